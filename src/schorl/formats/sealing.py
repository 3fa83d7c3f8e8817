"""JSON as packs hold it, and the seal of a manifest."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from schorl.formats.whole_folder import sha256_of

SEAL = "sha256_of_the_rest"


def sealed(document: Mapping[str, Any]) -> dict[str, Any]:
    """A manifest with a checksum of its own, since nothing else vouches for it."""
    rest = {key: value for key, value in document.items() if key != SEAL}
    text = json.dumps(rest, sort_keys=True, allow_nan=False, ensure_ascii=False)
    return rest | {SEAL: sha256_of(text.encode("utf-8"))}


def json_bytes(document: Mapping[str, Any]) -> bytes:
    """A JSON document with sorted keys and nothing JSON does not know."""
    text = json.dumps(document, indent=1, sort_keys=True, allow_nan=False, ensure_ascii=False)
    return (text + "\n").encode("utf-8")


def write_json(path: Path, document: Mapping[str, Any]) -> None:
    """Write a JSON document."""
    path.write_bytes(json_bytes(document))
