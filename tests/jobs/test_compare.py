"""The command ``compare``: its files, their bytes, and bad input."""

import json
from pathlib import Path

import pandas as pd
import pytest

from hmmseg.cli import main
from hmmseg.evidence.tallies import MEASURES
from tests.evidence.drawn import drawn_contigs, write_drawn


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with 60 kb in six records and the regions in it."""
    monkeypatch.chdir(tmp_path)
    write_drawn(tmp_path, drawn_contigs(1, 60_000, 500, 2_000, (0.35, 0.65), 6))
    return tmp_path


QUICK = "--folds 3 --replicates 50 --restarts 1 --max-order 2 --max-hmm-order 1".split()  # noqa: SIM905


def run(*arguments: str) -> int:
    return main(["compare", "s.fa", *QUICK, *arguments])


def test_with_labels(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("--labels", "truth.bed", "--output", "c") == 0
    out = capsys.readouterr().out.splitlines()
    assert sorted(p.name for p in Path("c").iterdir()) == [
        "accuracy.png", "accuracy.svg", "accuracy.tsv", "comparison.json", "provenance.json",
    ]  # fmt: skip
    document = json.loads(Path("c/comparison.json").read_text())
    assert document["held_out"] == {"split": "contigs", "folds": 3, "blocks": 12}
    assert out[-1] == document["verdict"]["words"]
    assert any("s per Mb" in line for line in out)
    measures = document["accuracy"]["measures"]
    assert list(measures) == list(MEASURES)
    rows = pd.read_csv("c/accuracy.tsv", sep="\t").set_index("measure")
    for name, three in measures.items():
        for way, found in three.items():
            if found["value"] is not None:
                assert rows.loc[name, way] == pytest.approx(found["value"], abs=1e-6)
                assert found["low"] <= found["value"] + 1e-9
                assert found["value"] <= found["high"] + 1e-9
    assert measures["f1"]["hmm"]["value"] > 0.85
    assert main(["verify", "c"]) == 0


def test_without_labels(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("--output", "c") == 0
    assert "bits per held-out base" in capsys.readouterr().out.splitlines()[-1]
    document = json.loads(Path("c/comparison.json").read_text())
    assert document["labels"] is False
    assert len(document["held_out_bits"]) == 3 + 2
    assert document["verdict"]["answer"] == "the HMM is better"
    assert "no independent evidence" in document["agreement"]["what"]
    assert "drawn from the fitted HMM" in document["simulated"]["what"]
    names = {p.name for p in Path("c").iterdir()}
    assert {"heldout.tsv", "heldout.svg", "simulated.tsv", "simulated.png"} <= names
    rows = pd.read_csv("c/heldout.tsv", sep="\t")
    assert rows["parameters"].tolist() == [1, 7, 25, 4, 16]


def test_the_same_bytes_again(here: Path) -> None:
    for name, threads in (("one", "1"), ("two", "2")):
        for labels in ([], ["--labels", "truth.bed"]):
            output = f"{name}{len(labels)}"
            assert run(*labels, "--output", output, "--threads", threads) == 0
    for number in (0, 2):
        for path in Path(f"one{number}").iterdir():
            assert path.read_bytes() == Path(f"two{number}", path.name).read_bytes(), path.name


@pytest.mark.parametrize(
    ("arguments", "code", "message"),
    [
        ("--order 1", 2, "--order and --label belong to --labels"),
        ("--labels all.bed", 1, "all.bed: the labels leave one class only"),
        ("--labels truth.bed --split contigs --folds 7", 1, "6 contigs cannot make 7 folds"),
        ("--labels truth.bed --label lake", 1, "no interval named lake"),
        ("--labels missing.bed", 1, "missing.bed"),
    ],
)
def test_refusals(
    arguments: str, code: int, message: str, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("all.bed").write_text("".join(f"c{n}\t0\t10000\n" for n in range(6)))
    assert run(*arguments.split(), "--output", "refused") == code
    assert message in capsys.readouterr().err
    assert not Path("refused").exists()
