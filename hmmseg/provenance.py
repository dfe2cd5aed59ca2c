"""How a result came about, in a file of its own beside it.

The file holds what bears on the result and nothing else: versions, command, parameters, seed
and checksums. It has no dates, no host and no absolute paths, so two runs give the same bytes.
"""

import json
import platform
import zlib
from collections.abc import Mapping, Sequence
from importlib import metadata
from pathlib import Path
from typing import Any

from hmmseg import __version__
from hmmseg.errors import OutputError
from hmmseg.outputs import PROVENANCE, sha256_of, whole_file, write_json

__all__ = [
    "FORMAT",
    "VERSION",
    "difference",
    "earlier_document",
    "is_current",
    "is_intact",
    "origin",
    "provenance_path",
    "read_provenance",
    "software",
    "write_provenance",
]

FORMAT = "hmmseg-provenance"
VERSION = 1

# What computes or writes results; the versions of the rest say nothing about them.
_SOFTWARE = ("numpy", "numba", "llvmlite", "biopython", "pandas")
# A result is the same whatever these are.
_NOT_RESULT = frozenset({"debug", "force", "output", "quiet", "threads"})
_KEYS = frozenset(
    {"format", "version", "software", "command", "parameters", "seed", "inputs", "outputs"}
)


def write_provenance(
    folder_or_file: str | Path,
    command: str,
    parameters: Mapping[str, Any],
    seed: int | None,
    inputs: Sequence[str | Path],
    outputs: Sequence[str | Path],
) -> None:
    """Write the provenance of a finished result.

    Parameters
    ----------
    folder_or_file : path
        A folder, which gets a ``provenance.json``, or a file such as ``MODEL.json``, which gets
        a ``MODEL.provenance.json`` beside it. One that is there already is replaced.
    command : str
        The command that made the result, such as ``decode``.
    parameters : mapping
        Its parameters by name. A path is reduced to its last part; threads, output, force and
        the like are left out, for the result does not depend on them.
    seed : int or None
        The seed of random draws, if there were any.
    inputs : sequence of path
        Files that were read; ``-`` is standard input, of which no checksum is left.
    outputs : sequence of path
        Files of the result, named relative to the folder.

    Raises
    ------
    OutputError
        If an output does not lie in the folder, or the file cannot be written.
    """
    result = Path(folder_or_file)
    root = result if result.is_dir() else result.parent
    document = {
        **origin(command, parameters, seed, inputs),
        "outputs": [_fingerprint(path, _relative(path, root)) for path in outputs],
    }
    with whole_file(provenance_path(result), force=True) as temporary:
        write_json(temporary, document)


def is_current(
    folder_or_file: str | Path,
    command: str,
    parameters: Mapping[str, Any],
    seed: int | None,
    inputs: Sequence[str | Path],
) -> bool:
    """Tell whether a result is there, whole, and what the same call would make again.

    Parameters
    ----------
    folder_or_file, command, parameters, seed, inputs
        As for `write_provenance`.
    """
    result = Path(folder_or_file)
    try:
        found = read_provenance(result)
    except OutputError:
        return False
    if difference(found, origin(command, parameters, seed, inputs)) is not None:
        return False
    return is_intact(result, found)


def difference(found: Mapping[str, Any], expected: Mapping[str, Any]) -> str | None:
    """Name the first thing, outputs aside, in which a provenance is not what it should be.

    Parameters
    ----------
    found : mapping
        As `read_provenance` returns it.
    expected : mapping
        As `origin` returns it.

    Returns
    -------
    str or None
        ``command``, ``software`` or ``seed``, the name of an input file or of a parameter; None
        if they agree.
    """
    # Through JSON, so that both have been written and read.
    expected = json.loads(json.dumps(expected))
    for key in ("format", "version", "command", "software", "seed"):
        if found[key] != expected[key]:
            return key
    if found["inputs"] != expected["inputs"]:
        others = [one["name"] for one in expected["inputs"] if one not in found["inputs"]]
        return str(others[0]) if others else "inputs"
    theirs, ours = found["parameters"], expected["parameters"]
    for key in (*ours, *theirs):
        if key not in theirs or key not in ours or theirs[key] != ours[key]:
            return str(key)
    return None


def earlier_document(
    name: str,
    folder: str | Path,
    command: str,
    parameters: Mapping[str, Any],
    seed: int | None,
    inputs: Sequence[str | Path],
) -> dict[str, Any] | None:
    """Return the JSON document of a result that is what the same call would make again.

    Parameters
    ----------
    name
        Of the document in the result's folder.
    folder, command, parameters, seed, inputs
        As for `is_current`.

    Returns
    -------
    dict or None
        None if there is no such result.
    """
    if not is_current(folder, command, parameters, seed, inputs):
        return None
    found: dict[str, Any] = json.loads((Path(folder) / name).read_bytes())
    return found


def is_intact(folder_or_file: str | Path, document: Mapping[str, Any]) -> bool:
    """Tell whether all files of a result are there, as its provenance describes them."""
    result = Path(folder_or_file)
    root = result if result.is_dir() else result.parent
    return all(
        (root / entry["name"]).is_file()
        and _fingerprint(root / entry["name"], entry["name"]) == entry
        for entry in document["outputs"]
    )


def origin(
    command: str, parameters: Mapping[str, Any], seed: int | None, inputs: Sequence[str | Path]
) -> dict[str, Any]:
    """Return everything that a provenance says but the outputs.

    Parameters
    ----------
    command, parameters, seed, inputs
        As for `write_provenance`.
    """
    return {
        "format": FORMAT,
        "version": VERSION,
        "software": software(),
        "command": command,
        "parameters": {k: _plain(v) for k, v in parameters.items() if k not in _NOT_RESULT},
        "seed": None if seed is None else int(seed),
        "inputs": [_fingerprint(path, Path(path).name) for path in inputs],
    }


def provenance_path(folder_or_file: str | Path) -> Path:
    """Return where the provenance of a result folder or file stands."""
    result = Path(folder_or_file)
    if result.is_dir():
        return result / PROVENANCE
    return result.with_name(f"{result.stem}.{PROVENANCE}")


def read_provenance(folder_or_file: str | Path) -> dict[str, Any]:
    """Read the provenance of a result and check its form.

    Raises
    ------
    OutputError
        If there is none, or it is no document of this format and version.
    """
    path = provenance_path(folder_or_file)
    try:
        document = json.loads(path.read_bytes())
    except FileNotFoundError as error:
        # Of what is not there nobody can tell whether it would be a folder or a file.
        missing = path if Path(folder_or_file).exists() else folder_or_file
        raise OutputError(f"{missing} does not exist; is {folder_or_file} a result?") from error
    except ValueError as error:
        raise OutputError(f"{path}: not valid JSON: {error}") from error
    if not isinstance(document, dict) or document.get("format") != FORMAT:
        raise OutputError(f'{path}: expected "format": "{FORMAT}"')
    if document.get("version") != VERSION:
        raise OutputError(f"{path}: version {document.get('version')} is not known, only {VERSION}")
    if set(document) != _KEYS:
        keys = ", ".join(sorted(_KEYS ^ set(document)))
        raise OutputError(f"{path}: keys are missing or not known: {keys}")
    if not isinstance(document["parameters"], dict):
        raise OutputError(f'{path}: "parameters" is no object')
    for key in ("inputs", "outputs"):
        if not _is_list_of_fingerprints(document[key]):
            raise OutputError(f'{path}: "{key}" is not a list of name, sha256 and bytes')
    return document


def software() -> dict[str, str]:
    """Return the versions of what computes and writes results."""
    versions = {"hmmseg": __version__, "python": platform.python_version()}
    versions |= {name: metadata.version(name) for name in _SOFTWARE}
    # Another zlib may compress the same content to other bytes.
    return versions | {"zlib": zlib.ZLIB_RUNTIME_VERSION}


def _fingerprint(path: str | Path, name: str) -> dict[str, Any]:
    if str(path) == "-":
        return {"name": "-", "sha256": None, "bytes": None}
    return {"name": name, "sha256": sha256_of(path), "bytes": Path(path).stat().st_size}


def _relative(path: str | Path, root: Path) -> str:
    try:
        return Path(path).resolve().relative_to(root.resolve()).as_posix()
    except ValueError as error:
        raise OutputError(f"{path} is not part of the result in {root}") from error


def _plain(value: Any) -> Any:
    """Turn a parameter into what JSON can hold, without places on this machine."""
    if isinstance(value, Path):
        return value.name
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, set | frozenset):
        return sorted(_plain(item) for item in value)
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    # NumPy's scalars and arrays.
    return _plain(value.tolist()) if hasattr(value, "tolist") else value


def _is_list_of_fingerprints(entries: Any) -> bool:
    return isinstance(entries, list) and all(
        isinstance(entry, dict)
        and set(entry) == {"name", "sha256", "bytes"}
        and isinstance(entry["name"], str)
        and isinstance(entry["sha256"], str | None)
        and isinstance(entry["bytes"], int | None)
        for entry in entries
    )
