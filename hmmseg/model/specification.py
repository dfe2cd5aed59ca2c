"""What is wanted, said in YAML: states with a name, a composition and an expected length.

An example, complete::

    order: 0
    states:
      - {name: background, reported: false, expected_length: 5000}
      - {name: rich, reported: true, expected_length: 800, gc: 0.55}

A specification is no model yet: compositions may be relative to the genome at hand, to which
:mod:`hmmseg.model.anchoring` ties them. Presets are specifications that come with the package.
"""

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import yaml

from hmmseg.errors import ModelError
from hmmseg.model.document import is_plain_name
from hmmseg.model.parameters import MAX_ORDER

__all__ = [
    "DECODERS",
    "SOFT_MASK_POLICIES",
    "Specification",
    "StateWish",
    "load_specification",
    "read_specification",
]

SOFT_MASK_POLICIES = ("use", "hide")
"""Lower-case bases are ordinary sequence, or missing."""

DECODERS = ("path", "posterior")
"""How regions are called, see :mod:`hmmseg.regions.calling`."""

_MOST_STATES = 8
_STATE_KEYS = {
    "name", "reported", "expected_length", "gc", "gc_odds", "conditional", "enriched",
    "independent",
}  # fmt: skip
_KEYS = {
    "purpose", "finds", "also_finds", "source", "order", "symmetric", "soft_mask", "anchor",
    "trained", "restarts", "pseudocount", "decoder", "min_length", "merge_gap", "states",
}  # fmt: skip


@dataclass(frozen=True)
class StateWish:
    """One state as it is wanted.

    Attributes
    ----------
    name : str
        Of the state.
    reported : bool
        Whether its regions are reported.
    expected_length : float
        Mean length of a visit, in bases.
    gc : float or None
        GC fraction to start from.
    gc_odds : float or None
        The same relative to the genome: odds of G+C against A+T over the genome's odds.
    conditional : tuple or None
        Rows of P(base | context), contexts in alphabetical order.
    enriched : mapping of str to float
        Words and the factors by which they are more frequent than in the genome.
    independent : bool
        Start from the genome's bases without its use of words.
    """

    name: str
    reported: bool
    expected_length: float
    gc: float | None = None
    gc_odds: float | None = None
    conditional: tuple[tuple[float, ...], ...] | None = None
    enriched: Mapping[str, float] | None = None
    independent: bool = False


@dataclass(frozen=True)
class Specification:
    """Everything that is wanted of a model.

    Attributes
    ----------
    name : str
        Of the preset, or of the file.
    states : tuple of StateWish
        In the order of the model's states.
    order : int
        Context length in bases.
    symmetric : bool
        Whether both strands are treated alike.
    anchor : str or None
        The state whose table stands for the genome's own: the tables of the others count
        relative to it.
    soft_mask : str
        One of `SOFT_MASK_POLICIES`.
    trained : bool
        Whether Baum-Welch follows; otherwise the anchored model is used as it is.
    restarts : int
        Number of starting points.
    pseudocount : float
        Of each state, in single-strand bases.
    decoder : str
        Proposed for calling regions: ``"path"`` or ``"posterior"`` over 0.5.
    min_length, merge_gap : int
        Likewise, in bases.
    purpose, finds, also_finds, source : str
        For people.
    """

    name: str
    states: tuple[StateWish, ...]
    order: int = 0
    symmetric: bool = True
    anchor: str | None = None
    soft_mask: str = "use"
    trained: bool = True
    restarts: int = 1
    pseudocount: float = 0.0
    decoder: str = "path"
    min_length: int = 1
    merge_gap: int = 0
    purpose: str = ""
    finds: str = ""
    also_finds: str = ""
    source: str = ""

    def with_order(self, order: int) -> "Specification":
        """Return the same with another order.

        Raises
        ------
        ModelError
            A state's words are given, which belong to the order they are given for.
        """
        if order == self.order:
            return self
        for wish in self.states:
            if wish.conditional is not None or wish.enriched is not None:
                raise ModelError(
                    f"state {wish.name} of {self.name} is given by words of {self.order + 1} "
                    f"bases, so the order stays {self.order}"
                )
        return replace(self, order=order)


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


def _specification(document: Any, name: str) -> Specification:
    if not isinstance(document, dict) or "states" not in document:
        raise ModelError("states: missing; a specification lists the states that are wanted")
    _check_keys("", document, _KEYS)
    order = _whole(document, "order", 0, 0, MAX_ORDER)
    states = document["states"]
    if not isinstance(states, list) or not 1 <= len(states) <= _MOST_STATES:
        raise ModelError(f"states: must be a list of 1 to {_MOST_STATES} states")
    wishes = tuple(_state(f"states[{i}].", state, order) for i, state in enumerate(states))
    names = [wish.name for wish in wishes]
    if len(set(names)) != len(names):
        raise ModelError(f"states: names are not distinct: {', '.join(names)}")
    anchor = _text(document, "anchor") or None
    if anchor is not None and not any(w.name == anchor and w.conditional for w in wishes):
        raise ModelError(f"anchor: {anchor!r} is not the name of a state with a conditional table")
    return Specification(
        name=name,
        states=wishes,
        order=order,
        symmetric=_flag(document, "symmetric", True),
        anchor=anchor,
        soft_mask=_choice(document, "soft_mask", SOFT_MASK_POLICIES),
        trained=_flag(document, "trained", True),
        restarts=_whole(document, "restarts", 1, 1, 1000),
        pseudocount=_number(document, "pseudocount", lambda x: x >= 0) or 0.0,
        decoder=_choice(document, "decoder", DECODERS),
        min_length=_whole(document, "min_length", 1, 1, 10**9),
        merge_gap=_whole(document, "merge_gap", 0, 0, 10**9),
        **{key: _text(document, key) for key in ("purpose", "finds", "also_finds", "source")},
    )


def _state(where: str, state: Any, order: int) -> StateWish:
    if not isinstance(state, dict):
        raise ModelError(f"{where[:-1]}: must have keys, name and expected_length at least")
    _check_keys(where, state, _STATE_KEYS)
    name = state.get("name")
    if not isinstance(name, str) or not is_plain_name(name):
        raise ModelError(f"{where}name: {name!r} must be 1 to 64 letters, digits, '-' or '.'")
    length = _number(state, "expected_length", lambda x: x >= 1, where)
    if length is None:
        raise ModelError(f"{where}expected_length: missing; give a mean length in bases")
    wish = StateWish(
        name=name,
        reported=_flag(state, "reported", True, where),
        expected_length=length,
        gc=_number(state, "gc", lambda x: 0 < x < 1, where),
        gc_odds=_number(state, "gc_odds", lambda x: x > 0, where),
        conditional=_table(where, state, order),
        enriched=_enriched(where, state, order),
        independent=_flag(state, "independent", False, where),
    )
    if wish.gc is not None and wish.gc_odds is not None:
        raise ModelError(f"{where}gc: give either gc or gc_odds")
    if wish.conditional is not None and (wish.enriched is not None or wish.independent):
        raise ModelError(f"{where}conditional: does not go with enriched or independent")
    return wish


def _table(
    where: str, state: Mapping[str, Any], order: int
) -> tuple[tuple[float, ...], ...] | None:
    rows = state.get("conditional")
    if rows is None:
        return None
    if not isinstance(rows, list) or len(rows) != 4**order:
        raise ModelError(f"{where}conditional: must be a list of {4**order} rows, as order {order}")
    for i, row in enumerate(rows):
        if not isinstance(row, list) or len(row) != 4 or not all(_is_number(x) for x in row):
            raise ModelError(f"{where}conditional[{i}]: must be four probabilities")
        # Printed tables are rounded; rows are scaled to 1.
        if min(row) < 0 or abs(sum(row) - 1) > 0.01:
            raise ModelError(f"{where}conditional[{i}]: not a distribution that sums to 1")
    return tuple(tuple(x / sum(row) for x in row) for row in rows)


def _enriched(where: str, state: Mapping[str, Any], order: int) -> dict[str, float] | None:
    words = state.get("enriched")
    if words is None:
        return None
    if not isinstance(words, dict) or not words:
        raise ModelError(f"{where}enriched: must give a factor for each of some words")
    for word, factor in words.items():
        if not isinstance(word, str) or len(word) != order + 1 or set(word) - set("ACGT"):
            raise ModelError(f"{where}enriched: {word!r} is not a word of {order + 1} bases ACGT")
        if not _is_number(factor) or factor <= 0:
            raise ModelError(f"{where}enriched.{word}: {factor!r} is not a factor above 0")
    return {word: float(factor) for word, factor in words.items()}


def _check_keys(where: str, found: Mapping[str, Any], known: set[str]) -> None:
    for key in found:
        if key not in known:
            raise ModelError(f"{where}{key}: unknown key; known are {', '.join(sorted(known))}")


def _is_number(value: Any) -> bool:
    return not isinstance(value, bool) and isinstance(value, int | float) and math.isfinite(value)


def _number(
    found: Mapping[str, Any], key: str, possible: Callable[[float], bool], where: str = ""
) -> float | None:
    value = found.get(key)
    if value is None:
        return None
    if not _is_number(value) or not possible(value):
        raise ModelError(f"{where}{key}: {value!r} is not possible here")
    return float(value)


def _whole(found: Mapping[str, Any], key: str, default: int, least: int, most: int) -> int:
    value = found.get(key, default)
    if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
        raise ModelError(f"{key}: {value!r} is not a whole number from {least} to {most}")
    return value


def _flag(found: Mapping[str, Any], key: str, default: bool, where: str = "") -> bool:
    value = found.get(key, default)
    if not isinstance(value, bool):
        raise ModelError(f"{where}{key}: {value!r} is neither true nor false")
    return value


def _choice(found: Mapping[str, Any], key: str, possible: tuple[str, ...]) -> str:
    """Return one of several words, the first by default."""
    value = found.get(key, possible[0])
    if value not in possible:
        raise ModelError(f"{key}: {value!r} is none of {', '.join(possible)}")
    return str(value)


def _text(found: Mapping[str, Any], key: str) -> str:
    value = found.get(key, "")
    if not isinstance(value, str):
        raise ModelError(f"{key}: {value!r} is not text")
    return " ".join(value.split())
