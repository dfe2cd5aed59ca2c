"""The command ``report``: what it writes, the same bytes, and what it refuses."""

import base64
import html
import json
import re
import shutil
import subprocess
import sys
import zlib
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pyBigWig
import pytest

from hmmseg.cli import main
from hmmseg.provenance import read_provenance
from hmmseg.report import where
from hmmseg.report.methods import CAUTION
from hmmseg.tracks.table import read_regions_table
from tests.report.folders import HOSTILE, ROOT, calibrate, called, small_assembly


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Results with a calibration."""
    top = tmp_path_factory.mktemp("report")
    folder = called(top / "small", small_assembly(top / "assembly.fa"))
    calibrate(folder)
    return folder


@pytest.fixture
def folder(made: Path, tmp_path: Path) -> Path:
    return Path(shutil.copytree(made, tmp_path / "small"))


def page_of(folder: Path, *words: str) -> str:
    output = folder.parent / "page.html"
    assert main(["report", str(folder), "--output", str(output), "--force", *words]) == 0
    return output.read_text(encoding="utf-8")


class _Text(HTMLParser):
    """Text and elements of a page, its data and program left out."""

    def __init__(self) -> None:
        super().__init__()
        self.text: list[str] = []
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self._within = ""

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        self._within = tag

    def handle_endtag(self, tag: str) -> None:
        self._within = ""

    def handle_data(self, data: str) -> None:
        if self._within not in ("script", "style"):
            self.text.append(data)


def parsed(page: str) -> _Text:
    reader = _Text()
    reader.feed(page)
    return reader


def test_same_inputs_same_bytes_in_another_process(folder: Path, tmp_path: Path) -> None:
    one = page_of(folder, "--figures", str(tmp_path / "figures"))
    other = tmp_path / "other.html"
    figures = tmp_path / "more"
    subprocess.run(
        [sys.executable, "-m", "hmmseg", "report", folder, "--output", other, "--figures", figures],
        check=True, capture_output=True, cwd=ROOT,
        env={"PYTHONHASHSEED": "7", "PATH": "/usr/bin:/bin", "HOME": str(tmp_path),
             "PYTHONPATH": str(ROOT)},
    )  # fmt: skip
    assert other.read_text(encoding="utf-8") == one
    for path in sorted((tmp_path / "figures").iterdir()):
        assert (figures / path.name).read_bytes() == path.read_bytes(), path.name


def test_provenance_names_what_was_read(folder: Path) -> None:
    page_of(folder)
    found = read_provenance(folder.parent / "page.html")
    names = {entry["name"] for entry in found["inputs"]}
    assert {"regions.tsv", "model.json", "survey.json", "gc.bw", "lengths.tsv"} <= names
    assert found["parameters"]["assemblies"] == ["small"]


def test_numbers_are_those_of_the_tracks(folder: Path) -> None:
    """Expected bases of each state by another reader of bigWig."""
    text = " ".join(" ".join(parsed(page_of(folder)).text).split())
    summary = json.loads((folder / "calls" / "summary.json").read_text())
    for state, numbers in summary["regions"].items():
        total = 0.0
        with pyBigWig.open(str(folder / "calls" / f"{state}.posterior.bw")) as track:
            for record, length in track.chroms().items():
                total += np.nansum(track.values(record, 0, length))
        share = 100 * total / summary["decoded_bases"]
        assert re.search(rf"{state} {numbers['count']:,} {numbers['bases']:,} ", text)
        assert f"{share:.1f} %" in text


def test_nothing_of_a_name_is_markup(folder: Path) -> None:
    page = page_of(folder)
    assert page.count("<script>alert(1)") == 0
    found = parsed(page)
    assert not [attrs for _, attrs in found.elements if "onerror" in attrs]
    assert sum(tag == "section" for tag, _ in found.elements) == 6
    # One of them is named in a table of records that do not fit.
    assert HOSTILE[1] in "".join(found.text)


def test_a_page_asks_for_nothing(folder: Path) -> None:
    """No attribute leads anywhere but into the page; the browser test listens, too."""
    for tag, attrs in parsed(page_of(folder)).elements:
        for key in ("src", "href", "action", "data", "srcset", "poster"):
            value = attrs.get(key)
            assert value is None or value.startswith(("#", "data:")), (tag, value[:80])


def test_stages_that_were_not_run_say_how(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The commands are real: each option stands in the help of its command."""
    for gone in ("calls", "calibration", "survey"):
        shutil.rmtree(folder / gone)
    page = page_of(folder)
    commands = [html.unescape(text) for text in re.findall(r"<code>hmmseg ([^<]*)</code>", page)]
    assert {command.split()[0] for command in commands} == {
        "decode", "select", "compare", "calibrate",
    }  # fmt: skip
    for command in commands:
        capsys.readouterr()
        assert main([command.split()[0], "--help"]) == 0
        told = capsys.readouterr().out
        options = re.findall(r"--[a-z-]+", command)
        assert options
        assert all(f"{option} " in told for option in options), command


def test_what_changed_since_an_earlier_version(folder: Path, tmp_path: Path) -> None:
    earlier = tmp_path / "earlier"
    fasta = small_assembly(tmp_path / "assembly.fa")
    decode = ["decode", str(fasta), "--model", str(folder / "model.json")]
    assert main([*decode, "--min-length", "800", "--output", str(earlier)]) == 0
    assert main(["diff", str(earlier), str(folder), "--output", str(folder / "diff")]) == 0
    said = json.loads((folder / "diff" / "diff.json").read_text())
    text = "".join(parsed(page_of(folder)).text)
    assert said["statement"] in text
    assert said["regions"]["island"]["gained"] > 3
    assert "Regions lost and gained" in text


def test_several_assemblies_side_by_side(folder: Path, tmp_path: Path) -> None:
    other = Path(shutil.copytree(folder, tmp_path / "<b>other&"))
    shutil.rmtree(other / "calibration")
    page_of(folder)
    (folder.parent / "page.html").rename(folder / "report.html")
    output = tmp_path / "all.html"
    call = ["report", str(folder), str(other), "--output", str(output)]
    assert main([*call, "--figures", str(tmp_path / "f")]) == 0
    page = output.read_text(encoding="utf-8")
    found = parsed(page)
    text = "".join(found.text)
    assert "<b>other&" in text
    assert not [tag for tag, _ in found.elements if tag == "b"]
    assert "1 of 2 assemblies were not calibrated" in text
    assert [a["href"] for t, a in found.elements if t == "a" and not a["href"].startswith("#")] == [
        "small/report.html"
    ]
    assert (tmp_path / "f" / "shares.svg").exists()
    assert main([*call, "--force"]) == 0
    assert output.read_text(encoding="utf-8") == page


def test_folders_of_one_name_are_told_apart(folder: Path, tmp_path: Path) -> None:
    other = Path(shutil.copytree(folder, tmp_path / "later" / "small"))
    output = tmp_path / "all.html"
    assert main(["report", str(folder), str(other), "--output", str(output)]) == 0
    assert "later/small" in output.read_text(encoding="utf-8")


def test_methods_say_what_was_done_and_cite_what_they_name(folder: Path) -> None:
    page = page_of(folder)
    paragraph = re.search(r'<p class="quote">([^<]*)</p>', page)
    assert paragraph is not None
    text = html.unescape(paragraph[1])
    model = json.loads((folder / "model.json").read_text())
    assert f"{len(model['states'])} states" in text
    assert "3 starts with seed 1" in text
    assert "chain" in text
    names = re.findall(r"([A-Z][a-z]+)(?: et al\.| & [A-Z][a-z]+)? (?:19|20)\d\d", text)
    assert len(names) >= 4
    references = page[page.index("References</h3>") :]
    for name in names:
        assert f"{name} " in references, name
    for entry in read_provenance(folder / "model.json")["inputs"]:
        assert entry["sha256"] in page


def test_caution_is_that_of_the_readme(folder: Path) -> None:
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    caution = readme.partition("## Caution")[2].strip().split("\n\n")[0]
    assert " ".join(caution.split()) == CAUTION
    assert CAUTION in html.unescape(page_of(folder))


def test_only_a_survey_gives_a_page(folder: Path, tmp_path: Path) -> None:
    for path in folder.iterdir():
        if path.name != "survey":
            shutil.rmtree(path) if path.is_dir() else path.unlink()
    found = parsed(page_of(folder))
    assert sum(tag == "section" for tag, _ in found.elements) == 6
    assert "There is no model yet." in "".join(found.text)


def test_without_gc_the_map_has_two_panels(folder: Path) -> None:
    (folder / "survey" / "gc.bw").unlink()
    assert '"gc":false' in page_of(folder)


def test_of_very_many_regions_the_surest_are_shown(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    table = read_regions_table(folder / "calls" / "regions.tsv")
    monkeypatch.setattr(where, "MOST_ROWS", 5)
    page = page_of(folder)
    assert f'"left_out":{len(table) - 5}' in page
    content = re.search(r'id="regions-data">([^<]*)<', page)
    assert content is not None
    ids = zlib.decompress(base64.b64decode(content[1])).decode().split("\x1e")[0].split("\n")
    surest = table.sort_values("log_odds_bits", ascending=False)["region_id"].head(5)
    assert sorted(ids) == sorted(surest)


def test_figures_are_files(folder: Path, tmp_path: Path) -> None:
    page_of(folder, "--figures", str(tmp_path / "figures"))
    names = {path.name for path in (tmp_path / "figures").iterdir()}
    assert {
        "null-island.svg",
        "null-island.png",
        "reliability.svg",
        "training.svg",
        "overview.png",
    } <= names
    for path in (tmp_path / "figures").glob("*.svg"):
        text = path.read_text(encoding="utf-8")
        assert "<script" not in text
        assert "dc:date" not in text


@pytest.mark.parametrize(
    ("name", "content", "told"),
    [
        ("survey/survey.json", "{", "cannot be read"),
        ("survey/survey.json", "[]", "not a document"),
        ("calls/summary.json", "nothing", "cannot be read"),
        ("calls/regions.tsv", "a\tb\n", "header"),
        ("model.json", "{}", "model.json: format"),
    ],
)
def test_damaged_files_are_named(
    folder: Path, capsys: pytest.CaptureFixture[str], name: str, content: str, told: str
) -> None:
    (folder / name).write_text(content, encoding="utf-8")
    capsys.readouterr()
    output = folder.parent / "page.html"
    assert main(["report", str(folder), "--output", str(output)]) == 1
    error = capsys.readouterr().err
    assert error.startswith("hmmseg: ")
    assert error.count("\n") == 1
    assert told in error
    assert not list(folder.parent.glob("*page*"))


def test_a_calibration_of_other_calls_is_left_out(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = folder / "calibration" / "regions.tsv"
    lines = path.read_text(encoding="utf-8").splitlines()
    path.write_text("\n".join(lines[:-1]) + "\n", encoding="utf-8")
    capsys.readouterr()
    text = "".join(parsed(page_of(folder)).text)
    assert "this calibration out" in capsys.readouterr().err
    assert "No test says yet" in text
    assert "reliability" not in text


def test_another_model_beside_the_calls_is_told(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    shutil.copy(ROOT / "demo_data" / "model.json", folder / "model.json")
    capsys.readouterr()
    page_of(folder)
    assert "not the model that made the calls" in capsys.readouterr().err


def test_refusals(folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    page_of(folder)
    capsys.readouterr()
    output = str(folder.parent / "page.html")
    assert main(["report", str(folder), "--output", output]) == 1
    assert "give --force" in capsys.readouterr().err
    assert main(["report", str(tmp_path / "absent"), "--output", str(tmp_path / "x.html")]) == 1
    assert "no such folder" in capsys.readouterr().err
    (tmp_path / "empty").mkdir()
    assert main(["report", str(tmp_path / "empty"), "--output", str(tmp_path / "x.html")]) == 1
    assert "holds none of survey" in capsys.readouterr().err
    assert main(["report", str(folder), str(folder), "--output", str(tmp_path / "x.html")]) == 2
    assert "stands twice" in capsys.readouterr().err
