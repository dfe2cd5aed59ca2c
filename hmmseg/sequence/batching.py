"""Sharing records out to batches, so that few batches notice when an assembly is revised."""

from collections.abc import Iterator, Sequence

__all__ = ["share_out"]


def share_out(digests: Sequence[str], bases: Sequence[int], batch_bases: int) -> list[list[int]]:
    """Put records together by their digests.

    A record as long as a batch is one of its own. The others stand on the leaves of a binary
    tree over the bits of their digests: a leaf that holds more than a batch divides at the next
    bit. Which records share a leaf thus depends on those whose digests begin alike and on no
    others. When a record changes, the leaf that it leaves and the leaf that it joins change;
    where one of these then divides, or its sibling can join it, that one more.

    Parameters
    ----------
    digests
        Of each record, in hexadecimal digits, all of one length.
    bases
        Of each record.
    batch_bases
        Bases of a batch at most, unless records of one digest hold more.

    Returns
    -------
    list of list of int
        Numbers of the records of each batch. Batches, and records in them, stand in the order of
        the digests, records of one digest in that given; only the long records come last.
    """
    keys = [int(digest, 16) for digest in digests]
    order = sorted(range(len(keys)), key=keys.__getitem__)
    long = [[record] for record in order if bases[record] >= batch_bases]
    short = [record for record in order if bases[record] < batch_bases]
    top = 4 * max(map(len, digests), default=0) - 1
    return [*_leaves(short, top, keys, bases, batch_bases), *long]


def _leaves(
    records: list[int], bit: int, keys: list[int], bases: Sequence[int], batch_bases: int
) -> Iterator[list[int]]:
    """Yield the leaves of the tree below one node, whose records differ from this bit on."""
    if not records:
        return
    if bit < 0 or sum(bases[record] for record in records) <= batch_bases:
        yield records
        return
    for side in (0, 1):
        own = [record for record in records if keys[record] >> bit & 1 == side]
        yield from _leaves(own, bit - 1, keys, bases, batch_bases)
