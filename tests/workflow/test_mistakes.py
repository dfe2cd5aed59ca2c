"""A mistake in the sample sheet or the configuration gets one line that says where it is."""

import re
from pathlib import Path

import pytest

from tests.workflow.running import Project, dry_runs

SHEETS = {
    # text of the sheet: row and column that the message must name, and a word of the reason
    "assembly\tfasta\na\ta\udce4.fa\n": (2, "2", "no text"),
    "assembly\tfasta\na\ta\x00.fa\n": (2, "2", "no text"),
    "assembly\tfasta\tcolour\na\ta.fa\tred\n": (1, "colour", "not known"),
    "assembly\na\n": (1, "fasta", "missing"),
    "fasta\na.fa\n": (1, "assembly", "missing"),
    "assembly\tfasta\tfasta\na\ta.fa\ta.fa\n": (1, "fasta", "twice"),
    "assembly\tfasta\t\torder\na\ta.fa\t\t1\n": (1, "3", "no name"),
    "assembly\tfasta\na\ta.fa\tb.fa\n": (2, "3", "beyond"),
    "assembly\tfasta\na\ta.fa\n\n# aside\n\tb.fa\n": (5, "assembly", "no value"),
    "assembly\tfasta\na\ta.fa\nb\t\n": (3, "fasta", "no value"),
    "assembly\tfasta\na\ta.fa\na\tb.fa\n": (3, "assembly", "above"),
    "assembly\tfasta\nmy assembly\ta.fa\n": (2, "assembly", "Letters"),
    "assembly\tfasta\nlogs\ta.fa\n": (2, "assembly", "not logs"),
    "assembly\tfasta\na\tmissing.fa\n": (2, "fasta", "no file missing.fa"),
    "assembly\tfasta\texclude\na\ta.fa\tx.bed\n": (2, "exclude", "no file x.bed"),
    "assembly\tfasta\tstates\na\ta.fa\ttwo\n": (2, "states", "integer"),
    "assembly\tfasta\tstates\na\ta.fa\t2.5\n": (2, "states", "integer"),
    "assembly\tfasta\tstates\na\ta.fa\t0\n": (2, "states", "minimum"),
    "assembly\tfasta\torder\na\ta.fa\t1\nb\tb.fa\t9\n": (3, "order", "maximum"),
    "assembly\tfasta\tthreshold\na\ta.fa\tnan\n": (2, "threshold", "number"),
    "assembly\tfasta\tdecoder\na\ta.fa\tboth\n": (2, "decoder", "one of"),
    "assembly\tfasta\tinit\torder\na\ta.fa\tm.json\t1\n": (2, "order", "comes with the init"),
    "assembly\tfasta\tpreset\torder\na\ta.fa\tx\t1\n": (2, "order", "comes with the preset"),
    "assembly\tfasta\tpreset\tinit\na\ta.fa\tx\tm.json\n": (2, "init", "one of the two"),
    "assembly\tfasta\tstart\na\ta.fa\tfree\n": (2, "start", "stranded"),
    "assembly\tfasta\tspec\tinit\na\ta.fa\tb.fa\tm.json\n": (2, "init", "one of the two"),
    "assembly\tfasta\tspec\tstates\na\ta.fa\tb.fa\t3\n": (2, "states", "comes with the spec"),
    "assembly\tfasta\ttrain_labels\na\ta.fa\tx.bed\n": (2, "train_labels", "no file x.bed"),
    "assembly\tfasta\ttrain_bases\na\ta.fa\t-1\n": (2, "train_bases", "minimum"),
    "assembly\tfasta\tlabels\na\ta.fa\tb.fa\n": (2, "labels", "compare"),
    "assembly\tfasta\tmodel\na\ta.fa\tnone.json\n": (2, "model", "no file none.json"),
    "assembly\tfasta\tmodel\na\ta.fa\tm.json\n": (2, "model", "m.json"),
    "assembly\tfasta\tmodel\tpreset\na\ta.fa\tm.json\tx\n": (2, "preset", "for training"),
    "assembly\tfasta\tmodel\tfix\na\ta.fa\tm.json\tstart\n": (2, "fix", "for training"),
}
CONFIGS = {
    # what stands behind --config: the key that the message must name, and a word of the reason
    "assemblies=nowhere.tsv": ("assemblies", "no file nowhere.tsv"),
    "colour=red": ("colour", "not known"),
    "batch_bases=0": ("batch_bases", "minimum"),
    "threads=many": ("threads", "integer"),
    "select_states=[0]": ("select_states.0", "integer"),
    "select_orders=2": ("select_orders", "array"),
    "defaults={states: 9}": ("defaults.states", "integer"),
    "defaults={init: nowhere.json}": ("defaults.init", "no file nowhere.json"),
    "defaults={model: nowhere.json}": ("defaults.model", "no file nowhere.json"),
    "defaults={colour: red}": ("defaults.colour", "not known"),
}


@pytest.fixture(scope="module")
def answers(tmp_path_factory: pytest.TempPathFactory) -> dict[str, tuple[int, str]]:
    """Exit code and messages for every sheet and configuration, and for a sound one."""
    folder = tmp_path_factory.mktemp("mistakes")
    for name in ("a.fa", "b.fa", "m.json"):
        (folder / name).write_text("")
    project = Project(folder)
    project.configure([{"assembly": "a", "fasta": "a.fa"}])
    calls: dict[str, list[str]] = {"sound": []}
    for number, sheet in enumerate(SHEETS):
        (folder / f"{number}.tsv").write_bytes(sheet.encode("utf-8", "surrogateescape"))
        calls[sheet] = ["--config", f"assemblies={number}.tsv"]
    calls |= {config: ["--config", config] for config in CONFIGS}
    common = [*project.arguments(), "--dry-run", "--quiet"]
    done = dry_runs([[*common, *call] for call in calls.values()])
    return dict(zip(calls, done, strict=True))


def test_a_sound_sheet_is_accepted(answers: dict[str, tuple[int, str]]) -> None:
    code, messages = answers["sound"]
    assert code == 0, messages


@pytest.mark.parametrize("sheet", SHEETS)
def test_sheet(sheet: str, answers: dict[str, tuple[int, str]]) -> None:
    row, column, reason = SHEETS[sheet]
    code, messages = answers[sheet]
    assert code == 1
    [line] = [line for line in messages.splitlines() if re.match(r"\d+\.tsv, row", line)]
    assert re.match(rf"\d+\.tsv, row {row}, column {column}: .*{reason}", line), line


@pytest.mark.parametrize("config", CONFIGS)
def test_configuration(config: str, answers: dict[str, tuple[int, str]]) -> None:
    key, reason = CONFIGS[config]
    code, messages = answers[config]
    assert code == 1
    [line] = [line for line in messages.splitlines() if line.startswith("configuration, key")]
    assert re.match(rf"configuration, key {re.escape(key)}: .*{reason}", line), line


def test_a_sheet_without_rows_is_refused(tmp_path: Path) -> None:
    project = Project(tmp_path)
    project.configure([{"assembly": "a", "fasta": "a.fa"}])
    (tmp_path / "sheet.tsv").write_text("assembly\tfasta\n# none yet\n")
    [(code, messages)] = dry_runs([[*project.arguments(), "--dry-run", "--quiet"]])
    assert code == 1
    assert "sheet.tsv lists no assembly; add a row for each" in messages
