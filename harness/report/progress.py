"""Progress in one line: done, rate and time left; plain lines now and then where no one watches."""

from __future__ import annotations

import sys
import time
from typing import TextIO

from harness.trials.driver import Progress

_SECONDS_BETWEEN_LINES = 10.0
_SECONDS_BETWEEN_REDRAWS = 0.2


class ProgressLine:
    """Writes progress to a stream: redrawn on a terminal, a line every ten seconds elsewhere."""

    def __init__(self, stream: TextIO | None = None) -> None:
        self.stream = sys.stderr if stream is None else stream
        self.live = self.stream.isatty()
        self._last = -1e9
        self._drawn = 0

    def __call__(self, progress: Progress) -> None:
        """Show how far a run is, if it is time to."""
        pause = _SECONDS_BETWEEN_REDRAWS if self.live else _SECONDS_BETWEEN_LINES
        finished = progress.done == progress.total
        if not finished and time.monotonic() - self._last < pause:
            return
        self._last = time.monotonic()
        text = words_for(progress)
        if self.live:
            self.stream.write("\r" + text.ljust(self._drawn))
            self._drawn = len(text)
        else:
            self.stream.write(text + "\n")
        self.stream.flush()

    def close(self) -> None:
        """Leave the line, so that what follows starts on its own."""
        if self._drawn:
            self.stream.write("\n")
            self._drawn = 0


def words_for(progress: Progress) -> str:
    """One line about a run."""
    done = f"{progress.done:,} of {progress.total:,} trials"
    if progress.done == progress.total:
        return f"{done} in {clock(progress.seconds)}"
    if progress.seconds_left is None:
        return f"{done}, running"
    return f"{done}, {progress.rate:,.0f} a second, {clock(progress.seconds_left)} left"


def clock(seconds: float) -> str:
    """A duration as 0:07, 12:30 or 3:04:05."""
    whole = round(seconds)
    hours, minutes, rest = whole // 3600, whole // 60 % 60, whole % 60
    return f"{hours}:{minutes:02d}:{rest:02d}" if hours else f"{minutes}:{rest:02d}"
