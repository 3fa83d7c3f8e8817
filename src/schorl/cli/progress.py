"""A progress line for a terminal: nothing for the first second, gone when done."""

from __future__ import annotations

import sys
import time

from schorl.model.progress import Progress

QUIET_FOR_S = 1.0
WIDTH = 24


def terminal_progress() -> Progress:
    """A callable that draws one line on stderr once a run has taken over a second."""
    started = time.monotonic()

    def draw(stage: str, done: int, total: int) -> None:
        if time.monotonic() - started < QUIET_FOR_S:
            return
        full = WIDTH * done // max(total, 1)
        bar = "=" * full + " " * (WIDTH - full)
        sys.stderr.write(f"\r{stage:<16}[{bar}] {done}/{total} ")
        if done >= total:
            sys.stderr.write("\r" + " " * (WIDTH + 40) + "\r")
        sys.stderr.flush()

    return draw
