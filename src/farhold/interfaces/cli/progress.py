"""Progress on standard error: nothing for two seconds, then a bar on a terminal or plain lines elsewhere."""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, TextIO

from farhold.interfaces.cli.options import Manner
from farhold.interfaces.cli.text import plain_text
from farhold.watch import SILENT, Watch

if TYPE_CHECKING:
    from rich.progress import Progress

__all__ = ["DELAY_S", "BarWatch", "LineWatch", "duration", "watching"]

DELAY_S = 2.0
_EVERY_S = 10.0
_SELDOM_S = 300.0


def duration(seconds: float) -> str:
    """Write a time to wait for: ``45 s``, ``12 min``, ``3 h 05 min``."""
    if seconds < 90.0:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60.0)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60:,} h {minutes % 60:02d} min"


class LineWatch:
    """Says the stage in plain lines once `delay_s` have passed; `verbose` says all stages and seconds."""

    def __init__(self, stream: TextIO, verbose: bool = False, delay_s: float = DELAY_S) -> None:
        self._stream = stream
        self._verbose = verbose
        self._lock = threading.RLock()
        self._name = ""
        self._total: int | None = None
        self._done = 0
        self._since = time.monotonic()
        self._said = 0.0
        self._shown = False
        self._timer = threading.Timer(delay_s, self.show)
        self._timer.daemon = True
        self._timer.start()

    def say(self, line: str) -> None:
        """Write one line."""
        with self._lock:
            self._stream.write(plain_text(line) + "\n")
            self._stream.flush()
            self._said = time.monotonic()

    def show(self) -> None:
        """Begin to say what is being done (called when the delay has passed)."""
        with self._lock:
            self._shown = True
            self.begin()

    def begin(self) -> None:
        """Say that the present stage goes on."""
        if self._name:
            self.say(self._name if self._total is None else f"{self._name} ({self._total:,})")

    def far(self) -> str:
        """Say how far the present stage is, how fast it goes and what time is left."""
        passed_s = time.monotonic() - self._since
        parts = [f"{self._done:,} of {self._total:,}" if self._total else f"{self._done:,}"]
        if self._done > 0 and passed_s > 0.0:
            each_s = passed_s / self._done
            parts.append(f"{each_s:.1f} s each" if each_s >= 1.0 else f"{1.0 / each_s:,.1f} per s")
            if self._total and self._done <= self._total:
                parts.append(f"{duration((self._total - self._done) * each_s)} left")
        return ", ".join(parts)

    def moved(self) -> None:
        """Say how far the present stage is, every ten seconds at first and every five minutes in the end."""
        now = time.monotonic()
        if now - self._said >= min(max(_EVERY_S, (now - self._since) / 12.0), _SELDOM_S):
            self.say(f"{self._name}: {self.far()}")

    def _end(self) -> None:
        if self._verbose and self._name:
            self.say(f"{self._name}: {time.monotonic() - self._since:.2f} s")

    def note(self, text: str) -> None:
        """Say one line at once."""
        self.say(text)

    def stage(self, name: str, total: int | None = None) -> None:
        """Begin the stage `name` of `total` steps."""
        with self._lock:
            self._end()
            self._name, self._total, self._done, self._since = name, total, 0, time.monotonic()
            if self._shown:
                self.begin()

    def advance(self, steps: int = 1) -> None:
        """Count `steps` more."""
        with self._lock:
            self._done += steps
            if self._shown:
                self.moved()

    def close(self) -> None:
        """Stop saying anything."""
        self._timer.cancel()
        with self._lock:
            self._end()
            self._name, self._shown = "", False


class BarWatch(LineWatch):
    """Draws the stage as a bar that goes away when the work is done."""

    _bar: Progress | None = None

    def say(self, line: str) -> None:
        """Write one line above the bar."""
        if self._bar is None:
            super().say(line)
        else:
            self._bar.console.print(plain_text(line), markup=False, highlight=False)

    def begin(self) -> None:
        """Draw the bar of the present stage."""
        from rich.console import Console
        from rich.markup import escape
        from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

        if self._bar is None:
            words = (TextColumn("{task.description}"), TextColumn("{task.fields[far]}", markup=False))
            columns = (words[0], BarColumn(24), TimeElapsedColumn(), words[1])
            self._bar = Progress(*columns, console=Console(file=self._stream), transient=True)
            self._bar.start()
        for task in self._bar.task_ids:
            self._bar.remove_task(task)
        if self._name:
            self._bar.add_task(escape(plain_text(self._name)), total=self._total, completed=self._done, far="")

    def moved(self) -> None:
        """Move the bar."""
        if self._bar is not None:
            for task in self._bar.task_ids:
                self._bar.update(task, completed=self._done, far=self.far())

    def close(self) -> None:
        """Take the bar away."""
        self._timer.cancel()
        with self._lock:
            if self._bar is not None:
                self._bar.stop()
                self._bar = None
        super().close()


@contextmanager
def watching(manner: Manner) -> Iterator[Watch]:
    """Yield the watch that fits `manner` and the terminal, and put it away afterwards."""
    if manner.quiet:
        yield SILENT
        return
    kind = BarWatch if sys.stderr.isatty() else LineWatch
    watch = kind(sys.stderr, manner.verbose)
    try:
        yield watch
    finally:
        watch.close()
