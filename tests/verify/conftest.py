"""Lets the tests of this folder share modules."""

from __future__ import annotations

import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
for folder in (HERE, HERE.parent / "onsets", HERE.parent / "systems", HERE.parent / "document"):
    if str(folder) not in sys.path:
        sys.path.append(str(folder))
