"""Threads of our own over fixed chunks; BLAS and OpenMP held to one thread.

The bytes of a result then depend neither on the number of cores nor on how BLAS splits its work.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from typing import TypeVar

Part = TypeVar("Part")
MOST_THREADS = 8


def thread_count() -> int:
    """Threads to use: SCHORL_THREADS where set, else the cores, at most eight."""
    asked = os.environ.get("SCHORL_THREADS", "")
    if asked.isdigit() and int(asked) > 0:
        return int(asked)
    return max(1, min(os.cpu_count() or 1, MOST_THREADS))


@contextmanager
def one_blas_thread() -> Iterator[None]:
    """Hold BLAS and OpenMP to one thread inside the block."""
    from threadpoolctl import threadpool_limits

    with threadpool_limits(limits=1):
        yield


def for_each(parts: Sequence[Part], work: Callable[[Part], None]) -> None:
    """Run ``work`` for each part; parts write to places of their own, so order does not matter."""
    count = thread_count()
    if count == 1 or len(parts) < 2:
        for part in parts:
            work(part)
        return
    with ThreadPoolExecutor(max_workers=count) as pool:
        for _ in pool.map(work, parts):
            pass
