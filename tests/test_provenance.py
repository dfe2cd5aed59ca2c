"""Provenance: what made a result, in the same bytes every time."""

import hashlib
import json
import os
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import hmmseg
from hmmseg.errors import OutputError
from hmmseg.provenance import (
    difference,
    origin,
    provenance_path,
    read_provenance,
    write_provenance,
)


def make_run(root: Path) -> Path:
    """Make a result folder and its inputs below `root`, with its provenance."""
    root.mkdir(parents=True, exist_ok=True)
    (root / "genome.fa").write_bytes(b">a\nACGT\n")
    (root / "model.json").write_bytes(b"{}")
    result = root / "out"
    (result / "sub").mkdir(parents=True)
    (result / "regions.bed").write_bytes(b"a\t0\t4\n")
    (result / "sub" / "x.tsv").write_bytes(b"")
    parameters = {
        "min_length": np.int64(200),
        "threshold": np.float64(0.1),
        "decoder": "path",
        "model": root / "model.json",
        "circular": ("a", "b"),
        "names": frozenset({"z", "y"}),
        "levels": np.array([0.5, 1.0]),
        "nested": {"path": root / "genome.fa", "none": None, "yes": True},
        "threads": 7,
        "output": str(result),
        "force": True,
    }
    inputs = [root / "genome.fa", root / "model.json"]
    outputs = [result / "regions.bed", result / "sub" / "x.tsv"]
    write_provenance(result, "decode", parameters, 7, inputs, outputs)
    return result


def test_the_document(tmp_path: Path) -> None:
    document = json.loads((make_run(tmp_path) / "provenance.json").read_bytes())
    software = document.pop("software")
    assert software["hmmseg"] == hmmseg.__version__
    assert software["numpy"] == np.__version__
    assert {"python", "numba", "biopython", "zlib"} <= set(software)
    sha = {text: hashlib.sha256(text).hexdigest() for text in (b">a\nACGT\n", b"{}", b"")}
    bed = b"a\t0\t4\n"
    assert document == {
        "format": "hmmseg-provenance",
        "version": 1,
        "command": "decode",
        "parameters": {
            "min_length": 200,
            "threshold": 0.1,
            "decoder": "path",
            "model": "model.json",
            "circular": ["a", "b"],
            "names": ["y", "z"],
            "levels": [0.5, 1.0],
            "nested": {"path": "genome.fa", "none": None, "yes": True},
        },
        "seed": 7,
        "inputs": [
            {"name": "genome.fa", "sha256": sha[b">a\nACGT\n"], "bytes": 8},
            {"name": "model.json", "sha256": sha[b"{}"], "bytes": 2},
        ],
        "outputs": [
            {"name": "regions.bed", "sha256": hashlib.sha256(bed).hexdigest(), "bytes": 6},
            {"name": "sub/x.tsv", "sha256": sha[b""], "bytes": 0},
        ],
    }


def test_the_same_bytes_elsewhere_and_later(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    first = make_run(tmp_path / "here") / "provenance.json"
    monkeypatch.setenv("TZ", "Pacific/Chatham")
    monkeypatch.chdir(tmp_path)
    second = make_run(Path("there") / "deeper") / "provenance.json"
    os.utime(second, (0, 0))
    assert first.read_bytes() == second.read_bytes()
    assert str(tmp_path).encode() not in first.read_bytes()


def test_of_a_file(tmp_path: Path) -> None:
    model = tmp_path / "island.v2.json"
    model.write_bytes(b"{}")
    write_provenance(model, "train", {}, None, ["-"], [model])
    assert provenance_path(model) == tmp_path / "island.v2.provenance.json"
    document = read_provenance(model)
    assert document["seed"] is None
    assert document["inputs"] == [{"name": "-", "sha256": None, "bytes": None}]
    assert [entry["name"] for entry in document["outputs"]] == ["island.v2.json"]
    assert sorted(path.name for path in tmp_path.iterdir()) == [
        "island.v2.json",
        "island.v2.provenance.json",
    ]


def test_an_earlier_one_is_replaced(tmp_path: Path) -> None:
    result = make_run(tmp_path)
    write_provenance(result, "survey", {}, None, [], [])
    assert read_provenance(result)["command"] == "survey"


def test_outputs_lie_in_the_folder(tmp_path: Path) -> None:
    result = make_run(tmp_path)
    with pytest.raises(OutputError, match=r"genome\.fa is not part of the result"):
        write_provenance(result, "decode", {}, None, [], [tmp_path / "genome.fa"])


def test_nan_is_no_parameter(tmp_path: Path) -> None:
    result = make_run(tmp_path)
    before = (result / "provenance.json").read_bytes()
    with pytest.raises(ValueError, match="not JSON compliant"):
        write_provenance(result, "decode", {"x": float("nan")}, None, [], [])
    assert (result / "provenance.json").read_bytes() == before


def entry(**changed: Any) -> dict[str, Any]:
    return {"name": "a", "sha256": "0", "bytes": 1} | changed


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"format": "other"}, 'expected "format": "hmmseg-provenance"'),
        ({"version": 2}, "version 2 is not known"),
        ({"date": "today"}, "keys are missing or not known: date"),
        ({"outputs": {}}, '"outputs" is not a list of name, sha256 and bytes'),
        ({"inputs": [entry(name=1)]}, '"inputs" is not a list'),
        ({"inputs": [entry(sha256=1)]}, '"inputs" is not a list'),
        ({"outputs": [entry(bytes="1")]}, '"outputs" is not a list'),
        ({"outputs": [entry(more=1)]}, '"outputs" is not a list'),
        ({"outputs": ["a"]}, '"outputs" is not a list'),
    ],
)
def test_reading_checks_the_form(tmp_path: Path, changes: dict[str, Any], message: str) -> None:
    result = make_run(tmp_path)
    document = read_provenance(result) | changes
    (result / "provenance.json").write_text(json.dumps(document))
    with pytest.raises(OutputError, match=message):
        read_provenance(result)


@pytest.mark.parametrize("content", [b"", b"{", b"\xff\xfe", b"[]"])
def test_reading_what_is_no_document(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "provenance.json").write_bytes(content)
    with pytest.raises(OutputError, match=r"provenance\.json: (not valid JSON|expected)"):
        read_provenance(tmp_path)


def test_reading_what_is_not_there(tmp_path: Path) -> None:
    nowhere = tmp_path / "nowhere"
    with pytest.raises(OutputError, match=rf"^{nowhere} does not exist; is {nowhere} a result\?"):
        read_provenance(nowhere)
    with pytest.raises(OutputError, match=r"provenance\.json does not exist; is .* a result\?"):
        read_provenance(tmp_path)


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({}, None),
        ({"threads": 9, "output": "elsewhere"}, None),
        ({"min_length": 201}, "min_length"),
        ({"more": None}, "more"),
    ],
)
def test_difference_names_a_parameter(
    tmp_path: Path, changes: dict[str, Any], told: str | None
) -> None:
    found = read_provenance(make_run(tmp_path))
    inputs = [tmp_path / "genome.fa", tmp_path / "model.json"]
    expected = origin("decode", {**found["parameters"], **changes}, 7, inputs)
    assert difference(found, expected) == told


def test_difference_names_what_else_is_not_the_same(tmp_path: Path) -> None:
    found = read_provenance(make_run(tmp_path))
    inputs = [tmp_path / "genome.fa", tmp_path / "model.json"]
    for command, seed, told in (("train", 7, "command"), ("decode", 8, "seed")):
        assert difference(found, origin(command, found["parameters"], seed, inputs)) == told
    few = origin("decode", found["parameters"], 7, inputs[:1])
    assert difference(found, few) == "inputs"
    inputs[1].write_bytes(b"[]")
    assert difference(found, origin("decode", found["parameters"], 7, inputs)) == "model.json"
    other = {**found, "software": {**found["software"], "numpy": "0"}}
    assert difference(other, origin("decode", found["parameters"], 7, inputs)) == "software"
    fewer = {key: value for key, value in found["parameters"].items() if key != "decoder"}
    assert difference(found, {**found, "parameters": fewer}) == "decoder"
