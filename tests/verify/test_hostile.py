"""Sessions with damage of any sort: opening, claiming and checking raise nothing but errors of ours."""

from __future__ import annotations

import json
import random
import zipfile
from typing import Any

from session_samples import packed

from tinemark.document.proofs import claims_of, with_doubts
from tinemark.document.session_file import read_session, session_bytes
from tinemark.onsets.results import Status
from tinemark.resources_path import resource
from tinemark.systems.errors import SessionFileError
from tinemark.verify.check import check
from tinemark.verify.claims import Outcome

WORDS = [
    "flip",
    "fold",
    "pitchfork",
    "Neimark-Sacker",
    "proved",
    "estimated",
    "supercritical",
    "",
    "x",
    "r",
    "t",
]


def spoiled(generator: random.Random, plain: Any) -> Any:
    """A copy with a few leaves of one row or of a certificate's system changed."""
    plain = json.loads(json.dumps(plain))
    for _ in range(generator.randint(1, 2)):
        at = generator.choice([plain["ledger"]["rows"][0]["onset"]] * 3 + [plain])
        key: Any = generator.choice(["certificate", *at] if at is not plain else ["certified"])
        while isinstance(at[key], (dict, list)) and at[key]:
            at = at[key]
            key = generator.choice(list(at)) if isinstance(at, dict) else generator.randrange(len(at))
        at[key] = leaf(generator, at[key])
    return plain


def leaf(generator: random.Random, old: Any) -> Any:
    if isinstance(old, int):
        return generator.choice([0, 1, 2, 3, 10**9, 2**53, old + 1, old * 2])
    if not isinstance(old, str) or not old or generator.random() < 0.2:
        return generator.choice([*WORDS, "0", "-1", "1e-300", "9" * 300, "1." + "1" * 1200])
    place = generator.randrange(len(old))
    return old[:place] + generator.choice("0123456789+-*/()., xe\n") + old[place + 1 :]


def test_spoiled_sessions_are_refused_in_words() -> None:
    data = resource("demo", "hatchery.tinemark").read_bytes()
    whole = json.loads(zipfile.ZipFile(resource("demo", "hatchery.tinemark")).read("session.json"))
    del whole["ledger"]["rows"][1:]
    whole["ledger"]["alphas"] = []
    generator = random.Random(1603)
    outcomes = dict.fromkeys(Outcome, 0)
    for _ in range(300):
        plain = spoiled(generator, whole)
        try:
            session = read_session(packed(json.dumps(plain).encode()), file="f")
        except SessionFileError:
            continue
        shown = with_doubts(session)
        # What is written after opening comes back the same.
        assert with_doubts(read_session(session_bytes(shown))) == shown
        for (_, claim), row in zip(claims_of(session), shown.ledger.rows, strict=False):
            verdict = check(claim)
            outcomes[verdict.outcome] += 1
            if verdict.outcome is not Outcome.CONFIRMED:
                assert verdict.reason
                assert len(verdict.words) < 400
            if verdict.outcome is Outcome.REFUSED and verdict.part.value == "digest":
                assert row.onset.status is Status.ESTIMATED
    assert outcomes[Outcome.REFUSED] > 80
    # What is not covered by a certificate (words, notes) may have been changed, and little else.
    assert outcomes[Outcome.CONFIRMED] < 60
    assert session_bytes(read_session(data)) == data
