"""Sessions for the document's tests: a whole one with everything in it, and a strategy of many."""

from __future__ import annotations

import dataclasses
import io
import zipfile
from fractions import Fraction

import onset_samples as known
from hypothesis import strategies as st

from tinemark.density.request import SweepRule, View
from tinemark.density.tone import PALETTE_NAMES
from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.ledger import FollowedAlpha
from tinemark.document.session import PictureSettings, Session
from tinemark.document.session_file import session_bytes
from tinemark.equations.accuracy import Accuracy
from tinemark.onsets.results import Certificate, Kind, Onset, Sensitivity, Status

LOGISTIC_TEXT = """\
# Kept with its comments.
title = "Logistic growth"
kind = "map"

[states.x]
start = "0.4"
range = ["0", "1"]

[parameters.r]
value = "3.2"            # as measured
range = ["2.8", "4.0"]

[next]
x = "r*x*(1 - x)"

[diagram]
parameter = "r"
observe = "x"
"""
CUBIC_TEXT = LOGISTIC_TEXT.replace("Logistic growth", "Cubic").replace("r*x*(1 - x)", "r*x*(1 - x**2)")


def pick(session: Session, onset: Onset, stated_base: int = 0) -> Session:
    """The session with one more pick of its present system."""
    place = led.place_of(ses.system_of(session), session.parameter)
    ledger, _ = led.add(session.ledger, onset, place, stated_base=stated_base)
    return ses.with_ledger(session, ledger)


def full_session() -> Session:
    """A session with something in every field."""
    session = ses.new_session(LOGISTIC_TEXT)
    for onset in known.flips(known.LOGISTIC[:6]):
        session = pick(session, onset)
    period, fold_at, values = known.WINDOWS[0]
    for onset in (known.fold(fold_at, period), *known.flips(values, period)):
        session = pick(session, onset)
    for onset in known.flips(known.WINDOWS[4][2][:2], 6):
        session = pick(session, onset, 6)
    eye = led.eye_pick("r", Fraction(11, 3), Fraction(1, 700))
    session = pick(session, eye)
    measured = known.onset(Kind.FLIP, "3.01", 1, 2, "0.02", Status.MEASURED)
    session = pick(session, measured)
    session = ses.with_ledger(
        session, led.note(session.ledger, "r2", "seen at the bench, 4 mA • 东\n2nd line")
    )
    session = ses.with_view(session, View(Fraction(10, 3), Fraction(7, 2), Fraction(1, 3), Fraction("0.97")))
    session = ses.with_view(session, View(Fraction("3.4"), Fraction("3.45"), Fraction(0), Fraction(1)))
    session = ses.view_back(session)
    session = ses.with_picture(
        session, PictureSettings(SweepRule.SEVERAL, 1500, 8, "thorough", "equalised", "ember")
    )
    session = ses.with_probe(session, Fraction("3.83"))
    return ses.with_words(session, title='Growth "A" \\ β', notes="line 1\nline 2\t<&>\u2028")


def certified_session() -> Session:
    """The whole session, and a row with all that a proof may leave behind."""
    session = full_session()
    certificate = Certificate(
        system_text=LOGISTIC_TEXT,
        kind="flip",
        period=8,
        parameter="r",
        criticality="supercritical",
        precision=120,
        parameter_box=("3.5644072660954325977735575", "0.0000000000000000000000012"),
        state_boxes=(("x", "0.490607658056600960502243955", "0.000000000000000000000012"),),
        digest="0123456789abcdef" * 4,
    )
    onset = dataclasses.replace(
        known.flip(known.LOGISTIC[3], 8, width="1e-21"),
        consequence="a jump, held back to r = 3.5",
        sensitivities=(Sensitivity("c", "-1.25e-3"),),
        certificate=certificate,
    )
    return pick(session, onset)


def json_of(session: Session) -> bytes:
    with zipfile.ZipFile(io.BytesIO(session_bytes(session))) as archive:
        return archive.read("session.json")


def packed(
    content: bytes, name: str = "session.json", *, compression: int = zipfile.ZIP_STORED, mode: int = 0o100644
) -> bytes:
    buffer = io.BytesIO()
    with zipfile.ZipFile(buffer, "w", compression) as archive:
        info = zipfile.ZipInfo(name)
        info.compress_type = compression
        info.external_attr = mode << 16
        archive.writestr(info, content)
    return buffer.getvalue()


texts = st.text(st.characters(exclude_categories=["Cs"]), max_size=60)
fractions = st.one_of(
    st.fractions(min_value=-(10**30), max_value=10**30),
    st.builds(lambda n, p: Fraction(n, 10**p), st.integers(-(10**40), 10**40), st.integers(0, 120)),
)
views = (
    st.tuples(fractions, fractions, fractions, fractions)
    .map(lambda f: View(*sorted(f[:2]), *sorted(f[2:])))
    .filter(lambda v: v.left < v.right and v.bottom < v.top)
)
pictures = st.builds(
    PictureSettings,
    rule=st.sampled_from(SweepRule),
    transient_steps=st.integers(0, 10**7),
    starts=st.integers(1, 10_000),
    budget=st.sampled_from(list(ses.BUDGETS)),
    tone=st.sampled_from(ses.TONES),
    palette=st.sampled_from(["", *PALETTE_NAMES]),
    accuracy=st.sampled_from(Accuracy),
)
onsets = st.one_of(
    st.sampled_from(known.flips(known.LOGISTIC)),
    st.sampled_from([known.fold(fold_at, period) for period, fold_at, _ in known.WINDOWS]),
    st.builds(
        lambda value, half: led.eye_pick("r", value, half),
        fractions,
        fractions.filter(lambda f: f != 0).map(abs).filter(lambda f: f > Fraction(1, 10**300)),
    ),
    st.builds(
        lambda onset, reason, claim: dataclasses.replace(
            onset, status=Status.ESTIMATED, reason=reason, evidence=((claim, reason),)
        ),
        st.sampled_from(known.flips(known.LOGISTIC)),
        texts,
        texts,
    ),
)


@st.composite
def sessions(draw: st.DrawFn) -> Session:
    """Sessions reached by changes, in any order."""
    session = ses.new_session(LOGISTIC_TEXT)
    for _ in range(draw(st.integers(0, 8))):
        match draw(st.integers(0, 7)):
            case 0 | 1:
                session = pick(session, draw(onsets), draw(st.sampled_from([0, 0, 1, 3])))
            case 2:
                session = ses.with_view(session, draw(views))
            case 3:
                session = draw(st.sampled_from([ses.view_back, ses.view_forward]))(session)
            case 4:
                session = ses.with_picture(session, draw(pictures))
            case 5:
                session = ses.with_probe(session, draw(st.none() | fractions))
            case 6:
                session = ses.with_words(session, title=draw(texts), notes=draw(texts))
            case 7:
                names = [row.id for row in session.ledger.rows]
                if names:
                    noted = led.note(session.ledger, draw(st.sampled_from(names)), draw(texts))
                    session = ses.with_ledger(session, noted)
                else:
                    session = ses.with_system(session, CUBIC_TEXT)
    return session


def followed_session() -> Session:
    """The same, and what following two of its ladders said of their cycles."""
    session = certified_session()
    ledger = session.ledger
    flips = [row for row in ledger.rows if row.onset.kind is Kind.FLIP]
    first, window = (tuple(row.id for row in flips if row.ladder == name) for name in ("L1", "L7"))
    alphas = (
        FollowedAlpha(first, "-2.50290787509589", "0.00000000000003"),
        FollowedAlpha(window, reason="alpha needs at least 5 successive proved levels"),
    )
    return dataclasses.replace(session, ledger=dataclasses.replace(ledger, alphas=alphas))
