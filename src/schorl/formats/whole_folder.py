"""A folder that is written whole or not at all.

Written into a hidden folder beside the target, checked, synced, and only then renamed. With
``replace`` the old folder is renamed aside first; whatever moment a run is killed at, the next
command finds either name and completes or undoes the swap.
"""

from __future__ import annotations

import hashlib
import os
import shutil
from collections.abc import Callable
from pathlib import Path

from schorl.errors import OutputProblem, UsageProblem
from schorl.findings import finding
from schorl.formats.writing import sync_folder, write_synced

ASIDE, BESIDE, LOCK = ".old-pack", ".new-pack", ".lock"
Rows = tuple[tuple[str, int, str], ...]


def put_folder(folder: Path, fill: Callable[[Path], Rows], *, replace: bool) -> Rows:
    """Let ``fill`` write a folder beside the target and check it, then move it into place.

    Returns
    -------
    The rows ``fill`` gave back: path, bytes and sha256 of each file.

    Raises
    ------
    UsageProblem
        There is a folder already and ``replace`` is not set (exit 2).
    OutputProblem
        Writing failed (exit 5); nothing is left behind.
    """
    complete_swaps(folder)
    if folder.exists() and not replace:
        what = "there is a pack already; nothing was written"
        raise UsageProblem([finding("OUT-THERE", where=str(folder), what=what)])
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        with _Lock(folder):
            return _put_beside(folder, fill)
    except OSError as reason:
        what = f"cannot be written: {reason.strerror or reason}"
        raise OutputProblem([finding("OUT-WRITE", where=str(folder), what=what)]) from None


def _put_beside(folder: Path, fill: Callable[[Path], Rows]) -> Rows:
    beside = folder.with_name(f".{folder.name}{BESIDE}")
    shutil.rmtree(beside, ignore_errors=True)
    beside.mkdir(mode=0o700)
    try:
        rows = fill(beside)
        _sync_all(beside)
        beside.chmod(0o755)
        _move_in(beside, folder)
    except BaseException:
        shutil.rmtree(beside, ignore_errors=True)
        raise
    return rows


class _Lock:
    """Only one run writes a pack at a time; a dead run's lock does not hold."""

    def __init__(self, folder: Path) -> None:
        self.path = folder.with_name(f".{folder.name}{LOCK}")

    def __enter__(self) -> None:
        for _ in range(2):
            try:
                write_synced(self.path, str(os.getpid()).encode())
                return
            except FileExistsError:
                if _alive(self.path):
                    what = "another run is writing this pack"
                    raise OutputProblem(
                        [finding("OUT-BUSY", where=str(self.path), what=what)]
                    ) from None
                self.path.unlink(missing_ok=True)
        raise OutputProblem(
            [finding("OUT-BUSY", where=str(self.path), what="the lock stays taken")]
        )

    def __exit__(self, *_: object) -> None:
        self.path.unlink(missing_ok=True)


def _alive(lock: Path) -> bool:
    try:
        number = int(lock.read_text(encoding="ascii") or "0")
        os.kill(number, 0)
    except (ValueError, ProcessLookupError, FileNotFoundError):
        return False
    except OSError:  # not ours to signal: it lives
        return True
    return number > 0


def listed(folder: Path) -> Rows:
    """Path, bytes and sha256 of every file of a folder, in order; all made readable to all."""
    paths = sorted(one for one in folder.rglob("*") if one.is_file())
    rows = []
    for path in paths:
        path.chmod(0o644)
        data = path.read_bytes()
        rows.append((path.relative_to(folder).as_posix(), len(data), sha256_of(data)))
    return tuple(rows)


def sha256_of(data: bytes) -> str:
    """Checksum of bytes, in hexadecimal."""
    return hashlib.sha256(data).hexdigest()


def _sync_all(folder: Path) -> None:
    for path in sorted(folder.rglob("*")):
        if path.is_file():
            with path.open("rb+") as stream:
                os.fsync(stream.fileno())
    for path in [*[one for one in folder.rglob("*") if one.is_dir()], folder]:
        sync_folder(path)


def _move_in(beside: Path, folder: Path) -> None:
    aside = folder.with_name(f".{folder.name}{ASIDE}")
    if folder.exists():
        folder.rename(aside)
        try:
            beside.rename(folder)
        except BaseException:
            aside.rename(folder)
            raise
    else:
        beside.rename(folder)
    sync_folder(folder.parent)
    shutil.rmtree(aside, ignore_errors=True)


def complete_swaps(folder: Path) -> None:
    """Finish or undo a swap that a killed run left: afterwards the old or new pack stands whole."""
    aside = folder.with_name(f".{folder.name}{ASIDE}")
    if not folder.name or not aside.is_dir():
        return
    if _busy(folder):
        return
    if folder.exists():
        shutil.rmtree(aside, ignore_errors=True)
    else:
        aside.rename(folder)


def _busy(folder: Path) -> bool:
    lock = folder.with_name(f".{folder.name}{LOCK}")
    return lock.exists() and _alive(lock)
