"""What may be read at all: known kinds of files, archives within limits, XML without tricks."""

from __future__ import annotations

import io
import re
import zipfile
import zlib
from pathlib import Path

from schorl.findings import Finding, finding

MOST_BYTES = 64 * 2**20
MOST_UNPACKED = 256 * 2**20
MOST_RATIO = 200
MOST_ENTRIES = 1000
DRIVERS = {
    ".geojson": "GeoJSON",
    ".json": "GeoJSON",
    ".gpkg": "GPKG",
    ".shp": "ESRI Shapefile",
    ".kml": "KML",
}


class Unreadable(Exception):
    """A file that must not or cannot be read; carries the finding."""

    def __init__(self, found: Finding) -> None:
        self.found = found
        super().__init__(found.what)


def refuse(code: str, path: Path, what: str, hint: str = "") -> Unreadable:
    """An ``Unreadable`` about a file."""
    return Unreadable(finding(code, where=path.name, what=what, hint=hint))


def checked_bytes(path: Path) -> bytes:
    """A file's bytes, read once, within the size limit."""
    try:
        size = path.stat().st_size
        if size > MOST_BYTES:
            raise refuse("IN-SIZE", path, f"{size / 2**20:.0f} MiB; at most 64 MiB are read")
        data = path.read_bytes()
    except OSError as reason:
        raise refuse("IN-READ", path, f"cannot be read: {reason.strerror or reason}") from None
    if not data.strip(b"\0 \r\n\t"):
        raise refuse("IN-EMPTY", path, "the file is empty")
    return data


def unpacked(path: Path, data: bytes) -> dict[str, bytes]:
    """Members of an archive by name, really unpacked in memory, within all limits.

    Nothing is written to disk, no member's name is used as a path, and an archive within an
    archive is not opened.
    """
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            infos = [info for info in archive.infolist() if not info.is_dir()]
            if len(infos) > MOST_ENTRIES:
                raise refuse("IN-ARCHIVE", path, f"{len(infos)} entries; at most {MOST_ENTRIES}")
            return _members(path, archive, infos, packed=len(data))
    except (
        zipfile.BadZipFile,
        zlib.error,
        NotImplementedError,
        RuntimeError,
        EOFError,
        ValueError,
        OSError,
        KeyError,
    ) as reason:
        raise refuse("IN-ARCHIVE", path, f"not a readable archive: {reason}") from None


def _members(
    path: Path, archive: zipfile.ZipFile, infos: list[zipfile.ZipInfo], *, packed: int
) -> dict[str, bytes]:
    members: dict[str, bytes] = {}
    total = 0
    for info in infos:
        with archive.open(info) as stream:
            chunks = []
            while chunk := stream.read(1 << 20):
                total += len(chunk)
                if total > MOST_UNPACKED or total > MOST_RATIO * packed + (1 << 20):
                    raise refuse("IN-ARCHIVE", path, "unpacks to far more than its own size")
                chunks.append(chunk)
        members[info.filename] = b"".join(chunks)
    return members


def refuse_xml_tricks(path: Path, data: bytes) -> None:
    """Refuse XML with a document type: entities can explode or fetch files."""
    # A document type stands before the first element, however much is put before it; wide
    # encodings are brought to one byte a character.
    text = data.replace(b"\0", b"").lstrip(b"\xef\xbb\xbf\xff\xfe")
    prolog = re.match(rb"(?:\s+|<\?.*?\?>|<!--.*?-->)*", text, flags=re.DOTALL)
    if text[prolog.end() if prolog else 0 :].startswith(b"<!"):
        raise refuse("IN-XML", path, "the XML declares a document type or entities")
