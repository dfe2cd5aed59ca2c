"""The selection of a model through the command line: whole, in parts, and when it cannot be."""

import json
from pathlib import Path
from xml.etree import ElementTree

import numpy as np
import pytest

from hmmseg.cli import main


@pytest.fixture(scope="module")
def here(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with a genome of two GC levels, and one too small to judge."""
    folder = tmp_path_factory.mktemp("select")
    random = np.random.default_rng(3)
    gc = np.repeat(np.tile([0.3, 0.65], 20), 800)
    strong = random.random(len(gc)) < gc
    bases = np.where(strong, random.choice(list("CG"), len(gc)), random.choice(list("AT"), len(gc)))
    (folder / "two.fa").write_text(f">r\n{''.join(bases)}\n")
    (folder / "small.fa").write_text(f">r\n{''.join(bases[:9000])}\n")
    grid = ["select", str(folder / "two.fa"), "--states", "1-2", "--orders", "0,1"]
    assert main([*grid, "--tolerance", "1e-6", "--output", str(folder / "whole")]) == 0
    return folder


def test_table_picture_and_recommendation(here: Path) -> None:
    document = json.loads((here / "whole" / "selection.json").read_text())
    assert document["recommended"]["states"] == 2
    assert document["recommended"]["order"] == 0
    assert "states 2 is the most that was tried" in document["recommended"]["caution"]
    rows = (here / "whole" / "selection.tsv").read_text().splitlines()
    assert [row.split("\t")[:2] for row in rows[1:]] == [
        ["1", "0"],
        ["1", "1"],
        ["2", "0"],
        ["2", "1"],
    ]
    assert "recommended" in rows[3]
    total = sum(block["bases"] for block in document["blocks"])
    for model in document["models"]:
        assert model["held_out_bits_per_base"] == pytest.approx(sum(model["held_out_bits"]) / total)
    picture = (here / "whole" / "selection.svg").read_text()
    ElementTree.fromstring(picture)
    assert "held-out bits per base" in picture
    assert "2 states" in picture
    assert main(["verify", str(here / "whole")]) == 0


def test_parts_put_together_are_the_whole(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    parts = []
    for states in "12":
        for order in "01":
            parts.append(str(here / f"part-{states}-{order}"))
            cell = ["select", str(here / "two.fa"), "--states", states, "--orders", order]
            threads = ["--threads", states]
            assert main([*cell, "--tolerance", "1e-6", *threads, "--output", parts[-1]]) == 0
    assert main(["recommend", *reversed(parts), "--output", str(here / "joined")]) == 0
    assert "recommended: 2 states, order 0" in capsys.readouterr().out
    for name in ("selection.json", "selection.tsv", "selection.svg"):
        assert (here / "joined" / name).read_bytes() == (here / "whole" / name).read_bytes()


def test_too_small_a_genome_is_said_to_be(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    words = ["select", str(here / "small.fa"), "--states", "1", "--orders", "0"]
    assert main([*words, "--output", str(here / "small")]) == 0
    out = capsys.readouterr().out
    assert "not assessable: 3 blocks of 2,500 bases" in out
    assert out.splitlines()[-1].startswith("recommended: not assessable")
    assert not (here / "small" / "selection.svg").exists()
    assert main(["verify", str(here / "small")]) == 0


def test_parts_of_other_sequence_are_refused(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    words = ["select", str(here / "two.fa"), "--states", "1", "--orders", "2"]
    assert main([*words, "--folds", "4", "--output", str(here / "other")]) == 0
    joined = ["--output", str(here / "never")]
    assert main(["recommend", str(here / "whole"), str(here / "other"), *joined]) == 1
    assert "its blocks are not those of" in capsys.readouterr().err
    assert main(["recommend", str(here / "whole"), str(here / "whole"), *joined]) == 1
    assert "are in an earlier folder" in capsys.readouterr().err
    assert main(["recommend", str(here), *joined]) == 1
    assert "give a folder written by select" in capsys.readouterr().err
    assert not (here / "never").exists()


@pytest.mark.parametrize(
    ("words", "told"),
    [
        (["--states", "0-2"], "not within 1 to 8"),
        (["--states", "3-2"], "not within 1 to 8"),
        (["--orders", "0-9"], "not within 0 to 8"),
        (["--orders", "a"], "is not like 1-3 or 0,2,4"),
    ],
)
def test_grids_that_are_none(
    here: Path, capsys: pytest.CaptureFixture[str], words: list[str], told: str
) -> None:
    assert main(["select", str(here / "two.fa"), *words, "--output", str(here / "never")]) == 2
    assert told in capsys.readouterr().err
