"""Regions called in sequence whose path is known, and whether the true ends lie within limits."""

from dataclasses import replace

import numpy as np

from hmmseg.inference.posterior import posterior
from hmmseg.model import Model
from hmmseg.regions.calling import Caller
from hmmseg.sequence.contigs import Contig
from hmmseg.simulate import simulate

__all__ = ["CLEAR", "MODELS", "truth_within"]


def gc_model(
    gc: list[float], transitions: list[list[float]], stages: tuple[int, ...] = ()
) -> Model:
    count = len(gc)
    return Model(
        names=tuple(f"s{i}" for i in range(count)),
        reported=(False,) + (True,) * (count - 1),
        order=0,
        symmetric=True,
        start_kind="stationary",
        transitions=np.array(transitions),
        joint=np.array([[(1 - x) / 2, x / 2, x / 2, (1 - x) / 2] for x in gc]),
        stages=stages,
    )


CLEAR = gc_model([0.35, 0.65], [[0.999, 0.001], [0.004, 0.996]])


def truth_within(model: Model, decoder: str, lengths: list[int], seed: int) -> list[bool]:
    """Tell for each called end whether the true one lies within its limits.

    The limits speak of the run around an anchor that is in the state, so an end counts if the
    anchor is in truth.
    """
    within = []
    for drawn in simulate(model, lengths, seed):
        contig = Contig("r", 0, drawn.bases, False, len(drawn.bases))
        calls = Caller(model, decoder).call(contig, lambda *_: None)
        own = posterior(model, contig)
        assert calls.limits is not None
        for start, end, state, limits in zip(*calls.intervals, calls.limits, strict=True):
            core = own[start:end, state]
            high = start + np.flatnonzero(core >= 0.99 * core.max())
            other = np.flatnonzero(drawn.path != state)
            for anchor, side in ((high[0], 0), (high[-1], 1)):
                if drawn.path[anchor] != state:
                    continue
                before, behind = other[other < anchor], other[other > anchor]
                first = before[-1] + 1 if len(before) else 0
                last = behind[0] if len(behind) else len(contig)
                true = first if side == 0 else last
                within.append(bool(limits[2 * side] <= true <= limits[2 * side + 1]))
    return within


MODELS = {
    "clear": CLEAR,
    "weak": gc_model([0.4, 0.55], [[0.9995, 0.0005], [0.001, 0.999]]),
    "short": gc_model([0.35, 0.65], [[0.99, 0.01], [0.03, 0.97]]),
    "three states": gc_model(
        [0.4, 0.55, 0.7], [[0.998, 0.001, 0.001], [0.003, 0.995, 0.002], [0.003, 0.002, 0.995]]
    ),
    "staged": gc_model([0.35, 0.6], [[0.998, 0.002], [0.01, 0.99]], (1, 4)),
    "both strands": replace(
        CLEAR,
        order=1,
        start=None,
        joint=np.array(
            [
                [9, 4.8, 6, 10.2, 7.2, 5.2, 1.6, 6, 6, 4, 5.2, 4.8, 7.8, 6, 7.2, 9],
                [3.24, 5.76, 5.76, 3.24]
                + [5.76, 10.24, 10.24, 5.76] * 2
                + [3.24, 5.76, 5.76, 3.24],
            ]
        )
        / 100,
    ),
}
