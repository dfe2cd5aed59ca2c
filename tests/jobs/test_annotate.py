"""The whole job in one command: its decisions, that they are obeyed, and what is done again."""

import json
import shutil
from pathlib import Path

import numpy as np
import pytest
import yaml

from hmmseg.cli import main
from hmmseg.errors import UsageError
from hmmseg.jobs.decide import choose_preset, decide
from hmmseg.jobs.decisions import KEYS, read_decisions, to_yaml
from hmmseg.jobs.sources import Sources
from hmmseg.jobs.survey import survey
from hmmseg.model.presets import PRESETS
from hmmseg.tracks.table import read_regions_table

ROOT = Path(__file__).resolve().parents[2]
GENOMES = {
    "demo": (ROOT / "demo_data" / "assembly.fa.gz", "cpg-island"),
    "chloroplast": (ROOT / "tests" / "data" / "NC_000932.fa.gz", "gc-island"),
    "archaeon": (ROOT / "tests" / "data" / "NC_005791.fa.gz", "gc-island"),
    "phage": (ROOT / "tests" / "data" / "NC_001416.fa.gz", "gc-domain"),
}
FILES = {
    "decisions.yaml", "model.json", "model.provenance.json", "survey/survey.json",
    "survey/survey.tsv", "survey/provenance.json", "calls/regions.bed", "calls/regions.tsv",
    "calls/regions.gff3", "calls/chrom.sizes", "calls/summary.json", "calls/provenance.json",
    "comparison/comparison.json", "comparison/heldout.tsv", "comparison/heldout.svg",
    "comparison/heldout.png", "comparison/simulated.tsv", "comparison/simulated.svg",
    "comparison/simulated.png", "comparison/provenance.json", "survey/gc.bw", "report.html",
    "report.provenance.json", "calls/composition.tsv", "calls/records.tsv",
    "calibration/regions.tsv", "calibration/regions.filtered.bed",
    "calibration/false_regions.tsv", "calibration/calibration.json",
    "calibration/provenance.json", "calibration/resolution.tsv", "calibration/detection.tsv",
    "calibration/reliability.tsv", "calibration/false_discovery.tsv",
    "calibration/homogeneity.tsv", "calibration/lengths.tsv",
}  # fmt: skip


@pytest.fixture(scope="module")
def done(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder in which the chloroplast has been annotated with no option at all."""
    folder = tmp_path_factory.mktemp("annotate") / "result"
    path, _ = GENOMES["chloroplast"]
    assert main(["annotate", str(path), "--output", str(folder)]) == 0
    return folder


@pytest.fixture
def folder(done: Path, tmp_path: Path) -> Path:
    """A copy of it."""
    return Path(shutil.copytree(done, tmp_path / "result"))


def files_of(folder: Path) -> dict[str, bytes]:
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def run(folder: Path, *words: str) -> int:
    return main(["annotate", str(GENOMES["chloroplast"][0]), "--output", str(folder), *words])


def change(path: Path, **values: object) -> None:
    document = yaml.safe_load(path.read_text())
    for key, value in values.items():
        document[key]["value"] = value
    path.write_text(yaml.safe_dump(document, sort_keys=False))


@pytest.mark.parametrize("name", GENOMES)
def test_decisions_without_any_option(tmp_path: Path, name: str) -> None:
    path, preset = GENOMES[name]
    sources = Sources((str(path),))
    decisions = decide(survey(sources, str(tmp_path / "survey"), False), sources, None)
    assert decisions["preset"] == preset
    assert set(decisions.made) == set(KEYS)
    assert all(len(decision.because) > 10 for decision in decisions.made.values())
    assert decisions["circular"] == (["plasmid_1"] if name == "demo" else [])
    # The scaffold with the domain, and one of 420 bases.
    left_out = ["scaffold_02", "scaffold_23"] if name == "demo" else []
    assert decisions["train_without"] == left_out
    (tmp_path / "d.yaml").write_text(to_yaml(decisions), encoding="utf-8")
    assert read_decisions(tmp_path / "d.yaml") == decisions


@pytest.mark.parametrize(
    ("gc", "cpg", "bases", "preset"),
    [
        (0.41, 0.25, 3_000_000_000, "cpg-island"),  # a mammal
        (0.37, 0.55, 1_400_000_000, "cpg-island"),  # a fish: AT-rich, but large
        (0.31, 0.30, 1_700_000, "gc-island"),  # an archaeon that avoids CpG
        (0.194, 0.75, 23_000_000, "gc-island"),  # a malaria parasite
        (0.36, 0.75, 120_000_000, "gc-domain"),  # a plant
        (0.42, 0.92, 140_000_000, "gc-domain"),  # a fly
        (0.51, 1.16, 4_600_000, "foreign"),  # an enterobacterium
        (0.45, 0.95, 16_000, "gc-domain"),  # a small organelle
        (0.42, None, 10_000, "gc-domain"),
    ],
)
def test_preset_by_what_the_genome_is_like(
    gc: float, cpg: float | None, bases: int, preset: str
) -> None:
    """Round figures of kinds of genomes, from memory."""
    found, why = choose_preset({"gc": gc, "cpg_observed_expected": cpg, "known_bases": bases})
    assert found == preset
    assert f"{100 * gc:.1f} % GC" in why


def test_everything_is_there_and_whole(done: Path) -> None:
    assert FILES | {"calls/gc-island.posterior.bw"} == set(files_of(done))
    for name in ("survey", "calls", "calibration"):
        assert main(["verify", str(done / name)]) == 0


def test_operons_are_as_sure_as_the_size_allows(done: Path) -> None:
    """Both rRNA operons of the chloroplast (Sato et al. 1999), and no region as sure as they.

    No null region reaches their score, so E is the least there is, and they share it.
    """
    document = json.loads((done / "calibration" / "calibration.json").read_text())
    table = read_regions_table(done / "calibration" / "regions.tsv")
    bed = (ROOT / "tests" / "data" / "NC_000932.operon.bed").read_text().splitlines()
    operons = [tuple(map(int, line.split("\t")[1:3])) for line in bed]
    found = table[table["length"] > 5000]
    ends = zip(found["start"], found["end"], strict=True)
    for (start, end), (first, last) in zip(ends, operons, strict=True):
        assert start == pytest.approx(first, abs=200)
        assert end == pytest.approx(last, abs=200)
    least = document["bases"] / document["null_bases"]
    assert found["expected_by_chance"].tolist() == pytest.approx([least, least], rel=1e-5)
    assert found["q_value"].tolist() == pytest.approx([least / 2, least / 2], rel=1e-5)
    assert document["kept"] >= 2
    assert (table.loc[table["length"] < 5000, "q_value"] > least / 2).all()


def test_again_says_what_is_done_and_changes_nothing(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    before = files_of(folder)
    assert run(folder) == 0
    out = capsys.readouterr().out.splitlines()
    assert [line.split(",")[0] for line in out[:5]] == [
        "survey: already there",
        f"decisions: as they stand in {folder / 'decisions.yaml'}",
        "train: already there",
        "decode: already there",
        "calibrate: already there",
    ]
    assert files_of(folder) == before


def test_the_page_follows_the_files_beside_it(folder: Path) -> None:
    """It is made again, without --force, when what it shows has changed; nobody else's is."""
    features = GENOMES["chloroplast"][0].parent / "NC_000932.rna.bed"
    before = (folder / "report.html").read_bytes()
    assert run(folder, "--features", str(features)) == 0
    assert (folder / "report.html").read_bytes() != before
    (folder / "report.provenance.json").unlink()
    (folder / "report.html").write_text("my own")
    assert run(folder) == 1
    assert (folder / "report.html").read_text() == "my own"


def test_what_is_missing_is_completed(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = files_of(folder)
    shutil.rmtree(folder / "calls")
    assert run(folder) == 0
    out = capsys.readouterr().out
    assert "train: already there" in out
    assert "decode: done" in out
    assert files_of(folder) == before


def test_damaged_result_is_not_taken_for_done(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    before = files_of(folder)
    (folder / "calls" / "regions.bed").write_text("")
    assert run(folder) == 1
    assert "give --force" in capsys.readouterr().err
    assert run(folder, "--force") == 0
    assert files_of(folder) == before


def test_decisions_changed_in_place_are_obeyed_with_force(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    change(folder / "decisions.yaml", min_length=5000, decoder="path", calibrate="skip")
    assert run(folder) == 1
    err = capsys.readouterr().err
    assert "calls: made from other sequence or by other decisions; give --force" in err
    assert run(folder, "--force") == 0
    assert "train: already there" in capsys.readouterr().out
    rows = (folder / "calls" / "regions.tsv").read_text().splitlines()[1:]
    assert len(rows) == 2  # the two rRNA operons
    assert main(["verify", str(folder / "calls")]) == 0


def test_decisions_file_is_obeyed(done: Path, tmp_path: Path) -> None:
    other = tmp_path / "mine.yaml"
    shutil.copy(done / "decisions.yaml", other)
    change(
        other,
        calibrate="skip",
        preset="gc-domain",
        states=2,
        circular=["NC_000932.1"],
        soft_mask="use",
    )
    assert run(tmp_path / "other", "--decisions", str(other)) == 0
    assert (tmp_path / "other" / "decisions.yaml").read_text() == other.read_text()
    assert (tmp_path / "other" / "calls" / "high-gc.posterior.bw").exists()
    assert "Is_circular=true" in (tmp_path / "other" / "calls" / "regions.gff3").read_text()


def test_preset_asked_for(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(folder, "--preset", "gc-domain") == 1
    assert "other decisions stand there" in capsys.readouterr().err
    assert run(folder, "--preset", "gc-domain", "--force") == 0
    assert yaml.safe_load((folder / "decisions.yaml").read_text())["preset"] == {
        "value": "gc-domain",
        "because": "asked for",
    }


def test_without_preset_states_are_found_by_themselves(done: Path, tmp_path: Path) -> None:
    other = tmp_path / "mine.yaml"
    shutil.copy(done / "decisions.yaml", other)
    change(other, preset=None, states=2, order=0, max_iterations=3, calibrate="skip")
    assert run(tmp_path / "other", "--decisions", str(other)) == 0
    assert (tmp_path / "other" / "calls" / "regions.tsv").exists()


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ("value: gc-island", "value: islands", "preset: 'islands' is not possible"),
        ("preset:", "present:", "present: unknown decision"),
        ("value: 3", "value: three", "states: 'three'"),
        ("value: 3", "value: 2", "states: preset gc-island has 3"),
        ("value: 0.5", "value: 1.5", "threshold: 1.5"),
        ("value: 0.5", "values: 0.5", "threshold: missing"),
        ("because:", "reason:", "only value and because"),
        ("value: use", "value: [", "not valid YAML"),
    ],
)
def test_decisions_that_cannot_be_obeyed(
    folder: Path, capsys: pytest.CaptureFixture[str], old: str, new: str, told: str
) -> None:
    text = (folder / "decisions.yaml").read_text()
    assert old in text
    (folder / "decisions.yaml").write_text(text.replace(old, new, 1))
    assert run(folder, "--force") == 2
    err = capsys.readouterr().err
    assert told in err
    assert err.count("\n") == 1


def test_order_of_a_preset_given_by_words_stays(
    folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    change(folder / "decisions.yaml", preset="cpg-island", order=2)
    assert run(folder, "--force") == 2
    assert "given by words of 2 bases, so the order stays 1" in capsys.readouterr().err


def test_standard_input_is_refused(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["annotate", "-", "--output", str(tmp_path / "x")]) == 2
    assert "give a file" in capsys.readouterr().err


def test_absent_decisions_are_named(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="cannot be read"):
        read_decisions(tmp_path / "absent.yaml")
    assert set(PRESETS) >= {preset for _, preset in GENOMES.values()}


def test_most_of_an_assembly_is_never_left_out(tmp_path: Path) -> None:
    random = np.random.default_rng(1)
    records = [f">r{i}\n{''.join(random.choice(list('ACGT'), 300))}\n" for i in range(20)]
    (tmp_path / "a.fa").write_text("".join(records))
    sources = Sources((str(tmp_path / "a.fa"),))
    decisions = decide(survey(sources, str(tmp_path / "survey"), False), sources, None)
    assert decisions["train_without"] == []
    assert "most of the assembly" in decisions.made["train_without"].because
