"""Batches: put together they are the whole, and what has not changed is not decoded again."""

import json
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import pytest

from hmmseg.cli import main
from hmmseg.jobs.plan import read_plan
from tests.test_cli import MODEL

FASTA, MODEL_FILE = "some.fa", "model.json"
CALLING = ["--soft-mask", "hide", "--min-length", "5", "--gap-min", "30"]


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder to be in, with a model and an assembly that has all that records can have."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / MODEL_FILE).write_text(json.dumps(MODEL))
    write(assembly())
    Path("exclude.bed").write_text("record_2\t100\t110\nrecord_5\t0\t1\n")
    return tmp_path


def drawn(seed: int, length: int = 3_000) -> str:
    """Letters whose composition changes every 200 bases."""
    random = np.random.default_rng(seed)
    strong = random.random(length) < np.repeat(random.choice([0.3, 0.7], length // 200), 200)
    letters = np.where(strong, random.choice(list("CG"), length), random.choice(list("AT"), length))
    return "".join(letters)


def assembly() -> dict[str, str]:
    """Header and letters of each record."""
    records = {f"record_{number}": drawn(number) for number in range(12)}
    records["record_1"] = records["record_1"].replace("GC", "gc").replace("CCC", "CRN")
    records["record_3"] = records["record_3"][:500] + "N" * 29 + "R" + "N" * 40 + drawn(50)
    records["gaps"] = "N" * 100
    records["masked"] = drawn(70).lower()
    records["ring [topology=circular]"] = drawn(60)
    records["named"] = drawn(61)
    records["twin"] = records["record_7"]
    return records


def write(records: dict[str, str]) -> None:
    Path(FASTA).write_text("".join(f">{name}\n{text}\n" for name, text in records.items()))


def in_batches(*chosen: str) -> list[str]:
    """Decode batch by batch, as the workflow does; return the keys that had to be decoded."""
    model = ["--model", MODEL_FILE]
    size = ["--batch-bases", "8000", "--parts", "parts", "--force"]
    assert main(["batches", FASTA, *model, *size, *CALLING, *chosen, "--output", "batches"]) == 0
    cut = ["cut", FASTA, "--batches", "batches", *CALLING[-2:], *chosen]
    assert main([*cut, "--output", "pieces", "--force"]) == 0
    keys = sorted(path.stem for path in Path("pieces").glob("*.fa"))
    for key in keys:
        assert main(part(key)) == 0
    assert main(["gather", "batches", "--parts", "parts", "--output", "gathered", "--force"]) == 0
    return keys


def part(key: str) -> list[str]:
    """The command that decodes one batch."""
    piece = [f"pieces/{key}.fa", "--exclude", f"pieces/{key}.bed", "--model", MODEL_FILE]
    return ["decode", *piece, *CALLING, "--output", f"parts/{key}", "--reuse"]


def check_whole(*chosen: str) -> None:
    """What was gathered has the bytes of one decoding of the whole assembly."""
    whole = ["decode", FASTA, "--model", MODEL_FILE, *CALLING, *chosen]
    assert main([*whole, "--output", "whole", "--force"]) == 0
    one, other = (
        {p.name: p.read_bytes() for p in Path(name).iterdir() if p.name != "provenance.json"}
        for name in ("whole", "gathered")
    )
    assert one == other
    assert main(["verify", "gathered"]) == 0


@pytest.mark.parametrize("threads", ["1", "2", "3"])
def test_any_number_of_threads_gathers_the_same_bytes(threads: str, here: Path) -> None:
    in_batches()
    gather = ["gather", "batches", "--parts", "parts", "--output", "again", "--threads", threads]
    assert main(gather) == 0
    for path in Path("gathered").iterdir():
        assert Path("again", path.name).read_bytes() == path.read_bytes(), path.name


@pytest.mark.parametrize(
    "chosen",
    [
        (),
        ("--circular", "named", "--min-record", "101"),
        ("--exclude", "exclude.bed"),
    ],
)
def test_gathered_batches_are_the_whole(chosen: tuple[str, ...], here: Path) -> None:
    assert len(in_batches(*chosen)) > 3
    check_whole(*chosen)


def test_a_revision_decodes_only_batches_that_changed(here: Path) -> None:
    first = in_batches()
    before = read_plan("batches")
    records = assembly()
    revised = {
        "renamed" if name == "record_4" else name: text for name, text in reversed(records.items())
    }
    write(revised)
    assert in_batches() == []
    check_whole()

    revised["record_6"] = "A" + records["record_6"][1:]
    revised["new"] = drawn(99)
    del revised["record_9"]
    write(revised)
    again = in_batches()
    check_whole()
    after = read_plan("batches")
    kept = {batch.key for batch in before.batches} & {batch.key for batch in after.batches}
    assert sorted(again) == sorted(batch.key for batch in after.batches if batch.key not in kept)
    # One record left its batch, one joined one, one did both; where a batch then divided, or two
    # became one, records that had not changed were decoded with them.
    assert len(first) == 9
    assert len(again) == 4


def test_another_model_or_another_filter_decodes_everything(here: Path) -> None:
    first = in_batches()
    Path(MODEL_FILE).write_text(json.dumps({**MODEL, "transitions": [[0.99, 0.01], [0.01, 0.99]]}))
    assert not set(in_batches()) & set(first)
    CALLING[3] = "6"
    try:
        assert len(in_batches()) == len(first)
    finally:
        CALLING[3] = "5"


def test_a_lost_or_damaged_part_is_told(here: Path, capsys: pytest.CaptureFixture[str]) -> None:
    key = in_batches()[0]
    gather = ["gather", "batches", "--parts", "parts", "--output", "again"]
    table = Path("parts", key, "regions.tsv")
    content = table.read_text()
    table.write_text(content + "\n")
    capsys.readouterr()
    assert main(gather) == 1
    assert f"parts/{key}: damaged" in capsys.readouterr().err
    # Decoding it once more mends it.
    assert main(part(key)) == 0
    assert table.read_text() == content
    assert main(gather) == 0
    Path("parts", key).rename("elsewhere")
    capsys.readouterr()
    assert main([*gather, "--force"]) == 1
    assert f"parts/{key}: the result of this batch is gone" in capsys.readouterr().err


def test_sequence_that_changed_since_the_plan_is_refused(
    here: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    plan = ["batches", FASTA, "--model", MODEL_FILE, "--batch-bases", "8000", "--output", "batches"]
    assert main(plan) == 0
    write({**assembly(), "record_2": drawn(77)})
    capsys.readouterr()
    assert main(["cut", FASTA, "--batches", "batches", "--output", "pieces"]) == 1
    assert "record record_2 is not as it was" in capsys.readouterr().err
    assert not Path("pieces").exists()


@pytest.fixture
def one_piece(here: Path) -> str:
    """Key of a batch that has not been decoded."""
    plan = ["batches", FASTA, "--model", MODEL_FILE, *CALLING, "--batch-bases", "8000"]
    assert main([*plan, "--output", "batches"]) == 0
    assert main(["cut", FASTA, "--batches", "batches", "--output", "pieces"]) == 0
    return read_plan("batches").batches[0].key


def test_two_jobs_at_once_on_one_batch(one_piece: str) -> None:
    with ThreadPoolExecutor(2) as pool:
        codes = list(pool.map(main, [part(one_piece)] * 2))
    assert codes == [0, 0]
    assert main(["verify", f"parts/{one_piece}"]) == 0
    assert [path.name for path in Path("parts").iterdir()] == [one_piece]
