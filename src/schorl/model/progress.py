"""Progress is a callable: the library reports, the command line draws, a test records."""

from __future__ import annotations

from collections.abc import Callable

Progress = Callable[[str, int, int], None]


def silent(stage: str, done: int, total: int) -> None:
    """Report nothing."""
