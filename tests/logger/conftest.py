"""A logged survey for each test."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.logger.made import Logged, log


@pytest.fixture
def logged(tmp_path: Path) -> Logged:
    """Four flows, the first of them none, of 150 s each at 4 Hz."""
    return log(tmp_path / "survey")
