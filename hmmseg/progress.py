"""Progress on standard error: a bar on a terminal, a plain line now and then elsewhere."""

import sys
import time
from collections.abc import Callable
from types import TracebackType
from typing import Any, Self

__all__ = ["Progress", "warn"]

LINE_INTERVAL = 30.0
BAR_DELAY = 1.0


class Progress:
    """Tells how far a job has come; used as a context manager.

    On a terminal a bar appears after the first second. Elsewhere, as in a log on a cluster, a
    plain line is written at the first step after every 30 seconds, and one at the end of a job
    that has written any. A short job therefore writes nothing.

    Parameters
    ----------
    total : int
        Steps in the whole job, in `unit`; 0 where it is not known beforehand.
    label : str
        What is being done, such as ``decoding``.
    unit : str
        What is counted, such as ``bases``.
    quiet : bool
        Write nothing at all.
    clock : callable
        Returns the time in seconds; only differences matter.
    """

    def __init__(
        self,
        total: int,
        label: str,
        unit: str,
        *,
        quiet: bool = False,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.total = total
        self.label = label
        self.unit = unit
        self.done = 0
        self._quiet = quiet
        self._clock = clock
        self._bar: Any = None

    def __enter__(self) -> Self:
        """Start the clock, and the bar if there is a terminal."""
        self._begun = self._last_line = self._clock()
        self._lines = 0
        if not self._quiet and sys.stderr.isatty():
            from tqdm import tqdm  # noqa: PLC0415  (only a terminal pays for the import)

            self._bar = tqdm(
                total=self.total,
                desc=self.label,
                unit=f" {self.unit}",
                unit_scale=True,
                delay=BAR_DELAY,
            )
        return self

    def advance(self, n: int, note: str = "") -> None:
        """Count `n` further steps; `note` says in a few words what stands at present."""
        self.done += n
        if self._quiet:
            return
        if self._bar is not None:
            if note:
                self._bar.set_postfix_str(note, refresh=False)
            self._bar.update(n)
        elif self._clock() - self._last_line >= LINE_INTERVAL:
            self._write_line(note)

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        traceback: TracebackType | None,
    ) -> None:
        """Close the bar, or write the last line of a job that has written any."""
        if self._bar is not None:
            self._bar.close()
        elif kind is None and self._lines:
            self._write_line("")

    def _write_line(self, note: str) -> None:
        now = self._clock()
        share = f" ({100 * self.done // self.total} %)" if self.total else ""
        whole = f" of {self.total:,}" if self.total else ""
        line = f"{self.label}: {self.done:,}{whole} {self.unit}{share}, {now - self._begun:.0f} s"
        print(f"{line}, {note}" if note else line, file=sys.stderr, flush=True)
        self._last_line = now
        self._lines += 1


def warn(message: str) -> None:
    """Tell the user something that is no error, in one line on standard error."""
    print(f"hmmseg: warning: {message}", file=sys.stderr, flush=True)
