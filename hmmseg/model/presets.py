"""Presets: specifications that come with the package."""

from importlib import resources

from hmmseg.errors import UsageError
from hmmseg.model.specification import Specification
from hmmseg.model.specification_file import read_specification

__all__ = ["PRESETS", "load_preset", "preset_text"]

PRESETS = ("cpg-island", "gc-island", "gc-domain", "at-rich", "foreign")
"""Names, in the order in which they are listed."""


def preset_text(name: str) -> str:
    """Return a preset's document, comments and all.

    Raises
    ------
    UsageError
        There is no such preset.
    """
    if name not in PRESETS:
        raise UsageError(f"there is no preset '{name}'; choose from {', '.join(PRESETS)}")
    file = resources.files("hmmseg.model") / "presets" / f"{name}.yaml"
    return file.read_text(encoding="utf-8")


def load_preset(name: str) -> Specification:
    """Return a preset by its name.

    Raises
    ------
    UsageError
        There is no such preset.
    """
    return read_specification(preset_text(name), name, f"preset {name}")
