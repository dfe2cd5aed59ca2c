"""The command ``simulate``: sequence with a known truth, from a model."""

import gzip
from pathlib import Path
from typing import IO

import numpy as np

from hmmseg.inference.path import runs_of
from hmmseg.model import Model, load_model
from hmmseg.outputs import check_target, whole_folder
from hmmseg.provenance import write_provenance
from hmmseg.sequence.alphabet import decode
from hmmseg.simulate import Drawn
from hmmseg.simulate import simulate as draw_sequences

__all__ = ["simulate"]

_LINE = 80
_COMPRESSION = 1
"""Sequence hardly packs better with more effort."""


def simulate(
    model_path: str, output: str, records: int, length: int, seed: int, force: bool
) -> None:
    """Write ``sequence.fa.gz``, and ``truth.bed`` with the intervals of reported states.

    Parameters
    ----------
    model_path
        A model document.
    output
        The folder to write.
    records, length
        How many records, and their length in bases.
    seed
        Of the random draws.
    force
        Replace an earlier result.
    """
    check_target(output, force)
    model = load_model(model_path)
    with whole_folder(output, force=force) as folder:
        fasta, truth = folder / "sequence.fa.gz", folder / "truth.bed"
        with (
            fasta.open("wb") as raw,
            gzip.GzipFile("", "wb", _COMPRESSION, raw, mtime=0) as packed,
            truth.open("w", encoding="utf-8", newline="\n") as bed,
        ):
            drawn = draw_sequences(model, [length] * records, seed)
            for number, one in enumerate(drawn, start=1):
                name = f"simulated_{number}"
                _write_record(packed, name, one)
                bed.writelines(_truth_lines(model, name, one))
        parameters = {"model": Path(model_path), "records": records, "length": length}
        write_provenance(folder, "simulate", parameters, seed, [model_path], [fasta, truth])


def _write_record(file: gzip.GzipFile | IO[bytes], name: str, drawn: Drawn) -> None:
    file.write(f">{name}\n".encode())
    chunk = _LINE * 16384
    for begin in range(0, len(drawn.bases), chunk):
        text = decode(drawn.bases[begin : begin + chunk])
        lines = (text[at : at + _LINE] for at in range(0, len(text), _LINE))
        file.write(("\n".join(lines) + "\n").encode())


def _truth_lines(model: Model, name: str, drawn: Drawn) -> list[str]:
    runs = runs_of(drawn.path)
    reported = np.array(model.reported)[runs.states]
    return [
        f"{name}\t{runs.edges[i]}\t{runs.edges[i + 1]}\t{model.names[runs.states[i]]}\n"
        for i in np.flatnonzero(reported)
    ]
