"""Build the invented assembly of this folder: ``python demo_data/build.py [FOLDER]``.

Reads ``recipe.json``, ``model.json`` and ``chains/`` beside it, draws sequence from the models by
``hmmseg.simulate``, plants, cuts and masks what the recipe names, and writes
``assembly.fa.gz`` and ``truth.bed`` to FOLDER, by default this folder.
"""

import gzip
import json
import random
import sys
from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from hmmseg.model import load_model
from hmmseg.simulate import simulate

__all__ = ["build", "main"]

HERE = Path(__file__).resolve().parent
LETTERS = np.frombuffer(b"ACGT", dtype=np.uint8)
LOWER = ord("a") - ord("A")
GAP_MIN = 25
"""Shortest run of N that separates contigs; truth is stated for contigs only."""


@dataclass
class Drawn:
    """A record in the making.

    Parameters
    ----------
    name
        Name of the record.
    letters
        uint8[position]: the sequence as ASCII.
    truth
        int64[position]: index into ``labels``, 0 where nothing is to be found.
    circular
        Whether the end joins the start.
    gap
        bool[position]: whether the position lies in a gap.
    """

    name: str
    letters: NDArray[np.uint8]
    truth: NDArray[np.int64]
    circular: bool = False
    gap: NDArray[np.bool_] = field(init=False)

    def __post_init__(self) -> None:
        """Start without gaps."""
        self.gap = np.zeros(len(self.letters), dtype=bool)


def draw(recipe: dict[str, Any], labels: list[str]) -> dict[str, Drawn]:
    """Draw the scaffolds from the model, and the plasmid from its chain."""
    model = load_model(HERE / "model.json")
    states = zip(model.names, model.reported, strict=True)
    kinds = np.array([labels.index(name) if reported else 0 for name, reported in states])
    records = {}
    drawn = simulate(model, recipe["scaffolds"], recipe["seed"])
    for number, (bases, path) in enumerate(drawn, start=1):
        name = f"scaffold_{number:02d}"
        records[name] = Drawn(name, LETTERS[bases], kinds[path])
    plasmid = recipe["plasmid"]
    letters = draw_chain(plasmid["chain"], plasmid["length"], recipe["seed"] + 1)
    truth = np.zeros(len(letters), dtype=np.int64)
    records[plasmid["record"]] = Drawn(plasmid["record"], letters, truth, circular=True)
    return records


def draw_chain(chain: str, length: int, seed: int) -> NDArray[np.uint8]:
    """Letters from one of the one-state models in ``chains/``."""
    [(bases, _)] = simulate(load_model(HERE / "chains" / f"{chain}.json"), [length], seed)
    return LETTERS[bases]


def plant(records: dict[str, Drawn], recipe: dict[str, Any], labels: list[str]) -> None:
    """Write the planted stretches over what was drawn, across the origin if they reach it."""
    for seed, item in enumerate(recipe["planted"], start=recipe["seed"] + 2):
        record = records[item["record"]]
        positions = np.arange(item["start"], item["start"] + item["length"])
        if record.circular:
            positions %= len(record.letters)
        record.letters[positions] = draw_chain(item["chain"], item["length"], seed)
        record.truth[positions] = labels.index(item["name"])


def blemish(records: dict[str, Drawn], recipe: dict[str, Any]) -> None:
    """Soft-mask at random, then write ambiguous letters and runs of N."""
    # random.random() is the one stream that Python promises to keep from version to version.
    uniform = random.Random(recipe["seed"]).random
    masked = recipe["soft_masked"]
    names = list(records)
    ends = np.cumsum([len(record.letters) for record in records.values()])
    for _ in range(masked["stretches"]):
        at = int(uniform() * ends[-1])
        index = int(np.searchsorted(ends, at, side="right"))
        letters = records[names[index]].letters
        start = at - int(ends[index]) + len(letters)
        length = masked["shortest"] + int(uniform() * (masked["longest"] - masked["shortest"]))
        stretch = letters[start : start + length]
        stretch[stretch < ord("a")] += LOWER
    for name, position, letter in recipe["ambiguous"]:
        records[name].letters[position] = ord(letter)
    for name, start, length in recipe["gaps"]:
        records[name].letters[start : start + length] = ord("N")
        records[name].gap[start : start + length] = length >= GAP_MIN


def truth_lines(record: Drawn, labels: list[str]) -> Iterator[str]:
    """BED lines of what is to be found in a record, gaps left out."""
    found = np.where(record.gap, 0, record.truth)
    cuts = np.flatnonzero(np.diff(found)) + 1
    bounds = [0, *cuts.tolist(), len(found)]
    for start, end in pairwise(bounds):
        if found[start]:
            yield f"{record.name}\t{start}\t{end}\t{labels[found[start]]}\n"


def fasta(record: Drawn, species: str, width: int) -> bytes:
    """One record as FASTA."""
    kind = " plasmid [topology=circular]" if record.circular else ""
    lines = [f">{record.name} {species}, an invented species{kind}".encode()]
    text = record.letters.tobytes()
    lines += [text[i : i + width] for i in range(0, len(text), width)]
    return b"\n".join(lines) + b"\n"


def build(folder: Path) -> None:
    """Write ``assembly.fa.gz`` and ``truth.bed`` to a folder.

    Parameters
    ----------
    folder
        Where to write; files of these names in it are replaced.
    """
    recipe = json.loads((HERE / "recipe.json").read_text(encoding="utf-8"))
    labels = ["", "island", "domain", "insert"]
    records = draw(recipe, labels)
    plant(records, recipe, labels)
    blemish(records, recipe)
    text = b"".join(
        fasta(record, recipe["species"], recipe["line_width"]) for record in records.values()
    )
    (folder / "assembly.fa.gz").write_bytes(gzip.compress(text, compresslevel=9, mtime=0))
    truth = "".join(line for record in records.values() for line in truth_lines(record, labels))
    (folder / "truth.bed").write_text(truth, encoding="ascii", newline="\n")


def main(arguments: list[str]) -> None:
    """Build into the folder named by the one argument, or into this one."""
    build(Path(arguments[0]) if arguments else HERE)


if __name__ == "__main__":
    main(sys.argv[1:])
