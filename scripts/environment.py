"""Make a virtual environment with Schorl in it, with nothing but the standard library."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
import venv
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
OLDEST = (3, 11)


def python_of(folder: Path) -> Path:
    """The interpreter of a virtual environment, on any system."""
    return folder / ("Scripts/python.exe" if os.name == "nt" else "bin/python")


def made(name: str, *, extra: str = "") -> Path:
    """Interpreter of an environment with this checkout installed; made once, renewed on change."""
    if sys.version_info < OLDEST:
        sys.exit(f"Schorl needs Python {OLDEST[0]}.{OLDEST[1]} or newer; this is {sys.version}")
    folder = ROOT / name
    python = python_of(folder)
    stamp = folder / "made-from.txt"
    wanted = _fingerprint(extra)
    if python.exists() and stamp.exists() and stamp.read_text(encoding="utf-8") == wanted:
        return python
    print(f"making {folder.name} (a few minutes, once) ...", flush=True)
    venv.create(folder, with_pip=True, clear=True)
    target = f"{ROOT}[{extra}]" if extra else str(ROOT)
    subprocess.run(
        [python, "-m", "pip", "install", "--quiet", "--disable-pip-version-check", "-e", target],
        check=True,
    )
    stamp.write_text(wanted, encoding="utf-8")
    return python


def _fingerprint(extra: str) -> str:
    project = (ROOT / "pyproject.toml").read_bytes()
    return f"{hashlib.sha256(project).hexdigest()} {extra} {sys.version}"
