"""A real browser for pages: Debian's Chromium through Playwright, axe-core from npm."""

from __future__ import annotations

import os
import shutil
import tempfile
from pathlib import Path

import pytest

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
NODE = Path(os.environ.get("SCHORL_NODE_MODULES") or Path(tempfile.gettempdir()) / "schorl-node")
AXE = NODE / "node_modules" / "axe-core" / "axe.min.js"
AXE_TAGS = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]

needs_chromium = pytest.mark.skipif(CHROMIUM is None, reason="Debian's chromium is not installed")


def axe_faults(page) -> list:
    """What axe-core finds wrong with an open page; skips where it is not installed."""
    if not AXE.is_file():
        pytest.skip(f"axe-core is not at {AXE.parent}; npm install axe-core there")
    page.evaluate(AXE.read_text(encoding="utf-8"))
    return page.evaluate(
        "tags => axe.run(document, {runOnly: tags}).then(r => r.violations.map("
        "v => [v.id, v.impact, v.nodes.map(n => n.html.slice(0, 160)).slice(0, 3)]))",
        AXE_TAGS,
    )
