"""Records from FASTA and GenBank files.

Biopython parses; this module turns letters into codes, keeps what letters say beyond the base
(soft-masking, N, ambiguity), and explains what is wrong with a file in one line.
"""

import re
import warnings
from collections import deque
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt
from Bio import BiopythonWarning, SeqIO
from Bio.Seq import UndefinedSequenceError
from Bio.SeqIO.FastaIO import SimpleFastaParser
from Bio.SeqRecord import SeqRecord

from hmmseg.errors import SequenceError, UsageError
from hmmseg.sequence.alphabet import (
    AMBIGUOUS,
    LETTER_N,
    LOWER,
    encode,
    letter_kinds,
    text_chunks,
)
from hmmseg.sequence.intervals import empty_intervals, flag_runs, merge
from hmmseg.sequence.source import READ_ERRORS, STDIN, TextSource, check_readable, open_text

__all__ = ["Record", "read_records", "record_from_text"]

_CIRCULAR = re.compile(r"\[\s*topology\s*=\s*circular\s*\]", re.IGNORECASE)
_GENBANK = re.compile(r"\.(gb|gbk|gbff|genbank)(\.b?gz)?$", re.IGNORECASE)


@dataclass(frozen=True, eq=False)
class Record:
    """One record of a sequence file.

    Attributes
    ----------
    name : str
        First word of the header.
    description : str
        The whole header.
    bases : uint8[position]
        Codes 0 to 3 for A C G T, 4 for a missing base.
    soft_mask : int64[interval, 2]
        Runs of lower-case letters.
    n_runs : int64[interval, 2]
        Runs of the letter N, of any length.
    ambiguous : int
        Number of IUPAC letters other than A C G T U N.
    circular : bool
        Whether the position after the last is the first.
    """

    name: str
    description: str
    bases: npt.NDArray[np.uint8]
    soft_mask: npt.NDArray[np.int64]
    n_runs: npt.NDArray[np.int64]
    ambiguous: int
    circular: bool

    def __len__(self) -> int:
        """Length in bases."""
        return len(self.bases)


def record_from_text(
    name: str, text: bytes | str, *, description: str = "", circular: bool = False
) -> Record:
    """Build a record from its letters.

    Parameters
    ----------
    name : str
    text : bytes or str
        IUPAC nucleotide letters.
    description : str
        Header; the name if empty.
    circular : bool

    Raises
    ------
    SequenceError
        There is no letter, or one that is not an IUPAC nucleotide letter.
    """
    if not text:
        raise SequenceError(f"record {name} is empty; remove it or add its sequence")
    try:
        bases = encode(text)
    except SequenceError as error:
        raise SequenceError(f"record {name}, {error}") from None
    soft, runs, ambiguous = [empty_intervals()], [empty_intervals()], 0
    for offset, piece in text_chunks(text):
        kinds = letter_kinds(piece)
        if not kinds.any():
            continue
        soft.append(flag_runs((kinds & LOWER) != 0, offset))
        runs.append(flag_runs((kinds & LETTER_N) != 0, offset))
        ambiguous += int(np.count_nonzero(kinds & AMBIGUOUS))
    return Record(
        name=name,
        description=description or name,
        bases=bases,
        # A run cut by a chunk's border is made whole by merging.
        soft_mask=merge(np.concatenate(soft)),
        n_runs=merge(np.concatenate(runs)),
        ambiguous=ambiguous,
        circular=circular,
    )


def read_records(paths: Sequence[str | Path]) -> Iterator[Record]:
    """Read the records of FASTA and GenBank files one at a time.

    Files may be plain, gzip or bgzip; ``-`` is standard input. A name that ends in ``.gb``,
    ``.gbk``, ``.gbff`` or ``.genbank`` (also with ``.gz``) is read as GenBank, anything else as
    FASTA. ``[topology=circular]`` in a FASTA header makes the record circular.

    Parameters
    ----------
    paths : sequence of str or Path

    Returns
    -------
    iterator of Record
        In the order of the files. Records without a known base are among them.

    Raises
    ------
    SequenceError
        At once if a file cannot be read; while iterating if its content is at fault: no
        header, an empty or nameless record, a name seen before in any of the files, a letter
        outside the IUPAC nucleotide letters, damaged compression.
    UsageError
        Standard input is named twice.
    """
    if [str(path) for path in paths].count(STDIN) > 1:
        raise UsageError("standard input (-) can be read only once; name it once")
    for path in paths:
        check_readable(path)
    return _read_all(paths)


def _read_all(paths: Sequence[str | Path]) -> Iterator[Record]:
    """Chain the files' records and refuse a second record of the same name."""
    seen: dict[str, str] = {}
    for path in paths:
        read = _read_genbank if _GENBANK.search(str(path)) else _read_fasta
        with open_text(path) as source:
            for record in read(source):
                if record.name in seen:
                    raise SequenceError(
                        f"{source.name}: record {record.name} was seen before, in "
                        f"{seen[record.name]}; names must be unique over all files"
                    )
                seen[record.name] = source.name
                yield record


def _check_fasta_head(source: TextSource) -> None:
    """Raise unless the text begins like FASTA."""
    start = source.head.lstrip()
    if start.startswith(">"):
        return
    if start.startswith("@"):
        problem = "looks like FASTQ; convert the reads' assembly to FASTA"
    elif start.startswith("LOCUS "):
        problem = "looks like GenBank; give the file the ending .gb"
    elif "\ufffd" in start:
        problem = "a binary file; give text, plain or gzip"
    else:
        problem = "no FASTA header: the first line must begin with '>' and name the record"
    raise SequenceError(f"{source.name}: {problem}")


def _joined_lines(source: TextSource, headers: deque[int]) -> Iterator[str]:
    """Yield header lines, and sequence in pieces of about a megabyte without white space.

    The parser keeps every line of a record as an object: lines as they stand would double its
    memory, and cost a turn of the loop each. ``headers`` gets each header's line number.
    """
    number = 1
    for block in source.blocks():
        if block[0] != ">" and "\n>" not in block:
            parts = [block]
        else:
            # Cut before and behind each header line; parts with a header begin with '>'.
            parts = re.split(r"^(>[^\n]*\n?)", block, flags=re.MULTILINE)
        for part in parts:
            if part.startswith(">"):
                headers.append(number)
                yield part
            elif letters := "".join(part.split()):
                yield letters
            number += part.count("\n")


def _read_fasta(source: TextSource) -> Iterator[Record]:
    """Read the records of a FASTA file."""
    _check_fasta_head(source)
    headers: deque[int] = deque()
    lines = _joined_lines(source, headers)
    parsed: Iterator[tuple[str, str]] = SimpleFastaParser(lines)  # type: ignore[no-untyped-call, unused-ignore]
    for title, text in parsed:
        where = f"{source.name}:{headers.popleft()}"
        if not title.strip():
            raise SequenceError(f"{where}: a record without a name; write one behind the '>'")
        name = title.split(maxsplit=1)[0]
        if not name.isprintable() or "\ufffd" in name:
            raise SequenceError(f"{where}: the record's name is not readable text; rename it")
        circular = _CIRCULAR.search(title) is not None
        try:
            record = record_from_text(name, text, description=title, circular=circular)
        except SequenceError as error:
            raise SequenceError(f"{where}: {error}") from None
        # While the caller works on the record, its letters need no memory here.
        del text
        yield record


def _parsed_genbank(source: TextSource) -> Iterator[SeqRecord]:
    """Iterate over Biopython's records, its faults explained."""
    parsed: Iterator[SeqRecord] = SeqIO.parse(source.stream, "genbank")  # type: ignore[no-untyped-call, unused-ignore]
    while True:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", BiopythonWarning)
            # Less sequence than the LOCUS line promises, or no end mark, is no small matter.
            warnings.filterwarnings("error", message="Expected sequence length|Premature end")
            try:
                record = next(parsed, None)
            except READ_ERRORS as error:
                raise source.explained(error) from error
            # On damaged text the parser fails in many ways, failed assertions among them.
            except Exception as error:
                detail = " ".join(str(error).split()) or type(error).__name__
                raise SequenceError(
                    f"{source.name}: not a whole GenBank file ({detail}); download it again or "
                    "give FASTA"
                ) from error
        if record is None:
            return
        yield record


def _read_genbank(source: TextSource) -> Iterator[Record]:
    """Read the records of a GenBank file."""
    count = 0
    for count, parsed in enumerate(_parsed_genbank(source), 1):
        name = parsed.id or ""
        if name in (".", "<unknown id>") or len(name.split()) != 1 or not name.isprintable():
            raise SequenceError(f"{source.name}: record {count} has no name; add its VERSION line")
        try:
            text = bytes(parsed.seq or b"")
        except UndefinedSequenceError:
            raise SequenceError(
                f"{source.name}: record {name} has no sequence (no ORIGIN block); download the "
                "full record"
            ) from None
        circular = parsed.annotations.get("topology") == "circular"
        header = f"{name} {parsed.description}".strip()
        try:
            yield record_from_text(name, text, description=header, circular=circular)
        except SequenceError as error:
            raise SequenceError(f"{source.name}: {error}") from None
    if count == 0:
        raise SequenceError(f"{source.name}: no GenBank record; is this a GenBank file?")
