"""Branches on the diagram: asked for at rest, drawn, hovered, and giving way to clicks; kinds and jumps."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QColor, QImage, QPainter
from PySide6.QtTest import QTest
from shell_window import FakeDesks, FakeRefinery, flip, window_on

from tinemark.density.request import View
from tinemark.document import ledger as ledgers
from tinemark.onsets.results import BranchPiece, BranchRequest, BranchResult, Criticality, Kind
from tinemark.systems.errors import NoOnsetFound
from tinemark.window.branch_curves import BranchCurves, cycle_words, multiplier_words
from tinemark.window.ledger_marks import consequence_words, is_jump, kind_words, mark_of, short_label
from tinemark.window.signs import CORNERS, kind_path
from tinemark.window.theme import DARK, LIGHT, contrast
from tinemark.work.jobs import Cancelled, Failed, Finished, Progressed

VIEW = View(Fraction(0), Fraction(1), Fraction(0), Fraction(1))
PLOT = QRectF(0, 0, 400, 200)
RESULT = BranchResult(
    (
        BranchPiece(1, True, (0.0, 0.5), ((0.5, 0.5),), ((-0.5, 0.0), (-1.0, 0.0))),
        BranchPiece(1, False, (0.5, 1.0), ((0.5, 0.5),), ((-1.0, 0.0), (-2.0, 0.0))),
        BranchPiece(2, True, (0.5, 1.0), ((0.5, 0.9), (0.5, 0.1)), ((1.0, 0.0), (0.6, 0.8))),
    ),
    ((Kind.FLIP, 1, 0.5, 0.5), (Kind.FOLD, 3, 0.25, 0.9)),
    "branches of periods 1, 2 were followed and pass 2 onsets",
)


class BranchingRefinery(FakeRefinery):
    """Records views as well."""

    def branches(self, request: BranchRequest) -> int:
        self.asked.append(request)
        return len(self.asked)


@pytest.fixture
def desks() -> FakeDesks:
    made = FakeDesks()
    made.refinery = BranchingRefinery()
    return made


@pytest.fixture
def window(tmp_path, qtbot, desks):
    with window_on(tmp_path, make=desks.make) as shown:
        qtbot.waitUntil(lambda: shown.branches.desk is not None)
        yield shown


def asked(desks) -> list[BranchRequest]:
    return [request for request in desks.refinery.asked if isinstance(request, BranchRequest)]


# --- curves


def test_a_cycle_is_found_by_its_curve_and_told_in_words():
    curves = BranchCurves(RESULT, VIEW)
    stable = curves.cycle_at(VIEW, PLOT, QPointF(100, 103))
    assert (stable.period, stable.stable, stable.piece) == (1, True, 0)
    assert stable.multiplier == pytest.approx(-0.75)
    assert cycle_words(stable) == "Stable steady state, multiplier \N{MINUS SIGN}0.75"
    unstable = curves.cycle_at(VIEW, PLOT, QPointF(300, 100))
    assert cycle_words(unstable) == "Unstable steady state, multiplier \N{MINUS SIGN}1.5"
    upper = curves.cycle_at(VIEW, PLOT, QPointF(400, 21))
    assert (upper.period, upper.piece) == (2, 2)
    assert float(curves.value_at(upper.across, upper.up)[1]) == pytest.approx(0.9, abs=1e-3)
    assert curves.cycle_at(VIEW, PLOT, QPointF(100, 150)) is None


def test_pairs_of_multipliers_are_told_as_pairs():
    assert (
        multiplier_words(complex(0, -1))
        == "multipliers 0 \N{PLUS-MINUS SIGN} 1i (modulus 1, 0.25 of a turn a period)"
    )


def test_curves_lie_where_they_belong_in_another_view():
    curves = BranchCurves(RESULT, VIEW)
    half = View(Fraction(0), Fraction(1, 2), Fraction(0), Fraction(1))
    assert curves.cycle_at(half, PLOT, QPointF(399, 100)).stable
    assert [place.x() for _, place in curves.places(half, PLOT)] == [pytest.approx(400), pytest.approx(200)]
    deep = View(Fraction(1, 2), Fraction(1, 2) + Fraction(1, 10**12), Fraction(0), Fraction(1))
    assert curves.places(deep, PLOT) == [] and curves.cycle_at(deep, PLOT, QPointF(200, 100)) is None


def test_stable_is_solid_and_unstable_dashed_in_one_hue():
    image = QImage(400, 200, QImage.Format.Format_RGB32)
    image.fill(QColor(LIGHT.plot))
    painter = QPainter(image)
    BranchCurves(RESULT, VIEW).paint(painter, LIGHT, VIEW, PLOT)
    painter.end()

    def drawn(first: int, last: int) -> list[bool]:
        row = [image.pixelColor(x, 100).lightness() for x in range(first, last)]
        below = [image.pixelColor(x, 99).lightness() for x in range(first, last)]
        return [min(pair) < 150 for pair in zip(row, below, strict=True)]

    assert all(drawn(5, 190))
    dashes = drawn(210, 390)
    assert 0.4 < sum(dashes) / len(dashes) < 0.8


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_the_hue_is_seen_on_the_ground(theme):
    assert contrast(theme.branch, theme.plot) >= 4.5
    assert theme.branch not in (theme.accent, theme.cool)


# --- asking


def test_nothing_is_asked_until_the_branches_are_switched_on(window, desks, qtbot):
    assert not asked(desks)
    window.actions_by_name["branches"].trigger()
    qtbot.waitUntil(lambda: len(asked(desks)) == 1)
    view = window.keeper.session.view
    request = asked(desks)[0]
    assert (request.left, request.right, request.bottom, request.top) == (
        view.left,
        view.right,
        view.bottom,
        view.top,
    )
    assert window.actions_by_name["branches"].isChecked() and window.memory.flag("branches", False)
    window.actions_by_name["branches"].trigger()
    assert desks.refinery.cancelled == [1] and window.diagram.branches.curves is None


def switched_on(window, desks, qtbot) -> int:
    window.branches.switch()
    qtbot.waitUntil(lambda: bool(asked(desks)))
    return len(desks.refinery.asked)


def answer(window, desks, number: int) -> None:
    request = desks.refinery.asked[number - 1]
    window._hear(Finished(number, request, RESULT))


def test_the_newest_view_wins_and_a_stale_answer_is_dropped(window, desks, qtbot):
    first = switched_on(window, desks, qtbot)
    view = window.keeper.session.view
    window.keeper.show_view(View(view.left, (view.left + view.right) / 2, view.bottom, view.top))
    assert desks.refinery.cancelled == [first]
    answer(window, desks, first)
    assert window.diagram.branches.curves is None
    qtbot.waitUntil(lambda: len(asked(desks)) == 2)
    answer(window, desks, len(desks.refinery.asked))
    assert window.diagram.branches.curves.view == window.keeper.session.view
    window.files.open_builtin("ricker")
    assert window.diagram.branches.curves is None, "curves of another system must not stay"


def test_branches_give_way_to_a_click_and_come_back_after_it(window, desks, qtbot):
    first = switched_on(window, desks, qtbot)
    window.rows.pick(Fraction(3), Fraction(2, 3))
    assert desks.refinery.cancelled == [first]
    pick = len(desks.refinery.asked)
    window._hear(Cancelled(pick, desks.refinery.asked[pick - 1]))
    qtbot.waitUntil(lambda: len(asked(desks)) == 2)


def test_long_work_is_shown_and_can_be_cancelled(window, desks, qtbot, monkeypatch):
    number = switched_on(window, desks, qtbot)
    monkeypatch.setattr("tinemark.window.branch_jobs.LONG_MS", -1)
    window._hear(Progressed(number, "following the branch of period 2", 0.5))
    assert window.status.bar.isVisible() and "period 2" in window.status.words.words
    window.cancel()
    assert desks.refinery.cancelled == [number] and not window.status.bar.isVisible()
    assert window.branches.is_up_to_date


def test_what_cannot_be_followed_is_said(window, desks, qtbot):
    number = switched_on(window, desks, qtbot)
    window._hear(Failed(number, asked(desks)[0], NoOnsetFound("the view is too narrow")))
    assert window.status.words.words == "No branches: the view is too narrow."
    assert window.status.words.property("rank") == "warning"


def test_hovering_tells_and_a_click_on_a_sign_picks_there(window, desks, qtbot):
    answer(window, desks, switched_on(window, desks, qtbot))
    diagram = window.diagram
    plot = diagram.parts.plot
    QTest.mouseMove(diagram, QPointF(plot.left() + 0.7 * plot.width(), plot.center().y()).toPoint())
    qtbot.waitUntil(lambda: diagram.branches.point is not None)
    words = diagram.branches.words(diagram.words_at)
    assert words.startswith("Unstable steady state, multiplier") and "\nr " in words
    spot = QPointF(plot.left() + 0.25 * plot.width() + 3, plot.top() + 0.1 * plot.height() + 2).toPoint()
    QTest.mouseMove(diagram, spot)
    qtbot.waitUntil(lambda: diagram.branches.spot is not None)
    assert diagram.branches.words(diagram.words_at).startswith("Fold of a cycle of period 3")
    diagram.picked.connect(lambda *_: pytest.fail("a sign was clicked, not the place"))
    QTest.mouseClick(diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, spot)
    view = window.keeper.session.view
    request = desks.refinery.asked[-1]
    assert request.near == view.left + view.width / 4
    assert request.observed == view.bottom + Fraction(0.9) * view.height
    assert request.kinds == {Kind.FOLD} and request.width < view.width / 10
    assert not diagram.grab().isNull()


# --- kinds and jumps


def test_every_kind_has_a_shape_of_its_own():
    shapes = {}
    for kind in Kind:
        path = kind_path(kind.value, QPointF(0, 0), 8)
        shapes[kind] = tuple(
            (round(path.elementAt(n).x, 3), round(path.elementAt(n).y, 3)) for n in range(path.elementCount())
        )
    known = {kind: shape for kind, shape in shapes.items() if kind is not Kind.UNKNOWN}
    assert len(set(known.values())) == len(known)
    assert set(CORNERS) == {kind.value for kind in Kind} - {Kind.NEIMARK_SACKER.value, Kind.UNKNOWN.value}


@pytest.mark.parametrize(
    ("change", "label", "words"),
    [
        ({"kind": Kind.FLIP}, "1\N{RIGHTWARDS ARROW}2", "supercritical flip, period 1 to 2"),
        (
            {"kind": Kind.NEIMARK_SACKER, "period_after": 1},
            "Neimark-Sacker 1",
            "supercritical Neimark-Sacker point of period 1",
        ),
        (
            {"kind": Kind.PITCHFORK, "period_before": 2, "period_after": 2},
            "pitchfork 2",
            "supercritical pitchfork of period 2",
        ),
        (
            {"kind": Kind.TRANSCRITICAL, "period_after": 1, "criticality": Criticality.NOT_APPLICABLE},
            "transcritical 1",
            "transcritical of period 1",
        ),
        (
            {"kind": Kind.BORDER_COLLISION, "criticality": Criticality.NOT_APPLICABLE},
            "border collision 2",
            "border collision, period 1 to 2",
        ),
        (
            {
                "kind": Kind.CRISIS,
                "period_before": 3,
                "period_after": 0,
                "criticality": Criticality.NOT_APPLICABLE,
            },
            "crisis",
            "crisis of period 3",
        ),
    ],
)
def test_kinds_in_words(change, label, words):
    onset = replace(flip("3"), **change)
    assert short_label(onset) == label
    assert kind_words(onset) == words


def test_a_jump_is_said_at_the_mark_and_in_the_detail(window):
    soft = flip("3")
    hard = replace(flip("3.2"), criticality=Criticality.SUBCRITICAL)
    told = replace(
        flip("3.3"),
        kind=Kind.BORDER_COLLISION,
        criticality=Criticality.NOT_APPLICABLE,
        consequence="no stable behaviour near the border follows, a jump",
    )
    formula = replace(soft, consequence="the formula jumps there, so the cycle ends")
    assert [is_jump(onset) for onset in (soft, hard, told, formula)] == [False, True, True, False]
    assert consequence_words(hard) == "the change is a jump"
    assert consequence_words(told) == told.consequence
    place = ledgers.place_of(window.keeper.system, "r")
    ledger = window.keeper.session.ledger
    for onset in (soft, hard, told):
        ledger, row = ledgers.add(ledger, onset, place)
    window.keeper.set_ledger("test", ledger)
    marks = [mark_of(row, "x") for row in ledger.rows]
    assert sorted(mark.jumps for mark in marks) == [False, True, True]
    assert all(("jump" in mark.label and "jump" in mark.words) == mark.jumps for mark in marks)
    window.rows.select(row)
    assert window.ledger_panel.detail.follows.text() == "No stable behaviour near the border follows, a jump."
    assert not window.diagram.grab().isNull()
