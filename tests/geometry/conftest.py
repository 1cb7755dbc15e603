"""Fixtures of the geometry tests; makes ``geometry_cases`` importable under ``--import-mode=importlib``."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))
from geometry_cases import body


@pytest.fixture
def panel() -> str:
    """A foam block 300 x 300 x 100 mm with a steel bolt of 8 mm."""
    return body("panel", "a", "box = { from = [0, 0, 0], to = [300, 300, 100] }") + body(
        "bolt", "b", "cylinder = { from = [150, 150, 0], to = [150, 150, 100], diameter = 8 }"
    )
