"""One record for all tests of the report."""

from __future__ import annotations

import pytest

from support.example_record import example_record


@pytest.fixture(scope="session")
def record():
    return example_record()
