"""All that the model and the assembly say about calls, on the demo and on a chloroplast."""

from pathlib import Path

import pandas as pd
import pytest

from hmmseg.cli import main
from hmmseg.jobs.checks import check
from hmmseg.jobs.sources import Sources
from hmmseg.model import load_model
from hmmseg.sequence.alphabet import decode
from hmmseg.simulate import simulate
from hmmseg.tracks.table import read_regions_table

ROOT = Path(__file__).resolve().parents[2]
DEMO = ROOT / "demo_data"
HEADERS = {
    "resolution.tsv": "state formula_l50 formula_l95 simulated_l50 simulated_l95",
    "detection.tsv": "state length trials detected",
    "reliability.tsv": "state low high bases mean_posterior observed_fraction",
    "false_discovery.tsv": "state threshold bases nominal_fdr observed_fdr",
    "homogeneity.tsv": (
        "record bases gc gc_rest share surprise_z composition_p adjusted_p effect verdict words"
    ),
    "lengths.tsv": "state length up_to observed expected",
}


@pytest.fixture(scope="module")
def regions(tmp_path_factory: pytest.TempPathFactory) -> pd.DataFrame:
    """What the demo's own model calls in it."""
    folder = tmp_path_factory.mktemp("calls") / "calls"
    demo = [str(DEMO / "assembly.fa.gz"), "--model", str(DEMO / "model.json")]
    assert main(["decode", *demo, "--output", str(folder)]) == 0
    return read_regions_table(folder / "regions.tsv")


def checked(folder: Path, regions: pd.DataFrame, threads: int = 1) -> dict[str, str]:
    folder.mkdir()
    sources = Sources((str(DEMO / "assembly.fa.gz"),))
    model = load_model(DEMO / "model.json")
    return check(sources, model, regions, folder, threads=threads)


def test_tables_and_statements_of_the_demo(tmp_path: Path, regions: pd.DataFrame) -> None:
    """The plasmid and the scaffold that is half a domain are what was planted (see its README).

    The insert is a sixth of its scaffold: significant, but no large effect on the whole.
    """
    said = checked(tmp_path / "one", regions)
    tables = {name: pd.read_csv(tmp_path / "one" / name, sep="\t") for name in HEADERS}
    for name, header in HEADERS.items():
        assert list(tables[name].columns) == header.split()
        assert len(tables[name])
    assert set(said) == {"resolution", "reliability", "homogeneity", "lengths"}
    records = tables["homogeneity.tsv"].set_index("record")
    assert set(records.index[records["verdict"] == "differs"]) == {"plasmid_1", "scaffold_02"}
    assert set(records.index[records["verdict"] == "too short"]) == {
        "scaffold_20", "scaffold_21", "scaffold_22", "scaffold_23",
    }  # fmt: skip
    insert = records.loc["scaffold_05"]
    assert insert["adjusted_p"] < 1e-3
    assert insert["verdict"] == "fits"
    assert "plasmid_1 (GC 46.3 %" in said["homogeneity"]
    (row,) = tables["resolution.tsv"].to_dict("records")
    assert row["simulated_l50"] == pytest.approx(row["formula_l50"], rel=0.25)
    shorter = int((regions["length"] < row["simulated_l50"]).sum())
    assert (f"; {shorter} of {len(regions)} called are shorter" in said["resolution"]) == (
        shorter > 0
    )
    wrong = tables["false_discovery.tsv"]
    assert (wrong["observed_fdr"] - wrong["nominal_fdr"]).abs().max() < 0.03
    assert "fit the model's (geometric)" in said["lengths"]


def test_same_bytes_on_any_threads(tmp_path: Path, regions: pd.DataFrame) -> None:
    assert checked(tmp_path / "one", regions, 1) == checked(tmp_path / "two", regions, 2)
    for name in HEADERS:
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()


def test_only_records_that_were_called_are_judged(tmp_path: Path, regions: pd.DataFrame) -> None:
    sources = Sources((str(DEMO / "assembly.fa.gz"),))
    model = load_model(DEMO / "model.json")
    names = ["scaffold_01", "scaffold_03"]
    said = check(sources, model, regions, tmp_path, records=names)
    assert "None of 2 records judged" in said["homogeneity"]
    table = pd.read_csv(tmp_path / "homogeneity.tsv", sep="\t")
    assert sorted(table["record"]) == names


def test_a_chain_has_nothing_to_resolve(tmp_path: Path, regions: pd.DataFrame) -> None:
    """A model with one state that is reported has no boundaries, and still fits or not."""
    sources = Sources((str(DEMO / "assembly.fa.gz"),))
    chain = load_model(DEMO / "chains" / "island.json")
    said = check(sources, chain, regions.iloc[:0], tmp_path, records=["scaffold_10"])
    assert "no state that could be told" in said["resolution"]
    assert pd.read_csv(tmp_path / "resolution.tsv", sep="\t").empty


def test_a_record_without_bases_is_in_the_table_and_warned_of_no_more(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], regions: pd.DataFrame
) -> None:
    """The command has read the sequence before, and said so then."""
    model = load_model(DEMO / "model.json")
    (drawn,) = simulate(model, [30_000], 1)
    fasta = tmp_path / "a.fa"
    fasta.write_text(f">one\n{decode(drawn.bases)}\n>empty\n{'N' * 400}\n")
    check(Sources((str(fasta),)), model, regions.iloc[:0], tmp_path)
    assert "skipped" not in capsys.readouterr().err
    table = pd.read_csv(tmp_path / "homogeneity.tsv", sep="\t").set_index("record")
    assert table["bases"].to_dict() == {"one": 30_000, "empty": 0}
    assert table.loc["empty", "verdict"] == "too short"
