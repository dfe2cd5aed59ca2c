"""What commands read of the results of others, without what made them: it takes long to load."""

import json
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError

__all__ = ["read_summary"]


def read_summary(folder: Path) -> dict[str, Any]:
    """Return the document ``summary.json`` of a folder of calls.

    Raises
    ------
    OutputError
        There is none, or it is not one.
    """
    path = folder / "summary.json"
    try:
        document = json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        raise OutputError(f"{path}: cannot be read; give a folder written by decode") from None
    if not isinstance(document, dict) or document.get("format") != "hmmseg-calls":
        raise OutputError(f"{path}: not a summary of calls; give a folder written by decode")
    return document
