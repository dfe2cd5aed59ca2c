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

__all__ = ["base_codes", "code_total", "token_count", "tokenise", "words_of"]

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
    contexts = words_of(order)
    missing = code_total(order) - 1
    context, known = _context_before(bases, order, closed, start)
    for position in range(start, stop):
        base = np.int64(bases[position])
        if base == _MISSING:
            codes[position - start] = missing
            context = 0
            known = 0
            continue
        size = words_of(known)
        codes[position - start] = (4 * size - 4) // 3 + 4 * (context & (size - 1)) + base
        context = (4 * context + base) & (contexts - 1)
        if known < order:
            known += 1


@kernel
def _step(bases, order, word, context, known, position, stop):
    """Return the next token, its length, and the context and known bases behind it."""
    codes = code_total(order)
    contexts = words_of(order)
    if word > 1 and known == order and position + word <= stop:
        number = 0
        seen = 0
        for at in range(position, position + word):
            number = (number << 2) + bases[at]
            seen |= bases[at]
        if seen < _MISSING:
            number += context << (2 * word)
            return codes + number, word, number & (contexts - 1), order
    base = np.int64(bases[position])
    if base == _MISSING:
        return codes - 1, 1, 0, 0
    size = words_of(known)
    code = (4 * size - 4) // 3 + 4 * (context & (size - 1)) + base
    return code, 1, (4 * context + base) & (contexts - 1), min(known + 1, order)


@kernel
def token_count(bases, order, word, closed, start, stop):
    """Return how many tokens positions ``start`` to ``stop`` make."""
    context, known = _context_before(bases, order, closed, start)
    count = 0
    position = start
    while position < stop:
        _, length, context, known = _step(bases, order, word, context, known, position, stop)
        position += length
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
    context, known = _context_before(bases, order, closed, start)
    count = 0
    position = start
    while position < stop:
        token, length, context, known = _step(bases, order, word, context, known, position, stop)
        tokens[count] = token
        position += length
        count += 1
