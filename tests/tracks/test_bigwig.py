"""Posterior tracks, read back by two readers of other origins.

They are pybigtools (on bigtools, in Rust) and pyBigWig (on libBigWig, in C).
"""

import bisect
import contextlib
import itertools
import os
import struct
import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pybigtools
import pyBigWig
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.outputs import sha256_of
from hmmseg.tracks import bbi, bigwig_file
from hmmseg.tracks.bigwig import PosteriorTrack, read_track, rounded_runs, summarize_track
from hmmseg.tracks.bigwig_file import RUNS_IN_BLOCK
from hmmseg.tracks.zoom import bins_of_runs, first_bin_size

Runs = list[tuple[int, int, float]]
Change = Callable[[int, NDArray[np.void]], tuple[int, NDArray[np.void]]]

# Names as they come in assemblies; not in alphabetical order.
LENGTHS = {"scaffold_2": 300, "chr1.1": 1, "gi|7|x": 90, "a": 40}


def second_reader(path: Path) -> dict[str, Runs]:
    """Return the intervals of each record as pybigtools reads them."""
    file = pybigtools.open(str(path))
    return {name: [tuple(run) for run in file.records(name)] for name in file.chroms()}


def third_reader(path: Path) -> dict[str, Runs]:
    """Return the intervals of each record that has any as pyBigWig reads them."""
    file = pyBigWig.open(str(path))
    assert list(file.chroms().items()) == list(LENGTHS.items())
    found = {name: file.intervals(name) for name in LENGTHS}
    file.close()
    return {name: list(runs) for name, runs in found.items() if runs}


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
        assert third_reader(path) == {name: runs for name, runs in found.items() if runs}
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
    starts, ends, levels = many_runs(300 * RUNS_IN_BLOCK + 5)
    length = int(ends[-1])
    for name, cuts in (("whole.bw", []), ("cut.bw", [1, RUNS_IN_BLOCK - 1, 40_000, 200_000])):
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
    for pattern in ("0", "170"):
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
    other = pyBigWig.open(str(path))
    assert other.chroms() == lengths
    assert [other.intervals(name) for name in lengths] == [None] * len(lengths)


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

    def write_with(self, path: Path, monkeypatch: pytest.MonkeyPatch, change: Change) -> None:
        # What goes to the disk is not what was counted.
        pack = bbi.pack_section
        monkeypatch.setattr(bbi, "pack_section", lambda number, runs: pack(*change(number, runs)))
        write(path, [("a", [(0, 5, 0.25), (5, 10, 0.5)])])

    @pytest.mark.parametrize(
        "change",
        [
            lambda number, runs: (number, runs[:1]),
            lambda number, runs: (number, runs[::-1][:1]),
            lambda number, runs: (99, runs),
        ],
    )
    def test_lost_runs(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, change: Change
    ) -> None:
        with pytest.raises(OutputError, match=r"differs from what was written|not a readable"):
            self.write_with(tmp_path / "x.bw", monkeypatch, change)

    def test_changed_values(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        def change(number: int, runs: NDArray[np.void]) -> tuple[int, NDArray[np.void]]:
            runs = runs.copy()
            runs["value"][1] = 0.375
            return number, runs

        with pytest.raises(OutputError, match="differs from what was written"):
            self.write_with(tmp_path / "x.bw", monkeypatch, change)

    def test_changed_lengths(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        names = bbi.write_names
        other = {**LENGTHS, "a": 41}
        monkeypatch.setattr(bbi, "write_names", lambda file, _: names(file, other))
        with pytest.raises(OutputError, match="its records differ from those written"):
            write(tmp_path / "x.bw", [("a", [(0, 5, 0.25)])])

    def test_nothing_is_checked_after_a_failure(self, tmp_path: Path) -> None:
        track = PosteriorTrack(tmp_path / "x.bw", LENGTHS)
        with pytest.raises(ZeroDivisionError), track:
            raise ZeroDivisionError


@pytest.mark.parametrize("bytes_free", [100, 5_000, 100_000])
def test_a_full_disk_is_an_error_in_one_line(tmp_path: Path, bytes_free: int) -> None:
    # The system's limit on the size of a file stands for the end of the disk (setrlimit(2)).
    code = (
        "import resource, sys\nfrom tests.tracks.test_bigwig import many_runs\n"
        "from hmmseg.errors import OutputError\nfrom hmmseg.tracks import PosteriorTrack\n"
        "starts, ends, levels = many_runs(50_000)\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[2]),) * 2)\n"
        "try:\n"
        "    with PosteriorTrack(sys.argv[1], {'x': int(ends[-1])}) as track:\n"
        "        track.add('x', starts, ends, levels / 1000)\n"
        "except OutputError as error:\n"
        "    print(error)\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "x.bw"), str(bytes_free)],
        cwd=Path(__file__).parents[2],
        capture_output=True,
        text=True,
        check=True,
        timeout=120,
    )
    expected = f"cannot write {tmp_path / 'x.bw'}: File too large; make room or choose another"
    assert done.stdout.startswith(expected)
    assert done.stdout.count("\n") == 1
    assert done.stderr == ""


class TestSummary:
    @given(tracks())
    def test_is_that_of_the_values(self, track: dict[str, Runs]) -> None:
        with scratch() as path:
            write(path, list(track.items()))
            found = summarize_track(path)
            values = np.concatenate([dense(track[name], LENGTHS[name]) for name in LENGTHS])
            values = values[~np.isnan(values)]
            assert list(found.record_lengths.items()) == list(LENGTHS.items())
            assert found.bases == len(values)
            assert found.total == pytest.approx(float(values.sum(dtype=np.float64)), abs=1e-9)
            if len(values):
                assert (found.lowest, found.highest) == (values.min(), values.max())
            other = pybigtools.open(str(path)).info()["summary"]
            assert other["basesCovered"] == found.bases
            assert other["sum"] == pytest.approx(found.total)
            if len(values):
                assert (other["min"], other["max"]) == (values.min(), values.max())

    @given(tracks())
    def test_runs_are_read_back(self, track: dict[str, Runs]) -> None:
        with scratch() as path:
            write(path, list(track.items()))
            found: dict[str, Runs] = {name: [] for name in LENGTHS}
            for name, *columns in read_track(path):
                found[name] += zip(*columns, strict=True)
            assert found == second_reader(path)

    @pytest.mark.parametrize("content", [b"", b"x", b"not a bigWig file" * 100])
    def test_of_another_file(self, tmp_path: Path, content: bytes) -> None:
        (tmp_path / "x.bw").write_bytes(content)
        with pytest.raises(OutputError, match=r"x\.bw: not a readable bigWig file"):
            summarize_track(tmp_path / "x.bw")

    def test_of_the_product_of_another_program(self, tmp_path: Path) -> None:
        path = tmp_path / "x.bw"
        file = pyBigWig.open(str(path), "w")
        file.addHeader(list(LENGTHS.items()))
        file.addEntries(["a", "a"], [0, 30], ends=[10, 40], values=[0.5, 0.25])
        file.close()
        found = summarize_track(path)
        assert (found.record_lengths, found.bases, found.total) == (LENGTHS, 20, 7.5)

    @pytest.mark.parametrize(
        ("part", "offset", "new", "message"),
        [
            ("names", 0, b"\0", "no names"),
            ("index", 0, b"\0", "no index"),
            ("index", 48, b"\0", "broken index"),  # a branch that leads back
            ("index", 50, b"\xff", "the file is cut short"),  # more items than the file has
            ("header", 0, b"\0", "not a bigWig file"),
        ],
    )
    def test_names_what_is_damaged(
        self, tmp_path: Path, part: str, offset: int, new: bytes, message: str
    ) -> None:
        path = tmp_path / "x.bw"
        write(path, [("a", [(0, 5, 0.25)])])
        content = bytearray(path.read_bytes())
        # Offsets of names and index: Kent et al. (2010), supplementary table 5.
        where = {"header": 0, "names": 8, "index": 24}[part]
        begin = struct.unpack_from("<Q", content, where)[0] if where else 0
        content[begin + offset : begin + offset + len(new)] = new
        path.write_bytes(content)
        with pytest.raises(OutputError, match=message):
            summarize_track(path)

    @pytest.mark.parametrize(
        ("at", "new", "message"),
        [
            (20, b"\2", "a block that is not one of runs"),
            (22, b"\7", "a block that is not one of runs"),
            (28, b"\xff", "values or intervals out of bounds"),
            (32, b"\0\0\xc0\x7f", "values or intervals out of bounds"),  # NaN
        ],
    )
    def test_names_what_is_wrong_with_runs(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, at: int, new: bytes, message: str
    ) -> None:
        pack = bbi.pack_section

        def damaged(number: int, runs: NDArray[np.void]) -> bytes:
            content = bytearray(pack(number, runs))
            content[at : at + len(new)] = new
            return bytes(content)

        monkeypatch.setattr(bbi, "pack_section", damaged)
        with pytest.raises(OutputError, match=message):
            write(tmp_path / "x.bw", [("a", [(0, 5, 0.25)])])

    @given(st.data())
    def test_of_damaged_files(self, data: st.DataObject) -> None:
        with scratch() as path:
            write(path, [("scaffold_2", [(0, 5, 0.25), (9, 200, 0.5)]), ("a", [(3, 4, 1.0)])])
            content = bytearray(path.read_bytes())
            if data.draw(st.booleans()):
                del content[data.draw(st.integers(0, len(content) - 1)) :]
            for _ in range(data.draw(st.integers(0, 3)) if content else 0):
                at = data.draw(st.integers(0, len(content) - 1))
                content[at] = data.draw(st.integers(0, 255))
            path.write_bytes(content)
            # Whatever the damage: a summary or the one kind of error, and no crash.
            with contextlib.suppress(OutputError):
                assert summarize_track(path).bases >= 0


class TestNames:
    """The tree of names, searched as Kent et al. (2010), supplementary tables 8 to 11, have it."""

    @staticmethod
    def look_up(content: bytes, name: str) -> tuple[int, int]:
        """Return number and length of a record, going down by its name only."""
        (tree,) = struct.unpack_from("<Q", content, 8)
        magic, _, size, value_size, _, _ = struct.unpack_from("<IIIIQQ", content, tree)
        assert (magic, value_size) == (0x78CA8C91, 8)
        key, node = name.encode().ljust(size, b"\0"), tree + 32
        while True:
            is_leaf, _, count = struct.unpack_from("<BBH", content, node)
            starts = [node + 4 + i * (size + 8) for i in range(count)]
            keys = [content[at : at + size] for at in starts]
            assert keys == sorted(keys)
            at = starts[bisect.bisect_right(keys, key) - 1]
            if is_leaf:
                assert content[at : at + size] == key
                number, length = struct.unpack_from("<II", content, at + size)
                return number, length
            (node,) = struct.unpack_from("<Q", content, at + size)

    # One node holds 256 names, and 256 nodes stand below one: one, two and three storeys.
    @pytest.mark.parametrize("number", [1, 256, 257, 66_000])
    def test_every_name_is_found(self, tmp_path: Path, number: int) -> None:
        lengths = {f"s{i * 7919 % number}.é": 10 + i for i in range(number)}
        some = list(lengths)[:: 1 + number // 50]
        write(tmp_path / "x.bw", [(name, [(0, 10, 0.5)]) for name in some], lengths)
        content = (tmp_path / "x.bw").read_bytes()
        for i, name in list(enumerate(lengths))[:: 1 + number // 997]:
            assert self.look_up(content, name) == (i, 10 + i)
        file = pybigtools.open(str(tmp_path / "x.bw"))
        assert file.chroms() == lengths
        for name in list(lengths)[:: 1 + number // 150]:
            expected = [(0, 10, 0.5)] if name in some else []
            assert list(file.records(name)) == expected


class TestZoom:
    @pytest.fixture(autouse=True)
    def _levels_for_few(self, monkeypatch: pytest.MonkeyPatch) -> None:
        monkeypatch.setattr(bigwig_file, "FEW", 40)

    def write_many(self, path: Path) -> dict[str, NDArray[np.float32]]:
        """Write records of many and of few runs, with holes; return their dense values."""
        rng = np.random.default_rng(11)
        lengths = {"x": 150_000, "none": 700, "y.1": 90_000, "short": 3, "long": 400_000}
        values = {name: np.full(length, np.nan, np.float32) for name, length in lengths.items()}
        with PosteriorTrack(path, lengths) as track:
            for name, mean in (("x", 4), ("y.1", 30), ("short", 1), ("long", 50_000)):
                cuts = np.cumsum(rng.integers(1, 2 * mean + 1, 2 * lengths[name] // mean))
                cuts = np.append(cuts[cuts < lengths[name]], lengths[name])
                starts, ends = np.append(0, cuts[:-1]), cuts
                keep = rng.random(len(starts)) < 0.9
                levels = rng.integers(0, 1001, len(starts)) / 1000
                track.add(name, starts[keep], ends[keep], levels[keep])
                for start, end, level in zip(starts[keep], ends[keep], levels[keep], strict=True):
                    values[name][start:end] = level
        return values

    def test_bins_hold_what_the_values_say(self, tmp_path: Path) -> None:
        values = self.write_many(tmp_path / "x.bw")
        file = pybigtools.open(str(tmp_path / "x.bw"))
        sizes = file.zooms()
        assert len(sizes) >= 3
        assert all(coarse == 4 * fine for fine, coarse in itertools.pairwise(sizes))
        for size, (name, dense_values) in itertools.product(sizes, values.items()):
            rows = {start // size: (start, end, info) for start, end, info in
                    file.zoom_records(size, name)}  # fmt: skip
            bins = range(0, len(dense_values), size)
            for at in bins:
                inside = dense_values[at : at + size].astype(np.float64)
                covered = np.flatnonzero(~np.isnan(inside))
                if not len(covered):
                    assert at // size not in rows
                    continue
                start, end, info = rows.pop(at // size)
                inside = inside[covered]
                assert (start, end) == (at + covered[0], at + covered[-1] + 1)
                assert info["bases_covered"] == len(inside)
                assert (info["min_val"], info["max_val"]) == (inside.min(), inside.max())
                assert info["sum"] == pytest.approx(inside.sum(), rel=1e-5, abs=1e-6)
                assert info["sum_squares"] == pytest.approx((inside**2).sum(), rel=1e-5, abs=1e-6)
            assert not rows

    def test_statistics_from_zoom_levels_and_from_values_agree(self, tmp_path: Path) -> None:
        values = self.write_many(tmp_path / "x.bw")
        file = pyBigWig.open(str(tmp_path / "x.bw"))
        assert file.header()["nLevels"] >= 3
        for name, dense_values in values.items():
            covered = dense_values[~np.isnan(dense_values)]
            kinds = {"mean": np.mean, "min": np.min, "max": np.max}
            for kind, function in kinds.items():
                exact = function(covered.astype(np.float64)) if len(covered) else None
                for found in (file.stats(name, type=kind), file.stats(name, type=kind, exact=True)):
                    assert found == [exact if exact is None else pytest.approx(exact, abs=1e-5)]
        file.close()

    def test_a_small_track_has_none(self, tmp_path: Path) -> None:
        write(tmp_path / "x.bw", [("a", [(0, 5, 0.25)])])
        assert pybigtools.open(str(tmp_path / "x.bw")).zooms() == []

    def test_scattered_single_bases_are_not_worth_a_level(self, tmp_path: Path) -> None:
        starts = np.arange(0, 5_000_000, 1000)
        with PosteriorTrack(tmp_path / "x.bw", {"x": 5_000_000}) as track:
            track.add("x", starts, starts + 1, np.full(len(starts), 0.5))
        file = pybigtools.open(str(tmp_path / "x.bw"))
        assert file.zooms() == []
        assert [start for start, _, _ in file.records("x")] == starts.tolist()

    def test_one_run_over_a_long_record_makes_few_bins(self) -> None:
        # 4 Gb, the most that bigWig holds: the number of bins is bounded, whatever the length.
        size = first_bin_size(bases=2**32 - 1, runs=2**31, longest=2**32 - 1)
        assert (2**32 - 1) / size <= 2**20
        runs = np.array([(0, 2**32 - 1, 0.5)], dtype=bbi.RUN)
        rows = bins_of_runs(np.array([0]), runs, size)
        assert rows["bases"].astype(np.int64).sum() == 2**32 - 1
        assert rows["end"][-1] == 2**32 - 1


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
