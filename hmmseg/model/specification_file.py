"""Specifications in YAML: read, and refused by the name of the key.

An example, complete::

    order: 0
    states:
      - {name: background, reported: false, expected_length: 5000}
      - {name: rich, reported: true, expected_length: 800, gc: 0.55}

What each key means stands in :mod:`hmmseg.model.specification`.
"""

import math
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import yaml

from hmmseg.errors import ModelError
from hmmseg.model.document import is_plain_name
from hmmseg.model.parameters import MAX_ORDER, MAX_STATES
from hmmseg.model.specification import DECODERS, SOFT_MASK_POLICIES, Specification, StateWish

__all__ = ["load_specification", "read_specification"]

_MOST_STATES = 8
_STATE_KEYS = {
    "name", "reported", "expected_length", "stages", "gc", "gc_odds", "conditional", "enriched",
    "independent", "pseudocount", "length_pseudocount",
}  # fmt: skip
_KEYS = {
    "purpose", "finds", "also_finds", "source", "order", "symmetric", "soft_mask", "anchor",
    "trained", "restarts", "pseudocount", "fixed", "never", "decoder", "min_length", "merge_gap",
    "end_window",
    "states",
}  # fmt: skip


def load_specification(path: str | Path) -> Specification:
    """Read and check a YAML file.

    Parameters
    ----------
    path
        The file.

    Raises
    ------
    ModelError
        It cannot be read, is not YAML, or says what is not possible; the message names the file
        and the key.
    """
    try:
        text = Path(path).read_text(encoding="utf-8")
    except OSError as error:
        raise ModelError(f"{path}: cannot be read ({error.strerror}); check the name") from None
    except UnicodeDecodeError:
        raise ModelError(f"{path}: not a text file; a specification is YAML") from None
    return read_specification(text, Path(path).stem, str(path))


def read_specification(text: str, name: str, where: str) -> Specification:
    """Read a specification from text.

    Parameters
    ----------
    text
        YAML.
    name
        What to call it.
    where
        What messages call it.

    Raises
    ------
    ModelError
        As for `load_specification`.
    """
    try:
        document = yaml.safe_load(text)
    except yaml.YAMLError as error:
        mark = getattr(error, "problem_mark", None)
        line = f", line {mark.line + 1}" if mark else ""
        problem = getattr(error, "problem", None) or "not readable"
        raise ModelError(f"{where}{line}: not valid YAML ({problem})") from None
    try:
        return _specification(document, name)
    except ModelError as error:
        raise ModelError(f"{where}: {error}") from None


class _Entries:
    """What stands under the keys of one part of a document."""

    def __init__(self, found: Any, known: set[str], where: str = "") -> None:
        self._found: Mapping[str, Any] = found
        self.where = where
        for key in found:
            if key not in known:
                raise self.error(key, f"unknown key; known are {', '.join(sorted(known))}")

    def error(self, key: str, problem: str) -> ModelError:
        return ModelError(f"{self.where}{key}: {problem}")

    def get(self, key: str) -> Any:
        return self._found.get(key)

    def number(self, key: str, possible: Callable[[float], bool]) -> float | None:
        value = self._found.get(key)
        if value is None:
            return None
        if not _is_number(value) or not possible(value):
            raise self.error(key, f"{value!r} is not possible here")
        return float(value)

    def strength(self, key: str) -> float:
        return self.number(key, lambda value: value >= 0) or 0.0

    def whole(self, key: str, default: int, least: int, most: int) -> int:
        value = self._found.get(key, default)
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            raise self.error(key, f"{value!r} is not a whole number from {least} to {most}")
        return value

    def flag(self, key: str, default: bool) -> bool:
        value = self._found.get(key, default)
        if not isinstance(value, bool):
            raise self.error(key, f"{value!r} is neither true nor false")
        return value

    def choice(self, key: str, possible: tuple[str, ...]) -> str:
        """Return one of several words, the first by default."""
        value = self._found.get(key, possible[0])
        if value not in possible:
            raise self.error(key, f"{value!r} is none of {', '.join(possible)}")
        return str(value)

    def text(self, key: str) -> str:
        value = self._found.get(key, "")
        if not isinstance(value, str):
            raise self.error(key, f"{value!r} is not text")
        return " ".join(value.split())

    def texts(self, key: str) -> tuple[str, ...]:
        value = self._found.get(key, [])
        if not isinstance(value, list) or not all(isinstance(one, str) for one in value):
            raise self.error(key, "must be a list of names")
        return tuple(value)


def _specification(document: Any, name: str) -> Specification:
    if not isinstance(document, dict) or "states" not in document:
        raise ModelError("states: missing; a specification lists the states that are wanted")
    keys = _Entries(document, _KEYS)
    order = keys.whole("order", 0, 0, MAX_ORDER)
    states = keys.get("states")
    if not isinstance(states, list) or not 1 <= len(states) <= _MOST_STATES:
        raise ModelError(f"states: must be a list of 1 to {_MOST_STATES} states")
    wishes = tuple(_state(f"states[{i}].", state, order) for i, state in enumerate(states))
    names = [wish.name for wish in wishes]
    if len(set(names)) != len(names):
        raise ModelError(f"states: names are not distinct: {', '.join(names)}")
    anchor = keys.text("anchor") or None
    if anchor is not None and not any(w.name == anchor and w.conditional for w in wishes):
        raise ModelError(f"anchor: {anchor!r} is not the name of a state with a conditional table")
    return Specification(
        name=name,
        states=wishes,
        order=order,
        symmetric=keys.flag("symmetric", True),
        anchor=anchor,
        soft_mask=keys.choice("soft_mask", SOFT_MASK_POLICIES),
        trained=keys.flag("trained", True),
        restarts=keys.whole("restarts", 1, 1, 1000),
        pseudocount=keys.strength("pseudocount"),
        fixed=_fixed(keys, names),
        never=_never(keys, names),
        decoder=keys.choice("decoder", DECODERS),
        min_length=keys.whole("min_length", 1, 1, 10**9),
        merge_gap=keys.whole("merge_gap", 0, 0, 10**9),
        end_window=keys.whole("end_window", 0, 0, 10**4),
        **{key: keys.text(key) for key in ("purpose", "finds", "also_finds", "source")},
    )


def _fixed(keys: _Entries, names: list[str]) -> tuple[str, ...]:
    possible = [f"{name}.{what}" for name in names for what in ("emissions", "length")]
    for one in keys.texts("fixed"):
        if one not in (*possible, "transitions"):
            raise keys.error(
                "fixed", f"{one!r} is no parameter; there are transitions, {', '.join(possible)}"
            )
    return keys.texts("fixed")


def _never(keys: _Entries, names: list[str]) -> tuple[tuple[str, str], ...]:
    pairs = keys.get("never") or []
    if not isinstance(pairs, list):
        raise keys.error("never", "must be a list of pairs of states")
    for i, pair in enumerate(pairs):
        if not isinstance(pair, list) or len(pair) != 2 or pair[0] == pair[1]:
            raise keys.error(f"never[{i}]", "must be two different states")
        for name in pair:
            if name not in names:
                raise keys.error(f"never[{i}]", f"{name!r} is no state; {', '.join(names)} are")
    return tuple((one, other) for one, other in pairs)


def _state(where: str, state: Any, order: int) -> StateWish:
    if not isinstance(state, dict):
        raise ModelError(f"{where[:-1]}: must have keys, name and expected_length at least")
    keys = _Entries(state, _STATE_KEYS, where)
    name = keys.get("name")
    if not isinstance(name, str) or not is_plain_name(name):
        raise keys.error("name", f"{name!r} must be 1 to 64 letters, digits, '-' or '.'")
    stages = keys.whole("stages", 1, 1, MAX_STATES)
    length = keys.number("expected_length", lambda value: value >= stages)
    if length is None:
        raise keys.error("expected_length", "missing; give a mean length in bases")
    wish = StateWish(
        name=name,
        reported=keys.flag("reported", True),
        expected_length=length,
        gc=keys.number("gc", lambda value: 0 < value < 1),
        gc_odds=keys.number("gc_odds", lambda value: value > 0),
        conditional=_table(keys, order),
        enriched=_enriched(keys, order),
        independent=keys.flag("independent", False),
        stages=stages,
        pseudocount=keys.strength("pseudocount"),
        length_pseudocount=keys.strength("length_pseudocount"),
    )
    if wish.gc is not None and wish.gc_odds is not None:
        raise keys.error("gc", "give either gc or gc_odds")
    if wish.conditional is not None and (wish.enriched is not None or wish.independent):
        raise keys.error("conditional", "does not go with enriched or independent")
    return wish


def _table(keys: _Entries, order: int) -> tuple[tuple[float, ...], ...] | None:
    rows = keys.get("conditional")
    if rows is None:
        return None
    if not isinstance(rows, list) or len(rows) != 4**order:
        raise keys.error("conditional", f"must be a list of {4**order} rows, as order {order}")
    for i, row in enumerate(rows):
        if not isinstance(row, list) or len(row) != 4 or not all(_is_number(x) for x in row):
            raise keys.error(f"conditional[{i}]", "must be four probabilities")
        # Printed tables are rounded; rows are scaled to 1.
        if min(row) < 0 or abs(sum(row) - 1) > 0.01:
            raise keys.error(f"conditional[{i}]", "not a distribution that sums to 1")
    return tuple(tuple(x / sum(row) for x in row) for row in rows)


def _enriched(keys: _Entries, order: int) -> dict[str, float] | None:
    words = keys.get("enriched")
    if words is None:
        return None
    if not isinstance(words, dict) or not words:
        raise keys.error("enriched", "must give a factor for each of some words")
    for word, factor in words.items():
        if not isinstance(word, str) or len(word) != order + 1 or set(word) - set("ACGT"):
            raise keys.error("enriched", f"{word!r} is not a word of {order + 1} bases ACGT")
        if not _is_number(factor) or factor <= 0:
            raise keys.error(f"enriched.{word}", f"{factor!r} is not a factor above 0")
    return {word: float(factor) for word, factor in words.items()}


def _is_number(value: Any) -> bool:
    return not isinstance(value, bool) and isinstance(value, int | float) and math.isfinite(value)
