"""Calls of invented sequence, with a model given and with one trained on it."""

import json
from pathlib import Path

import numpy as np
import pytest

from hmmseg.cli import main
from tests.test_cli import MODEL


def fasta_of(records: dict[str, str]) -> str:
    return "".join(f">{name}\n{text}\n" for name, text in records.items())


def drawn(random: np.random.Generator, gc: np.ndarray) -> str:
    strong = random.random(len(gc)) < gc
    return "".join(
        np.where(strong, random.choice(list("CG"), len(gc)), random.choice(list("AT"), len(gc)))
    )


@pytest.fixture(scope="session")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Two records with a gap, some N and planted regions, a circle, and calls of all of them."""
    folder = tmp_path_factory.mktemp("made")
    random = np.random.default_rng(3)
    texts = {}
    for name, length in (("one", 60_000), ("two", 30_000), ("ring", 8_000)):
        gc = np.full(length, 0.3)
        for start in range(2_000, length, 10_000):
            gc[start : start + 600] = 0.7
        texts[name] = drawn(random, gc)
    texts["one"] = texts["one"][:20_000] + "N" * 300 + texts["one"][20_300:]
    texts["two"] = texts["two"][:9_000] + "N" * 5 + texts["two"][9_005:]
    # The region of the circle lies across its origin.
    texts["ring [topology=circular]"] = texts["ring"][2_300:] + texts.pop("ring")[:2_300]
    (folder / "a.fa").write_text(fasta_of(texts))
    (folder / "model.json").write_text(json.dumps(MODEL))
    a, model = str(folder / "a.fa"), str(folder / "model.json")
    assert main(["decode", a, "--model", model, "--output", str(folder / "calls")]) == 0
    assert main(["train", a, "--output", str(folder / "own.json"), "--restarts", "2"]) == 0
    own = ["--model", str(folder / "own.json"), "--decoder", "posterior", "--min-length", "20"]
    assert main(["decode", a, *own, "--output", str(folder / "own_calls")]) == 0
    return folder
