"""Commands about chains: what they write, and one clear line for bad input."""

import json
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pandas as pd
import pybigtools
import pytest

from hmmseg.cli import main
from hmmseg.tracks.bed import read_bed
from hmmseg.tracks.table import read_regions_table

TRUTH = [(3000, 5000), (9000, 10_000), (14_000, 17_000)]
LENGTH = 20_000


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with sequence, its labels, and two chains counted from them."""
    monkeypatch.chdir(tmp_path)
    random = np.random.default_rng(2)
    strong = np.full(LENGTH, 0.3)
    for start, end in TRUTH:
        strong[start:end] = 0.7
    bases = np.where(
        random.random(LENGTH) < strong,
        random.choice(list("CG"), LENGTH),
        random.choice(list("AT"), LENGTH),
    )
    bases[7000:7040] = "N"
    Path("s.fa").write_text(f">one\n{''.join(bases)}\n>tiny\n{'ACGT' * 20}\n")
    lines = [f"one\t{start}\t{end}\trich_{i}\n" for i, (start, end) in enumerate(TRUTH)]
    Path("truth.bed").write_text("".join(lines))
    assert (
        main(["chains", "s.fa", "--labels", "truth.bed", "--order", "1", "--output", "pair"]) == 0
    )
    return tmp_path


CLASSIFY = "classify s.fa --region-chain pair/region.json --background-chain pair/background.json"


def run(line: str) -> int:
    return main(line.split())


def test_classify_writes_what_decode_writes(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(f"{CLASSIFY} --labels truth.bed --output calls --min-length 300") == 0
    assert sorted(p.name for p in Path("calls").iterdir()) == [
        "chrom.sizes", "composition.tsv", "provenance.json", "records.tsv", "region.posterior.bw",
        "regions.bed", "regions.gff3", "regions.tsv", "summary.json",
    ]  # fmt: skip
    captured = capsys.readouterr()
    assert captured.err.splitlines()[-1] == (
        "hmmseg: warning: 1 contigs are shorter than the window of 200 bases: not called"
    )
    # Shares of windows are no posteriors of bases: nothing follows from them about ends.
    header = Path("calls/regions.tsv").read_text().splitlines()[0].split("\t")
    assert header[8:] == [
        "soft_masked_fraction", "gc", "cpg_ratio", "gc_skew", "at_skew", "dinucleotide_entropy",
        "dinucleotide_distance", "gardiner_garden_1987", "takai_jones_2002",
    ]  # fmt: skip
    assert run("verify calls") == 0
    table = read_regions_table("calls/regions.tsv")
    assert table["region_id"].tolist() == ["region_1", "region_2", "region_3"]
    for (start, end), row in zip(TRUTH, table.itertuples(), strict=True):
        assert abs(row.start - start) < 150
        assert abs(row.end - end) < 150
        assert row.log_odds_bits > 100
    summary = json.loads(Path("calls/summary.json").read_text())
    assert summary["classifier"]["mcc_on_labels"] > 0.9
    assert summary["decoded_bases"] == LENGTH - 40
    track = pybigtools.open("calls/region.posterior.bw")
    values = np.array(list(track.values("one", fillna=None)))
    assert np.isnan(values[7000:7040]).all()
    assert np.isnan(values).sum() == 40
    inside = np.zeros(LENGTH, bool)
    for row in table.itertuples():
        inside[row.start : row.end] = True
    assert (values[inside] >= 0.5).all()


def test_threads_do_not_show(here: Path) -> None:
    for threads in (1, 2):
        assert run(f"{CLASSIFY} --threads {threads} --output t{threads}") == 0
    for path in Path("t1").iterdir():
        assert path.read_bytes() == Path("t2", path.name).read_bytes(), path.name


def test_threshold_moves_the_regions(here: Path) -> None:
    for bits in (0, 20):
        assert run(f"{CLASSIFY} --threshold {bits} --output c{bits}") == 0
    low, high = (read_regions_table(f"c{bits}/regions.tsv") for bits in (0, 20))
    assert high["length"].sum() < low["length"].sum()


BAD_CALLS: Sequence[tuple[str, int, str]] = [
    ("--labels truth.bed --threshold 3", 2, "exclude each other"),
    ("--window 10 --step 11", 2, "a step of 11 bases"),
    ("--window 30000", 1, "longer than every contig"),
    ("--window 30000 --labels truth.bed", 1, "longer than every contig"),
    ("--labels all.bed", 1, "one class only"),
    ("--labels beyond.bed", 1, "beyond.bed:1: the interval ends at 20001"),
    ("--labels other.bed", 1, "other.bed:1: record two is not in the sequence"),
    ("--labels empty.bed", 1, "empty.bed: holds no interval"),
    ("--region-chain two.json", 1, "the region chain has 2 states"),
    ("--region-chain zero.json", 1, "order 0, the background chain order 1"),
    ("--region-chain stranded.json", 1, "the region chain is stranded"),
    ("--region-chain missing.json", 1, "missing.json"),
]


@pytest.mark.parametrize(("options", "code", "message"), BAD_CALLS)
def test_classify_refuses(
    options: str, code: int, message: str, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("all.bed").write_text(f"one\t0\t{LENGTH}\ntiny\t0\t80\n")
    Path("beyond.bed").write_text(f"one\t5\t{LENGTH + 1}\n")
    Path("other.bed").write_text("two\t5\t9\n")
    Path("empty.bed").write_text("")
    assert run("train s.fa --states 1 --output zero.json") == 0
    assert run("train s.fa --states 1 --order 1 --stranded --output stranded.json") == 0
    assert run("train s.fa --max-iterations 1 --restarts 1 --output two.json") == 0
    capsys.readouterr()
    assert run(f"{CLASSIFY} {options} --output refused") == code
    lines = [x for x in capsys.readouterr().err.splitlines() if "warning" not in x]
    assert len(lines) == 1
    assert lines[0].startswith("hmmseg: ")
    assert message in lines[0]
    assert not Path("refused").exists()


def test_chains_say_where_they_are_from(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(f"{CLASSIFY} --output calls") == 0
    capsys.readouterr()
    assert run("chains s.fa --calls calls --output again") == 0
    assert "no independent evidence" in capsys.readouterr().err
    for folder, independent in (("pair", True), ("again", False)):
        document = json.loads(Path(folder, "region.json").read_text())
        assert document["training"]["independent"] is independent
    assert run("chains s.fa --labels truth.bed --label rich --order 1 --output named") == 0
    assert Path("named/region.json").read_bytes() == Path("pair/region.json").read_bytes()


@pytest.mark.parametrize(
    ("options", "code", "message"),
    [
        ("", 2, "either --labels BED or --calls DIR"),
        ("--labels truth.bed --calls pair", 2, "either --labels BED or --calls DIR"),
        ("--calls pair", 1, "summary.json"),
        ("--labels all.bed", 1, "one class only"),
    ],
)
def test_chains_refuse(
    options: str, code: int, message: str, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    Path("all.bed").write_text(f"one\t0\t{LENGTH}\ntiny\t0\t80\n")
    assert run(f"chains s.fa {options} --output refused") == code
    assert message in capsys.readouterr().err
    assert not Path("refused").exists()


def test_machine_tables(here: Path) -> None:
    assert run("machine --model pair/background.json --output m") == 0
    steps = pd.read_csv("m/transitions.tsv", sep="\t", keep_default_na=False)
    shares = pd.read_csv("m/stationary.tsv", sep="\t").set_index("history")["probability"]
    assert list(steps.columns) == ["history", "base", "next_history", "probability"]
    assert len(steps) == 16
    assert (steps["next_history"] == steps["base"]).all()
    assert steps.groupby("history")["probability"].sum().tolist() == pytest.approx([1.0] * 4)
    flow = steps["history"].map(shares) * steps["probability"]
    moved = flow.groupby(steps["next_history"]).sum()
    assert moved.tolist() == pytest.approx(shares.tolist(), abs=1e-14)
    assert json.loads(Path("m/machine.json").read_text())["histories"] == 4
    assert run("verify m") == 0


def test_machine_refuses_an_hmm(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run("train s.fa --max-iterations 1 --restarts 1 --output two.json") == 0
    assert run("machine --model two.json --output m") == 1
    assert "two.json: the model has 2 states" in capsys.readouterr().err


def test_orders_find_the_order_that_made_the_sequence(here: Path) -> None:
    random = np.random.default_rng(3)
    table = random.dirichlet(np.full(4, 3.0), size=16)
    bases = [0, 0]
    for uniform in random.random(60_000):
        row = np.cumsum(table[4 * bases[-2] + bases[-1]])
        bases.append(min(int(np.searchsorted(row, uniform)), 3))
    Path("two.fa").write_text(">x\n" + "".join("ACGT"[b] for b in bases) + "\n")
    assert run("orders two.fa --stranded --max-order 5 --output o") == 0
    document = json.loads(Path("o/orders.json").read_text())
    assert (document["best_by_bic"], document["best_by_heldout"]) == (2, 2)
    rows = document["orders"]
    assert [row["parameters"] for row in rows] == [3 * 4**k for k in range(6)]
    for row in rows:
        assert row["bic"] == pytest.approx(
            -2 * row["log_likelihood"] + row["parameters"] * np.log(60_002)
        )
        assert row["heldout_bits_per_base"] >= rows[2]["heldout_bits_per_base"]


def test_orders_refuse_too_little_sequence(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("little.fa").write_text(">x\nACGT\n")
    assert run("orders little.fa --output o") == 1
    assert "1 blocks cannot make 5 folds" in capsys.readouterr().err


def test_bed_of_calls_is_readable(here: Path) -> None:
    assert run(f"{CLASSIFY} --output calls") == 0
    assert (read_bed("calls/regions.bed", {"one": LENGTH, "tiny": 80})["name"] != "").all()
