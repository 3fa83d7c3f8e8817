"""The whole record of a run beside its files, so that a pack can be taken up again exactly."""

from __future__ import annotations

import gzip
import json
from pathlib import Path

from schorl.errors import Refusal
from schorl.findings import finding
from schorl.formats.codec import Decoder, Encoder
from schorl.formats.whole_folder import complete_swaps
from schorl.model.record import RunRecord
from schorl.model.summary import SCHEMA

RECORD_FILE, MANIFEST = "record.json.gz", "manifest.json"
#: Most bytes a record is unpacked to: a million cells and all that is known of each.
MOST_BYTES = 1_000_000_000


def record_bytes(record: RunRecord) -> bytes:
    """A record as gzipped JSON without a clock: the same bytes from the same record."""
    encoder = Encoder()
    held = encoder.value(record)
    document = {"schema": SCHEMA, "record": held, "arrays": encoder.arrays}
    text = json.dumps(document, sort_keys=True, allow_nan=False, ensure_ascii=True)
    return gzip.compress(text.encode("ascii"), compresslevel=6, mtime=0)


def read_record(folder: Path) -> RunRecord:
    """The record of a written pack, as it was.

    Raises
    ------
    Refusal
        Not a pack; no record in it, a later version's, or one that cannot be read (exit 3).
    """
    complete_swaps(folder)
    path = folder / RECORD_FILE
    if not path.is_file():
        if not (folder / MANIFEST).is_file():
            there = folder.is_dir()
            what = f"there is no {MANIFEST} in it" if there else "there is no such folder"
            raise Refusal([finding("OUT-NOT-PACK", where=str(folder), what=what)])
        what = f"the pack has no `{RECORD_FILE}`: an earlier version wrote it, or it was removed"
        raise _refusal(folder, what)
    try:
        document = json.loads(_unpacked(path))
        if document["schema"] > SCHEMA:
            raise _refusal(folder, f"its record has schema {document['schema']}")
        record = Decoder(document["arrays"]).value(RunRecord, document["record"])
    except Refusal:
        raise
    except Exception as reason:  # whatever a damaged file does to its reader
        what = f"its record cannot be read: {type(reason).__name__}: {reason}"
        raise _refusal(folder, what) from None
    if not isinstance(record, RunRecord):
        raise _refusal(folder, "its record cannot be read")
    return record


def _unpacked(path: Path) -> bytes:
    with gzip.open(path) as stream:
        text = stream.read(MOST_BYTES + 1)
    if len(text) > MOST_BYTES:
        raise ValueError(f"more than {MOST_BYTES} bytes")
    return text


def _refusal(folder: Path, what: str) -> Refusal:
    return Refusal([finding("OUT-RECORD", where=str(folder), what=what)])
