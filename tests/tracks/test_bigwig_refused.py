"""Posterior tracks that must not be written or read: bad calls, damage, full disks, odd names."""

import bisect
import struct
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pybigtools
import pytest
from numpy.typing import NDArray

from hmmseg.errors import OutputError
from hmmseg.tracks import bbi
from hmmseg.tracks.bigwig import PosteriorTrack
from tests.tracks.bigwig_tracks import LENGTHS, Change, write


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
