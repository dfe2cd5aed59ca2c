"""The expectation steps of two peers, on the same model and the same bases as ours."""

import ctypes
import os
import shutil
import subprocess
import tempfile
from collections.abc import Callable
from pathlib import Path

import numpy as np

from hmmseg.inference.streams import build_stream
from hmmseg.model import Model
from hmmseg.sequence.contigs import Contig
from tests.peer import peer_of
from tests.strategies import parameters_of

__all__ = ["Step", "hmmlearn_compiled_step", "hmmlearn_step", "textbook_step"]

Step = Callable[[], float]
"""One expectation step; returns the log-likelihood in nats."""


def hmmlearn_step(model: Model, contig: Contig) -> Step:
    """Return hmmlearn's, ``implementation="scaling"``: all of its E-step and nothing else."""
    peer = peer_of(parameters_of(model), implementation="scaling")
    symbols = contig.bases.astype(np.int64)[:, None]
    return lambda: float(peer._do_estep(symbols, [len(symbols)])[1])


def hmmlearn_compiled_step(model: Model, contig: Contig) -> Step:
    """Return the part of hmmlearn's that is C++, without the counting of emissions.

    It is less than an E-step, so ratios to it are lower bounds.
    """
    from hmmlearn import _hmmc  # type: ignore[import-untyped]  # noqa: PLC0415

    start, transitions = model.start_probabilities.copy(), model.transitions.copy()
    emissions, bases = model.joint.copy(), contig.bases

    def step() -> float:
        lattice = emissions[:, bases].T.copy()
        log_likelihood, forward, scales = _hmmc.forward_scaling(start, transitions, lattice)
        backward = _hmmc.backward_scaling(start, transitions, lattice, scales)
        _hmmc.compute_scaling_xi_sum(forward, transitions, backward, lattice)
        return float(log_likelihood)

    return step


def textbook_step(model: Model, contig: Contig) -> Step | None:
    """Return ``textbook.c``, built for this processor; None where there is no compiler."""
    compiler = shutil.which(os.environ.get("CC", "cc"))
    if compiler is None:
        return None
    with tempfile.TemporaryDirectory() as folder:
        library = Path(folder) / "textbook.so"
        source = Path(__file__).with_name("textbook.c")
        flags = ["-O3", "-march=native", f"-DSTATES={model.states}", "-shared", "-fPIC"]
        subprocess.run([compiler, *flags, "-o", library, source, "-lm"], check=True)
        function = ctypes.CDLL(str(library)).expect
    function.restype = ctypes.c_double
    doubles = np.ctypeslib.ndpointer(np.float64, flags="C")
    function.argtypes = [
        np.ctypeslib.ndpointer(np.uint16, flags="C"), ctypes.c_long, doubles, doubles, doubles,
        ctypes.c_long, doubles, doubles, doubles, doubles,
    ]  # fmt: skip
    codes = build_stream([contig], model.order, 1).codes(0).astype(np.uint16)
    alpha, scale = np.ones((len(codes), model.states)), np.ones(len(codes))
    emissions = model.emissions.copy()

    def step() -> float:
        return float(
            function(
                codes, len(codes), model.start_probabilities, model.transitions, emissions,
                emissions.shape[1], alpha, scale, np.zeros_like(model.transitions),
                np.zeros_like(emissions),
            )
        )  # fmt: skip

    return step
