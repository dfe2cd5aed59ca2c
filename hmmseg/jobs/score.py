"""The command ``score``: how well a model explains each record."""

from collections.abc import Iterator, Sequence
from contextlib import ExitStack
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from hmmseg.errors import ModelError, UsageError
from hmmseg.inference.chains import ChainScorer
from hmmseg.inference.expectation import log_likelihoods
from hmmseg.inference.joint import JointParts, joint_parts
from hmmseg.inference.predictive import predictive_windows
from hmmseg.inference.streams import Corpus
from hmmseg.jobs.sources import Sources
from hmmseg.kernels.elementary import LN2, exp
from hmmseg.model import Model, load_model
from hmmseg.outputs import check_target, whole_file
from hmmseg.provenance import write_provenance
from hmmseg.regions.paths import StatedPath
from hmmseg.sequence.alphabet import MISSING
from hmmseg.sequence.contigs import Contig
from hmmseg.sequence.intervals import flag_runs
from hmmseg.tracks.spool import SpooledTrack

__all__ = ["Extras", "RecordScore", "score"]


class Extras(NamedTuple):
    """What to tell besides the likelihood.

    Attributes
    ----------
    chain_start : str or None
        Of a chain: how contigs begin, see :data:`hmmseg.inference.chains.STARTS`.
    path : str or None
        A BED file of states, whose probability is told with that of the sequence.
    per_base : str or None
        A bigWig file to write with the bits of each base.
    force : bool
        Replace that file.
    """

    chain_start: str | None = None
    path: str | None = None
    per_base: str | None = None
    force: bool = False

    @property
    def columns(self) -> list[str]:
        """Names of the columns that follow the likelihood's."""
        names = ["log_start"] if self.chain_start is not None else []
        if self.path is not None:
            names += [
                "log_joint",
                "log_path_start",
                "log_path_transitions",
                "log_path_emissions",
                "log_path_posterior",
                "path_posterior",
            ]
        return names


class RecordScore(NamedTuple):
    """One record's score.

    Attributes
    ----------
    record : str
        Its name.
    bases : int
        Known bases in its contigs.
    log_likelihood : float
        In nats, all contigs together.
    bits_per_base : float
        -log2 likelihood for each known base.
    more : tuple of float
        What the extras ask for.
    """

    record: str
    bases: int
    log_likelihood: float
    bits_per_base: float
    more: tuple[float, ...] = ()


def score(
    sources: Sources, model_path: str, threads: int, extras: Extras | None = None
) -> Iterator[RecordScore]:
    """Yield the log-likelihood of each record under a model.

    Parameters
    ----------
    sources
        The sequence.
    model_path
        A model document; a chain is a model with one state.
    threads
        Threads to use; the result does not depend on it.
    extras
        What else to tell.

    Raises
    ------
    UsageError
        Two extras do not go together.
    ModelError
        A start is asked for, but the model is no chain; or a path, but a state has stages.
    LabelError
        The path does not fit the sequence or the model.
    """
    extras = extras or Extras()
    if extras.chain_start is not None and (extras.path or extras.per_base):
        raise UsageError("--chain-start goes with neither --path nor --per-base; leave it out")
    model = load_model(model_path)
    job = _Scorer(model, model_path, sources, extras)
    lengths = {}
    with ExitStack() as stack:
        track = None
        if extras.per_base is not None:
            check_target(extras.per_base, extras.force)
            track = _BitsTrack(extras.per_base, extras.force, stack)
        for record, contigs in sources.read_contigs():
            lengths[record.name] = len(record)
            if contigs:
                yield job.record(record.name, contigs, threads)
                if track is not None:
                    track.add(model, contigs)
        job.finish(lengths)
        if track is not None:
            track.finish(lengths)
    if extras.per_base is not None:
        parameters = {**sources.parameters(), "model": Path(model_path)}
        inputs = [*sources.files(), model_path]
        write_provenance(
            extras.per_base, "score --per-base", parameters, None, inputs, [extras.per_base]
        )


class _Scorer:
    """Scores records in the way that is asked for."""

    def __init__(self, model: Model, name: str, sources: Sources, extras: Extras) -> None:
        self._model, self._selects = model, sources.selects
        try:
            self._chain = (
                ChainScorer(model, extras.chain_start) if extras.chain_start is not None else None
            )
        except ModelError as error:
            raise ModelError(f"{name}: {error}") from None
        self._path = None
        if extras.path is not None:
            self._path = StatedPath.read(extras.path, model.names, model.background)

    def record(self, name: str, contigs: Sequence[Contig], threads: int) -> RecordScore:
        corpus = Corpus(contigs, self._model.order, self._model.both_strands, threads)
        bases, more = corpus.bases, tuple[float, ...]()
        if self._chain is not None:
            parts = [self._chain.parts(contig) for contig in contigs]
            begun = sum(one.start for one in parts)
            total = begun + sum(one.steps for one in parts)
            more = (begun,)
        else:
            total = float(log_likelihoods(self._model, corpus, threads).sum())
        if self._path is not None:
            more = self._of_path(contigs, total)
        return RecordScore(name, bases, total, -total / LN2 / bases, more)

    def _of_path(self, contigs: Sequence[Contig], total: float) -> tuple[float, ...]:
        assert self._path is not None
        found = [joint_parts(self._model, contig, self._path.on(contig)) for contig in contigs]
        parts = JointParts(*(sum(column) for column in zip(*found, strict=True)))
        posterior = parts.total - total
        return (parts.total, *parts, posterior, float(exp(posterior)))

    def finish(self, lengths: dict[str, int]) -> None:
        if self._path is not None:
            self._path.check(lengths, self._selects)


class _BitsTrack:
    """The bits of each known base, as a bigWig that appears whole or not at all."""

    def __init__(self, path: str, force: bool, stack: ExitStack) -> None:
        self._target = stack.enter_context(whole_file(path, force=force))
        folder = stack.enter_context(TemporaryDirectory(dir=self._target.parent, prefix="."))
        self._path = Path(folder, self._target.name)
        self._track = SpooledTrack(self._path)

    def add(self, model: Model, contigs: Sequence[Contig]) -> None:
        for contig in contigs:
            for begin, bits in predictive_windows(model, contig):
                known = contig.bases[begin : begin + len(bits)] != MISSING
                for first, last in flag_runs(known).tolist():
                    self._add(contig, begin + first, bits[first:last])

    def _add(self, contig: Contig, begin: int, bits: NDArray[np.float64]) -> None:
        start = (contig.start + begin) % contig.record_length
        cut = min(contig.record_length - start, len(bits))
        self._track.add(contig.record, start, bits[:cut])
        if cut < len(bits):
            # A contig across the origin goes on at the record's first position.
            self._track.add(contig.record, 0, bits[cut:])

    def finish(self, lengths: dict[str, int]) -> None:
        self._track.finish(lengths)
        self._path.replace(self._target)
