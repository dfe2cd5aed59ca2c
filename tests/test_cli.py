"""The command line as a user meets it: results, exit codes, and one clear line for bad input."""

import gzip
import json
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from hmmseg.cli import cli, main

MODEL: dict[str, Any] = {
    "format": "hmmseg-model",
    "version": 1,
    "order": 0,
    "symmetric": True,
    "start": "stationary",
    "states": [
        {"name": "plain", "reported": False, "joint": [0.35, 0.15, 0.15, 0.35]},
        {"name": "rich", "reported": True, "joint": [0.15, 0.35, 0.35, 0.15]},
    ],
    "transitions": [[0.995, 0.005], [0.01, 0.99]],
}


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with a model and some sequence."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "model.json").write_text(json.dumps(MODEL))
    random = np.random.default_rng(5)
    records = []
    for number in range(3):
        gc = np.repeat(random.choice([0.3, 0.7], 20), 200)
        strong = random.random(4000) < gc
        bases = np.where(strong, random.choice(list("CG"), 4000), random.choice(list("AT"), 4000))
        records.append(f">record_{number + 1}\n{''.join(bases)}\n")
    (tmp_path / "some.fa").write_text("".join(records))
    return tmp_path


def lines_of(capsys: pytest.CaptureFixture[str]) -> tuple[list[str], list[str]]:
    captured = capsys.readouterr()
    return captured.out.splitlines(), captured.err.splitlines()


@pytest.mark.parametrize("command", list(cli.commands))
def test_help(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([command, "--help"]) == 0
    out, err = lines_of(capsys)
    assert out[0].startswith(f"Usage: hmmseg {command} ")
    assert err == []


def test_whole_job(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["survey", "some.fa", "--output", "survey"]) == 0
    assert main(["train", "some.fa", "--output", "own.json", "--restarts", "2"]) == 0
    out, _ = lines_of(capsys)
    assert out[-3].startswith("state\treported\tgc\tcpg_oe\texpected_length\tshare\t")
    assert main(["decode", "some.fa", "--model", "own.json", "--output", "calls"]) == 0
    for folder in ("survey", "calls"):
        assert main(["verify", folder]) == 0
    lines_of(capsys)
    assert main(["score", "some.fa", "--model", "own.json"]) == 0
    out, _ = lines_of(capsys)
    total = sum(float(line.split("\t")[2]) for line in out[1:])
    training = json.loads((here / "own.json").read_text())["training"]
    assert total == pytest.approx(training["log_likelihood"], rel=1e-12)
    assert training["log_likelihood"] == max(one["log_likelihood"] for one in training["restarts"])


def test_same_bytes_again_and_on_two_threads(here: Path) -> None:
    for name, threads in (("one", "1"), ("two", "2")):
        train = ["train", "some.fa", "--order", "1", "--restarts", "2", "--threads", threads]
        assert main([*train, "--output", f"{name}/model.json"]) == 0
        decode = ["decode", "some.fa", "--model", f"{name}/model.json", "--threads", threads]
        assert main([*decode, "--output", f"{name}/calls"]) == 0
    one, two = (
        {path.relative_to(here / name): path.read_bytes() for path in sorted(files)}
        for name in ("one", "two")
        for files in [[p for p in (here / name).rglob("*") if p.is_file()]]
    )
    assert len(one) > 8
    assert one == two


def test_simulated_truth_is_recovered(here: Path) -> None:
    simulate = ["simulate", "--model", "model.json", "--records", "2", "--length", "30000"]
    assert main([*simulate, "--seed", "3", "--output", "drawn"]) == 0
    decode = ["decode", "drawn/sequence.fa.gz", "--model", "model.json"]
    assert main([*decode, "--decoder", "posterior", "--output", "calls"]) == 0
    truth, found = (
        {
            (line.split("\t")[0], position)
            for line in path.read_text().splitlines()
            for position in range(int(line.split("\t")[1]), int(line.split("\t")[2]))
        }
        for path in (here / "drawn" / "truth.bed", here / "calls" / "regions.bed")
    )
    assert len(truth & found) > 0.7 * len(truth)
    assert len(truth & found) > 0.7 * len(found)


def test_nothing_is_overwritten_without_force(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    decode = ["decode", "some.fa", "--model", "model.json", "--output", "calls"]
    assert main(decode) == 0
    before = (here / "calls" / "regions.bed").read_bytes()
    lines_of(capsys)
    assert main(decode) == 1
    assert "--force" in lines_of(capsys)[1][0]
    assert main([*decode, "--force"]) == 0
    assert (here / "calls" / "regions.bed").read_bytes() == before


def broken_model(**changes: Any) -> bytes:
    return json.dumps({**MODEL, **changes}).encode()


def with_first_table(values: list[Any]) -> bytes:
    first, second = MODEL["states"]
    return broken_model(states=[{**first, "joint": values}, second])


BAD_SEQUENCE: dict[str, tuple[bytes, str]] = {
    "empty.fa": (b"", "empty"),
    "header.fa": (b"ACGT\nACGT\n", "header"),
    "none.fa": (b">one\n>two\nACGT\n", "one"),
    "nameless.fa": (b">\nACGT\n", "name"),
    "twice.fa": (b">one\nACGT\n>one\nACGT\n", "one"),
    "reads.fa": (b"@read\nACGT\n+\nIIII\n", "FASTQ"),
    "protein.fa": (b">one\nMKVLAA\n", "one"),
    "binary.fa": (b"\x00\x01\x02\x03" * 100, "binary"),
    "letter.fa": (b">one\nACGTACGT\nAC!T\n", "position 11"),
    "cut.fa.gz": (gzip.compress(b">one\n" + b"ACGT" * 10000)[:-20], "cut.fa.gz"),
    "plain.fa.gz": (b">one\nACGT\n", "gzip"),
    "gaps.fa": (b">one\n" + b"N" * 200 + b"\n", "known base outside gaps"),
}

BAD_MODELS: dict[str, tuple[bytes, str]] = {
    "text": (b"hello", "JSON"),
    "sum": (with_first_table([0.3, 0.3, 0.3, 0.3]), "states[0].joint: sums to 1.2"),
    "nan": (with_first_table([float("nan"), 0.5, 0.5, 0.0]), "states[0].joint[0]"),
    "negative": (with_first_table([-0.1, 0.6, 0.6, -0.1]), "states[0].joint[0]"),
    "shape": (with_first_table([0.5, 0.5]), "states[0].joint"),
    "version": (broken_model(version=99), "version"),
    "format": (broken_model(format="other"), "format"),
    "unknown key": (broken_model(colour="red"), "colour"),
    "row": (broken_model(transitions=[[0.9, 0.2], [0.1, 0.9]]), "transitions[0]"),
    "unbalanced": (with_first_table([0.4, 0.1, 0.2, 0.3]), "reverse complement"),
}


def fails_with_one_line(arguments: list[str], code: int, capsys: pytest.CaptureFixture[str]) -> str:
    before = sorted(Path().rglob("*"))
    lines_of(capsys)
    assert main(arguments) == code
    out, err = lines_of(capsys)
    problems = [line for line in err if not line.startswith("hmmseg: warning: ")]
    assert len(problems) == 1, err
    assert problems[0].startswith("hmmseg: ")
    assert "Traceback" not in problems[0]
    assert sorted(Path().rglob("*")) == before, "something was left behind"
    del out
    return problems[0]


Call = Callable[[str], list[str]]
CALLS: list[Call] = [
    lambda path: ["train", path, "--output", "new.json"],
    lambda path: ["decode", path, "--model", "model.json", "--output", "new"],
    lambda path: ["score", path, "--model", "model.json"],
]


@pytest.mark.parametrize("name", BAD_SEQUENCE)
@pytest.mark.parametrize("call", CALLS, ids=["train", "decode", "score"])
def test_bad_sequence(
    name: str, call: Call, here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    content, told = BAD_SEQUENCE[name]
    (here / name).write_bytes(content)
    assert told in fails_with_one_line(call(name), 1, capsys)


@pytest.mark.parametrize("name", BAD_MODELS)
def test_bad_model(name: str, here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    content, told = BAD_MODELS[name]
    (here / "bad.json").write_bytes(content)
    line = fails_with_one_line(
        ["decode", "some.fa", "--model", "bad.json", "--output", "new"], 1, capsys
    )
    assert "bad.json" in line
    assert told in line


BAD_CALLS: dict[str, tuple[list[str], str]] = {
    "no command": (["colour"], "colour"),
    "typo": (["train", "some.fa", "--output", "new.json", "--sates", "3"], "--states"),
    "no state": (["train", "some.fa", "--output", "new.json", "--states", "0"], "--states"),
    "nine states": (["train", "some.fa", "--output", "new.json", "--states", "9"], "--states"),
    "no output": (["train", "some.fa"], "--output"),
    "no file": (["train", "--output", "new.json"], "FASTA"),
    "threshold": (
        ["decode", "some.fa", "--model", "model.json", "--output", "new", "--threshold", "2"],
        "--threshold",
    ),
    "free and symmetric": (
        ["train", "some.fa", "--output", "new.json", "--start", "free"],
        "--stranded",
    ),
}


@pytest.mark.parametrize("name", BAD_CALLS)
def test_bad_call(name: str, here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    del here
    arguments, told = BAD_CALLS[name]
    assert told in fails_with_one_line(arguments, 2, capsys)


BAD_FILES: dict[str, tuple[list[str], str]] = {
    "missing sequence": (["train", "absent.fa", "--output", "new.json"], "absent.fa"),
    "missing model": (
        ["decode", "some.fa", "--model", "absent.json", "--output", "new"],
        "absent.json",
    ),
    "unwritable": (["train", "some.fa", "--output", "some.fa/new.json"], "some.fa"),
    "unknown record": (
        ["train", "some.fa", "--output", "new.json", "--records", "wrong.txt"],
        "wrong.txt:1",
    ),
    "outside": (["train", "some.fa", "--output", "new.json", "--exclude", "far.bed"], "far.bed:1"),
    "circle": (
        ["decode", "some.fa", "--model", "model.json", "--output", "new", "--circular", "x"],
        "record x",
    ),
    "nothing left": (
        ["train", "some.fa", "--output", "new.json", "--min-record", "9999"],
        "widen",
    ),
    "no result": (["verify", "absent"], "absent"),
}


@pytest.mark.parametrize("name", BAD_FILES)
def test_bad_file(name: str, here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (here / "wrong.txt").write_text("record_9\n")
    (here / "far.bed").write_text("record_1\t10\t99999\n")
    arguments, told = BAD_FILES[name]
    assert told in fails_with_one_line(arguments, 1, capsys)


def test_record_of_gaps_is_skipped_with_a_warning(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (here / "gaps.fa").write_text(f">empty\n{'N' * 100}\n>full\n{'ACGTTGCA' * 500}\n")
    assert main(["decode", "gaps.fa", "--model", "model.json", "--output", "calls"]) == 0
    _, err = lines_of(capsys)
    assert len([line for line in err if "empty" in line and "warning" in line]) == 1
    assert json.loads((here / "calls" / "summary.json").read_text())["skipped_records"] == ["empty"]


def test_impossible_sequence_names_record_and_base(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    document = {**MODEL, "symmetric": False}
    document["states"] = [{**state, "joint": [0.5, 0.25, 0.25, 0.0]} for state in MODEL["states"]]
    (here / "bad.json").write_text(json.dumps(document))
    (here / "one.fa").write_text(">one\nACGCGAAACTGG\n")
    for command in (["score", "one.fa"], ["decode", "one.fa", "--output", "new"]):
        line = fails_with_one_line([*command, "--model", "bad.json"], 1, capsys)
        assert "record one, base 10" in line


def test_cancelled_job_leaves_nothing_behind(here: Path) -> None:
    """A cluster cancels by SIGTERM; here the job waits for sequence that never comes."""
    call = [sys.executable, "-m", "hmmseg", "decode", "-", "--model", "model.json"]
    with subprocess.Popen(
        [*call, "--output", "new"], stdin=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as job:
        while not list(here.glob(".*new*")):
            assert job.poll() is None
            time.sleep(0.05)
        job.terminate()
        assert job.stderr is not None
        assert job.stderr.read().strip() == "hmmseg: interrupted; nothing was written"
        assert job.wait() == 1
    assert not list(here.glob("*new*")) + list(here.glob(".*new*"))
