"""Tracks in bins against base by base, and what leaves the page small."""

import json
import zlib
from base64 import b64decode
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.cli import main
from hmmseg.errors import OutputError
from hmmseg.report.bins import LEVELS, NOTHING, Layout, read_binned
from hmmseg.report.packing import packed, plain_json
from hmmseg.report.where import longest_first
from hmmseg.tracks.bigwig import PosteriorTrack
from tests.report.large import large_folder

LENGTHS = {"b": 50, "none": 7, "a.1": 31}


@st.composite
def values(draw: st.DrawFn) -> dict[str, list[float | None]]:
    """Draw a value, or none, for each base of each record."""
    level = st.sampled_from([None, 0.0, 0.123, 0.5, 0.949, 0.95, 1.0])
    return {n: draw(st.lists(level, min_size=k, max_size=k)) for n, k in LENGTHS.items()}


def written(path: Path, drawn: dict[str, list[float | None]]) -> Path:
    with PosteriorTrack(path, LENGTHS) as track:
        for name, own in drawn.items():
            at = [i for i, value in enumerate(own) if value is not None]
            track.add(name, at, [i + 1 for i in at], [own[i] for i in at])
    return path


@given(drawn=values(), size=st.integers(1, 40))
def test_bins_hold_lowest_mean_and_highest_of_their_bases(
    tmp_path_factory: pytest.TempPathFactory, drawn: dict[str, list[float | None]], size: int
) -> None:
    path = written(tmp_path_factory.mktemp("bins") / "x.bw", drawn)
    layout = Layout(longest_first(LENGTHS), size)
    found = read_binned(path, layout, (0.95,))
    everything = [v for own in drawn.values() for v in own if v is not None]
    assert found.bases == len(everything)
    assert found.total == pytest.approx(sum(everything), abs=1e-5)
    assert found.above == {0.95: sum(v >= 0.95 for v in everything)}
    at = 0
    for name in ("b", "a.1", "none"):
        own = drawn[name]
        for start in range(0, len(own), size):
            known = [v for v in own[start : start + size] if v is not None]
            trio = [int(x[at]) for x in (found.lowest, found.mean, found.highest)]
            if not known:
                assert trio == [NOTHING] * 3
            else:
                said = [min(known), sum(known) / len(known), max(known)]
                # Half a step of the byte, and what single precision takes.
                assert np.allclose(np.array(trio) / LEVELS, said, rtol=0, atol=0.5 / LEVELS + 1e-6)
            at += 1
    assert at == len(found.mean)


@given(drawn=values())
def test_holes_are_the_bases_without_a_value(
    tmp_path_factory: pytest.TempPathFactory, drawn: dict[str, list[float | None]]
) -> None:
    path = written(tmp_path_factory.mktemp("bins") / "x.bw", drawn)
    layout = Layout(longest_first(LENGTHS), 10)
    names = list(layout.record_lengths)
    holes = read_binned(path, layout).holes.tolist()
    found = {(names[record], i) for record, start, end in holes for i in range(start, end)}
    assert found == {(n, i) for n, own in drawn.items() for i, v in enumerate(own) if v is None}
    assert sorted(holes) == holes
    assert all(start < end for _, start, end in holes)


def test_bins_grow_with_the_assembly() -> None:
    assert Layout.fitting({"a": 1_000_000}, 2).size == 10
    assert Layout.fitting({"a": 100_000_000}, 2).size == 100
    assert Layout.fitting({"a": 3_000_000_000}, 2).size == 5_000
    for bases in (10**6, 10**7, 123_456_789, 10**9):
        layout = Layout.fitting({"a": bases}, 3)
        assert 3 * layout.counts.sum() <= 2_000_000


def test_another_length_of_a_record_is_told(tmp_path: Path) -> None:
    path = written(tmp_path / "x.bw", {n: [0.5] * k for n, k in LENGTHS.items()})
    with pytest.raises(OutputError, match=r"a\.1 has another length"):
        read_binned(path, Layout({**LENGTHS, "a.1": 99}, 10))


@pytest.mark.parametrize(
    ("bases", "records", "regions", "most"),
    [
        pytest.param(10_000_000, 1_200, 6_000, 4.5, id="10 Mb"),
        pytest.param(100_000_000, 12_000, 60_000, 12, id="100 Mb", marks=pytest.mark.slow),
    ],
)
def test_pages_of_large_assemblies_can_be_sent(
    tmp_path: Path, bases: int, records: int, regions: int, most: float
) -> None:
    """The drawing library takes 1.4 MB of each, the bins at most 4."""
    folder = large_folder(tmp_path / "large", bases, records, regions)
    page = tmp_path / "page.html"
    assert main(["report", str(folder), "--output", str(page)]) == 0
    assert page.stat().st_size < most * 1_000_000


@given(text=st.text(), name=st.text())
def test_nothing_in_json_can_be_markup(text: str, name: str) -> None:
    """HTML ends a script at ``</script``, and a comment can hide one (WHATWG HTML, 4.12.1.3)."""
    document = {name: [text, 1.5, None], "x": "</script><!--<script>"}
    written_json = plain_json(document)
    assert not set(written_json) & set("<>&\u2028\u2029")
    assert json.loads(written_json) == document


@given(content=st.binary())
def test_packed_content_comes_back(content: bytes) -> None:
    assert zlib.decompress(b64decode(packed(content))) == content
