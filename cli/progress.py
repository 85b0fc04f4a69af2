"""Progress on stderr, once work takes longer than people wait gladly."""

from __future__ import annotations

import sys
import threading
import time
from collections.abc import Callable
from types import TracebackType
from typing import TextIO

_PATIENCE_S = 1.5
_WIDTH = 30


class ProgressBar:
    """A callable ``progress(done, total)`` that shows a bar on a terminal, and a line now and then elsewhere.

    Nothing is shown before 1.5 seconds have passed, nor when ``quiet``. The end of its block clears the bar.
    """

    def __init__(
        self,
        label: str,
        *,
        quiet: bool = False,
        stream: TextIO | None = None,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self.label = label
        self.quiet = quiet
        self.stream = stream or sys.stderr
        self.clock = clock
        self._terminal = self.stream.isatty()
        self._started = clock()
        self._stage = self._started
        self._next = self._started + _PATIENCE_S
        self._shown = False
        self._lock = threading.Lock()

    def __enter__(self) -> ProgressBar:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._shown and self._terminal:
            self._write("\r\x1b[2K")

    def __call__(self, done: int, total: int) -> None:
        if self.quiet or total <= 0:
            return
        now = self.clock()
        if now < self._next:
            return
        with self._lock:
            self._next = now + (0.1 if self._terminal else 10.0)
            self._shown = True
            share = min(done / total, 1.0)
            left = (now - self._stage) * (1 - share) / share if share > 0 else None
            text = f"{self.label}: {100 * share:3.0f} %" + (f", about {_span(left)} left" if left else "")
            if self._terminal:
                bar = ("#" * round(_WIDTH * share)).ljust(_WIDTH, ".")
                self._write(f"\r\x1b[2K[{bar}] {text}")
            else:
                self._write(text + "\n")

    def begin(self, stage: str) -> None:
        """Name the stage that begins; shown at once where work has taken long already."""
        with self._lock:
            self.label, self._stage = stage, self.clock()
            if self.quiet or self.clock() < self._started + _PATIENCE_S:
                return
            self._shown = True
            self._write(f"\r\x1b[2K{stage} …" if self._terminal else f"{stage} …\n")

    def _write(self, text: str) -> None:
        try:
            self.stream.write(text)
            self.stream.flush()
        except OSError:
            # Progress that cannot be shown must not stop the work.
            self.quiet = True


def _span(seconds: float) -> str:
    """A duration as people say it.

    >>> _span(8.2), _span(160), _span(7300)
    ('8 s', '3 min', '2.0 h')
    """
    if seconds < 99.5:
        return f"{max(seconds, 1):.0f} s"
    return f"{seconds / 60:.0f} min" if seconds < 5400 else f"{seconds / 3600:.1f} h"
