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


def with_alphas(plain: dict[str, Any]) -> dict[str, Any]:
    """Version 2 to 3: the ledger keeps the alpha of ladders that were followed. None was kept before."""
    return {**plain, "ledger": {**plain["ledger"], "alphas": []}}


MIGRATIONS: Mapping[int, Migration] = {1: with_certificates, 2: with_alphas}
"""For each old schema version the step to the next one."""
