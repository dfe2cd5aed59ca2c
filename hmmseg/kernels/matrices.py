"""Matrices of tokens: what one step does to a forward vector.

With T the transitions and e(c) the emissions of code c, one base is T diag(e(c)), and a word
is the product over its bases. ``matrices[token, i, j]`` is then P(the token's bases, state j at
its last base | state i at the base before it, context).
"""

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np

from hmmseg.kernels.arrays import all_zero, copy_matrix
from hmmseg.kernels.compiling import helper, kernel
from hmmseg.kernels.tokens import words_of

__all__ = ["add_heads", "code_in_word", "fill_token_matrices", "smallest_entry", "unfold_kernel"]


@kernel
def fill_token_matrices(transitions, emissions, order, word, matrices):
    """Fill the matrix of every token.

    Parameters
    ----------
    transitions : float64[state, state]
    emissions : float64[state, code]
        There may be several copies of the codes, as long as there are no words.
    order, word : int
        Context length, and bases in a word (1: no word tokens).
    matrices : float64[token, state, state]
        Filled.
    """
    states, codes = emissions.shape
    for code in range(codes):
        for i in range(states):
            for j in range(states):
                matrices[code, i, j] = transitions[i, j] * emissions[j, code]
    if word == 1:
        return
    full = codes - 1 - words_of(order + 1)
    product = np.empty((states, states))
    for number in range(words_of(order + word)):
        first = full + code_in_word(number, order, word, 0)
        copy_matrix(matrices[first], matrices[codes + number])
        for at in range(1, word):
            step = matrices[full + code_in_word(number, order, word, at)]
            _multiply(matrices[codes + number], step, product, states)
            copy_matrix(product, matrices[codes + number])


@kernel
def code_in_word(number, order, word, at):
    """Return the (order + 1)-mer that ends at one base of a word with its context.

    Parameters
    ----------
    number : int
        The word behind its context, as a number in base four.
    order, word : int
        Bases of the context, and of the word.
    at : int
        The base, counted from the word's first.
    """
    return (number >> (2 * (word - 1 - at))) & (words_of(order + 1) - 1)


@helper
def _multiply(a, b, out, states):
    for i in range(states):
        for j in range(states):
            total = 0.0
            for k in range(states):
                total += a[i, k] * b[k, j]
            out[i, j] = total


@kernel
def smallest_entry(matrices):
    """Return the smallest entry above zero of float64[token, state, state]."""
    smallest = np.inf
    for token in range(matrices.shape[0]):
        for i in range(matrices.shape[1]):
            for j in range(matrices.shape[2]):
                if 0.0 < matrices[token, i, j] < smallest:
                    smallest = matrices[token, i, j]
    return smallest


@helper
def _multiply_transposed_left(a, b, out, states):
    """Fill out = a' b."""
    for i in range(states):
        for j in range(states):
            total = 0.0
            for k in range(states):
                total += a[k, i] * b[k, j]
            out[i, j] = total


@helper
def _multiply_transposed_right(a, b, out, states):
    """Fill out = a b'."""
    for i in range(states):
        for j in range(states):
            total = 0.0
            for k in range(states):
                total += a[i, k] * b[j, k]
            out[i, j] = total


@helper
def _add_step(weights, matrix, code, transition_counts, emission_counts, states):
    """Add one base's share: weights[i, j] times its matrix."""
    for i in range(states):
        for j in range(states):
            expected = weights[i, j] * matrix[i, j]
            transition_counts[i, j] += expected
            emission_counts[j, code] += expected


@cache
def unfold_kernel(states: int) -> Callable[..., Any]:
    """Return ``unfold_counts`` for a number of states, a constant in it."""

    @kernel
    def unfold_counts(weights, matrices, order, word, transition_counts, emission_counts):
        """Turn pair weights of tokens into expected counts of transitions and emissions.

        Parameters
        ----------
        weights : float64[token, state, state]
            Sum over occurrences of forward[i] backward[j] / P(record).
        matrices : float64[token, state, state]
            As filled by :func:`fill_token_matrices`.
        order, word : int
            Context length, and bases in a word.
        transition_counts : float64[state, state]
            Added to.
        emission_counts : float64[state, code]
            Added to.
        """
        codes = emission_counts.shape[1]
        full = codes - 1 - words_of(order + 1)
        for code in range(codes):
            _add_step(
                weights[code], matrices[code], code, transition_counts, emission_counts, states
            )
        if word == 1:
            return
        before = np.empty((word, states, states))
        outer = np.empty((states, states))
        scratch = np.empty((states, states))
        for number in range(words_of(order + word)):
            if all_zero(weights[codes + number]):
                continue
            # before[at] carries the weights from the state before the word to the one before `at`.
            copy_matrix(weights[codes + number], before[0])
            for at in range(1, word):
                step = matrices[full + code_in_word(number, order, word, at - 1)]
                _multiply_transposed_left(step, before[at - 1], before[at], states)
            last = full + code_in_word(number, order, word, word - 1)
            _add_step(
                before[word - 1], matrices[last], last, transition_counts, emission_counts, states
            )
            # outer[b, j] carries them back from the state at the word's end.
            copy_matrix(matrices[last], outer)
            for at in range(word - 2, -1, -1):
                code = full + code_in_word(number, order, word, at)
                _multiply_transposed_right(before[at], outer, scratch, states)
                _add_step(scratch, matrices[code], code, transition_counts, emission_counts, states)
                if at > 0:
                    _multiply(matrices[code], outer, scratch, states)
                    copy_matrix(scratch, outer)

    return unfold_counts


@kernel
def add_heads(heads, codes, kept, start_counts, emission_counts):
    """Add what the first bases of contigs are expected to have been emitted by.

    Parameters
    ----------
    heads : float64[contig, state]
        Posterior of the state at the first base.
    codes : int64[contig]
        Code of the first base.
    kept : bool[contig]
        Contigs to add, in their order.
    start_counts : float64[state]
        Added to.
    emission_counts : float64[state, code]
        Added to.
    """
    for contig in range(kept.size):
        if kept[contig]:
            for j in range(start_counts.size):
                start_counts[j] += heads[contig, j]
                emission_counts[j, codes[contig]] += heads[contig, j]
