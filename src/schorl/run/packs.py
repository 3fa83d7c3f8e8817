"""Packs that were written earlier, taken up again."""

from __future__ import annotations

from pathlib import Path

from schorl.errors import Refusal
from schorl.findings import finding
from schorl.formats.record_file import read_record
from schorl.formats.verify import verify
from schorl.formats.whole_folder import sha256_of
from schorl.model.record import RunRecord

MOST_FAULTS = 6  # more of them say no more


def whole_record(folder: Path) -> RunRecord:
    """The record of a pack in which nothing is missing or touched.

    Raises
    ------
    Refusal
        Not a pack, or with each fault that was found (exit 3).
    """
    record = read_record(folder)
    seen = verify(folder)
    if seen.whole:
        return record
    raise Refusal(
        [
            finding(
                "OUT-TOUCHED", where=f"{folder.name}: {one.file}", what=f"{one.place}: {one.what}"
            )
            for one in seen.faults[:MOST_FAULTS]
        ]
    )


def identity_of(folder: Path) -> str:
    """Checksum of a pack's manifest: the same pack has the same one."""
    return sha256_of((folder / "manifest.json").read_bytes())


def named_source(folder: Path) -> str:
    """What a record made from a pack says that it came from."""
    return f"{folder.name}, manifest {identity_of(folder)}"
