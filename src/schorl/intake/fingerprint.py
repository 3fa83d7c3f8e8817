"""Checksums of input files, so that a run can be tied to what it read."""

from __future__ import annotations

import hashlib
from pathlib import Path

SIDE_FILES = {".shp": (".shx", ".dbf", ".prj", ".cpg")}


def sha256_of(path: Path) -> str:
    """SHA-256 of a file's bytes, hexadecimal; a shapefile's side files are taken in."""
    digest = hashlib.sha256()
    for one in (path, *_beside(path)):
        with one.open("rb") as stream:
            while block := stream.read(1 << 20):
                digest.update(block)
    return digest.hexdigest()


def _beside(path: Path) -> list[Path]:
    beside = SIDE_FILES.get(path.suffix.lower(), ())
    return [side for suffix in beside if (side := path.with_suffix(suffix)).exists()]
