"""Fixtures of the benchmarks."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from types import ModuleType

import pytest


@pytest.fixture(scope="session")
def script() -> ModuleType:
    """The plain script that speed is measured against, loaded from its file."""
    path = Path(__file__).with_name("script.py")
    spec = importlib.util.spec_from_file_location("plain_script", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module
