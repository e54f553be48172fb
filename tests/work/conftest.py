"""Makes the stand-in engines beside this file importable, here and in spawned processes."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))


@pytest.fixture
def logistic():
    from tinemark.systems.library import builtin_system

    return builtin_system("logistic")
