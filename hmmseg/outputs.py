"""Results that appear whole or not at all, and that nothing overwrites unasked.

A result is built under a hidden temporary name in the folder where it will stand, flushed to
the disk, and renamed into place: a rename within one folder is atomic (POSIX.1-2017,
``rename``), so a reader sees the old result or the new one and never a part of either.
Missing parent folders are made, and removed again if the result does not come about.
"""

import errno
import hashlib
import json
import os
import secrets
import shutil
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

from hmmseg.errors import OutputError

__all__ = [
    "PROVENANCE",
    "check_target",
    "sha256_of",
    "whole_file",
    "whole_folder",
    "write_json",
]

PROVENANCE = "provenance.json"
"""The file that every result folder holds; its presence marks a folder as a result."""

_NO_ROOM = {errno.ENOSPC, errno.EDQUOT}


def check_target(path: str | Path, force: bool) -> None:
    """Find out before the work whether its result could be put at `path`.

    An empty folder may always be filled. A folder is replaced only with `force`, and only if
    it is an earlier result (it holds ``provenance.json``): a slip such as ``--output ~`` must
    not cost anybody their files.

    Parameters
    ----------
    path : path
        Where the result, file or folder, is to stand.
    force : bool
        Whether an earlier result may be replaced.

    Raises
    ------
    OutputError
        If something is there already, or its folder cannot be written.
    """
    target = _resolved(path)
    if target.is_dir():
        _check_folder(target, force)
    elif target.exists():
        _check_file(target, force)
    ancestor = next(parent for parent in target.parents if parent.exists())
    if not ancestor.is_dir():
        raise OutputError(
            f"cannot write {path}: {ancestor} is a file, not a folder; choose another place"
        )
    if not os.access(ancestor, os.W_OK | os.X_OK):
        raise OutputError(
            f"cannot write {path}: no permission to write in {ancestor}; choose another place"
        )


@contextmanager
def whole_file(path: str | Path, *, force: bool = False) -> Iterator[Path]:
    """Write one file whole or not at all.

    Parameters
    ----------
    path : path
        The file to be. A symbolic link is followed; missing parent folders are made.
    force : bool
        Whether an existing file may be replaced.

    Yields
    ------
    Path
        An empty file in the same folder, with the same ending, to be written in the block.
        It takes the name `path` when the block ends and is removed if the block fails.

    Raises
    ------
    OutputError
        If the file exists and `force` is not given, or it cannot be written.
    """
    target = _resolved(path)
    check_target(target, force)
    if target.is_dir():
        raise OutputError(f"cannot write {path}: it is a folder; give the name of a file")
    temporary = _hidden(target, "partial")
    with _explained(path, temporary), _parents_of(target):
        try:
            temporary.open("x").close()
            yield temporary
            _flush(temporary)
            check_target(target, force)
            temporary.replace(target)
            _flush(target.parent)
        except BaseException:
            temporary.unlink(missing_ok=True)
            raise


@contextmanager
def whole_folder(path: str | Path, *, force: bool = False) -> Iterator[Path]:
    """Write a folder of results whole or not at all.

    Parameters
    ----------
    path : path
        The folder to be. A symbolic link is followed; missing parent folders are made. A folder
        that exists and is empty is filled.
    force : bool
        Whether an earlier result may be replaced: it is moved aside, the new one takes its
        place, and only then is the old one removed.

    Yields
    ------
    Path
        An empty hidden folder beside the target, to be filled in the block. It takes the name
        `path` when the block ends and is removed if the block fails.

    Raises
    ------
    OutputError
        If the folder exists and may not be replaced, or it cannot be written.
    """
    target = _resolved(path)
    check_target(target, force)
    if target.exists() and not target.is_dir():
        raise OutputError(f"cannot write {path}: it is a file; give the name of a folder")
    temporary = _hidden(target, "partial")
    with _explained(path, temporary), _parents_of(target):
        try:
            temporary.mkdir()
            yield temporary
            for folder, _, files in os.walk(temporary):
                for name in files:
                    _flush(Path(folder, name))
                _flush(Path(folder))
            check_target(target, force)
            _put_in_place(temporary, target)
        except BaseException:
            shutil.rmtree(temporary, ignore_errors=True)
            raise


def sha256_of(path: str | Path) -> str:
    """Return the SHA-256 checksum of a file in hexadecimal digits."""
    with open(path, "rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def write_json(path: str | Path, obj: Any) -> None:
    """Write `obj` as JSON: keys in their own order, two spaces of indent, a line end at the end.

    Raises
    ------
    ValueError
        If a number is NaN or infinite: JSON has none (RFC 8259, section 6).
    """
    text = json.dumps(obj, indent=2, allow_nan=False, ensure_ascii=False)
    Path(path).write_text(text + "\n", encoding="utf-8", newline="\n")


def _resolved(path: str | Path) -> Path:
    # Without this, renaming would put a file in the place of a symbolic link to another disk.
    return Path(os.path.realpath(path))


def _check_file(target: Path, force: bool) -> None:
    if not target.is_file():
        raise OutputError(f"cannot write {target}: it is not a regular file; choose another name")
    if not force:
        raise OutputError(f"{target} exists; give --force to replace it, or another --output")


def _check_folder(target: Path, force: bool) -> None:
    if not any(target.iterdir()):
        return
    if not force:
        raise OutputError(
            f"folder {target} exists; give --force to replace it, or another --output"
        )
    if not (target / PROVENANCE).is_file():
        raise OutputError(
            f"folder {target} holds no {PROVENANCE}, so it is not an earlier result and --force "
            "does not replace it; remove it yourself or give another --output"
        )


def _hidden(target: Path, purpose: str) -> Path:
    # The name ends as the target does, for writers that go by the ending.
    return target.with_name(f".{purpose}-{secrets.token_hex(4)}-{target.name}")


def _flush(path: Path) -> None:
    """Have the system put a file's or folder's content on the disk."""
    descriptor = os.open(path, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _put_in_place(temporary: Path, target: Path) -> None:
    old = None
    if target.exists() and any(target.iterdir()):
        old = target.rename(_hidden(target, "replaced"))
    try:
        temporary.rename(target)
    except BaseException:
        if old is not None:
            old.rename(target)
        raise
    _flush(target.parent)
    if old is not None:
        shutil.rmtree(old, ignore_errors=True)


@contextmanager
def _parents_of(target: Path) -> Iterator[None]:
    """Make missing parent folders; on failure remove the ones made, if they are empty."""
    missing = [parent for parent in target.parents if not parent.exists()]
    try:
        for parent in reversed(missing):
            parent.mkdir(exist_ok=True)
        yield
    except BaseException:
        with suppress(OSError):
            for parent in missing:
                parent.rmdir()
        raise


@contextmanager
def _explained(path: str | Path, temporary: Path) -> Iterator[None]:
    """Turn the system's refusal to write the result into a line for the user.

    Errors about other files, such as an input that cannot be read, pass unchanged.
    """
    try:
        yield
    except OSError as error:
        named = [Path(os.fsdecode(n)) for n in (error.filename, error.filename2) if n is not None]
        ours = any(
            name in temporary.parents or temporary in (name, *name.parents) for name in named
        )
        if not ours and error.errno not in _NO_ROOM:
            raise
        advice = "make room" if error.errno in _NO_ROOM else "choose another --output"
        raise OutputError(f"cannot write {path}: {error.strerror}; {advice}") from error
