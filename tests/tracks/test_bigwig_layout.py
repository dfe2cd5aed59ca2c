"""The inside of a bigWig: summaries, zoom levels, runs of equal values."""

import contextlib
import itertools
import struct
from pathlib import Path

import numpy as np
import pybigtools
import pyBigWig
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.tracks import bbi, bigwig_file
from hmmseg.tracks.bigwig import PosteriorTrack, read_track, rounded_runs, summarize_track
from hmmseg.tracks.zoom import bins_of_runs, first_bin_size
from tests.tracks.bigwig_tracks import LENGTHS, Runs, dense, scratch, second_reader, tracks, write


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
