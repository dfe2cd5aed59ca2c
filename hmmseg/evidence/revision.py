"""What became of records and regions between two results, of two assemblies or two models.

Records are recognised by their sequence first and by their name second; regions by where they
lie in records that belong together.
"""

from collections import defaultdict, deque
from collections.abc import Callable, Iterable, Iterator, Sequence
from typing import NamedTuple

from hmmseg.sequence.identity import KnownRecord

__all__ = [
    "ADDED",
    "CHANGED",
    "GAINED",
    "KEPT",
    "LOST",
    "MOVED",
    "REMOVED",
    "RENAMED",
    "REVERSED",
    "SAME",
    "Placed",
    "RecordPair",
    "RegionPair",
    "match_regions",
    "pair_records",
]

SAME, RENAMED, REVERSED, CHANGED = "same", "renamed", "reversed", "changed"
ADDED, REMOVED = "added", "removed"
KEPT, MOVED, GAINED, LOST = "kept", "moved", "gained", "lost"


class RecordPair(NamedTuple):
    """Two records that belong together, or one that has no counterpart.

    Attributes
    ----------
    status : str
        One of the words of this module.
    old, new : KnownRecord or None
        The records.
    """

    status: str
    old: KnownRecord | None
    new: KnownRecord | None


class Placed(NamedTuple):
    """A region, and where it lies.

    Attributes
    ----------
    name : str
        Its identifier.
    state : str
        Its state.
    start, end : int
        In its record, half-open; across the origin of a circle the end lies beyond the length.
    """

    name: str
    state: str
    start: int
    end: int


class RegionPair(NamedTuple):
    """Two regions that belong together, or one that has no counterpart.

    Attributes
    ----------
    status : str
        One of the words of this module.
    old, new : Placed or None
        The regions, each in the coordinates of its own record.
    shared : int
        Bases that are in both.
    """

    status: str
    old: Placed | None
    new: Placed | None
    shared: int


def pair_records(old: Sequence[KnownRecord], new: Sequence[KnownRecord]) -> list[RecordPair]:
    """Find which record of a revision is which of before.

    Records of one name and sequence are the same. Of the rest, those of one sequence belong
    together (renamed), then those whose sequences are each other's reverse complement
    (reversed), then those of one name (changed: in letters or topology). A circle that is cut
    elsewhere has another sequence. Each record belongs to one other at most.

    Returns
    -------
    list of RecordPair
        In the order of the new records; removed ones come last, in the order of the old.
    """
    rounds: list[tuple[str, _Trait, _Trait]] = [
        (SAME, lambda r: (r.name, _content(r)), lambda r: (r.name, _content(r))),
        (RENAMED, _content, _content),
        (REVERSED, _other_strand, _content),
        (CHANGED, lambda r: r.name, lambda r: r.name),
    ]
    partner: dict[str, RecordPair] = {}
    left = {record.name: record for record in old}
    for status, trait, wanted in rounds:
        waiting: dict[object, deque[KnownRecord]] = defaultdict(deque)
        for record in left.values():
            waiting[trait(record)].append(record)
        for record in new:
            if record.name not in partner and waiting[wanted(record)]:
                found = waiting[wanted(record)].popleft()
                partner[record.name] = RecordPair(status, found, record)
                del left[found.name]
    pairs = [partner.get(record.name, RecordPair(ADDED, None, record)) for record in new]
    return pairs + [RecordPair(REMOVED, record, None) for record in left.values()]


_Trait = Callable[[KnownRecord], object]


def _content(record: KnownRecord) -> object:
    return record.sequence.given, record.circular


def _other_strand(record: KnownRecord) -> object:
    return record.sequence.reverse, record.circular


def match_regions(
    pair: RecordPair, old: Sequence[Placed], new: Sequence[Placed]
) -> list[RegionPair]:
    """Find what became of the regions of one pair of records.

    Regions of one state belong together if they share bases, those that share most first; each
    belongs to one other at most. With the same ends a region is kept, with others moved; one
    without a counterpart is lost or gained. In a changed record coordinates count from the start
    or from the end, whichever shares more, because what lies behind the only insertion or deletion
    keeps its distance from the end.

    Parameters
    ----------
    pair
        The records; where one is missing all regions are gained or lost.
    old, new
        Their regions.

    Returns
    -------
    list of RegionPair
        Those with a new region by its start, then the lost ones.
    """
    if pair.old is None or pair.new is None:
        return [
            *(RegionPair(GAINED, None, region, 0) for region in new),
            *(RegionPair(LOST, region, None, 0) for region in old),
        ]
    moves = _moves(pair.status, pair.old, pair.new)
    found: dict[int, tuple[int, int, bool]] = {}
    taken: set[int] = set()
    candidates = _candidates(old, new, moves, pair.new)
    for _, shared, number, other in sorted(candidates, key=lambda c: (-c[0], -c[1], c[2], c[3])):
        if number not in taken and other not in found:
            taken.add(number)
            same = any(_span(move(old[number])) == _span(new[other]) for move in moves)
            found[other] = number, shared, same
    result = []
    for other in sorted(range(len(new)), key=lambda index: (new[index].start, new[index].end)):
        if other in found:
            number, shared, same = found[other]
            result.append(RegionPair(KEPT if same else MOVED, old[number], new[other], shared))
        else:
            result.append(RegionPair(GAINED, None, new[other], 0))
    lost = (region for number, region in enumerate(old) if number not in taken)
    return result + [RegionPair(LOST, region, None, 0) for region in lost]


def _span(region: Placed) -> tuple[int, int]:
    return region.start, region.end


_Move = Callable[[Placed], Placed]


def _moves(status: str, old: KnownRecord, new: KnownRecord) -> list[_Move]:
    """Return the ways in which an old region's place may be a place in the new record."""

    def mirrored(region: Placed) -> Placed:
        start = (new.length - region.end) % new.length
        return region._replace(start=start, end=start + region.end - region.start)

    def from_the_end(region: Placed) -> Placed:
        shift = new.length - old.length
        return region._replace(start=region.start + shift, end=region.end + shift)

    if status == REVERSED:
        return [mirrored]
    if status == CHANGED and old.length != new.length:
        return [lambda region: region, from_the_end]
    return [lambda region: region]


def _candidates(
    old: Sequence[Placed], new: Sequence[Placed], moves: Sequence[_Move], record: KnownRecord
) -> list[tuple[bool, int, int, int]]:
    """Return whether the ends are the same, shared bases, and numbers of the two regions."""
    best: dict[tuple[int, int], tuple[bool, int]] = {}
    theirs = _by_state(new, record.length)
    for move in moves:
        moved = [move(region) for region in old]
        for state, pieces in _by_state(moved, record.length).items():
            together: dict[tuple[int, int], int] = defaultdict(int)
            for number, other, shared in _overlaps(pieces, theirs.get(state, [])):
                together[number, other] += shared
            for (number, other), shared in together.items():
                same = _span(moved[number]) == _span(new[other])
                found = same, shared
                best[number, other] = max(best.get((number, other), (False, 0)), found)
    return [(same, shared, *numbers) for numbers, (same, shared) in best.items()]


_Piece = tuple[int, int, int]


def _by_state(regions: Iterable[Placed], length: int) -> dict[str, list[_Piece]]:
    """Return start, end and number of the regions of each state, cut at the origin, sorted."""
    pieces: dict[str, list[_Piece]] = defaultdict(list)
    for number, region in enumerate(regions):
        pieces[region.state].append((region.start, min(region.end, length), number))
        if region.end > length:
            pieces[region.state].append((0, region.end - length, number))
    return {state: sorted(found) for state, found in pieces.items()}


def _overlaps(ones: Sequence[_Piece], others: Sequence[_Piece]) -> Iterator[tuple[int, int, int]]:
    """Yield the numbers of pieces that share bases, and how many; pieces of one kind do not."""
    first = 0
    for start, end, number in ones:
        while first < len(others) and others[first][1] <= start:
            first += 1
        at = first
        while at < len(others) and others[at][0] < end:
            shared = min(end, others[at][1]) - max(start, others[at][0])
            if shared > 0:
                yield number, others[at][2], shared
            at += 1
