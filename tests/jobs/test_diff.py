"""Two results compared: a revised assembly, a revised model, and what is no result."""

import csv
import json
from pathlib import Path

import pytest

from hmmseg.cli import main
from tests.jobs.test_batches import drawn
from tests.test_cli import MODEL

COMPLEMENT = str.maketrans("ACGT", "TGCA")


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with a model and the calls of an assembly."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "model.json").write_text(json.dumps(MODEL))
    called("old", {f"record_{number}": drawn(number) for number in range(6)})
    return tmp_path


def called(name: str, records: dict[str, str]) -> None:
    Path(f"{name}.fa").write_text("".join(f">{key}\n{text}\n" for key, text in records.items()))
    decode = ["decode", f"{name}.fa", "--model", "model.json", "--output", f"{name}/calls"]
    assert main(decode) == 0


def rows(path: str) -> list[dict[str, str]]:
    with Path(path).open(newline="") as file:
        return list(csv.DictReader(file, delimiter="\t"))


def test_a_revision(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = drawn(2)
    called(
        "new",
        {
            "record_1": drawn(1)[::-1].translate(COMPLEMENT),
            "first": drawn(0),
            "record_2": text[:1500] + "ACGTACGT" + text[1500:],
            "record_3": drawn(3),
            "record_5": drawn(5),
            "extra": drawn(9),
        },
    )
    capsys.readouterr()
    # A result folder serves as well as its calls.
    assert main(["diff", "old", "new/calls", "--output", "diff"]) == 0
    said = capsys.readouterr().out
    found = {
        (row["status"], row["old_record"], row["new_record"]) for row in rows("diff/records.tsv")
    }
    assert found == {
        ("renamed", "record_0", "first"),
        ("reversed", "record_1", "record_1"),
        ("changed", "record_2", "record_2"),
        ("same", "record_3", "record_3"),
        ("removed", "record_4", "NA"),
        ("same", "record_5", "record_5"),
        ("added", "NA", "extra"),
    }
    by_record: dict[str, set[str]] = {}
    for row in rows("diff/regions.tsv"):
        by_record.setdefault(row["record_status"], set()).add(row["status"])
    assert by_record["same"] == by_record["renamed"] == by_record["reversed"] == {"kept"}
    assert "kept" in by_record["changed"]
    assert by_record["added"] == {"gained"}
    assert by_record["removed"] == {"lost"}
    document = json.loads(Path("diff/diff.json").read_text())
    assert said == document["statement"] + "\n"
    assert "Of 6 records 2 are the same, 1 is renamed, 1 is reversed, 1 is changed" in said
    for side, column in (("old", "old_region"), ("new", "new_region")):
        told = [row[column] for row in rows("diff/regions.tsv") if row[column] != "NA"]
        called_regions = [row["region_id"] for row in rows(f"{side}/calls/regions.tsv")]
        assert sorted(told) == sorted(called_regions)
    assert main(["verify", "diff"]) == 0


def test_another_model(here: Path) -> None:
    weaker = [{**MODEL["states"][0]}, {**MODEL["states"][1], "joint": [0.22, 0.28, 0.28, 0.22]}]
    Path("model.json").write_text(json.dumps({**MODEL, "states": weaker}))
    called("new", {f"record_{number}": drawn(number) for number in range(6)})
    assert main(["diff", "old", "new", "--output", "diff"]) == 0
    document = json.loads(Path("diff/diff.json").read_text())
    assert document["records"]["same"] == 6
    assert document["regions"]["rich"]["moved"] > 0
    bases = document["region_bases"]
    assert 0 < bases["shared"] <= min(bases["old"], bases["new"])


def test_a_result_and_itself(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    capsys.readouterr()
    assert main(["diff", "old", "old", "--output", "diff"]) == 0
    assert "0 moved and 0 are lost; 0 are gained" in capsys.readouterr().out


def test_what_is_no_result_is_refused(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("empty").mkdir()
    capsys.readouterr()
    assert main(["diff", "old", "empty", "--output", "diff"]) == 1
    assert capsys.readouterr().err.startswith("hmmseg: empty/records.tsv: cannot be read")
    assert not Path("diff").exists()
