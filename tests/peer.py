"""Models and sequences in the shapes that hmmlearn takes."""

import warnings
from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tests.reference import Bases, Parameters

with warnings.catch_warnings():
    warnings.simplefilter("ignore")  # what a peer's import warns of is not ours to mend
    from hmmlearn.hmm import CategoricalHMM  # type: ignore[import-untyped, unused-ignore]

__all__ = ["column", "peer_of"]


def peer_of(p: Parameters, **settings: Any) -> Any:
    """Return the CategoricalHMM with the parameters of a model of order 0.

    The priors of hmmlearn are Dirichlet distributions with all parameters 1, its default, which
    add nothing to any count.
    """
    if p.order:
        message = "CategoricalHMM has no context"
        raise ValueError(message)
    peer = CategoricalHMM(p.states, n_features=4, init_params="", **settings)
    peer.startprob_ = p.start
    peer.transmat_ = p.transitions
    peer.emissionprob_ = p.joint
    return peer


def column(sequences: Sequence[Bases]) -> tuple[NDArray[np.int64], list[int]]:
    """Return sequences as one column of symbols, and their lengths."""
    symbols = np.concatenate([np.asarray(bases, dtype=np.int64) for bases in sequences])
    return symbols[:, None], [len(bases) for bases in sequences]
