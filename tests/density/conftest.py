"""Makes the support modules beside this file importable, and every run the same."""

from __future__ import annotations

import sys
from pathlib import Path

from hypothesis import settings

sys.path.insert(0, str(Path(__file__).parent))

settings.register_profile("the same in every run", derandomize=True, deadline=None)
settings.load_profile("the same in every run")
