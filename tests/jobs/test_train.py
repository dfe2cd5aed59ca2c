"""Training from presets and specifications, soft-masking, samples, and what is told at the end."""

import json
from pathlib import Path

import numpy as np
import pytest

from hmmseg.cli import main
from hmmseg.model import load_model
from hmmseg.model.presets import PRESETS

SPEC = """
order: 1
pseudocount: 16
states:
  - {name: plain, reported: false, expected_length: 400, gc_odds: 0.5}
  - {name: rich, expected_length: 300, gc_odds: 2}
"""


def draw(random: np.random.Generator, gc: float, length: int) -> str:
    weak, strong = (1 - gc) / 2, gc / 2
    return "".join(random.choice(list("ACGT"), length, p=[weak, strong, strong, weak]))


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with an AT-rich genome, in which GC-rich islands stand, some of them lower case."""
    monkeypatch.chdir(tmp_path)
    random = np.random.default_rng(2)
    records = []
    for number in range(4):
        pieces = []
        for island in range(5):
            pieces.append(draw(random, 0.3, 2000))
            rich = draw(random, 0.65, 400)
            pieces.append(rich.lower() if island % 2 else rich)
        records.append(f">r{number}\n{''.join(pieces)}\n")
    (tmp_path / "some.fa").write_text("".join(records))
    (tmp_path / "spec.yaml").write_text(SPEC)
    return tmp_path


def regions(folder: Path) -> list[list[str]]:
    return [line.split("\t") for line in (folder / "regions.tsv").read_text().splitlines()[1:]]


def test_preset_trains_and_names_what_it_was(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    train = ["train", "some.fa", "--preset", "gc-island", "--output", "model.json"]
    assert main(train) == 0
    document = json.loads((here / "model.json").read_text())
    assert document["training"]["preset"] == "gc-island"
    assert [state["name"] for state in document["states"]] == ["low", "middle", "gc-island"]
    provenance = json.loads((here / "model.provenance.json").read_text())
    assert provenance["parameters"]["preset"] == "gc-island"
    out = capsys.readouterr().out.splitlines()
    assert out[0].split("\t")[0] == "state"
    assert "very GC-rich, mean length" in out[3]
    assert main(["explain", "model.json"]) == 0
    assert capsys.readouterr().out.splitlines() == out


def test_specification_is_an_input(here: Path) -> None:
    assert main(["train", "some.fa", "--spec", "spec.yaml", "--output", "model.json"]) == 0
    training = json.loads((here / "model.json").read_text())["training"]
    assert (training["spec"], training["iterations"] > 0) == ("spec.yaml", True)
    provenance = json.loads((here / "model.provenance.json").read_text())
    assert [one["name"] for one in provenance["inputs"]] == ["some.fa", "spec.yaml"]
    assert provenance["parameters"]["pseudocount"] == 16


def test_printed_preset_is_a_specification(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["presets", "gc-island"]) == 0
    (here / "own.yaml").write_text(capsys.readouterr().out)
    assert main(["train", "some.fa", "--spec", "own.yaml", "--output", "own.json"]) == 0
    assert main(["train", "some.fa", "--preset", "gc-island", "--output", "model.json"]) == 0
    one, other = (json.loads((here / n).read_text()) for n in ("own.json", "model.json"))
    assert (one["states"], one["transitions"]) == (other["states"], other["transitions"])


def test_presets_lists_all_with_what_else_they_find(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["presets"]) == 0
    out = capsys.readouterr().out
    assert [line for line in out.splitlines() if line in PRESETS] == list(PRESETS)
    assert out.count("also finds:") == len(PRESETS)
    assert "rRNA operons above all" in " ".join(out.split())


def test_placed_preset_is_not_trained(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["train", "some.fa", "--preset", "at-rich", "--output", "model.json"]) == 0
    document = json.loads((here / "model.json").read_text())
    assert document["training"]["iterations"] == 0
    assert document["transitions"][1][1] == pytest.approx(1 - 1 / 2400)
    assert "hmmseg: warning" not in capsys.readouterr().err


def test_hidden_soft_mask_is_missing_in_training_and_calling(here: Path) -> None:
    train = ["train", "some.fa", "--spec", "spec.yaml"]
    assert main([*train, "--soft-mask", "hide", "--output", "hide.json"]) == 0
    assert main([*train, "--output", "use.json"]) == 0
    hidden, used = (
        json.loads((here / f"{name}.json").read_text())["training"] for name in ("hide", "use")
    )
    assert (hidden["soft_mask"], used["soft_mask"]) == ("hide", "use")
    assert used["bases"] - hidden["bases"] == 4 * 2 * 400
    for name in ("hide", "use"):
        assert main(["decode", "some.fa", "--model", f"{name}.json", "--output", name]) == 0
    # Every second and fourth island of a record is lower case.
    found = {row[1:3][0] + ":" + row[2]: float(row[8]) for row in regions(here / "use")}
    assert len([share for share in found.values() if share > 0.8]) >= 7
    assert len([share for share in found.values() if share < 0.2]) >= 10
    assert all(float(row[8]) < 0.5 for row in regions(here / "hide"))
    again = ["decode", "some.fa", "--model", "hide.json", "--soft-mask", "use"]
    assert main([*again, "--output", "again"]) == 0
    assert any(float(row[8]) > 0.8 for row in regions(here / "again"))


def test_sample_is_seeded(here: Path) -> None:
    train = ["train", "some.fa", "--spec", "spec.yaml", "--train-bases", "20000"]
    for name, seed in (("a", "1"), ("b", "1"), ("c", "2")):
        assert main([*train, "--seed", seed, "--output", f"{name}/m.json"]) == 0
    a, b, c = (json.loads((here / n / "m.json").read_text()) for n in "abc")
    assert a["training"]["sampled"]
    assert a["training"]["bases"] == 24000  # whole records, each of which is one block
    assert a["states"] == b["states"]
    assert a["states"] != c["states"]


def test_starts_that_found_different_things_are_told(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Without any structure, each start ends in another corner."""
    random = np.random.default_rng(3)
    (here / "plain.fa").write_text(f">a\n{draw(random, 0.5, 20000)}\n")
    train = ["train", "plain.fa", "--restarts", "3", "--states", "3", "--max-iterations", "40"]
    assert main([*train, "--output", "m.json"]) == 0
    err = capsys.readouterr().err
    assert "the best two of 3 starts" in err
    assert "found different things" in err
    fits = json.loads((here / "m.json").read_text())["training"]["restarts"]
    assert [len(fit["states"]) for fit in fits] == [3, 3, 3]


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (["--preset", "cpg"], "there is no preset 'cpg'"),
        (["--preset", "gc-island", "--init", "m.json"], "do not go together"),
        (["--preset", "gc-island", "--states", "2"], "--states does not go with --preset"),
        (["--spec", "spec.yaml", "--order", "2"], "--order does not go with --spec"),
    ],
)
def test_contradictions_are_refused(
    here: Path, capsys: pytest.CaptureFixture[str], words: list[str], told: str
) -> None:
    assert main(["train", "some.fa", *words, "--output", "model.json"]) == 2
    assert told in capsys.readouterr().err
    assert not (here / "model.json").exists()


def test_bad_specification_is_named(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (here / "spec.yaml").write_text("states: [{name: a}]")
    assert main(["train", "some.fa", "--spec", "spec.yaml", "--output", "model.json"]) == 1
    err = capsys.readouterr().err
    assert (
        err
        == "hmmseg: spec.yaml: states[0].expected_length: missing; give a mean length in bases\n"
    )


def test_what_a_specification_fixes_forbids_and_expects(here: Path) -> None:
    """Fixed and forbidden stay to the bit; strong pseudo-counts hold what weak ones let go."""
    states = """
  - {name: plain, reported: false, expected_length: 400, gc_odds: 0.5}
  - {name: rich, expected_length: 300, stages: 2, gc: 0.6, pseudocount: %s}
  - {name: other, reported: false, expected_length: 100, gc: 0.5}
"""
    found = {}
    for strength in ("0", "1.0e+9"):
        text = "fixed: [other.emissions, plain.length]\nnever: [[rich, other]]\nstates:" + states
        (here / "spec.yaml").write_text(text % strength)
        train = ["train", "some.fa", "--spec", "spec.yaml", "--output", f"{strength}.json"]
        assert main(train) == 0
        model = load_model(here / f"{strength}.json")
        assert model.training is not None
        assert model.training["iterations"] > 2
        assert model.gc[2] == pytest.approx(0.5, abs=1e-12)
        assert model.expected_lengths[0] == pytest.approx(400, rel=1e-9)
        assert model.transitions[1, 2] == 0
        assert model.transitions[2, 1] == 0
        assert model.stages == (1, 2, 1)
        found[strength] = float(model.gc[1])
    assert abs(found["0"] - 0.65) < 0.02
    assert found["1.0e+9"] == pytest.approx(0.6, abs=1e-4)
