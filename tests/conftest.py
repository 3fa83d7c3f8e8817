"""What all tests share: the support package on the path, and where optional open data lie."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

SHARED = Path(__file__).resolve().parents[2] / "shared"


@pytest.fixture(scope="session")
def datasets() -> Path:
    """Folder of open data sets beside the checkout; tests that need it are skipped without it."""
    folder = SHARED / "datasets"
    if not folder.is_dir():
        pytest.skip("open data sets are not beside this checkout")
    return folder
