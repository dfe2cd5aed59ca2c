"""An input file as text: plain, gzip, bgzip or standard input, with its faults named.

The bytes decide, not the name: a compressed file is known by its first two bytes. Only a name
that promises compression and does not keep it is refused, because that is mostly a download
gone wrong.
"""

import gzip
import io
import os
import sys
import zlib
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import IO, cast

from hmmseg.errors import HmmsegError, SequenceError

__all__ = ["READ_ERRORS", "STDIN", "TextSource", "check_readable", "open_text"]

STDIN = "-"
READ_ERRORS = (EOFError, zlib.error, OSError)
"""What reading a damaged, possibly compressed, file may raise."""

_HEAD = 1 << 16
_BLOCK = 1 << 20
_GZIP = b"\x1f\x8b"
_BGZIP_END = bytes.fromhex("1f8b08040000000000ff0600424302001b0003000000000000000000")
"""The empty block that ends a whole bgzip file (SAM/BAM format specification, section 4.1.2)."""
_OTHER_PACKING = {
    b"BZh": "bzip2",
    b"\xfd7zXZ": "xz",
    b"\x28\xb5\x2f\xfd": "zstd",
    b"PK\x03\x04": "zip",
}


@dataclass(frozen=True, eq=False)
class TextSource:
    """An opened text file.

    Attributes
    ----------
    name : str
        What messages call it.
    head : str
        Its first letters (up to 64 KiB), not consumed.
    stream : TextIOWrapper
        For parsers that want a handle; they pass `READ_ERRORS` to `explained`.
    error : type
        Class of what `lines` raises.
    """

    name: str
    head: str
    stream: io.TextIOWrapper
    error: type[HmmsegError]

    def lines(self) -> Iterator[str]:
        r"""Iterate over lines; every line ending arrives as ``\n``.

        Raises
        ------
        HmmsegError
            Of the class given to `open_text`: the compressed data is cut short or damaged.
        """
        try:
            yield from self.stream
        except READ_ERRORS as failure:
            raise self.explained(failure) from failure

    def blocks(self) -> Iterator[str]:
        r"""Iterate over blocks of whole lines, about a megabyte each; raises as `lines` does."""
        try:
            while block := self.stream.read(_BLOCK) + self.stream.readline():
                yield block
        except READ_ERRORS as failure:
            raise self.explained(failure) from failure

    def explained(self, failure: Exception) -> HmmsegError:
        """Return what to raise when reading `stream` failed with one of `READ_ERRORS`."""
        return self.error(_failure(self.name, failure))


def _failure(name: str, error: Exception) -> str:
    """Explain why reading stopped."""
    if isinstance(error, EOFError):
        return f"{name}: the compressed file ends too early; copy or download it again"
    if isinstance(error, gzip.BadGzipFile | zlib.error):
        return f"{name}: the compressed data is damaged ({error}); copy or download it again"
    return f"{name}: cannot be read ({error})"


class _Joined(io.RawIOBase):
    """Bytes already read, followed by the rest of their stream (which may be a pipe)."""

    def __init__(self, head: bytes, rest: IO[bytes]) -> None:
        self._head = head
        self._rest = rest

    def readable(self) -> bool:
        return True

    def readinto(self, buffer: memoryview) -> int:  # type: ignore[override]
        piece = self._head[: len(buffer)] or self._rest.read(len(buffer))
        self._head = self._head[len(piece) :] if self._head else b""
        buffer[: len(piece)] = piece
        return len(piece)


def check_readable(path: str | Path, error: type[HmmsegError] = SequenceError) -> None:
    """Raise ``error`` if a path (other than ``-``) is not a file that can be read."""
    if str(path) == STDIN:
        return
    target = Path(path)
    if target.is_dir():
        raise error(f"{target}: is a folder; give a file")
    if not target.exists():
        raise error(f"{target}: no such file")
    if not os.access(target, os.R_OK):
        raise error(f"{target}: may not be read; check its permissions")


@contextmanager
def open_text(
    path: str | Path, error: type[HmmsegError] = SequenceError, *, may_be_empty: bool = False
) -> Iterator[TextSource]:
    """Open a text file, unpacking gzip and bgzip; ``-`` is standard input.

    Parameters
    ----------
    path : str or Path
    error : type
        Class of what is raised.
    may_be_empty : bool
        Whether a file without content is in order.

    Raises
    ------
    HmmsegError
        Of class ``error``: the file is missing, a folder, empty, binary, packed in another
        way, cut short, or named as compressed without being so.
    """
    check_readable(path, error)
    name = "standard input" if str(path) == STDIN else str(path)
    with ExitStack() as stack:
        try:
            raw = sys.stdin.buffer if name != str(path) else stack.enter_context(open(path, "rb"))
        except OSError as failure:
            raise error(_failure(name, failure)) from failure
        plain = _unpacked(raw, name, error)
        head = _read_head(plain, name, error)
        if not head.strip() and not may_be_empty:
            raise error(f"{name}: the file is empty")
        if b"\0" in head:
            raise error(f"{name}: a binary file; give text, plain or gzip")
        joined = io.BufferedReader(_Joined(head, plain), buffer_size=_HEAD)
        # utf-8-sig drops a byte order mark; a stray byte in a description does no harm.
        stream = io.TextIOWrapper(joined, encoding="utf-8-sig", errors="replace")
        yield TextSource(name, head.decode("utf-8-sig", "replace"), stream, error)


def _unpacked(raw: IO[bytes], name: str, error: type[HmmsegError]) -> IO[bytes]:
    """Return the stream of unpacked bytes, after checks on the packed ones."""
    head = _read_head(raw, name, error)
    rest = io.BufferedReader(_Joined(head, raw), buffer_size=_HEAD)
    if head.startswith(_GZIP):
        _check_bgzip_end(raw, head, name, error)
        return cast(IO[bytes], gzip.GzipFile(fileobj=rest, mode="rb"))
    for magic, packing in _OTHER_PACKING.items():
        if head.startswith(magic):
            raise error(f"{name}: packed with {packing}; unpack it, or pack it with gzip")
    if head and name.lower().endswith((".gz", ".bgz")):
        raise error(f"{name}: named as a gzip file but is not one; rename it or download it again")
    return rest


def _check_bgzip_end(raw: IO[bytes], head: bytes, name: str, error: type[HmmsegError]) -> None:
    """Raise if a bgzip file lacks its end marker: one cut between blocks unpacks without fault."""
    is_bgzip = head[3:4] == b"\x04" and head[12:14] == b"BC"
    if not is_bgzip or not raw.seekable():
        return
    here = raw.tell()
    size = raw.seek(0, os.SEEK_END)
    raw.seek(max(0, size - len(_BGZIP_END)))
    tail = raw.read(len(_BGZIP_END))
    raw.seek(here)
    if tail != _BGZIP_END:
        raise error(f"{name}: the bgzip file lacks its end block; copy or download it again")


def _read_head(stream: IO[bytes], name: str, error: type[HmmsegError]) -> bytes:
    """Read up to 64 KiB; the caller puts them back in front."""
    try:
        return stream.read(_HEAD)
    except READ_ERRORS as failure:
        raise error(_failure(name, failure)) from failure
