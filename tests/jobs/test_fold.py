"""Folds as jobs of their own: ``fold``, and ``compare`` from what it wrote."""

import json
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from hmmseg.cli import main
from hmmseg.jobs import compare as job
from tests.evidence.drawn import drawn_contigs, write_drawn

FOLDS = (1, 2, 3)
QUICK = "--restarts 1 --max-hmm-order 1 --folds 3".split()  # noqa: SIM905
TOGETHER = ["--replicates", "50", "--max-order", "2"]
LABELS = {"blind": [], "labelled": ["--labels", "truth.bed"]}


def fold(number: int, output: str, *arguments: str) -> int:
    return main(["fold", "s.fa", "--fold", str(number), "--output", output, *QUICK, *arguments])


def compare(output: str, *arguments: str, fasta: str = "s.fa") -> int:
    return main(["compare", fasta, "--output", output, *QUICK, *TOGETHER, *arguments])


@pytest.fixture(scope="module")
def done(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with sequence, its regions, and every fold with labels and without."""
    folder = tmp_path_factory.mktemp("folds")
    write_drawn(folder, drawn_contigs(1, 60_000, 500, 2_000, (0.35, 0.65), 6))
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        for name, labels in LABELS.items():
            for number in FOLDS:
                assert fold(number, f"{name}/{number}", *labels, "--threads", "1") == 0
    return folder


@pytest.fixture
def here(done: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A copy of it to be in, and to spoil."""
    shutil.copytree(done, tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def files(folder: Path) -> dict[str, bytes]:
    return {str(p.relative_to(folder)): p.read_bytes() for p in folder.rglob("*") if p.is_file()}


@pytest.mark.parametrize("name", LABELS)
def test_comparison_from_parts_has_the_bytes_of_one_job(
    name: str, here: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    assert compare("whole", *LABELS[name]) == 0
    said = capsys.readouterr().out.splitlines()
    with monkeypatch.context() as patch:
        for of_folds in ("measured_turns", "predicted_turns"):
            patch.delattr(job, of_folds)
        assert compare("joined", *LABELS[name], "--parts", name) == 0
    # Only times are not known any more.
    assert any(" s per Mb" in line for line in said)
    assert capsys.readouterr().out.splitlines() == [one for one in said if " s per Mb" not in one]
    whole, joined = files(here / "whole"), files(here / "joined")
    origins = [json.loads(found.pop("provenance.json")) for found in (whole, joined)]
    assert len(whole) >= 4
    assert joined == whole
    extra = [one["name"] for one in origins[1].pop("inputs")[len(origins[0].pop("inputs")) :]]
    assert extra == ["provenance.json"] * 3
    assert origins[0] == origins[1]
    assert main(["verify", "joined"]) == 0


@pytest.mark.parametrize("name", LABELS)
def test_a_fold_has_the_same_bytes_again(name: str, here: Path) -> None:
    assert fold(2, "again", *LABELS[name], "--threads", "2") == 0
    assert files(here / "again") == files(here / name / "2")
    document = json.loads((here / "again" / "fold.json").read_text())
    assert (document["format"], document["version"], document["fold"]) == ("hmmseg-fold", 1, 2)
    assert main(["verify", "again"]) == 0


def test_a_fold_tells_what_it_did(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    del here
    assert fold(1, "one", "--labels", "truth.bed", "--order", "0") == 0
    tested = "an HMM and two chains of order 0 tested on 20000 bases that none had seen"
    assert capsys.readouterr().out == f"fold 1 of 3: {tested}\n"


def refused(here: Path, capsys: pytest.CaptureFixture[str], code: int, called: int) -> str:
    """Return the one line that was told; nothing was left behind."""
    told = capsys.readouterr().err.splitlines()
    assert called == code
    assert len(told) == 1
    assert not list(here.glob("*refused*"))
    assert not list(here.glob(".*"))
    return told[0]


def spoil_nothing(parts: Path) -> None:
    del parts


def take_away(parts: Path) -> None:
    shutil.rmtree(parts / "2")


def shorten(parts: Path) -> None:
    document = parts / "2" / "fold.json"
    document.write_text(document.read_text()[:-10])


def forget(parts: Path) -> None:
    (parts / "2" / "provenance.json").unlink()


def swap(parts: Path) -> None:
    (parts / "2").rename(parts / "aside")
    (parts / "3").rename(parts / "2")
    (parts / "aside").rename(parts / "3")


def put_a_survey(parts: Path) -> None:
    shutil.rmtree(parts / "2")
    assert main(["survey", "s.fa", "--output", str(parts / "2")]) == 0


def revise_sequence(parts: Path) -> None:
    fasta = parts.parent / "s.fa"
    letters = fasta.read_text()
    fasta.write_text(letters[:-2] + ("C" if letters[-2] != "C" else "G") + "\n")


def revise_labels(parts: Path) -> None:
    bed = parts.parent / "truth.bed"
    bed.write_text("".join(bed.read_text().splitlines(keepends=True)[1:]))


@pytest.mark.parametrize(
    ("name", "spoil", "options", "told"),
    [
        ("blind", take_away, "", "2: is missing; make it by hmmseg fold"),
        ("blind", shorten, "", "2: damaged; remove it and make it by hmmseg fold --fold 2"),
        ("labelled", forget, "", "2: damaged; remove it and make it by hmmseg fold --fold 2"),
        ("labelled", swap, "", "2: made with another fold; remove it"),
        ("blind", put_a_survey, "", "2: made with another command; remove it"),
        ("blind", revise_sequence, "", "1: made with another s.fa; remove it"),
        ("labelled", revise_labels, "", "1: made with another truth.bed; remove it"),
        ("blind", spoil_nothing, "--seed 2", "1: made with another seed; remove it"),
        ("blind", spoil_nothing, "--states 3", "1: made with another states; remove it"),
        ("labelled", spoil_nothing, "--decoder posterior", "1: made with another decoder"),
        ("labelled", spoil_nothing, "--folds 4", "1: made with another folds; remove it"),
    ],
)  # fmt: skip
def test_parts_that_are_not_those(
    name: str, spoil: Callable[[Path], None], options: str, told: str, here: Path,
    capsys: pytest.CaptureFixture[str],
) -> None:  # fmt: skip
    spoil(here / name)
    before = files(here)
    capsys.readouterr()
    code = compare("refused", *LABELS[name], "--parts", name, *options.split())
    assert f"hmmseg: {name}/{told}" in refused(here, capsys, 1, code)
    assert files(here) == before


def test_parts_with_labels_are_not_those_without(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert "another" in refused(here, capsys, 1, compare("refused", "--parts", "labelled"))


def test_parts_need_sequence_in_a_file(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    with (here / "s.fa").open() as sequence, pytest.MonkeyPatch.context() as patch:
        patch.setattr("sys.stdin", sequence)
        code = compare("refused", "--parts", "blind", fasta="-")
    assert "standard input leaves no checksum" in refused(here, capsys, 2, code)


@pytest.mark.parametrize(
    ("number", "options", "code", "told"),
    [
        (4, "", 2, "there is no fold 4 of 3; give --fold 1 to 3"),
        (0, "", 2, "--fold"),
        (1, "--folds 7 --split contigs", 1, "6 contigs cannot make 7 folds"),
        (1, "--label rich", 2, "--order and --label belong to --labels"),
        (1, "--labels one.bed --order 0", 1,
         "one.bed: with fold 1 held out, the labels leave one class only"),
    ],
)  # fmt: skip
def test_folds_that_cannot_be(
    number: int, options: str, code: int, told: str, here: Path,
    capsys: pytest.CaptureFixture[str],
) -> None:  # fmt: skip
    (here / "one.bed").write_text("c0\t100\t600\n")
    called = fold(number, "refused", *options.split())
    assert told in refused(here, capsys, code, called)


def test_an_earlier_fold_stays(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = files(here / "blind")
    assert fold(1, "blind/2") == 1
    assert "--force" in capsys.readouterr().err
    assert files(here / "blind") == before
