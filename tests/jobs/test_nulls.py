"""Null sequence drawn in parts gives the same calibration; parts that do not fit are refused."""

import json
import shutil
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hmmseg.cli import main
from hmmseg.jobs.null_sequence import part_numbers
from tests.jobs.test_calibrate import files_of, run

PROVENANCE = "provenance.json"
BASES = ["--null-bases", "150000"]


def drawn(made: Path, folder: Path, of: int, *words: str, model: str = "model") -> list[str]:
    """Prepare null sequence and draw it in parts; return the options that calibrate needs then."""
    calls = "calls" if model == "model" else "own_calls"
    given = [str(made / "a.fa"), "--model", str(made / f"{model}.json")]
    where = ["--calls", str(made / calls), "--output", str(folder / "nulls")]
    assert main(["nulls", *given, *where, *BASES, *words]) == 0
    for part in range(1, of + 1):
        numbers = ["--part", str(part), "--of", str(of), "--output", str(folder / f"parts/{part}")]
        assert main(["replicate", str(folder / "nulls"), *numbers]) == 0
    return ["--nulls", str(folder / "nulls"), "--parts", str(folder / "parts")]


def bytes_of(folder: Path) -> dict[str, bytes]:
    """Return all files but the provenance, which names the parts."""
    return {name: data for name, data in files_of(folder).items() if name != PROVENANCE}


@pytest.mark.parametrize(
    ("of", "model", "words"),
    [
        (4, "model", ["--seed", "7"]),
        # More parts than there is to do, so that some are empty.
        (15, "model", ["--null", "background", "--no-others"]),
        (2, "own", ["--no-others"]),
        (3, "own", ["--no-null-refit", "--null", "chain"]),
    ],
)
def test_parts_give_what_one_job_gives(
    made: Path,
    tmp_path: Path,
    of: int,
    model: str,
    words: list[str],
) -> None:
    calls = {"model": model, "calls": "calls" if model == "model" else "own_calls"}
    assert run(made, tmp_path / "one", *BASES, *words, **calls) == 0
    parts = drawn(made, tmp_path, of, *words, model=model)
    assert run(made, tmp_path / "many", *BASES, *words, *parts, **calls) == 0
    assert bytes_of(tmp_path / "one") == bytes_of(tmp_path / "many")
    assert main(["verify", str(tmp_path / "many")]) == 0
    document = json.loads((tmp_path / "many" / "calibration.json").read_text())
    assert document["null_refit"] == (model == "own" and "--no-null-refit" not in words)
    inputs = json.loads((tmp_path / "many" / PROVENANCE).read_text())["inputs"]
    # Of the calls, of the null sequence, and of each part.
    assert [one["name"] for one in inputs].count(PROVENANCE) == of + 2


def test_what_is_prepared_is_the_same_each_time_and_small(made: Path, tmp_path: Path) -> None:
    for name in ("a", "b"):
        drawn(made, tmp_path / name, 1)
    assert files_of(tmp_path / "a" / "nulls") == files_of(tmp_path / "b" / "nulls")
    assert files_of(tmp_path / "a" / "parts" / "1") == files_of(tmp_path / "b" / "parts" / "1")
    sizes = [path.stat().st_size for path in (tmp_path / "a" / "nulls").iterdir()]
    assert sum(sizes) < (made / "a.fa").stat().st_size / 2


@pytest.mark.parametrize(
    ("change", "told"),
    [
        ("missing", "parts/2: is missing; make it by hmmseg replicate --part 2 --of 3"),
        ("none", "parts/1: is missing; make it by hmmseg replicate --part 1 --of 1"),
        ("damaged", "parts/2: damaged; remove it and make it by hmmseg replicate --part 2"),
        ("odd", "parts/1: damaged; remove it"),
        ("of none", "parts/1: made with another of; remove it"),
        ("other number", "parts/2: made with another part; remove it and make it by hmmseg"),
        ("other null sequence", "parts/1: made with another provenance.json; remove it"),
        ("other seed", "nulls: made with another seed; remove it and make it by hmmseg nulls"),
        ("other calls", "nulls: made with another provenance.json; remove it and make it by"),
        ("changed calls", "calls: changed since these calls were made; make them anew"),
        ("damaged null sequence", "nulls: damaged; remove it and make it by hmmseg nulls"),
        ("no null sequence", "is elsewhere a result?; make it by hmmseg nulls"),
    ],
)
def test_parts_that_do_not_fit_are_refused(
    made: Path,
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
    change: str,
    told: str,
) -> None:
    words = drawn(made, tmp_path, 3)
    parts, calls = tmp_path / "parts", "calls"
    match change:
        case "missing":
            shutil.rmtree(parts / "2")
        case "none":
            shutil.rmtree(parts)
        case "damaged":
            (parts / "2" / "regions.npz").write_bytes(b"nothing")
        case "odd" | "of none":
            shutil.rmtree(parts / "2")
            shutil.rmtree(parts / "3")
            path = parts / "1" / PROVENANCE
            document = json.loads(path.read_text())
            document["parameters"] = {"part": 1, "of": 0} if change == "of none" else None
            path.write_text(json.dumps(document))
        case "other number":
            shutil.rmtree(parts / "2")
            shutil.copytree(parts / "3", parts / "2")
        case "other null sequence":
            shutil.rmtree(tmp_path / "nulls")
            drawn(made, tmp_path / "other", 1, "--seed", "2")
            shutil.move(tmp_path / "other" / "nulls", tmp_path / "nulls")
            words += ["--seed", "2"]
        case "other seed":
            words += ["--seed", "2"]
        case "other calls":
            calls = "own_calls"
        case "changed calls":
            shutil.copytree(made / "calls", tmp_path / "calls")
            table = tmp_path / "calls" / "regions.tsv"
            table.write_text(
                table.read_text().replace("island_1", "island_0").replace("rich_1\t", "rich_0\t")
            )
            calls = str(tmp_path / "calls")
        case "no null sequence":
            words[1] = "elsewhere"
        case "damaged null sequence":
            with (tmp_path / "nulls" / "assembly.npz").open("ab") as file:
                file.write(b"0")
    capsys.readouterr()
    assert run(made, tmp_path / "out", *BASES, *words, calls=calls) == 1
    (line,) = capsys.readouterr().err.splitlines()
    assert told in line
    assert line.startswith("hmmseg: ")
    assert not (tmp_path / "out").exists()


def test_a_call_at_fault_is_told(
    made: Path,
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert run(made, tmp_path / "out", "--parts", str(tmp_path)) == 2
    assert "--nulls and --parts belong together" in capsys.readouterr().err
    out = ["--output", str(tmp_path / "out")]
    assert main(["replicate", str(tmp_path), "--part", "3", "--of", "2", *out]) == 2
    assert "--part 3 is beyond --of 2" in capsys.readouterr().err
    assert main(["replicate", str(made / "calls"), "--part", "1", "--of", "2", *out]) == 1
    assert "calls: made by decode; give a folder written by nulls" in capsys.readouterr().err
    drawn(made, tmp_path, 0)
    (tmp_path / "nulls" / "assembly.npz").write_bytes(b"")
    assert main(["replicate", str(tmp_path / "nulls"), "--part", "1", "--of", "2", *out]) == 1
    assert "nulls: damaged; remove it and make it again by hmmseg" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


@given(
    sizes=st.lists(st.integers(1, 1_000), min_size=1, max_size=20),
    nulls=st.integers(1, 3),
    of=st.integers(1, 50),
)
def test_parts_are_alike_and_together_everything(sizes: list[int], nulls: int, of: int) -> None:
    bases = np.array(sizes)
    parts = part_numbers(bases, nulls, of).ravel()
    assert (np.diff(parts) >= 0).all()
    assert 1 == parts[0] <= parts[-1] <= of
    most = np.bincount(parts, np.tile(bases, nulls)).max()
    assert most < nulls * bases.sum() / of + bases.max()
