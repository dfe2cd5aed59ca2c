"""Labels: read with errors that name the line, and used by the command."""

import json
from pathlib import Path

import numpy as np
import pytest

from hmmseg.cli import main
from hmmseg.errors import LabelError
from hmmseg.sequence.contigs import Contig
from hmmseg.training.labels import labels_of_contigs, read_labels
from tests.test_cli import MODEL

BAD = {
    "one\t0\t200\trich\n": "labels.bed:1: ends at 200",
    "two\t0\t20\trich\n": "labels.bed:1: record two",
    "one\t0\t20\n": "labels.bed:1: no state",
    "one\t0\t20\trich\none\t10\t30\tplain\n": "labels.bed:2: overlaps the label of",
    "one\t0\t20\tother\n": "labels.bed:1: 'other' is no state of the model, which has plain, rich",
    "one\t40\t60\trich\n": "labels.bed:1: lies in a gap",
    "": "labels.bed: no label",
}


@pytest.mark.parametrize("text", BAD)
def test_bad_labels(text: str, tmp_path: Path) -> None:
    path = tmp_path / "labels.bed"
    path.write_text(text)
    contigs = [
        Contig("one", 0, np.zeros(50, np.uint8), False, 100),
        Contig("one", 75, np.zeros(25, np.uint8), False, 100),
    ]
    with pytest.raises(LabelError) as caught:
        labels_of_contigs(read_labels(path, {"one": 100}), contigs, ["plain", "rich"])
    assert BAD[text] in str(caught.value)


def test_contig_across_the_origin(tmp_path: Path) -> None:
    path = tmp_path / "labels.bed"
    path.write_text("one\t0\t5\tb\none\t95\t100\ta\n")
    contig = Contig("one", 90, np.zeros(30, np.uint8), False, 100)
    (labels,) = labels_of_contigs(read_labels(path, {"one": 100}), [contig], ["a", "b"])
    assert labels.tolist() == [0] * 5 + [1] * 5 + [2] * 5 + [0] * 15


def test_command_names_states_by_labels(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    Path("model.json").write_text(json.dumps(MODEL))
    simulate = ["simulate", "--model", "model.json", "--records", "2", "--length", "20000"]
    assert main([*simulate, "--seed", "1", "--output", "drawn"]) == 0
    train = ["train", "drawn/sequence.fa.gz", "--labels", "drawn/truth.bed"]
    assert main([*train, "--output", "own.json"]) == 0
    document = json.loads(Path("own.json").read_text())
    assert {state["name"]: state["reported"] for state in document["states"]} == {
        "rich": True,
        "unlabelled": False,
    }
    tables = {state["name"]: state["joint"] for state in document["states"]}
    assert tables["rich"] == pytest.approx([0.15, 0.35, 0.35, 0.15], abs=0.02)
    assert tables["unlabelled"] == pytest.approx([0.35, 0.15, 0.15, 0.35], abs=0.02)
    assert main([*train, "--init", "model.json", "--output", "two.json"]) == 0
    assert main([*train, "--states", "1", "--order", "1", "--output", "one.json"]) == 0
    Path("far.bed").write_text("simulated_1\t0\t99999\trich\n")
    far = ["train", "drawn/sequence.fa.gz", "--labels", "far.bed", "--output", "three.json"]
    assert main(far) == 1
    assert not Path("three.json").exists()
