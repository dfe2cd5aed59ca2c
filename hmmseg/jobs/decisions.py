"""The decisions of a whole job, each with its reason: a YAML file that a person can change.

Each decision has a ``value``, which is obeyed, and a ``because``, which is for people.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import yaml

from hmmseg.errors import UsageError
from hmmseg.model.presets import PRESETS
from hmmseg.model.specification import DECODERS, SOFT_MASK_POLICIES

__all__ = ["KEYS", "Decision", "Decisions", "read_decisions", "to_yaml"]

_HEADING = """\
# What hmmseg annotate decided for this assembly, and why. Change a value and give the file back:
#   hmmseg annotate FASTA... --output ANOTHER_FOLDER --decisions FILE
# Changed in its folder, it is obeyed when the same command is given again, with --force where
# that replaces earlier results.
"""
_WIDTH = 96


@dataclass(frozen=True)
class Decision:
    """One decision.

    Attributes
    ----------
    value : object
        What is obeyed.
    because : str
        The reason.
    """

    value: Any
    because: str


def _is_whole(least: int) -> Callable[[Any], bool]:
    return lambda v: isinstance(v, int) and not isinstance(v, bool) and v >= least


def _is_fraction(value: Any) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and 0 <= value < 1


def _is_names(value: Any) -> bool:
    return isinstance(value, list) and all(isinstance(name, str) for name in value)


KEYS: Mapping[str, tuple[Callable[[Any], bool], str]] = {
    "preset": (lambda v: v is None or v in PRESETS, f"none, or one of {', '.join(PRESETS)}"),
    "states": (lambda v: _is_whole(1)(v) and v <= 8, "a whole number from 1 to 8"),
    "order": (lambda v: _is_whole(0)(v) and v <= 8, "a whole number from 0 to 8"),
    "soft_mask": (lambda v: v in SOFT_MASK_POLICIES, "use or hide"),
    "circular": (_is_names, "a list of record names"),
    "train_without": (_is_names, "a list of record names"),
    "train_bases": (_is_whole(1), "a whole number of bases"),
    "restarts": (_is_whole(1), "a whole number from 1 up"),
    "seed": (_is_whole(0), "a whole number from 0 up"),
    "max_iterations": (_is_whole(0), "a whole number from 0 up"),
    "decoder": (lambda v: v in DECODERS, "path or posterior"),
    "threshold": (_is_fraction, "a number from 0 up and below 1"),
    "min_length": (_is_whole(1), "a whole number of bases"),
    "merge_gap": (_is_whole(0), "a whole number of bases"),
    "end_window": (_is_whole(0), "a whole number of bases"),
    "calibrate": (lambda v: v in ("run", "skip"), "run or skip"),
    "null_bases": (_is_whole(1), "a whole number of bases"),
    "compare": (lambda v: v in ("run", "skip"), "run or skip"),
}
"""What is decided, in the order of the file: a check, and what is possible in words."""


@dataclass(frozen=True)
class Decisions:
    """All decisions.

    Attributes
    ----------
    made : mapping of str to Decision
        One for each of `KEYS`.
    """

    made: Mapping[str, Decision]

    def __getitem__(self, key: str) -> Any:
        """Return the value of a decision."""
        return self.made[key].value


def to_yaml(decisions: Decisions) -> str:
    """Return the file's text."""
    parts = [_HEADING]
    for key in KEYS:
        decision = decisions.made[key]
        document = {key: {"value": decision.value, "because": decision.because}}
        parts.append(yaml.safe_dump(document, sort_keys=False, width=_WIDTH, allow_unicode=True))
    return "\n".join(parts)


def read_decisions(path: str | Path) -> Decisions:
    """Read a file of decisions.

    Raises
    ------
    UsageError
        It cannot be read, or a decision is missing, unknown or not possible; the message names
        the file and the key.
    """
    try:
        document = yaml.safe_load(Path(path).read_text(encoding="utf-8"))
    except OSError as error:
        raise UsageError(f"{path}: cannot be read ({error.strerror}); check the name") from None
    except UnicodeDecodeError:
        raise UsageError(f"{path}: not a text file; decisions are YAML") from None
    except yaml.YAMLError as error:
        mark = getattr(error, "problem_mark", None)
        line = f", line {mark.line + 1}" if mark else ""
        raise UsageError(f"{path}{line}: not valid YAML; see the file that was written") from None
    if not isinstance(document, dict):
        raise UsageError(f"{path}: no decisions in it; see the file that was written")
    for key in document:
        if key not in KEYS:
            raise UsageError(f"{path}: {key}: unknown decision; known are {', '.join(KEYS)}")
    made = {}
    for key, (possible, words) in KEYS.items():
        entry = document.get(key)
        if not isinstance(entry, dict) or "value" not in entry:
            raise UsageError(f"{path}: {key}: missing; give it a value")
        if set(entry) - {"value", "because"}:
            raise UsageError(f"{path}: {key}: only value and because belong under a decision")
        if not possible(entry["value"]):
            raise UsageError(f"{path}: {key}: {entry['value']!r} is not possible; give {words}")
        made[key] = Decision(entry["value"], str(entry.get("because") or ""))
    return Decisions(made)
