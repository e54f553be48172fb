"""The shell's parts by themselves: exact views, marks, axes, the bridge, words."""

from __future__ import annotations

import threading
from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from PySide6.QtCore import QPointF, QRectF, QSizeF
from PySide6.QtGui import QFontMetricsF, QImage, QPainter
from shell_window import flip

from tinemark.density.field import Field
from tinemark.density.request import View
from tinemark.document.row import Row
from tinemark.onsets.results import Criticality, Kind, Status
from tinemark.window import view_navigation as nav
from tinemark.window.axis import axis_ticks, axis_title
from tinemark.window.bridge import Bridge
from tinemark.window.diagram_layout import lay_out
from tinemark.window.diagram_paint import runs
from tinemark.window.ledger_marks import mark_of, short_label
from tinemark.window.lyapunov_strip import strip_range
from tinemark.window.marks import LINE_STYLES, Mark, mark_at, paint_sign
from tinemark.window.onset_jobs import digits_for
from tinemark.window.picture_tones import Tones, table, toned
from tinemark.window.status_line import counted
from tinemark.window.theme import LIGHT, mono_font

UNIT = View(Fraction(0), Fraction(1), Fraction(0), Fraction(1))
places = st.floats(0.0, 1.0)
edges = st.fractions(-1000, 1000, max_denominator=10**12)
extents = st.fractions(Fraction(1, 10**40), 1000).filter(lambda extent: extent > 0)
views = st.builds(lambda x, y, w, h: View(x, x + w, y, y + h), edges, edges, extents, extents)


# --- exact views


@given(views, places, places, st.sampled_from([Fraction(4, 5), Fraction(5, 4), Fraction(1, 100)]))
def test_a_zoom_keeps_its_place(view, u, v, factor):
    x, y = nav.place(view, u, v)
    zoomed = nav.zoomed(view, u, v, factor)
    assert abs(zoomed.width / view.width - factor) < factor / 10**5
    assert abs(nav.unit_x(zoomed, x) - u) < 1e-5 and abs(nav.unit_y(zoomed, y) - v) < 1e-5


@given(views, st.integers(-500, 500), st.integers(-500, 500))
def test_a_pan_is_exact_and_comes_back(view, columns, rows):
    there = nav.panned(view, columns, rows, 811, 503)
    assert there.width == view.width and there.height == view.height
    assert (there.left - view.left) * 811 == columns * view.width
    assert nav.panned(there, -columns, -rows, 811, 503) == view


@given(views, places, places, places, places)
def test_a_box_holds_what_was_drawn_round(view, u0, v0, u1, v1):
    if abs(u1 - u0) < 1e-3 or abs(v1 - v0) < 1e-3:
        return
    inside = nav.box(view, u0, v0, u1, v1)
    left, bottom = nav.place(view, min(u0, u1), min(v0, v1))
    assert abs(inside.left - left) < inside.width / 10**5
    assert abs(inside.bottom - bottom) < inside.height / 10**5
    assert nav.box(view, u1, v1, u0, v0) == inside


def test_zooming_ends_where_nothing_can_be_drawn():
    view = UNIT
    for _ in range(120):
        view = nav.zoomed(view, 0.3, 0.6, Fraction(1, 10))
    assert view.width == pytest.approx(nav.NARROWEST, rel=1e-5)
    for _ in range(130):
        view = nav.zoomed(view, 0.3, 0.6, Fraction(10))
    assert view.width == pytest.approx(nav.WIDEST, rel=1e-5)


@pytest.mark.parametrize(
    ("value", "extent", "words"),
    [
        ("3.44948974278", "1.2", "3.449"),
        ("-0.00123", "0.01", "\N{MINUS SIGN}0.00123"),
        ("0", "1", "0.000"),
        ("123456", "100000", "123456"),
        ("3.44948974278317809819", "0.000000000000001", "3.449489742783178098"),
    ],
)
def test_a_reading_has_the_digits_that_the_view_can_tell(value, extent, words):
    assert nav.reading(Fraction(value), Fraction(extent), 1000) == words


@given(st.fractions(Fraction(1, 10**60), 10**60).filter(lambda value: value > 0))
def test_magnitude(value):
    power = nav.magnitude(value)
    assert Fraction(10) ** power <= value < Fraction(10) ** (power + 1)


def test_a_click_asks_for_more_digits_the_deeper_the_view():
    near, tiny = Fraction("3.4494897"), Fraction(1, 10**30)
    assert digits_for(View(Fraction(3), Fraction(4), Fraction(0), Fraction(1))) == 20
    assert digits_for(View(near, near + tiny, Fraction(0), Fraction(1))) == 38


# --- layout


@pytest.mark.parametrize("ratio", [1.0, 1.25, 1.5, 1.75, 2.0, 3.0])
@pytest.mark.parametrize("size", [(320, 260), (797, 706), (1500, 901)])
def test_the_plot_lies_on_whole_device_pixels(qapp, size, ratio):
    parts = lay_out(QSizeF(*size), ratio, QFontMetricsF(mono_font(0.92)))
    for length in (parts.plot.left(), parts.plot.top(), parts.plot.width(), parts.plot.height()):
        assert length * ratio == pytest.approx(round(length * ratio), abs=1e-6)
    assert (parts.columns, parts.rows) == (
        round(parts.plot.width() * ratio),
        round(parts.plot.height() * ratio),
    )
    assert parts.plot.right() <= size[0] and parts.axis.bottom() <= size[1] + 1e-6
    assert parts.strip.top() >= parts.plot.bottom() and parts.periods.bottom() <= parts.plot.top()


def test_ticks_lie_where_their_labels_say(qapp):
    low, high = Fraction("3.4494897427"), Fraction("3.4494897429")
    found = axis_ticks(low, high, 700, 90)
    offset = Fraction(found.offset)
    assert len(found.marks) >= 3
    for share, label in found.marks:
        value = offset + Fraction(label)
        assert float((value - low) / (high - low)) == pytest.approx(share)
    assert len({label for _, label in found.marks}) == len(found.marks)
    assert axis_title("r", "V", "") == "r (V)"
    assert axis_title("x", "", "-3.5") == "x = \N{MINUS SIGN}3.5 + label"


# --- marks


def test_marks_say_status_by_shape_and_line(qapp):
    pictures = set()
    for status in LINE_STYLES:
        image = QImage(24, 24, QImage.Format.Format_RGB32)
        image.fill(LIGHT.plot)
        painter = QPainter(image)
        paint_sign(painter, LIGHT, status, QPointF(12, 12), 8)
        painter.end()
        pictures.add(bytes(image.constBits()))
    assert len(pictures) == len(LINE_STYLES) == len(set(LINE_STYLES.values())) == len(Status)
    assert set(LINE_STYLES) == {status.value for status in Status}


def test_the_mark_under_the_pointer_is_the_nearest():
    marks = [
        Mark(name, Fraction(value), None, "", "proved", "") for name, value in (("a", "0.5"), ("b", "0.52"))
    ]
    plot, lane = QRectF(100, 50, 400, 300), QRectF(100, 20, 400, 20)
    assert mark_at(marks, UNIT, plot, QPointF(302, 30), lane).row == "a"
    assert mark_at(marks, UNIT, plot, QPointF(305, 30), lane).row == "b"
    assert mark_at(marks, UNIT, plot, QPointF(305, 200), lane) is None
    assert mark_at(marks, UNIT, plot, QPointF(301, 200), lane).row == "a"


def test_labels_and_words_of_marks():
    row = Row("r1", flip("3.0"), "k", note="the first")
    mark = mark_of(row, "x")
    assert mark.label == "1\N{RIGHTWARDS ARROW}2" and mark.observed == Fraction("0.6666666666666666")
    assert "supercritical flip, period 1 to 2" in mark.words and "the first" in mark.words
    assert mark_of(row, "2*x").observed is None
    fold = replace(
        row.onset, kind=Kind.FOLD, period_before=0, period_after=3, criticality=Criticality.NOT_APPLICABLE
    )
    assert short_label(fold) == "fold 3"
    eye = replace(row.onset, kind=Kind.UNKNOWN, period_before=0, period_after=0)
    assert short_label(eye) == "by eye"


# --- pictures


def field(counts, period=None) -> Field:
    columns = counts.shape[1]
    return Field(
        counts.astype(np.uint32),
        np.zeros(columns),
        np.zeros(columns, np.int32) if period is None else np.asarray(period, np.int32),
        np.zeros(columns, bool),
        1,
    )


TONES = Tones("log", "ink", LIGHT.plot, False)


def test_uncounted_cells_keep_the_ground_and_row_0_is_at_the_bottom():
    counts = np.zeros((4, 3))
    counts[0, 1] = 9
    pixels = toned(field(counts), TONES)
    ground = 0xFF000000 | int(LIGHT.plot[1:], 16)
    assert pixels.flags.c_contiguous and pixels.dtype == np.uint32 and pixels.shape == (4, 3)
    assert pixels[3, 1] != ground and (np.delete(pixels.ravel(), 10) == ground).all()
    assert table(TONES)[0] == ground and len(table(TONES)) == 256


def test_branches_are_thickened_only_where_the_orbit_is_periodic():
    counts = np.zeros((7, 2))
    counts[3] = 5
    pixels = toned(field(counts, [2, 0]), replace(TONES, thickness=3))
    ground = table(TONES)[0]
    assert (pixels[:, 0] != ground).tolist() == [False, False, True, True, True, False, False]
    assert (pixels[:, 1] != ground).sum() == 1


def test_runs_of_columns():
    assert list(runs(np.array([1, 1, 0, 2, 2, 2]))) == [(0, 2, 1), (2, 3, 0), (3, 6, 2)]
    assert list(runs(np.array([], int))) == []


def test_the_strip_holds_what_matters():
    exponents = np.concatenate([np.linspace(-0.9, 0.4, 500), [np.nan, -np.inf]])
    bottom, top = strip_range(exponents)
    assert (bottom, top) == (-1.0, 0.5)
    assert strip_range(np.array([np.nan])) == (-1.0, 0.5)


# --- the bridge


def test_only_the_newest_picture_crosses_and_on_the_windows_thread(qtbot):
    bridge = Bridge()
    bridge.set_tones(TONES)
    seen: list[tuple[int, threading.Thread]] = []
    bridge.picture_ready.connect(lambda painted: seen.append((painted.number, threading.current_thread())))

    def work() -> None:
        for number in range(1, 40):
            bridge.on_field(number, field(np.ones((50, 50))))

    worker = threading.Thread(target=work)
    worker.start()
    worker.join()
    qtbot.waitUntil(lambda: bool(seen) and seen[-1][0] == 39)
    numbers = [number for number, _ in seen]
    assert numbers == sorted(numbers) and len(numbers) < 39
    assert {thread for _, thread in seen} == {threading.current_thread()}
    bridge.close()
    bridge.on_field(40, field(np.ones((5, 5))))
    bridge.on_event("late")
    bridge.deleteLater()


def test_errands_answer_the_newest_call_and_hand_on_errors(qtbot):
    bridge = Bridge()
    answers: list[object] = []
    gate = threading.Event()

    def slow() -> str:
        gate.wait(10)
        return "old"

    def wrong() -> None:
        raise ValueError("wrong")

    bridge.call("sum", slow, answers.append, answers.append)
    bridge.call("sum", lambda: "new", answers.append, answers.append)
    bridge.call("other", wrong, answers.append, answers.append)
    gate.set()
    qtbot.waitUntil(lambda: len(answers) == 2)
    assert answers[0] == "new" and isinstance(answers[1], ValueError)
    bridge.close()
    bridge.deleteLater()


def test_a_picture_that_cannot_be_coloured_is_said_and_the_next_one_comes(qtbot):
    bridge = Bridge()
    said: list[str] = []
    seen: list[int] = []
    bridge.trouble.connect(said.append)
    bridge.picture_ready.connect(lambda painted: seen.append(painted.number))
    bridge.set_tones(replace(TONES, palette="no such palette"))
    bridge.on_field(1, field(np.ones((5, 5))))
    qtbot.waitUntil(lambda: bool(said))
    bridge.set_tones(TONES)
    bridge.on_field(2, field(np.ones((5, 5))))
    qtbot.waitUntil(lambda: seen == [2])
    bridge.close()
    bridge.deleteLater()


@pytest.mark.parametrize(
    ("steps", "words"),
    [(0, "0"), (12_345, "12\N{THIN SPACE}345"), (3_260_000, "3.3 million"), (7_000_000_000, "7.0 billion")],
)
def test_counts_in_words(steps, words):
    assert counted(steps) == words
