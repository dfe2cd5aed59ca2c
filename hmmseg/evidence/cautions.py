"""What a person should know before trusting a trained model."""

from itertools import combinations

import numpy as np

from hmmseg.evidence.findings import expected_lengths, in_bases, shares
from hmmseg.model import Model
from hmmseg.model.contexts import code_offset, missing_code
from hmmseg.model.dimension import chain_parameters
from hmmseg.model.logarithm import LN2, logarithms

__all__ = ["bits_apart", "cautions"]

_FEWEST_VISITS = 3.0
_SHORTEST = 10.0
_SAME_BITS = 5e-4
"""Two states that a base tells apart by less than this are the same to any reader."""
_BOUNDARY = 1e-9
_BASES_PER_PARAMETER = 20


def cautions(model: Model, bases: int | None) -> list[str]:
    """Return a line for everything about a model that calls for a person's eye.

    Parameters
    ----------
    model
        The model.
    bases
        Known bases it was trained on; None if it was not trained, which leaves out what
        depends on it.
    """
    return [
        *(_about_visits(model, bases) if bases else ()),
        *_about_lengths(model),
        *_about_likeness(model),
        *_about_boundaries(model, bases),
    ]


def _about_visits(model: Model, bases: int) -> list[str]:
    lines = []
    share, lengths = shares(model), expected_lengths(model)
    parameters = chain_parameters(model.order, model.symmetric)
    for state, name in enumerate(model.names):
        held = float(share[state]) * bases
        visits = held / float(lengths[state]) if np.isfinite(lengths[state]) else np.inf
        if visits < 0.5:
            lines.append(f"state {name}: nobody visits it; train with fewer states")
        elif visits < _FEWEST_VISITS:
            lines.append(
                f"state {name}: rests on about {visits:.1f} visits, so its expected length is a "
                "guess"
            )
        if held < _BASES_PER_PARAMETER * parameters and visits >= 0.5:
            lines.append(
                f"state {name}: too little sequence to tell, {in_bases(held)} for {parameters} "
                "parameters of its composition; lower the order, or give pseudo-counts"
            )
    return lines


def _about_lengths(model: Model) -> list[str]:
    return [
        f"state {name}: expected length {length:.1f} bases, below {_SHORTEST:.0f}; it follows "
        "single words of the sequence, not regions"
        for name, length in zip(model.names, expected_lengths(model), strict=True)
        if length < _SHORTEST
    ]


def _about_likeness(model: Model) -> list[str]:
    lines = []
    for one, other in combinations(range(model.states), 2):
        bits = bits_apart(model, one, other)
        if bits < _SAME_BITS:
            lines.append(
                f"states {model.names[one]} and {model.names[other]}: the same composition (a base "
                f"tells them apart by {bits:.2g} bits); train with fewer states"
            )
    return lines


def _about_boundaries(model: Model, bases: int | None) -> list[str]:
    lines = []
    words = slice(code_offset(model.order), missing_code(model.order))
    conditionals = model.emissions[:, words].reshape(model.states, -1, 4)
    context = model.joint.reshape(model.states, -1, 4).sum(axis=2)
    share = shares(model)
    for state, name in enumerate(model.names):
        # A context that hardly ever occurs says nothing.
        seen = context[state] * share[state] * (bases or 1_000_000) >= 1
        count = int(np.count_nonzero(conditionals[state][seen] < _BOUNDARY))
        if count:
            lines.append(
                f"state {name}: {count} of its words have probability 0, so one such word ends a "
                "region; give pseudo-counts"
            )
    for one in range(model.states):
        if model.transitions[one, one] > 1 - _BOUNDARY and model.states > 1:
            lines.append(f"state {model.names[one]}: never left once entered")
            continue
        for other in range(model.states):
            if one == other or model.transitions[one, other] >= _BOUNDARY:
                continue
            names = model.names[one], model.names[other]
            if not model.symmetric:
                lines.append(f"state {names[1]}: never follows {names[0]} directly")
            elif one < other:
                lines.append(f"states {names[0]} and {names[1]}: never follow each other directly")
    return lines


def bits_apart(model: Model, one: int, other: int) -> float:
    """Return by how many bits a base tells two states apart, the mean over both states.

    It is the Kullback-Leibler divergence between their conditionals, averaged over the contexts
    as each state has them; infinity if one emits what the other cannot.

    Parameters
    ----------
    model
        The model.
    one, other
        Indices of the states.
    """
    words = slice(code_offset(model.order), missing_code(model.order))
    total = 0.0
    for p, q in ((one, other), (other, one)):
        own, rest = model.emissions[p, words], model.emissions[q, words]
        used = (model.joint[p] > 0) & (own > 0)
        if (rest[used] == 0).any():
            return float("inf")
        total += float((model.joint[p][used] * logarithms(own[used] / rest[used])).sum())
    return total / (2 * LN2)
