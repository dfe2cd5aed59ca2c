"""A model taken as it is: the same bytes, or a refusal."""

import json
from pathlib import Path

import pytest

from hmmseg.cli import main
from tests.test_cli import MODEL


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with a model written as a person would, on few lines."""
    monkeypatch.chdir(tmp_path)
    Path("model.json").write_text(json.dumps(MODEL))
    return tmp_path


def test_a_model_is_copied_byte_by_byte(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["adopt", "model.json", "--output", "of_mine/model.json"]) == 0
    assert capsys.readouterr().out == "order 0; states: plain, rich\n"
    assert Path("of_mine/model.json").read_bytes() == Path("model.json").read_bytes()
    origin = json.loads(Path("of_mine/model.provenance.json").read_text())
    assert origin["command"] == "adopt"
    assert origin["inputs"][0]["sha256"] == origin["outputs"][0]["sha256"]
    assert main(["adopt", "model.json", "--output", "of_mine/model.json"]) == 1


def test_what_is_no_model_is_refused(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("model.json").write_text(json.dumps({**MODEL, "transitions": [[1.0, 1.0], [0.5, 0.5]]}))
    assert main(["adopt", "model.json", "--output", "copy.json"]) == 1
    assert "transitions" in capsys.readouterr().err
    assert not Path("copy.json").exists()
