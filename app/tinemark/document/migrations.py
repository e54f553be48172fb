"""Steps from each old schema version of a session to the next. None is ever removed."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

Migration = Callable[[dict[str, Any]], dict[str, Any]]


def with_certificates(plain: dict[str, Any]) -> dict[str, Any]:
    """Version 1 to 2: rows say what follows, how they move with the other parameters, and how to check them.

    Nothing of that was known, so nothing is made up: a row that was proved has no certificate.
    """
    rows = []
    for row in plain["ledger"]["rows"]:
        onset = {**row["onset"], "consequence": "", "sensitivities": [], "certificate": None}
        rows.append({**row, "onset": onset})
    return {**plain, "ledger": {**plain["ledger"], "rows": rows}, "certified": []}


MIGRATIONS: Mapping[int, Migration] = {1: with_certificates}
"""For each old schema version the step to the next one."""
