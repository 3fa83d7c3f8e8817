"""Threads of our own over fixed chunks; BLAS and OpenMP held to one thread.

The bytes of a result then depend neither on the number of cores nor on how BLAS splits its work.
"""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from contextlib import contextmanager
from typing import TypeVar

import numpy as np

from schorl.model.arrays import Floats

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


class Room(threading.local):
    """Arrays that each thread uses again and again.

    A fresh array of some megabytes is handed out by the system page by page, which takes longer
    than the sums done in it.
    """

    def __init__(self) -> None:
        self._kept: dict[str, Floats] = {}

    def array(self, name: str, shape: tuple[int, int]) -> Floats:
        """The thread's array of this name, as large as asked; it holds whatever it held."""
        size = shape[0] * shape[1]
        kept = self._kept.get(name)
        if kept is None or kept.size < size:
            kept = self._kept[name] = np.empty(size)
        return kept[:size].reshape(shape)
