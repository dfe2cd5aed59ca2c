"""Processes of this machine: who descends from whom, who works for a run, and how to end them."""

import os
import signal
import time
from collections.abc import Callable, Iterator
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path

__all__ = ["Payload", "alive", "end_process", "holders", "payload", "tree", "wait_until"]


def wait_until(true: Callable[[], object], seconds: float, what: str) -> None:
    """Wait for something to become true; fail with its name if it does not in time."""
    end = time.monotonic() + seconds
    while not true():
        assert time.monotonic() < end, f"after {seconds} s: {what}"
        time.sleep(0.02)


def _folders() -> Iterator[Path]:
    """Return what the kernel tells of each process."""
    yield from Path("/proc").glob("[0-9]*")


def _fields(folder: Path) -> list[str]:
    """Return state, parent and so on, see proc(5); the name before them may hold anything."""
    return (folder / "stat").read_text().rpartition(")")[2].split()


def tree(pid: int) -> list[int]:
    """Return a process and all below it."""
    children: dict[int, list[int]] = {}
    for folder in _folders():
        with suppress(OSError):  # ended meanwhile
            children.setdefault(int(_fields(folder)[1]), []).append(int(folder.name))
    found = [pid]
    for one in found:
        found += children.get(one, [])
    return found


def holders(file: Path) -> list[int]:
    """Return the processes that have a file open."""
    found = []
    for folder in _folders():
        with suppress(OSError):  # ended meanwhile
            if any(link.readlink() == file for link in (folder / "fd").iterdir()):
                found.append(int(folder.name))
    return found


def alive(pid: int) -> bool:
    """Return whether a process runs; one that has ended and that nobody waits for does not."""
    try:
        return _fields(Path(f"/proc/{pid}"))[0] not in "XZ"
    except OSError:
        return False


def end_process(pid: int, number: int = signal.SIGTERM) -> None:
    """Signal a process, and wait until it is gone."""
    with suppress(ProcessLookupError):
        os.kill(pid, number)
    wait_until(lambda: not alive(pid), 20, f"process {pid} goes on")


@dataclass(frozen=True)
class Payload:
    """A process that does the work of a job, halted, so that things can happen to it meanwhile."""

    pid: int
    job: str
    node: str

    def go_on(self) -> None:
        """Let it work."""
        os.kill(self.pid, signal.SIGCONT)

    def grow(self, megabytes: int) -> None:
        """Let it work until it holds so much memory, and halt it again."""

        def large() -> bool:
            pages = int(Path(f"/proc/{self.pid}/statm").read_text().split()[1])
            return pages * os.sysconf("SC_PAGE_SIZE") >= megabytes * 1_000_000

        self.go_on()
        wait_until(large, 60, f"process {self.pid} stays small")
        os.kill(self.pid, signal.SIGSTOP)


def payload(folder: Path, command: str, but: str = "", seconds: float = 120) -> Payload:
    """Wait for a Slurm job that runs a command of hmmseg in a folder, and halt it.

    Parameters
    ----------
    folder
        Where the workflow runs.
    command
        Name of the command.
    but
        Number of a job that does not count.
    seconds
        How long to wait at most.
    """
    found: list[Payload] = []

    def look() -> bool:
        for process in _folders():
            with suppress(OSError, KeyError):  # ended meanwhile, or no job of Slurm
                words = (process / "cmdline").read_bytes().decode().split("\0")
                if len(words) > 2 and words[1].endswith("/hmmseg") and words[2] == command:
                    if (process / "cwd").readlink() != folder:
                        continue
                    lines = (process / "environ").read_bytes().decode().split("\0")
                    told = dict(line.partition("=")[::2] for line in lines)
                    seen = Payload(int(process.name), told["SLURM_JOB_ID"], told["SLURMD_NODENAME"])
                    if seen.job != but:
                        os.kill(seen.pid, signal.SIGSTOP)
                        found.append(seen)
        return bool(found)

    wait_until(look, seconds, f"no job does {command}")
    return found[0]
