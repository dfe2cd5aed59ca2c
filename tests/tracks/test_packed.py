"""Blocks of finished tracks taken over into another: the bytes are those of writing it anew."""

import resource
import zlib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.errors import OutputError
from hmmseg.tracks import bbi, bigwig_file, blocks
from hmmseg.tracks.bigwig import PosteriorTrack, read_track
from hmmseg.tracks.blocks import renumber, unpacked
from hmmseg.tracks.packed import PackedTrack
from tests.tracks.bigwig_tracks import LENGTHS, Runs, scratch, tracks, write

LONG = {"b": 50_000, "a": 10, "none": 7, "c": 3_000}


def levels(length: int, seed: int) -> np.ndarray:
    return np.random.default_rng(seed).integers(0, 1001, length) / 1000


def write_long(path: Path, names: dict[str, str], threads: int = 1) -> None:
    """Write records under other names, in their order; the values are of the given ones."""
    with PosteriorTrack(path, {new: LONG[old] for new, old in names.items()}, threads) as track:
        for new, old in names.items():
            if old != "none":
                starts = np.arange(LONG[old])
                track.add(new, starts, starts + 1, levels(LONG[old], len(old) + LONG[old]))


@pytest.mark.parametrize("threads", [1, 2, 3])
def test_records_of_two_tracks_make_a_third(
    threads: int, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # Small enough that records, batches and levels do not end together.
    monkeypatch.setattr(blocks, "PIECES_AT_ONCE", 5_000)
    monkeypatch.setattr(bigwig_file, "_BLOCKS_AT_ONCE", 2)
    monkeypatch.setattr("hmmseg.tracks.packed._BLOCKS_AT_ONCE", 3)
    write_long(tmp_path / "one.bw", {"x": "c", "y": "b", "z": "none"})
    write_long(tmp_path / "two.bw", {"x": "a", "y": "b"})
    places = {"1": ("one", "y"), "2": ("two", "x"), "3": ("one", "z"), "4": ("two", "y"),
              "5": ("one", "x")}  # fmt: skip
    wanted = {"1": "b", "2": "a", "3": "none", "4": "b", "5": "c"}
    write_long(tmp_path / "whole.bw", wanted)
    parts = {name: PackedTrack(tmp_path / f"{name}.bw") for name in ("one", "two")}
    joined = tmp_path / "joined.bw"
    with PosteriorTrack(joined, {n: LONG[old] for n, old in wanted.items()}, threads) as track:
        for part in parts.values():
            track.expect(part)
        for name, (part_name, alias) in places.items():
            track.copy(name, parts[part_name], alias)
    assert joined.read_bytes() == (tmp_path / "whole.bw").read_bytes()


@given(tracks(), st.permutations(list(LENGTHS)))
def test_any_record_at_any_place(track: dict[str, Runs], order: list[str]) -> None:
    with scratch() as path:
        write(path, list(track.items()))
        part, other = PackedTrack(path), path.with_name("other.bw")
        lengths = {f"{name}_": LENGTHS[name] for name in order}
        with PosteriorTrack(other, lengths) as copied:
            copied.expect(part)
            for name in order:
                copied.copy(f"{name}_", part, name)
        write(path, [(f"{name}_", track[name]) for name in order], lengths)
        assert other.read_bytes() == path.read_bytes()


@given(
    st.lists(st.integers(1, 300), min_size=1, max_size=4),
    st.integers(0, 2**32 - 1),
    st.integers(0, 2**32 - 1),
)
def test_a_new_number_gives_the_bytes_of_packing_anew(
    counts: list[int], old: int, new: int
) -> None:
    contents = []
    for count in counts:
        runs = np.zeros(count, bbi.RUN)
        runs["start"] = np.arange(count)
        runs["end"] = runs["start"] + 1
        runs["value"] = levels(count, count).astype(np.float32)
        contents.append(runs)
    before = [bbi.packed_section(bbi.pack_section(old, runs)) for runs in contents]
    after = [bbi.packed_section(bbi.pack_section(new, runs)) for runs in contents]
    packed = np.frombuffer(b"".join(before), np.uint8).copy()
    sizes = np.array([len(one) for one in before], dtype=np.uint64)
    assert renumber(packed, sizes, new) == sum(counts)
    assert packed.tobytes() == b"".join(after)
    # zlib itself checks what was made of its checksum.
    assert zlib.decompress(after[0]) == bbi.pack_section(new, contents[0])
    index = np.zeros(len(counts), bbi.BLOCK)
    index["size"], index["record"] = sizes, new
    numbers, runs = unpacked(packed.tobytes(), index)
    assert set(numbers.tolist()) == {new}
    assert runs.tobytes() == np.concatenate(contents).tobytes()


def copied(path: Path, part: PackedTrack, alias: str, lengths: dict[str, int]) -> None:
    """Write a track whose first record is one of another track."""
    with PosteriorTrack(path, lengths) as track:
        track.expect(part)
        track.copy(next(iter(lengths)), part, alias)


def first_block(part: PackedTrack, alias: str) -> int:
    """Where the first block of a record is in its file."""
    return int(next(part.blocks_of(alias))[0]["offset"][0])


def test_what_cannot_be_taken_over_is_told(tmp_path: Path) -> None:
    path, other = tmp_path / "one.bw", tmp_path / "two.bw"
    write_long(path, {"x": "c"})
    part = PackedTrack(path)
    for name, length in (("d", 3_000), ("x", 2_999)):
        with pytest.raises(OutputError, match=f"record {name} is not in it, or of another length"):
            copied(other, part, name, {"x": length})
    content = bytearray(path.read_bytes())
    content[first_block(part, "x") + 2] = 1  # as deflated blocks begin
    path.write_bytes(content)
    with pytest.raises(OutputError, match="packed in another way; remove its folder"):
        copied(other, part, "x", {"x": 3_000})
    path.write_bytes(content[:100])
    with pytest.raises(OutputError, match="not a readable bigWig"):
        PackedTrack(path)


def test_a_record_is_either_written_or_taken_over(tmp_path: Path) -> None:
    write_long(tmp_path / "one.bw", {"x": "c"})
    part = PackedTrack(tmp_path / "one.bw")
    for before in ("add", "copy"):
        with PosteriorTrack(tmp_path / "two.bw", {"y": 3_000}) as track:
            if before == "add":
                track.add("y", [0], [10], [0.5])
            else:
                track.expect(part)
                track.copy("y", part, "x")
            with pytest.raises(OutputError, match="there are runs of y already"):
                track.copy("y", part, "x")


@pytest.mark.parametrize("at", [12, 40, 2_000])
def test_damage_on_the_way_is_seen(at: int, tmp_path: Path) -> None:
    path = tmp_path / "one.bw"
    write_long(path, {"x": "c"})
    part = PackedTrack(path)
    content = bytearray(path.read_bytes())
    content[first_block(part, "x") + at] ^= 4
    path.write_bytes(content)
    with pytest.raises(OutputError, match="not a readable bigWig"):
        copied(tmp_path / "two.bw", part, "x", {"x": 3_000})


def test_a_record_left_out_is_seen(tmp_path: Path) -> None:
    write_long(tmp_path / "one.bw", {"x": "c", "y": "a"})
    part = PackedTrack(tmp_path / "one.bw")
    with pytest.raises(OutputError, match="differs from what was written"):
        copied(tmp_path / "two.bw", part, "x", {"x": 3_000, "y": 10})


def test_more_files_than_a_process_may_open(tmp_path: Path) -> None:
    paths = [tmp_path / f"{number}.bw" for number in range(150)]
    write_long(paths[0], {"x": "a"})
    for path in paths[1:]:
        path.write_bytes(paths[0].read_bytes())
    lengths = {str(number): 10 for number in range(150)}
    before = resource.getrlimit(resource.RLIMIT_NOFILE)
    open_now = len(list(Path("/proc/self/fd").iterdir()))
    resource.setrlimit(resource.RLIMIT_NOFILE, (open_now + 20, before[1]))
    try:
        parts = [PackedTrack(path) for path in paths]
        with PosteriorTrack(tmp_path / "all.bw", lengths) as track:
            for name, part in zip(lengths, parts, strict=True):
                track.expect(part)
                track.copy(name, part, "x")
    finally:
        resource.setrlimit(resource.RLIMIT_NOFILE, before)
    found = list(read_track(tmp_path / "all.bw"))
    assert [name for name, *_ in found] == list(lengths)
    for _, starts, _, values in found:
        assert starts.tolist() == list(range(10))
        assert values.tolist() == found[0][3].tolist()
