"""Reading: any wrapping, line ending, packing and source of a file gives the same records."""

import gzip
import io
import re
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest
from Bio import SeqIO
from Bio.bgzf import BgzfWriter
from Bio.Seq import Seq
from Bio.SeqFeature import FeatureLocation, SeqFeature
from Bio.SeqRecord import SeqRecord
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from hmmseg.errors import UsageError
from hmmseg.sequence import alphabet
from hmmseg.sequence.alphabet import decode, encode
from hmmseg.sequence.reading import Record, read_records, record_from_text

LETTERS = "ACGTUNRYSWKMBDHVacgtunryswkmbdhv"
texts = st.lists(st.text(alphabet=LETTERS, min_size=1, max_size=90), min_size=1, max_size=4)


def plain_fasta(sequences: list[str], width: int, ending: str) -> bytes:
    lines = []
    for number, text in enumerate(sequences):
        lines.append(f">r{number} number {number}")
        lines.extend(text[i : i + width] for i in range(0, len(text), width))
    return (ending.join(lines) + ending).encode()


def bgzipped(content: bytes) -> bytes:
    packed = io.BytesIO()
    writer = BgzfWriter(fileobj=packed)
    # Small blocks, so that records and lines lie across their borders.
    for offset in range(0, len(content), 50):
        writer.write(content[offset : offset + 50])
        writer.flush()
    packed.write(bytes.fromhex("1f8b08040000000000ff0600424302001b0003000000000000000000"))
    return packed.getvalue()


def in_members(content: bytes) -> bytes:
    return b"".join(gzip.compress(content[i : i + 40]) for i in range(0, len(content), 40))


PACKINGS: dict[str, Callable[[bytes], bytes]] = {
    "plain": bytes,
    "gzip": gzip.compress,
    "members": in_members,
    "bgzip": bgzipped,
}


def same(one: Record, other: Record) -> bool:
    return (
        (one.name, one.description, one.ambiguous, one.circular)
        == (other.name, other.description, other.ambiguous, other.circular)
        and one.bases.tolist() == other.bases.tolist()
        and one.soft_mask.tolist() == other.soft_mask.tolist()
        and one.n_runs.tolist() == other.n_runs.tolist()
    )


@settings(max_examples=50, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    sequences=texts,
    width=st.integers(1, 100),
    ending=st.sampled_from(["\n", "\r\n", "\r"]),
    packing=st.sampled_from(sorted(PACKINGS)),
)
def test_form_of_the_file_does_not_matter(
    tmp_path: Path, sequences: list[str], width: int, ending: str, packing: str
) -> None:
    path = tmp_path / ("a.fa" if packing == "plain" else "a.fa.gz")
    path.write_bytes(PACKINGS[packing](plain_fasta(sequences, width, ending)))
    records = list(read_records([path]))
    expected = [
        record_from_text(f"r{n}", text, description=f"r{n} number {n}")
        for n, text in enumerate(sequences)
    ]
    assert len(records) == len(expected)
    assert all(same(one, other) for one, other in zip(records, expected, strict=True))


@settings(max_examples=50, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(sequences=texts, width=st.integers(1, 100))
def test_records_are_those_of_biopython(tmp_path: Path, sequences: list[str], width: int) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(plain_fasta(sequences, width, "\n"))
    with path.open() as handle:
        expected = list(SeqIO.parse(handle, "fasta"))
    for record, parsed in zip(read_records([path]), expected, strict=True):
        text = str(parsed.seq)
        assert (record.name, record.description) == (parsed.id, parsed.description)
        assert record.bases.tolist() == encode(text).tolist()
        assert [m.span() for m in re.finditer("[Nn]+", text)] == [
            tuple(run) for run in record.n_runs.tolist()
        ]
        assert [m.span() for m in re.finditer("[a-z]+", text)] == [
            tuple(run) for run in record.soft_mask.tolist()
        ]
        assert record.ambiguous == len(re.findall("[^ACGTUN]", text.upper()))


@settings(max_examples=50)
@given(text=st.text(alphabet="ACGTNacgtnR", min_size=1, max_size=40), chunk=st.integers(1, 9))
def test_chunks_leave_no_trace(text: str, chunk: int) -> None:
    whole = record_from_text("r", text)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(alphabet, "CHUNK", chunk)
        assert same(record_from_text("r", text), whole)


def test_blocks_of_lines_leave_no_trace(tmp_path: Path) -> None:
    # Several blocks of a megabyte: headers within blocks, at their borders, and none at all.
    rng = np.random.default_rng(5)
    lengths = [30, 2_500_000, 1, 700_000, 900_000, 12]
    sequences = [decode(rng.integers(0, 4, size=n, dtype=np.uint8)) for n in lengths]
    path = tmp_path / "a.fa"
    path.write_bytes(plain_fasta(sequences, 60, "\n"))
    records = list(read_records([path]))
    assert [decode(record.bases) for record in records] == sequences


def test_white_space_and_blank_lines_are_passed_over(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(b"\n\n>a  first\nAC GT \n\n\tAC\n\n>b\nGG\n\n")
    a, b = read_records([path])
    assert (a.name, a.description, decode(a.bases)) == ("a", "a  first", "ACGTAC")
    assert (b.name, decode(b.bases)) == ("b", "GG")


def test_no_newline_at_the_end_and_a_byte_order_mark(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(b"\xef\xbb\xbf>a\nACGT\n>b\nGG")
    assert [decode(record.bases) for record in read_records([path])] == ["ACGT", "GG"]


def test_description_may_hold_any_bytes(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(">a Rhône\nAC\n".encode() + ">b Rhône\nGT\n".encode("latin-1"))
    assert [record.name for record in read_records([path])] == ["a", "b"]


def test_gzip_is_known_by_its_bytes(tmp_path: Path) -> None:
    path = tmp_path / "a.fasta"
    path.write_bytes(gzip.compress(b">a\nACGT\n"))
    assert [len(record) for record in read_records([path])] == [4]


def test_records_of_missing_bases_are_read(tmp_path: Path) -> None:
    path = tmp_path / "a.fa"
    path.write_bytes(b">n\nNNNN\n>r\nRYRY\n")
    n, r = read_records([path])
    assert n.bases.tolist() == r.bases.tolist() == [4, 4, 4, 4]
    assert (n.n_runs.tolist(), r.n_runs.tolist()) == ([[0, 4]], [])
    assert (n.ambiguous, r.ambiguous) == (0, 4)


@pytest.mark.parametrize(
    ("header", "circular"),
    [
        ("a [topology=circular]", True),
        ("a chloroplast [Topology = Circular] [x=y]", True),
        ("a [topology=linear]", False),
        ("a circular plasmid", False),
    ],
)
def test_topology_in_the_header(tmp_path: Path, header: str, circular: bool) -> None:
    path = tmp_path / "a.fa"
    path.write_text(f">{header}\nACGT\n")
    (record,) = read_records([path])
    assert record.circular is circular


@pytest.mark.parametrize("packing", sorted(PACKINGS))
def test_standard_input(monkeypatch: pytest.MonkeyPatch, packing: str) -> None:
    content = PACKINGS[packing](b">a\nACGTN\n>b\nGG\n")
    monkeypatch.setattr(sys, "stdin", SimpleNamespace(buffer=io.BytesIO(content)))
    assert [decode(record.bases) for record in read_records(["-"])] == ["ACGTN", "GG"]


@pytest.mark.parametrize("packing", sorted(PACKINGS))
def test_standard_input_from_a_pipe(packing: str) -> None:
    script = (
        "from hmmseg.sequence.reading import read_records\n"
        "print(*(len(record) for record in read_records(['-'])))"
    )
    content = PACKINGS[packing](plain_fasta(["ACGT" * 20_000, "GG"], 60, "\n"))
    run = subprocess.run(
        [sys.executable, "-W", "error", "-c", script],
        input=content,
        capture_output=True,
        check=True,
    )
    assert run.stdout.split() == [b"80000", b"2"]


def test_standard_input_can_be_named_once() -> None:
    with pytest.raises(UsageError, match="only once"):
        read_records(["-", "-"])


def genbank(records: list[SeqRecord]) -> str:
    handle = io.StringIO()
    SeqIO.write(records, handle, "genbank")
    return handle.getvalue()


def genbank_record(name: str, text: str, topology: str = "linear") -> SeqRecord:
    annotations: dict[str, str | int] = {"molecule_type": "DNA", "topology": topology}
    feature = SeqFeature(FeatureLocation(0, 4, strand=-1), type="gene")
    return SeqRecord(
        Seq(text),
        id=name,
        name="LOC",
        description="a test",
        annotations=annotations,
        features=[feature],
    )


@pytest.mark.parametrize("ending", ["gb", "gbk", "gbff", "genbank", "GB", "gbff.gz", "gbk.bgz"])
def test_genbank_by_its_ending(tmp_path: Path, ending: str) -> None:
    text = genbank(
        [genbank_record("AB1.2", "ACGTNNRACG" * 9, "circular"), genbank_record("AB2.1", "GGCC")]
    ).encode()
    path = tmp_path / f"a.{ending}"
    path.write_bytes(gzip.compress(text) if "gz" in ending else text)
    one, two = read_records([path])
    assert (one.name, one.description, one.circular) == ("AB1.2", "AB1.2 a test", True)
    assert one.bases.tolist() == encode("ACGTNNRACG" * 9).tolist()
    # GenBank writes all letters in lower case, which says nothing of masking.
    assert len(one.soft_mask) == 0
    assert len(one.n_runs) == one.ambiguous == 9
    assert (two.name, two.circular, decode(two.bases)) == ("AB2.1", False, "GGCC")


def test_several_files_in_their_order(tmp_path: Path) -> None:
    (tmp_path / "b.fa").write_text(">b\nAC\n")
    (tmp_path / "a.gb").write_text(genbank([genbank_record("a", "ACGT")]))
    records = read_records([tmp_path / "b.fa", tmp_path / "a.gb"])
    assert [record.name for record in records] == ["b", "a"]
