"""How much null sequence an assembly gets; imports nothing, so that others may ask at no cost."""

__all__ = ["null_bases_of"]

_TIMES = 20
_FEWEST_BASES, _MOST_BASES = 20_000_000, 500_000_000


def null_bases_of(bases: int) -> int:
    """Return how many bases of each null an assembly of so many bases gets by default."""
    return min(max(_TIMES * bases, _FEWEST_BASES), _MOST_BASES)
