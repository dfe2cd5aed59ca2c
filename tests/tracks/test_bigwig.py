"""Posterior tracks, read back by pybigtools, a bigWig reader of another origin (Rust)."""

import itertools
import os
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pybigtools  # type: ignore[import-untyped]
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.outputs import sha256_of
from hmmseg.tracks import bigwig
from hmmseg.tracks.bigwig import PosteriorTrack, rounded_runs, summarize_track

Runs = list[tuple[int, int, float]]

# Names as they come in assemblies; not in alphabetical order.
LENGTHS = {"scaffold_2": 300, "chr1.1": 1, "gi|7|x": 90, "a": 40}


def second_reader(path: Path) -> dict[str, Runs]:
    """Return the intervals of each record as pybigtools reads them."""
    file = pybigtools.open(str(path))
    return {name: [tuple(run) for run in file.records(name)] for name in file.chroms()}


def dense(runs: Runs, length: int) -> NDArray[np.float32]:
    """Return float32[position], NaN where no run is."""
    values = np.full(length, np.nan, dtype=np.float32)
    for start, end, value in runs:
        values[start:end] = value
    return values


def write(path: Path, calls: list[tuple[str, Runs]], lengths: dict[str, int] = LENGTHS) -> None:
    with PosteriorTrack(path, lengths) as track:
        for record, runs in calls:
            starts, ends, values = zip(*runs, strict=True) if runs else ((), (), ())
            track.add(record, starts, ends, values)


@st.composite
def runs_on(draw: st.DrawFn, length: int) -> Runs:
    """Draw sorted runs with values from a few levels, so that neighbours are often equal."""
    cuts = sorted(draw(st.sets(st.integers(0, length), max_size=24)))
    level = st.one_of(
        st.sampled_from([0.0, 0.5, 1.0]), st.integers(0, 1000).map(lambda k: k / 1000)
    )
    return [(a, b, draw(level)) for a, b in itertools.pairwise(cuts) if draw(st.integers(0, 3))]


@st.composite
def tracks(draw: st.DrawFn) -> dict[str, Runs]:
    """Draw the runs of each record of LENGTHS, some of them without any."""
    return {name: draw(runs_on(length)) for name, length in LENGTHS.items()}


@given(tracks())
def test_what_is_written_is_read_back(track: dict[str, Runs]) -> None:
    with scratch() as path:
        write(path, list(track.items()))
        found = second_reader(path)
        assert pybigtools.open(str(path)).chroms() == LENGTHS
        for name, length in LENGTHS.items():
            expected = dense(track[name], length)
            np.testing.assert_array_equal(dense(found[name], length), expected)
            # Runs are joined as far as they can be.
            for (_, end, value), (start, _, following) in itertools.pairwise(found[name]):
                assert end < start or value != following


@given(tracks(), st.lists(st.integers(0, 5), min_size=1))
def test_bytes_do_not_depend_on_how_runs_are_handed_over(
    track: dict[str, Runs], sizes: list[int]
) -> None:
    with scratch() as path:
        write(path, list(track.items()))
        whole = path.read_bytes()
        turn = itertools.cycle([*sizes, 1])
        calls = []
        for name, runs in track.items():
            rest = [piece for run in runs for piece in split(run)]
            while rest:
                size = next(turn)
                calls.append((name, rest[:size]))
                rest = rest[size:]
        write(path, calls)
        assert path.read_bytes() == whole


def split(run: tuple[int, int, float]) -> Runs:
    """Cut a run in two where it is longer than one base."""
    start, end, value = run
    middle = (start + end) // 2
    return [(start, middle, value), (middle, end, value)] if middle > start else [run]


class scratch:  # noqa: N801  (reads as a function; tmp_path does not go with Hypothesis)
    """A file name in a folder that is removed at the end."""

    def __enter__(self) -> Path:
        import tempfile  # noqa: PLC0415

        self.folder = tempfile.TemporaryDirectory()
        return Path(self.folder.name, "x.posterior.bw")

    def __exit__(self, *_: object) -> None:
        self.folder.cleanup()


def many_runs(number: int, seed: int = 7) -> tuple[NDArray[np.int64], ...]:
    """Return starts, ends and levels of touching runs, three bases long on average."""
    rng = np.random.default_rng(seed)
    ends = np.cumsum(rng.integers(1, 6, number))
    return np.append(0, ends[:-1]), ends, rng.integers(0, 1001, number)


def test_more_runs_than_are_handed_over_at_once(tmp_path: Path) -> None:
    starts, ends, levels = many_runs(3 * bigwig.RUNS_AT_ONCE + 5)
    length = int(ends[-1])
    for name, cuts in (("whole.bw", []), ("cut.bw", [1, bigwig.RUNS_AT_ONCE - 1, 40_000])):
        with PosteriorTrack(tmp_path / name, {"x": length}) as track:
            pieces = (np.split(column, cuts) for column in (starts, ends, levels / 1000))
            for piece in zip(*pieces, strict=True):
                track.add("x", *piece)
    assert sha256_of(tmp_path / "whole.bw") == sha256_of(tmp_path / "cut.bw")
    expected = np.repeat((levels / 1000).astype(np.float32), ends - starts)
    np.testing.assert_array_equal(
        dense(second_reader(tmp_path / "whole.bw")["x"], length), expected
    )


def test_other_memory_gives_the_same_bytes(tmp_path: Path) -> None:
    # MALLOC_PERTURB_ (glibc, mallopt(3)) fills new memory with a pattern: bytes that were never
    # set would show. On other systems it has no effect and the test still compares two runs.
    code = (
        "import sys\nfrom tests.tracks.test_bigwig import many_runs\n"
        "from hmmseg.tracks import PosteriorTrack\n"
        "starts, ends, levels = many_runs(5000)\n"
        "with PosteriorTrack(sys.argv[1], {'x.1': int(ends[-1]), 'empty': 9}) as track:\n"
        "    track.add('x.1', starts, ends, levels / 1000)\n"
    )
    sums = set()
    for pattern in ("0", "85", "170"):
        path = tmp_path / pattern
        subprocess.run(
            [sys.executable, "-c", code, str(path)],
            env={**os.environ, "MALLOC_PERTURB_": pattern},
            cwd=Path(__file__).parents[2],
            check=True,
            timeout=120,
        )
        sums.add(sha256_of(path))
    assert len(sums) == 1


@pytest.mark.parametrize("lengths", [LENGTHS, {"only": 1}])
def test_a_track_without_any_run_is_a_file_that_reads(
    tmp_path: Path, lengths: dict[str, int]
) -> None:
    path = tmp_path / "empty.bw"
    write(path, [], lengths)
    assert second_reader(path) == {name: [] for name in lengths}
    info = pybigtools.open(str(path)).info()
    assert info["chromCount"] == len(lengths)
    assert (info["summary"]["basesCovered"], info["summary"]["sum"]) == (0, 0)
    assert (info["summary"]["min"], info["summary"]["max"]) == (0, 0)
    found = summarize_track(path)
    assert (found.record_lengths, found.bases, found.total) == (lengths, 0, 0)
    assert np.isnan(found.lowest)
    assert np.isnan(found.highest)


def test_calls_without_runs_change_nothing(tmp_path: Path) -> None:
    write(tmp_path / "a", [("a", [(0, 5, 0.25)])])
    write(tmp_path / "b", [("scaffold_2", []), ("a", []), ("a", [(0, 5, 0.25)]), ("a", [])])
    assert (tmp_path / "a").read_bytes() == (tmp_path / "b").read_bytes()


class TestRefused:
    """What the library would take without a word, or crash on."""

    @pytest.fixture
    def track(self, tmp_path: Path) -> Iterator[PosteriorTrack]:
        with PosteriorTrack(tmp_path / "x.bw", LENGTHS) as track:
            track.add("chr1.1", [0], [1], [0.5])
            track.add("gi|7|x", [10], [20], [0.5])
            yield track

    @pytest.mark.parametrize(
        ("starts", "ends", "values", "message"),
        [
            ([30], [40], [np.nan], r"gi\|7\|x: value 0 is nan, not a finite number"),
            ([30, 40], [40, 50], [0.5, np.inf], r"value 1 is inf, not a finite number"),
            ([30], [91], [0.5], r"run 30-91 ends beyond the record's 90 bases"),
            ([-1], [5], [0.5], r"run -1-5 begins before the end of the run before it"),
            ([19], [25], [0.5], r"run 19-25 begins before the end of the run before it"),
            ([30, 39], [40, 50], [0.5, 0.1], r"run 39-50 begins before the end"),
            ([50, 30], [60, 40], [0.5, 0.1], r"run 30-40 begins before the end"),
            ([30], [30], [0.5], r"run 30-30 is empty"),
            ([40], [30], [0.5], r"run 40-30 is empty"),
            ([30, 40], [35], [0.5, 0.1], r"differ in number"),
            ([[30]], [[40]], [[0.5]], r"differ in number"),
        ],
    )
    def test_runs(
        self, track: PosteriorTrack, starts: object, ends: object, values: object, message: str
    ) -> None:
        with pytest.raises(OutputError, match=message):
            track.add("gi|7|x", starts, ends, values)  # type: ignore[arg-type]

    def test_a_record_that_is_not_there(self, track: PosteriorTrack) -> None:
        with pytest.raises(OutputError, match="b is not among the records"):
            track.add("b", [0], [1], [0.5])

    def test_a_record_out_of_order(self, track: PosteriorTrack) -> None:
        with pytest.raises(OutputError, match=r"chr1\.1 comes after gi\|7\|x, out of order"):
            track.add("chr1.1", [0], [1], [0.5])

    @pytest.mark.parametrize("lengths", [{}, {"a": 0}, {"a": 2**32}])
    def test_records(self, tmp_path: Path, lengths: dict[str, int]) -> None:
        with pytest.raises(OutputError, match="bigWig"):
            PosteriorTrack(tmp_path / "y.bw", lengths)
        assert not (tmp_path / "y.bw").exists()

    def test_a_place_that_cannot_be_written(self, tmp_path: Path) -> None:
        with pytest.raises(OutputError, match="cannot write"):
            PosteriorTrack(tmp_path / "no" / "y.bw", LENGTHS)


class TestReadBack:
    """The file is compared with what was handed over, so a loss on the way is seen."""

    def lose(self, path: Path, monkeypatch: pytest.MonkeyPatch, keep: int) -> None:
        hand_over = PosteriorTrack._hand_over

        def lossy(self: PosteriorTrack, number: int) -> None:
            real, self._file = self._file, Lossy(self._file, keep)
            hand_over(self, number)
            self._file = real

        monkeypatch.setattr(PosteriorTrack, "_hand_over", lossy)
        write(path, [("a", [(0, 5, 0.25), (5, 10, 0.5)])])

    def test_a_lost_run(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        with pytest.raises(OutputError, match="differs from what was written"):
            self.lose(tmp_path / "x.bw", monkeypatch, keep=1)

    def test_all_runs_lost(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        with pytest.raises(OutputError, match=r"differs from what was written|not a readable"):
            self.lose(tmp_path / "x.bw", monkeypatch, keep=0)

    def test_nothing_is_checked_after_a_failure(self, tmp_path: Path) -> None:
        track = PosteriorTrack(tmp_path / "x.bw", LENGTHS)
        with pytest.raises(ZeroDivisionError), track:
            raise ZeroDivisionError


class Lossy:
    """A bigWig file that loses the entries after the first few."""

    def __init__(self, file: object, keep: int) -> None:
        self.file, self.keep = file, keep

    def addEntries(  # noqa: N802
        self, names: list[str], starts: list[int], ends: list[int], values: list[float]
    ) -> None:
        k = self.keep
        if k:
            self.file.addEntries(  # type: ignore[attr-defined]
                names[:k], starts[:k], ends=ends[:k], values=values[:k]
            )


class TestSummary:
    @given(tracks())
    def test_is_that_of_the_values(self, track: dict[str, Runs]) -> None:
        with scratch() as path:
            write(path, list(track.items()))
            found = summarize_track(path)
            values = np.concatenate([dense(track[name], LENGTHS[name]) for name in LENGTHS])
            values = values[~np.isnan(values)]
            assert found.record_lengths == LENGTHS
            assert found.bases == len(values)
            assert found.total == pytest.approx(float(values.sum(dtype=np.float64)), abs=1e-9)
            if len(values):
                assert (found.lowest, found.highest) == (values.min(), values.max())

    def test_reads_in_pieces(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        write(tmp_path / "x.bw", [("scaffold_2", [(3, 250, 0.125)]), ("a", [(0, 40, 0.5)])])
        whole = summarize_track(tmp_path / "x.bw")
        monkeypatch.setattr(bigwig, "BASES_AT_ONCE", 7)
        assert summarize_track(tmp_path / "x.bw") == whole
        assert (whole.bases, whole.total) == (287, 247 * 0.125 + 20)

    @pytest.mark.parametrize("content", [b"", b"not a bigWig file" * 100])
    def test_of_another_file(self, tmp_path: Path, content: bytes) -> None:
        (tmp_path / "x.bw").write_bytes(content)
        with pytest.raises(OutputError, match=r"x\.bw: not a readable bigWig file"):
            summarize_track(tmp_path / "x.bw")


class TestRoundedRuns:
    @given(st.lists(st.one_of(st.sampled_from([0.0, 0.1, 1.0]), st.floats(0, 1)), max_size=60))
    def test_every_position_has_its_rounded_value(self, values: list[float]) -> None:
        starts, ends, levels = rounded_runs(np.array(values))
        assert [x.dtype.name for x in (starts, ends, levels)] == ["int64", "int64", "float64"]
        # Runs cover the positions without a hole, and neighbours differ.
        assert [0, *ends.tolist()] == [*starts.tolist(), len(values)]
        assert np.all(levels[1:] != levels[:-1])
        spread = np.repeat(levels, ends - starts)
        # At three decimals at most, and no further from the value than half a thousandth.
        assert all(f"{x:.3f}" == repr(float(x)).ljust(5, "0") for x in spread)
        assert np.all(np.abs(spread - np.array(values)) <= 0.0005 + 1e-12)

    def test_a_half_is_rounded_up(self) -> None:
        # These are exact in binary: 0.0625 = 62.5 thousandths, 0.9375 = 937.5, 0.3125 = 312.5.
        starts, _, levels = rounded_runs([0.0625, 0.9375, 0.3125])
        assert starts.tolist() == [0, 1, 2]
        assert levels.tolist() == [0.063, 0.938, 0.313]

    def test_a_whisker_outside_the_interval_is_its_end(self) -> None:
        assert rounded_runs([np.nextafter(1, 2), 1.0])[2].tolist() == [1.0]
        assert rounded_runs([-1e-17, 0.0])[2].tolist() == [0.0]

    def test_nothing(self) -> None:
        assert [len(column) for column in rounded_runs([])] == [0, 0, 0]

    @pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
    def test_refuses_what_is_no_number(self, bad: float) -> None:
        with pytest.raises(OutputError, match="value 1 is"):
            rounded_runs([0.5, bad])

    @given(st.lists(st.sampled_from([0.2, 0.2001, 0.7]), min_size=1, max_size=40), st.data())
    def test_blocks_joined_by_the_track_are_as_one(
        self, values: list[float], data: st.DataObject
    ) -> None:
        cut = data.draw(st.integers(0, len(values)))
        with scratch() as path:
            with PosteriorTrack(path, {"a": len(values)}) as track:
                track.add("a", *rounded_runs(values))
            whole = path.read_bytes()
            with PosteriorTrack(path, {"a": len(values)}) as track:
                for offset, block in ((0, values[:cut]), (cut, values[cut:])):
                    starts, ends, levels = rounded_runs(block)
                    track.add("a", starts + offset, ends + offset, levels)
            assert path.read_bytes() == whole
