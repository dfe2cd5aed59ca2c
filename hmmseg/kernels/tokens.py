"""Bases to codes, and codes to tokens: the units in which the kernels step.

A *code* is one base with its known context (:mod:`hmmseg.model.contexts`). A *token* is either
one code, or a whole word of ``word`` bases whose context is known in full:

    token = code                                      one base
    token = codes + context * 4**word + word_number   a word

Stepping by words needs fewer steps and gives the same numbers, because the matrix of a word is
the product of the matrices of its bases. The idea of reusing repeated words is from Lifshits,
Mozes, Weimann & Ziv-Ukelson 2009, Algorithmica 54: 379-399.
"""

import numpy as np

from hmmseg.kernels.compiling import kernel
from hmmseg.kernels.vectors import item

__all__ = ["add_counts", "base_codes", "code_total", "token_count", "tokenise", "words_of"]

_MISSING = 4


@kernel
def words_of(length):
    """Return the number of words of a length, 4**length."""
    return 1 << (2 * length)


@kernel
def code_total(order):
    """Return the number of codes of an order, the missing one included."""
    return (words_of(order + 2) - 4) // 3 + 1


@kernel
def _context_before(bases, order, closed, position):
    """Return the number of the context before a position, and how many of its bases are known."""
    context = 0
    known = 0
    for back in range(order, 0, -1):
        at = position - back
        if at < 0:
            if not closed:
                continue
            at %= bases.size
        base = bases[at]
        if base == _MISSING:
            context = 0
            known = 0
        else:
            context = 4 * context + base
            known += 1
    return context, known


@kernel
def base_codes(bases, order, closed, start, stop, codes):
    """Fill ``codes`` with the codes of positions ``start`` to ``stop``.

    Parameters
    ----------
    bases : uint8[position]
        A whole contig, 0 to 3, 4 where missing.
    order : int
        Context length.
    closed : bool
        Whether the position before the first is the last.
    start, stop : int
        Positions, half-open.
    codes : uint16[stop - start] or uint32[stop - start]
        Filled.
    """
    missing = code_total(order) - 1
    full = missing - words_of(order + 1)
    mask = words_of(order + 1) - 1
    context, known = _context_before(bases, order, closed, start)
    position = start
    while position < stop:
        if known == order:
            while position < stop:
                base = np.int64(item(bases, position))
                if base == _MISSING:
                    break
                context = (4 * context + base) & mask
                codes[position - start] = full + context
                position += 1
            context &= words_of(order) - 1
            if position == stop:
                break
        code, context, known = _base_step(bases, order, context, known, position)
        codes[position - start] = code
        position += 1


@kernel
def add_counts(codes, counts):
    """Count codes (uint16[position] or uint32[position]) into int64[code]."""
    for at in range(codes.size):
        counts[np.int64(item(codes, at))] += 1


@kernel
def _base_step(bases, order, context, known, position):
    """Return the code of one base, and the context and known bases behind it."""
    base = np.int64(bases[position])
    if base == _MISSING:
        return code_total(order) - 1, 0, 0
    size = words_of(known)
    code = (4 * size - 4) // 3 + 4 * (context & (size - 1)) + base
    return code, (4 * context + base) & (words_of(order) - 1), min(known + 1, order)


@kernel
def _word_number(bases, word, position):
    """Return the number of the word at a position, -1 if one of its bases is missing."""
    number = 0
    seen = 0
    for at in range(position, position + word):
        base = np.int64(item(bases, at))
        number = (number << 2) | base
        seen |= base
    return number if seen < _MISSING else -1


@kernel
def token_count(bases, order, word, closed, start, stop):
    """Return how many tokens positions ``start`` to ``stop`` make.

    Parameters
    ----------
    bases, order, word, closed, start, stop
        As for :func:`tokenise`.
    """
    context, known = _context_before(bases, order, closed, start)
    seen = 0
    for position in range(start, stop):
        seen |= np.int64(item(bases, position))
    if seen < _MISSING:
        # Single bases until the context is known, words as long as one fits, single bases.
        lead = min(order - known, stop - start) if word > 1 else 0
        words, rest = divmod(stop - start - lead, word)
        return lead + words + rest
    count = 0
    position = start
    while position < stop:
        if word > 1 and known == order:
            while position + word <= stop and _word_number(bases, word, position) >= 0:
                position += word
                count += 1
            if position == stop:
                break
        _, context, known = _base_step(bases, order, context, known, position)
        position += 1
        count += 1
    return count


@kernel
def tokenise(bases, order, word, closed, start, stop, tokens):
    """Fill ``tokens`` with the tokens of positions ``start`` to ``stop``, see :func:`base_codes`.

    Parameters
    ----------
    bases : uint8[position]
        A whole contig.
    order, word : int
        Context length, and bases in a word (1: codes only).
    closed : bool
        Whether contexts reach round the end.
    start, stop : int
        Positions, half-open. No token reaches beyond ``stop``.
    tokens : uint16[token] or uint32[token]
        Filled from its beginning.
    """
    codes = code_total(order)
    mask = words_of(order) - 1
    context, known = _context_before(bases, order, closed, start)
    count = 0
    position = start
    while position < stop:
        if word > 1 and known == order:
            while position + word <= stop:
                number = _word_number(bases, word, position)
                if number < 0:
                    break
                number |= context << (2 * word)
                tokens[count] = codes + number
                context = number & mask
                position += word
                count += 1
            if position == stop:
                break
        code, context, known = _base_step(bases, order, context, known, position)
        tokens[count] = code
        position += 1
        count += 1
