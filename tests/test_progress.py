"""Progress: a bar on a terminal, plain lines elsewhere, nothing for short or quiet jobs."""

import io
import subprocess
import sys

import pytest

from hmmseg import progress
from hmmseg.progress import Progress, warn


class Clock:
    """A clock that goes only when told."""

    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def run(step_seconds: float, steps: int, quiet: bool = False) -> None:
    clock = Clock()
    with Progress(100 * steps, "decoding", "bases", quiet=quiet, clock=clock) as job:
        for _ in range(steps):
            clock.now += step_seconds
            job.advance(100)


def test_a_short_job_writes_nothing(capsys: pytest.CaptureFixture[str]) -> None:
    run(step_seconds=2.9, steps=10)
    assert capsys.readouterr() == ("", "")


def test_a_plain_line_every_thirty_seconds(capsys: pytest.CaptureFixture[str]) -> None:
    run(step_seconds=10, steps=10)
    out, err = capsys.readouterr()
    assert out == ""
    assert err.splitlines() == [
        "decoding: 300 of 1,000 bases (30 %), 30 s",
        "decoding: 600 of 1,000 bases (60 %), 60 s",
        "decoding: 900 of 1,000 bases (90 %), 90 s",
        "decoding: 1,000 of 1,000 bases (100 %), 100 s",
    ]


def test_a_note_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    clock = Clock()
    with Progress(3, "training", "iterations", clock=clock) as job:
        clock.now += 31
        job.advance(1, "1.95 bits per base")
        job.advance(1, "1.94 bits per base")
    first, last = capsys.readouterr().err.splitlines()
    assert first == "training: 1 of 3 iterations (33 %), 31 s, 1.95 bits per base"
    assert last == "training: 2 of 3 iterations (66 %), 31 s"


def test_a_failed_job_does_not_claim_an_end(capsys: pytest.CaptureFixture[str]) -> None:
    def fail() -> None:
        clock = Clock()
        with Progress(2, "a", "b", clock=clock) as job:
            clock.now += 40
            job.advance(1)
            raise ValueError("stop")

    with pytest.raises(ValueError, match="stop"):
        fail()
    assert capsys.readouterr().err == "a: 1 of 2 b (50 %), 40 s\n"


def test_a_job_without_a_known_total(capsys: pytest.CaptureFixture[str]) -> None:
    clock = Clock()
    with Progress(0, "a", "b", clock=clock) as job:
        clock.now += 40
        job.advance(7)
    assert capsys.readouterr().err.splitlines()[0] == "a: 7 b, 40 s"


def test_quiet_writes_nothing(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    run(step_seconds=100, steps=3, quiet=True)
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys, "stderr", terminal := Terminal())
    monkeypatch.setattr(progress, "BAR_DELAY", 0.0)
    run(step_seconds=100, steps=3, quiet=True)
    assert terminal.getvalue() == ""


def test_a_terminal_gets_a_bar(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stderr", terminal := Terminal())
    monkeypatch.setattr(progress, "BAR_DELAY", 0.0)
    with Progress(1000, "decoding", "bases") as job:
        job.advance(1000, "record 3")
    assert "decoding: 100%" in terminal.getvalue()
    assert "record 3" in terminal.getvalue()
    assert "1.00k/1.00k" in terminal.getvalue()


def test_a_terminal_gets_nothing_for_a_short_job(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stderr", terminal := Terminal())
    with Progress(1000, "decoding", "bases") as job:
        job.advance(1000)
    assert terminal.getvalue() == ""


def test_tqdm_is_not_imported_off_a_terminal() -> None:
    code = (
        "import sys\nfrom hmmseg.progress import Progress\n"
        "with Progress(1, 'a', 'b') as job: job.advance(1)\nprint('tqdm' in sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert (done.stdout, done.stderr) == ("False\n", "")


def test_a_warning_is_one_line(capsys: pytest.CaptureFixture[str]) -> None:
    warn("record x holds nothing but N")
    assert capsys.readouterr() == ("", "hmmseg: warning: record x holds nothing but N\n")
