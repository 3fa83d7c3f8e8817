"""Writing that is whole or absent."""

from __future__ import annotations

import os
import re
import unicodedata
from pathlib import Path

RESERVED = {
    "CON",
    "PRN",
    "AUX",
    "NUL",
    *(f"COM{i}" for i in range(10)),
    *(f"LPT{i}" for i in range(10)),
}
LONGEST_NAME = 100


def safe_name(text: str) -> str:
    """A file name from a safe alphabet: letters, digits, dot, dash, underscore."""
    plain = unicodedata.normalize("NFKD", text.replace("ß", "ss"))
    plain = "".join(one for one in plain if not unicodedata.combining(one))
    name = re.sub(r"[^A-Za-z0-9._-]+", "-", plain).strip("-._")[:LONGEST_NAME] or "field"
    return f"_{name}" if name.split(".")[0].upper() in RESERVED else name


def write_synced(path: Path, data: bytes) -> None:
    """Write a new file and push it to the disk; never through a link, and whole or absent."""
    flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
    handle = os.open(path, flags, 0o644)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(data)
            stream.flush()
            os.fsync(stream.fileno())
    except BaseException:
        path.unlink(missing_ok=True)
        raise


def sync_folder(folder: Path) -> None:
    """Push a folder's entries to the disk where the system can."""
    if os.name == "nt":
        return
    handle = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def write_whole(path: Path, data: bytes) -> None:
    """Put a single file in place whole: written beside, then moved over."""
    beside = path.with_name(f".{path.name}.{os.getpid()}.part")
    beside.unlink(missing_ok=True)
    try:
        write_synced(beside, data)
        beside.replace(path)
    finally:
        beside.unlink(missing_ok=True)
    sync_folder(path.parent)
