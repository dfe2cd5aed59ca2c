"""What ``score`` tells besides the likelihood."""

import json
from pathlib import Path

import numpy as np
import pybigtools
import pytest

from hmmseg.cli import main

MODEL = {
    "format": "hmmseg-model", "version": 1, "order": 0, "symmetric": True,
    "start": "stationary",
    "states": [
        {"name": "plain", "reported": False, "joint": [0.35, 0.15, 0.15, 0.35]},
        {"name": "rich", "reported": True, "joint": [0.15, 0.35, 0.35, 0.15]},
    ],
    "transitions": [[0.9, 0.1], [0.2, 0.8]],
}  # fmt: skip


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    Path("m.json").write_text(json.dumps(MODEL))
    Path("s.fa").write_text(f">one\nACGRT\n{'N' * 30}\nGGGG\n>gap\n{'N' * 40}\n>two\nAAC\n")
    Path("path.bed").write_text("one\t1\t4\trich\none\t35\t39\trich_2\n")
    return tmp_path


def table(capsys: pytest.CaptureFixture[str]) -> list[dict[str, str]]:
    header, *rows = capsys.readouterr().out.splitlines()
    names = header.split("\t")
    return [dict(zip(names, row.split("\t"), strict=True)) for row in rows]


def test_bits_of_each_base(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main("score s.fa --model m.json --per-base bits.bw".split()) == 0  # noqa: SIM905
    rows = {row["record"]: row for row in table(capsys)}
    file = pybigtools.open("bits.bw")
    one = np.array(list(file.values("one", fillna=None)))
    two = np.array(list(file.values("two", fillna=None)))
    # The ambiguous base and the gap have no value.
    assert np.flatnonzero(np.isnan(one)).tolist() == [3, *range(5, 35)]
    assert np.nanmean(one) == pytest.approx(float(rows["one"]["bits_per_base"]), abs=5e-4)
    # By hand: two thirds and one third at the start, and one step on.
    first = 2 / 3 * 0.35 + 1 / 3 * 0.15
    weights = np.array([2 / 3 * 0.35, 1 / 3 * 0.15]) / first
    second = (weights @ np.array(MODEL["transitions"])) @ np.array([0.35, 0.15])
    assert two[:2] == pytest.approx(-np.log2([first, second]), abs=5e-4)
    assert Path("bits.provenance.json").exists()
    assert sorted(p.name for p in Path().iterdir() if p.name.startswith(".")) == []


def test_probability_of_a_path(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main("score s.fa --model m.json --path path.bed".split()) == 0  # noqa: SIM905
    rows = {row["record"]: {k: v for k, v in row.items() if k != "record"} for row in table(capsys)}
    one = {key: float(value) for key, value in rows["one"].items()}
    # plain, rich x 3, plain; then, behind the gap, rich x 4.
    assert one["log_path_start"] == pytest.approx(np.log(2 / 3) + np.log(1 / 3))
    assert one["log_path_transitions"] == pytest.approx(np.log(0.1 * 0.8 * 0.8 * 0.2 * 0.8**3))
    assert one["log_path_emissions"] == pytest.approx(np.log(0.35 * 0.35**2 * 0.35 * 0.35**4))
    assert one["log_joint"] == pytest.approx(
        one["log_path_start"] + one["log_path_transitions"] + one["log_path_emissions"]
    )
    assert one["path_posterior"] == pytest.approx(np.exp(one["log_joint"] - one["log_likelihood"]))
    assert 0 < one["path_posterior"] < 1
    two = {key: float(value) for key, value in rows["two"].items()}
    assert two["log_joint"] == pytest.approx(np.log(2 / 3 * 0.9**2 * 0.35**2 * 0.15))


def test_all_paths_share_out_the_whole(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    total = 0.0
    for number in range(8):
        states = ["rich" if number >> at & 1 else "plain" for at in range(3)]
        lines = [f"two\t{at}\t{at + 1}\t{state}\n" for at, state in enumerate(states)]
        Path("p.bed").write_text("".join(lines))
        assert main(["score", "s.fa", "--model", "m.json", "--path", "p.bed"]) == 0
        (row,) = (row for row in table(capsys) if row["record"] == "two")
        total += float(row["path_posterior"])
    assert total == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize(
    ("bed", "message"),
    [
        ("one\t0\t2\tlake\n", "p.bed:1: 'lake' is no state of the model, which has plain, rich"),
        ("one\t0\t4\trich\none\t3\t5\trich\n", "p.bed:2: overlaps the interval of p.bed:1"),
        ("one\t0\t99\trich\n", "p.bed:1: ends at 99, but record one has 39 bases"),
        ("six\t0\t9\trich\n", "p.bed:1: record six is not in the sequence"),
    ],
)
def test_paths_that_do_not_fit(
    bed: str, message: str, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("p.bed").write_text(bed)
    assert main(["score", "s.fa", "--model", "m.json", "--path", "p.bed"]) == 1
    assert message in capsys.readouterr().err


def test_start_of_a_chain(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    arguments = ["train", "s.fa", "--states", "1", "--order", "1", "--stranded"]
    assert main([*arguments, "--pseudocount", "16", "--output", "c.json"]) == 0
    capsys.readouterr()
    found = {}
    for start in ("counted", "stationary", "free"):
        assert main(["score", "s.fa", "--model", "c.json", "--chain-start", start]) == 0
        found[start] = table(capsys)[0]
    assert main(["score", "s.fa", "--model", "c.json"]) == 0
    plain = float(table(capsys)[0]["log_likelihood"])
    assert float(found["counted"]["log_likelihood"]) == pytest.approx(plain)
    assert float(found["free"]["log_start"]) == 0
    assert float(found["free"]["log_likelihood"]) > plain
    assert main(["score", "s.fa", "--model", "m.json", "--chain-start", "free"]) == 1
    assert "2 states" in capsys.readouterr().err
    both = ["score", "s.fa", "--model", "c.json", "--chain-start", "free", "--path", "path.bed"]
    assert main(both) == 2


def test_an_existing_track_is_not_replaced(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("bits.bw").write_text("mine")
    assert main(["score", "s.fa", "--model", "m.json", "--per-base", "bits.bw"]) == 1
    assert "--force" in capsys.readouterr().err
    assert Path("bits.bw").read_text() == "mine"
