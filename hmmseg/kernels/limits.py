"""How far scaled numbers may go before doubles are too short for them."""

__all__ = ["DECAY_BITS", "LOST", "SCALE_BITS", "VANISHING"]

SCALE_BITS = 64
"""Vectors are scaled by powers of 2**SCALE_BITS."""

DECAY_BITS = 500
"""By how many powers of two a value may fall between two looks at the scale."""

VANISHING = 2.0**-400
"""A value this far below the largest of its vector may be lost before the next look."""

LOST = 2.0**-960
"""A probability of what was seen in a block, given its ends, below which doubles are too short."""
