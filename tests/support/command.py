"""The command as a person runs it: in a process of its own, answering with JSON."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

FIELDS = Path(__file__).resolve().parents[2] / "sample_fields"


def run(*arguments):
    """Exit code and the one JSON document of a command; a traceback fails the test."""
    command = [sys.executable, "-m", "schorl", *map(str, arguments), "--json"]
    done = subprocess.run(command, capture_output=True, text=True, encoding="utf-8", check=False)
    assert "Traceback" not in done.stderr
    return done.returncode, json.loads(done.stdout)


def prescribed(job: str, folder: Path) -> Path:
    """The pack of a sample field's job, written into a folder."""
    code, answer = run("prescribe", FIELDS / job, "--out", folder)
    assert code == 0, answer["findings"]
    return Path(answer["result"]["pack"]["folder"])
