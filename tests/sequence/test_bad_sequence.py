"""Every way a sequence file can be at fault gets one line that says what, where, what to do."""

import bz2
import gzip
import io
import lzma
import sys
from pathlib import Path
from types import SimpleNamespace

import pytest

from hmmseg.errors import SequenceError
from hmmseg.sequence.reading import read_records
from tests.sequence.test_reading import bgzipped, genbank, genbank_record

GOOD = b">good\nACGTACGTACGT\n"


def failure(*paths: Path) -> str:
    """Message of the error that reading gives; it must be one line and name the last file."""
    with pytest.raises(SequenceError) as caught:
        list(read_records(paths))
    message = str(caught.value)
    assert "\n" not in message
    assert message.startswith(str(paths[-1]) + ":")
    return message


@pytest.mark.parametrize(
    ("content", "problem"),
    [
        (b"", "the file is empty"),
        (b"\n \n\r\n", "the file is empty"),
        (b"ACGT\nACGT\n", "no FASTA header: the first line must begin with '>'"),
        (b";comment\n>a\nACGT\n", "no FASTA header"),
        (b"@read1\nACGT\n+\nIIII\n", "looks like FASTQ"),
        (b"LOCUS       AB1  4 bp DNA\n", "looks like GenBank; give the file the ending .gb"),
        (b"\x7fELF\x02\x01\x00\x00", "a binary file"),
        (b"\xcf\xfa\xed\xfe\x07\x01", "a binary file"),
        (b">a\nAC\x00GT\n", "a binary file"),
        (bz2.compress(GOOD), "packed with bzip2"),
        (lzma.compress(GOOD), "packed with xz"),
        (b">a\nACGT\n>\nAC\n", ":3: a record without a name"),
        (b">   \nAC\n", ":1: a record without a name"),
        (b">a\xff\nAC\n", ":1: the record's name is not readable text"),
        (b">a\x07b\nAC\n", ":1: the record's name is not readable text"),
        (b">a\nACGT\n>b\n>c\nAC\n", ":3: record b is empty"),
        (b">a\nACGT\n>b\n\n\n", ":3: record b is empty"),
        (b">a\nACGT\n>p1\nMKVLAE\n", ":3: record p1, position 4: 'L'"),
        (b">p1\nMKL\n", "record p1, position 3: 'L' is not an IUPAC nucleotide letter"),
        (b">p1\nACGT\nAC*\n", "record p1, position 7: '*'"),
        (b">a\nAC-GT\n", "record a, position 3: '-' is not an IUPAC nucleotide letter; remove"),
        (b">a\nACGT\n1234\n", "record a, position 5: '1'"),
        (b">a\nACGT\n >b\nACGT\n", "record a, position 5: '>'"),
        (b">a\nAC\xc3\xa9GT\n", "record a, position 3:"),
        (b">a\nAC\xffGT\n", "record a, position 3:"),
    ],
)
def test_content(tmp_path: Path, content: bytes, problem: str) -> None:
    path = tmp_path / "bad.fa"
    path.write_bytes(content)
    assert problem in failure(path)
    if not content.startswith((b"BZh", b"\xfd7zXZ")):
        packed = tmp_path / "bad.fa.gz"
        packed.write_bytes(gzip.compress(content))
        assert problem in failure(packed)


def test_letter_far_into_a_record(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(b">a\n" + b"ACGTACGTAC\n" * 500_000 + b"ACE\n")
    assert "record a, position 5000003: 'E'" in failure(path)


def test_missing_file_and_folder_are_told_at_once(tmp_path: Path) -> None:
    good = tmp_path / "good.fa"
    good.write_bytes(GOOD)
    with pytest.raises(SequenceError, match=r"none\.fa: no such file"):
        read_records([good, tmp_path / "none.fa"])
    with pytest.raises(SequenceError, match="is a folder"):
        read_records([good, tmp_path])


def test_duplicate_names_within_a_file(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(b">a\nAC\n>b\nAC\n>a other\nGG\n")
    assert "record a was seen before" in failure(path)


def test_duplicate_names_over_files(tmp_path: Path) -> None:
    one, two = tmp_path / "one.fa", tmp_path / "two.gb"
    one.write_bytes(GOOD)
    two.write_text(genbank([genbank_record("good", "ACGT")]))
    message = failure(one, two)
    assert "record good was seen before" in message
    assert str(one) in message


def test_plain_file_named_as_gzip(tmp_path: Path) -> None:
    for name in ("a.fa.gz", "a.fa.bgz", "A.FA.GZ"):
        path = tmp_path / name
        path.write_bytes(GOOD)
        assert "named as a gzip file but is not one" in failure(path)


@pytest.mark.parametrize("packed", [gzip.compress(GOOD, mtime=0), bgzipped(GOOD)])
def test_packed_file_cut_anywhere(tmp_path: Path, packed: bytes) -> None:
    path = tmp_path / "a.fa.gz"
    path.write_bytes(packed)
    assert len(list(read_records([path]))) == 1
    for length in range(len(packed)):
        path.write_bytes(packed[:length])
        failure(path)


def test_long_packed_file_cut_behind_its_first_records(tmp_path: Path) -> None:
    text = b"".join(b">r%d\n" % n + b"ACGTTGCAAC" * 50 + b"\n" for n in range(3000))
    packed = gzip.compress(text)
    path = tmp_path / "a.fa.gz"
    path.write_bytes(packed[: len(packed) - 20])
    records = read_records([path])
    next(records)
    with pytest.raises(SequenceError, match="ends too early"):
        list(records)


def test_damaged_gzip(tmp_path: Path) -> None:
    packed = bytearray(gzip.compress(GOOD, mtime=0))
    packed[-6] ^= 1  # one bit of the checksum
    path = tmp_path / "a.fa.gz"
    path.write_bytes(bytes(packed))
    assert "damaged" in failure(path)


def test_rubbish_behind_gzip(tmp_path: Path) -> None:
    path = tmp_path / "a.fa.gz"
    path.write_bytes(gzip.compress(GOOD) + b"rubbish")
    assert "damaged" in failure(path)


@pytest.mark.parametrize("content", [b"", gzip.compress(GOOD)[:-9]], ids=["empty", "cut"])
def test_standard_input_is_called_so(monkeypatch: pytest.MonkeyPatch, content: bytes) -> None:
    monkeypatch.setattr(sys, "stdin", SimpleNamespace(buffer=io.BytesIO(content)))
    with pytest.raises(SequenceError, match=r"^standard input: "):
        list(read_records(["-"]))


def test_genbank_without_sequence(tmp_path: Path) -> None:
    text = genbank([genbank_record("AB1.1", "ACGT" * 30)])
    path = tmp_path / "a.gb"
    path.write_text(text[: text.index("ORIGIN")] + "CONTIG      join(AB2.1:1..120)\n//\n")
    assert "record AB1.1 has no sequence" in failure(path)


def test_genbank_cut_short(tmp_path: Path) -> None:
    text = genbank([genbank_record("AB1.1", "ACGT" * 90)])
    path = tmp_path / "a.gb"
    cuts = (text.index("FEATURES") + 12, text.index("ORIGIN") + 30, len(text) - 3)
    for cut in cuts:
        path.write_text(text[:cut])
        assert "not a whole GenBank file" in failure(path)


def test_genbank_with_less_sequence_than_it_says(tmp_path: Path) -> None:
    lines = genbank([genbank_record("AB1.1", "ACGT" * 90)]).splitlines(keepends=True)
    path = tmp_path / "a.gb"
    path.write_text("".join(line for line in lines if not line.lstrip().startswith("121 ")))
    assert "not a whole GenBank file (Expected sequence length 360" in failure(path)


def test_genbank_with_a_damaged_feature(tmp_path: Path) -> None:
    # Biopython fails by an assertion here.
    text = genbank([genbank_record("AB1.1", "ACGT" * 9)]).replace("complement(1..4)", "1..4x")
    path = tmp_path / "a.gb"
    path.write_text(text)
    assert "not a whole GenBank file" in failure(path)


def test_genbank_without_a_name(tmp_path: Path) -> None:
    lines = genbank([genbank_record("AB1.1", "ACGT" * 9)]).splitlines(keepends=True)
    kept = [line for line in lines if not line.startswith(("ACCESSION", "VERSION"))]
    path = tmp_path / "a.gb"
    path.write_text("".join(kept).replace("LOC ", "    "))
    assert "record 1 has no name; add its VERSION line" in failure(path)


def test_genbank_that_is_not_and_packed_genbank_cut_short(tmp_path: Path) -> None:
    path = tmp_path / "a.gb"
    path.write_bytes(GOOD)
    assert "no GenBank record" in failure(path)
    packed = tmp_path / "a.gb.gz"
    text = genbank([genbank_record("AB1.1", "ACGT" * 90)]).encode()
    packed.write_bytes(gzip.compress(text)[:-10])
    assert "ends too early" in failure(packed)


def test_long_packed_genbank_cut_short(tmp_path: Path) -> None:
    records = [genbank_record(f"AB{n}.1", "ACGTTGCA" * 1000) for n in range(12)]
    path = tmp_path / "a.gb.gz"
    path.write_bytes(gzip.compress(genbank(records).encode())[:-10])
    assert "ends too early" in failure(path)


def test_file_that_may_not_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    # Permissions do not bind every user, so the system's answers are played here.
    path = tmp_path / "a.fa"
    path.write_bytes(GOOD)
    with monkeypatch.context() as patch:
        patch.setattr("os.access", lambda *_: False)
        assert "check its permissions" in failure(path)
    with monkeypatch.context() as patch:

        def refuse(*_: object) -> None:
            raise OSError(5, "Input/output error")

        patch.setattr("builtins.open", refuse)
        assert "cannot be read ([Errno 5] Input/output error)" in failure(path)


def test_genbank_with_protein(tmp_path: Path) -> None:
    record = genbank_record("AB1.1", "MKVLAE")
    record.annotations["molecule_type"] = "protein"
    path = tmp_path / "a.gb"
    path.write_text(genbank([record]))
    assert "record AB1.1, position 4: 'L'" in failure(path)
