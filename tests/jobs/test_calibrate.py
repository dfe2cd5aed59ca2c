"""Calibration as a command: its files, that they fit the calls, and what it refuses."""

import json
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from hmmseg.cli import main
from hmmseg.tracks.table import read_regions_table
from tests.jobs.conftest import drawn, fasta_of
from tests.test_cli import MODEL

QUICK = ["--null-bases", "1000000", "--threads", "1"]


def run(made: Path, output: Path, *words: str, model: str = "model", calls: str = "calls") -> int:
    given = [str(made / "a.fa"), "--model", str(made / f"{model}.json")]
    folders = ["--calls", str(made / calls), "--output", str(output)]
    return main(["calibrate", *given, *folders, *QUICK, *words])


def files_of(folder: Path) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in sorted(folder.iterdir())}


def test_files_fit_one_another(made: Path, tmp_path: Path) -> None:
    output = tmp_path / "calibration"
    assert run(made, output) == 0
    document = json.loads((output / "calibration.json").read_text())
    regions = read_regions_table(output / "regions.tsv")
    calls = read_regions_table(made / "calls" / "regions.tsv")
    pd.testing.assert_frame_equal(regions[calls.columns.tolist()], calls)
    assert (document["null"], document["null_refit"]) == ("drift", False)
    # Whole replicates of the 98 kb, of which 300 are a gap.
    assert document["bases"] == 97_700
    assert document["null_bases"] == 11 * 97_700
    floor = 1 / 11
    best = regions.sort_values("log_odds_bits").iloc[-1]
    assert best["expected_by_chance"] == pytest.approx(floor, rel=1e-5)
    assert best["p_value"] == pytest.approx(1 - np.exp(-floor), rel=1e-5)
    kept = regions[regions["q_value"] <= document["q"]]
    assert document["kept"] == len(kept) >= 9
    lines = (output / "regions.filtered.bed").read_text().splitlines()
    names = [line.split("\t")[3] for line in lines]
    assert set(names) == set(kept["region_id"])
    assert len(names) == len(kept) + 1  # the one across the origin is two lines
    assert document["smallest_q"] == pytest.approx(floor / len(regions), rel=1e-5)
    table = pd.read_csv(output / "false_regions.tsv", sep="\t")
    assert set(table["null"]) == {"chain", "drift", "background"}
    for name, rows in table.sort_values("score").groupby("null"):
        assert rows["null_regions"].is_monotonic_decreasing
        assert rows["null_regions"].iloc[0] == document["nulls"][name]["regions"]
        assert (rows["upper_per_mb"] > rows["null_regions_per_mb"]).all()
    row = table[(table["null"] == "drift") & (table["score"] == best["log_odds_bits"])].iloc[0]
    assert (row["null_regions"], row["real_regions"]) == (0, 1)
    assert f"{len(kept)} of {len(regions)} regions" in document["statements"]["significance"]
    # What model and assembly say stands beside it, on the records that were called.
    assert list(document["statements"]) == [
        "significance", "resolution", "reliability", "homogeneity", "lengths",
    ]  # fmt: skip
    records = pd.read_csv(output / "homogeneity.tsv", sep="\t")
    assert dict(zip(records["record"], records["bases"], strict=True)) == {
        "one": 59_700, "two": 29_995, "ring": 8_000,
    }  # fmt: skip
    assert main(["verify", str(output)]) == 0


def test_same_bytes_on_two_threads_and_another_seed_differs(made: Path, tmp_path: Path) -> None:
    calls = {"model": "own", "calls": "own_calls"}
    for name, words in {
        "one": ["--threads", "1"],
        "two": ["--threads", "2"],
        "other": ["--seed", "2"],
    }.items():
        assert run(made, tmp_path / name, "--null-bases", "250000", *words, **calls) == 0
    one, two, other = (files_of(tmp_path / name) for name in ("one", "two", "other"))
    assert one == two
    assert one["false_regions.tsv"] != other["false_regions.tsv"]


def test_model_of_the_same_sequence_is_trained_anew(made: Path, tmp_path: Path) -> None:
    calls = {"model": "own", "calls": "own_calls"}
    for name, words in (("by default", []), ("not", ["--no-null-refit"])):
        assert run(made, tmp_path / name, "--null-bases", "250000", *words, **calls) == 0
    found = [
        json.loads((tmp_path / name / "calibration.json").read_text())
        for name in ("by default", "not")
    ]
    assert [one["null_refit"] for one in found] == [True, False]
    assert found[0]["nulls"] != found[1]["nulls"]
    # Training chose what is reported, so states are not kept apart.
    assert list(found[0]["smallest_q_by_state"]) == ["any"]
    assert list(found[1]["smallest_q_by_state"]) == ["high-gc"]


def test_null_that_judges_can_be_chosen(made: Path, tmp_path: Path) -> None:
    assert run(made, tmp_path / "out", "--null", "background", "--q", "0.5") == 0
    document = json.loads((tmp_path / "out" / "calibration.json").read_text())
    assert (document["null"], document["q"]) == ("background", 0.5)
    assert document["kept"] == document["nulls"]["background"]["kept"]


def test_too_small_is_said(made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(made, tmp_path / "out", "--null-bases", "50000", "--q", "0.001") == 0
    assert "Too small to be judged (rich)" in capsys.readouterr().out
    assert json.loads((tmp_path / "out" / "calibration.json").read_text())["kept"] == 0


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ("base", "these calls were made with another sequence; record one has other bases"),
        ("record", "these calls were made with another sequence"),
        ("model", "these calls were made with another model; give the model"),
        ("state", "these calls were made with another model"),
        ("folder", "cannot be read; give a folder written by decode"),
        ("exclude", "these calls were made with other intervals left out"),
        ("refit", "does not say how it was trained"),
        ("background", "there is no background"),
        ("standard input", "give a file, not '-'"),
    ],
)
def test_what_does_not_fit_is_refused(
    made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str], change: str, told: str
) -> None:
    fasta, model, calls = tmp_path / "a.fa", tmp_path / "model.json", made / "calls"
    text, document = (made / "a.fa").read_text(), json.loads(json.dumps(MODEL))
    words: list[str] = []
    if change == "base":
        text = text.replace("ACG", "ACT", 1)
    if change == "record":
        text = text[: text.index(">two")]
    if change == "model":
        document["transitions"] = [[0.996, 0.004], [0.008, 0.992]]
    if change == "state":
        document["states"][1]["name"] = "other"
    if change == "folder":
        calls = tmp_path
    if change == "exclude":
        (tmp_path / "x.bed").write_text("one\t0\t100\n")
        words = ["--exclude", str(tmp_path / "x.bed")]
    if change == "refit":
        words = ["--null-refit"]
    if change == "background":
        for state in document["states"]:
            state["reported"] = True
    fasta.write_text(text)
    model.write_text(json.dumps(document))
    if change == "background":
        calls = tmp_path / "calls"
        assert main(
            ["decode", str(fasta), "--model", str(model), "--output", str(calls)]
        ) == 0  # fmt: skip
        words = ["--null", "background"]
    name = "-" if change == "standard input" else str(fasta)
    given = ["calibrate", name, "--model", str(model), "--calls", str(calls)]
    capsys.readouterr()
    code = main([*given, "--output", str(tmp_path / "out"), *QUICK, *words])
    err = capsys.readouterr().err.splitlines()
    assert code == (2 if change == "standard input" else 1)
    assert told in err[-1]
    assert err[-1].startswith("hmmseg: ")
    assert not (tmp_path / "out").exists()


def test_gathered_calls_are_checked_by_their_regions(
    made: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Gathered calls hold no checksum of sequence or model, so scores are compared."""
    given = [str(made / "a.fa"), "--model", str(made / "model.json")]
    parts, batches = str(tmp_path / "parts"), tmp_path / "batches"
    assert main(["batches", *given, "--output", str(batches), "--parts", parts]) == 0
    assert main(["cut", given[0], "--batches", str(batches), "--output", f"{tmp_path}/cut"]) == 0
    key = (batches / "batches.tsv").read_text().splitlines()[1].split("\t")[0]
    part = [f"{tmp_path}/cut/{key}.fa", *given[1:], "--exclude", f"{tmp_path}/cut/{key}.bed"]
    assert main(["decode", *part, "--output", f"{parts}/{key}"]) == 0
    gather = ["gather", str(batches), "--parts", parts]
    assert main([*gather, "--output", str(tmp_path / "gathered")]) == 0
    given = ["--calls", str(tmp_path / "gathered"), "--output", str(tmp_path / "out"), *QUICK]
    good = ["calibrate", str(made / "a.fa"), "--model", str(made / "model.json"), *given]
    assert main(good) == 0
    document = json.loads(json.dumps(MODEL))
    document["states"][1]["joint"] = [0.16, 0.34, 0.34, 0.16]
    (tmp_path / "other.json").write_text(json.dumps(document))
    capsys.readouterr()
    bad = ["calibrate", str(made / "a.fa"), "--model", str(tmp_path / "other.json"), *given]
    assert main([*bad, "--force"]) == 1
    assert "another sequence or model" in capsys.readouterr().err


def test_boundaries_are_judged_where_every_state_is_reported(tmp_path: Path) -> None:
    random = np.random.default_rng(8)
    levels = np.repeat(random.permutation([0.35, 0.5] * 5), 10_000)
    (tmp_path / "a.fa").write_text(fasta_of({"one": drawn(random, levels)}))
    document = json.loads(json.dumps(MODEL))
    document["transitions"] = [[0.9999, 0.0001], [0.0001, 0.9999]]
    for state, gc in zip(document["states"], (0.35, 0.5), strict=True):
        state |= {"reported": True, "joint": [(1 - gc) / 2, gc / 2, gc / 2, (1 - gc) / 2]}
    (tmp_path / "model.json").write_text(json.dumps(document))
    given = [str(tmp_path / "a.fa"), "--model", str(tmp_path / "model.json")]
    calls = str(tmp_path / "calls")
    assert main(["decode", *given, "--output", calls]) == 0
    output = tmp_path / "out"
    assert main(["calibrate", *given, "--calls", calls, "--output", str(output), *QUICK]) == 0
    found = json.loads((output / "calibration.json").read_text())
    assert (found["judged"], found["null"]) == ("boundaries", "chain")
    regions = read_regions_table(output / "regions.tsv")
    boundaries = pd.read_csv(output / "boundaries.tsv", sep="\t")
    assert len(boundaries) == len(regions) - 1
    bits = regions["log_odds_bits"].to_numpy()
    assert np.allclose(boundaries["bits"], np.minimum(bits[:-1], bits[1:]))
    assert list(boundaries["position"]) == list(regions["start"][1:])
    weaker = np.fmax(boundaries["q_value"].to_numpy()[:-1], boundaries["q_value"].to_numpy()[1:])
    assert np.allclose(regions["q_value"][1:-1], weaker)
    true = np.flatnonzero(np.diff(levels)) + 1
    assert found["kept"] == len(regions) == len(true) + 1
    assert np.abs(boundaries["position"].to_numpy() - true).max() < 200
