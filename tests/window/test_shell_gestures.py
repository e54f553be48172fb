"""The hand on the diagram, with fake desks: what is asked for, and what is shown at once."""

from __future__ import annotations

from fractions import Fraction

import pytest
from PySide6.QtCore import QPoint, QPointF, Qt
from PySide6.QtGui import QWheelEvent
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QApplication
from shell_window import FakeDesks, at, window_on

from tinemark.onsets.results import Status
from tinemark.window.picture_jobs import TOO_DEEP
from tinemark.window.picture_tones import table
from tinemark.window.theme import current_theme
from tinemark.window.view_navigation import place
from tinemark.work.pictures import COMPILING, PictureWaits


@pytest.fixture
def desks():
    return FakeDesks()


@pytest.fixture
def window(qtbot, tmp_path, desks):
    with window_on(tmp_path, make=desks.make) as made:
        qtbot.waitUntil(lambda: made.pictures.desk is not None and bool(desks.pictures.asked))
        yield made


def drag(diagram, start: QPoint, end: QPoint, button=Qt.MouseButton.LeftButton) -> None:
    QTest.mousePress(diagram, button, Qt.KeyboardModifier.NoModifier, start)
    for step in (1, 2, 3, 4):
        QTest.mouseMove(diagram, start + (end - start) * step / 4)
    QTest.mouseRelease(diagram, button, Qt.KeyboardModifier.NoModifier, end)


def wheel(diagram, position: QPoint, turned: int) -> None:
    event = QWheelEvent(
        QPointF(position),
        QPointF(diagram.mapToGlobal(position)),
        QPoint(),
        QPoint(0, turned),
        Qt.MouseButton.NoButton,
        Qt.KeyboardModifier.NoModifier,
        Qt.ScrollPhase.NoScrollPhase,
        False,
    )
    QApplication.sendEvent(diagram, event)


def test_a_left_drag_zooms_to_the_box_and_backspace_goes_back(window, desks, qtbot):
    first = window.keeper.session.view
    start, end = at(window, "3.2", "0.8"), at(window, "3.6", "0.4")
    drag(window.diagram, start, end)
    view = window.keeper.session.view
    pixel = first.width / window.diagram.parts.columns
    assert abs(view.left - Fraction("3.2")) <= pixel
    assert abs(view.right - Fraction("3.6")) <= pixel
    assert abs(view.top - Fraction("0.8")) <= first.height / window.diagram.parts.rows
    qtbot.waitUntil(lambda: desks.pictures.asked[-1].view == view)
    window.diagram.setFocus()
    QTest.keyClick(window.diagram, Qt.Key.Key_Backspace)
    assert window.keeper.session.view == first
    QTest.keyClick(window.diagram, Qt.Key.Key_Backspace, Qt.KeyboardModifier.ShiftModifier)
    assert window.keeper.session.view == view
    QTest.keyClick(window.diagram, Qt.Key.Key_Home)
    assert window.keeper.session.view == first


def test_the_rubber_band_says_its_extents_and_escape_drops_it(window):
    before = window.keeper.session.view
    QTest.mousePress(
        window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, at(window, "3.2", "0.8")
    )
    QTest.mouseMove(window.diagram, at(window, "3.6", "0.4"))
    plain = window.diagram.grab().toImage()
    words = window.diagram.gestures._extents(
        window.diagram.point(Fraction("3.2"), Fraction("0.8")),
        window.diagram.point(Fraction("3.6"), Fraction("0.4")),
    )
    assert words.startswith("r 3.20") and "3.60" in words and "x 0.40" in words
    window.diagram.setFocus()
    QTest.keyClick(window.diagram, Qt.Key.Key_Escape)
    assert window.diagram.grab().toImage() != plain
    QTest.mouseRelease(
        window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, at(window, "3.6", "0.4")
    )
    assert window.keeper.session.view == before
    assert not window.onsets.jobs


def test_a_right_drag_pans_by_whole_columns_as_one_view(window, desks, qtbot):
    before = window.keeper.session.view
    start = at(window, "3.5", "0.5")
    drag(window.diagram, start, start + QPoint(-60, 3), Qt.MouseButton.RightButton)
    view = window.keeper.session.view
    shift = (view.left - before.left) * window.diagram.parts.columns / before.width
    assert shift == round(60 * window.diagram.devicePixelRatioF())
    assert view.width == before.width and view.bottom == before.bottom
    assert len(window.keeper.session.history.back) == 1
    qtbot.waitUntil(lambda: desks.pictures.asked[-1].view == view)


def test_the_old_picture_moves_at_once(window, desks, qtbot):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    image, drawn_for = window.diagram.image, window.keeper.session.view
    still = window.diagram.grab().toImage()
    start = at(window, "3.5", "0.5")
    drag(window.diagram, start, start + QPoint(-60, 0), Qt.MouseButton.RightButton)
    assert window.diagram.image is image and window.diagram.image_view == drawn_for
    moved = window.diagram.grab().toImage()
    plot = window.diagram.parts.plot
    ratio = window.diagram.devicePixelRatioF()
    # The line of counts in the left half, seen 60 pixels further left.
    rows = window.diagram.parts.rows
    y = int((plot.bottom() - plot.height() * (rows // 4 + 0.5) / rows) * ratio)
    x = round((plot.left() + plot.width() * 0.5 - 30) * ratio)
    assert moved.pixelColor(x - 60, y) == still.pixelColor(x, y)
    assert moved.pixelColor(x, y) != still.pixelColor(x, y)


def seen_at(window, u: float, v: float) -> str:
    image = window.diagram.grab().toImage()
    plot, ratio = window.diagram.parts.plot, window.diagram.devicePixelRatioF()
    across, up = plot.left() + u * plot.width(), plot.bottom() - v * plot.height()
    return image.pixelColor(int(across * ratio), int(up * ratio)).name()


def test_a_zoom_shows_a_first_look_before_anything_else_happens(window, desks, qtbot):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    desks.pictures.shade = 200
    shown: list[tuple[bool, object]] = []
    window.keeper.changed.connect(lambda *_: shown.append((window.diagram.glimpse, window.diagram.view)))
    drag(window.diagram, at(window, "3.2", "0.2"), at(window, "3.8", "0.8"))
    view = window.keeper.session.view
    # It was there when the session heard of the view, and is what is painted of it.
    assert shown[0][0].view == shown[0][1] == view == window.diagram.view
    looked = desks.pictures.glimpsed[-1]
    assert (looked.view, looked.columns) == (view, window.diagram.parts.columns)
    shade = f"#{int(table(window.pictures._tones)[200]) & 0xFFFFFF:06x}"
    assert {seen_at(window, u, v) for u in (0.3, 0.7) for v in (0.3, 0.7)} == {shade}
    qtbot.waitUntil(lambda: desks.pictures.asked[-1].view == view)
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image_view == view)
    assert window.diagram.glimpse is None
    assert seen_at(window, 0.3, 0.7) == current_theme().plot


def test_the_way_back_shows_a_first_look_and_a_pan_the_picture_itself(window, desks, qtbot):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    desks.pictures.shade = 200
    before = window.keeper.session.view
    window.diagram.gestures.zoom(Fraction(1, 2))
    looks = len(desks.pictures.glimpsed)
    window.keeper.view_back()
    assert window.diagram.glimpse.view == before == window.diagram.view
    assert len(desks.pictures.glimpsed) == looks + 1
    start = at(window, "3.5", "0.5")
    drag(window.diagram, start, start + QPoint(-60, 0), Qt.MouseButton.RightButton)
    assert len(desks.pictures.glimpsed) == looks + 1
    assert window.diagram.glimpse.view != window.diagram.view


def test_the_plot_alone_is_painted_as_in_the_whole(window, desks, qtbot):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    QApplication.processEvents()
    whole = window.diagram.grab().toImage()
    area = window.diagram.parts.plot.toAlignedRect()
    part = window.diagram.grab(area).toImage()
    ratio = window.diagram.devicePixelRatioF()
    corner = (round(area.x() * ratio), round(area.y() * ratio))
    assert part == whole.copy(*corner, part.width(), part.height())


def test_the_wheel_zooms_at_the_pointer_as_one_view(window):
    before = window.keeper.session.view
    position = at(window, "3.3", "0.6")
    spot = place(before, *window.diagram.place_at(QPointF(position)))
    for _ in range(3):
        wheel(window.diagram, position, 120)
    view = window.keeper.session.view
    assert float(view.width / before.width) == pytest.approx(0.8**3, rel=1e-5)
    again = place(view, *window.diagram.place_at(QPointF(position)))
    assert abs(again[0] - spot[0]) < before.width / 10**5
    assert len(window.keeper.session.history.back) == 1
    wheel(window.diagram, position, -120)
    assert window.keeper.session.view.width > view.width


def test_a_click_asks_the_refinery_and_shows_at_once_where(window, desks):
    QTest.mouseClick(
        window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, at(window, "3.01", "0.66")
    )
    request = desks.refinery.asked[-1]
    view = window.keeper.session.view
    assert abs(request.near - Fraction("3.01")) < view.width / 500
    assert (request.width, request.height, request.digits) == (view.width, view.height, 20)
    assert [words for _, _, words in window.diagram.pending.values()] == ["refining\N{HORIZONTAL ELLIPSIS}"]
    assert window.status.cancel.isVisible()
    QTest.mouseClick(window.status.cancel, Qt.MouseButton.LeftButton)
    assert desks.refinery.cancelled == [1]


def test_reading_by_eye_is_half_a_pixel_uncertain(window):
    window.set_tool("read")
    QTest.mouseClick(
        window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, at(window, "3.45", "0.5")
    )
    (row,) = window.keeper.session.ledger.rows
    half = window.keeper.session.view.width / window.diagram.parts.columns / 2
    assert row.onset.status is Status.READ_BY_EYE
    assert half <= row.onset.half_width <= half * Fraction(11, 10)
    assert [mark.row for mark in window.diagram.marks] == [row.id]
    assert window.rows.selected == row.id
    assert window.keeper.undo_label == "read by eye"
    window.keeper.undo()
    assert not window.diagram.marks


@pytest.mark.parametrize("with_tool", [True, False])
def test_the_probe_tool_and_control_click_set_the_probe(window, desks, with_tool):
    modifier = Qt.KeyboardModifier.NoModifier if with_tool else Qt.KeyboardModifier.ControlModifier
    if with_tool:
        window.set_tool("probe")
    QTest.mouseClick(window.diagram, Qt.MouseButton.LeftButton, modifier, at(window, "3.7", "0.5"))
    assert abs(window.keeper.session.probe - Fraction("3.7")) < Fraction(1, 100)
    assert window.panels.is_open("probe") and len(desks.probes.asked) == 1
    assert window.diagram.probe == window.keeper.session.probe
    window.panels.toggle("probe")
    assert window.keeper.session.probe is None and window.diagram.probe is None


def test_the_whole_job_on_the_diagram_by_keys(window, desks):
    diagram, key, held = window.diagram, Qt.Key, Qt.KeyboardModifier
    diagram.setFocus()
    before = window.keeper.session.view
    QTest.keyClick(diagram, key.Key_Right)
    assert window.keeper.session.view.left > before.left
    QTest.keyClick(diagram, key.Key_Left)
    QTest.keyClick(diagram, key.Key_Up)
    QTest.keyClick(diagram, key.Key_Down)
    assert window.keeper.session.view == before
    QTest.keyClick(diagram, key.Key_Return)
    assert diagram.cursor_place == (0.5, 0.5) and not desks.refinery.asked
    QTest.keyClick(diagram, key.Key_Left, held.ShiftModifier)
    QTest.keyClick(diagram, key.Key_Right, held.ShiftModifier | held.ControlModifier)
    u = 0.5 - 9 / diagram.parts.plot.width()
    assert diagram.cursor_place == pytest.approx((u, 0.5))
    QTest.keyClick(diagram, key.Key_Return)
    assert desks.refinery.asked[-1].near == place(before, *diagram.cursor_place)[0]
    QTest.keyClick(diagram, key.Key_Return, held.ShiftModifier)
    assert len(window.keeper.session.ledger.rows) == 1
    QTest.keyClick(diagram, key.Key_Return, held.ControlModifier)
    assert window.keeper.session.probe == place(before, *diagram.cursor_place)[0]
    spot = place(before, *diagram.cursor_place)
    QTest.keyClick(diagram, key.Key_Plus)
    zoomed = window.keeper.session.view
    assert zoomed.width < before.width
    assert abs(place(zoomed, *diagram.cursor_place)[0] - spot[0]) < before.width / 10**5
    QTest.keyClick(diagram, key.Key_Minus)
    # A zoom box from two corners.
    QTest.keyClick(diagram, key.Key_B)
    for _ in range(6):
        QTest.keyClick(diagram, key.Key_Right, held.ShiftModifier)
        QTest.keyClick(diagram, key.Key_Up, held.ShiftModifier)
    view = window.keeper.session.view
    QTest.keyClick(diagram, key.Key_B)
    assert float(window.keeper.session.view.width / view.width) == pytest.approx(
        60 / diagram.parts.plot.width(), rel=1e-4
    )


def test_too_deep_for_doubles_is_said_and_still_refines(window, desks, qtbot):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    view = window.keeper.session.view
    middle = Fraction("3.4494897427831780981972840747")
    tiny = Fraction(1, 10**24)
    deep = type(view)(middle - tiny, middle + tiny, view.bottom, view.top)
    asked = len(desks.pictures.asked)
    window.keeper.show_view(deep)
    qtbot.waitUntil(lambda: window.diagram.notice == TOO_DEEP)
    assert len(desks.pictures.asked) == asked and desks.pictures.cancelled
    QTest.mouseClick(
        window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, at(window, middle, "0.5")
    )
    request = desks.refinery.asked[-1]
    assert abs(request.near - middle) < tiny / 100
    assert request.digits >= 32
    window.keeper.view_back()
    qtbot.waitUntil(lambda: window.diagram.notice == "" and len(desks.pictures.asked) == asked + 1)


def test_stale_pictures_never_follow_newer_ones(window, desks, qtbot):
    window.diagram.gestures.zoom(Fraction(1, 2))
    qtbot.waitUntil(lambda: len(desks.pictures.asked) == 2)
    desks.pictures.answer(2)
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    newest = window.diagram.image_view
    desks.pictures.answer(1)
    desks.pictures.answer(2)
    qtbot.waitUntil(lambda: window.bridge._mail is None and not window.bridge._toning)
    QApplication.processEvents()
    assert window.diagram.image_view == newest == window.keeper.session.view


def test_what_a_picture_waits_for_is_said_until_its_kernels_have_drawn(window, desks, qtbot):
    request = desks.pictures.asked[-1]
    number = len(desks.pictures.asked)
    window.pictures.hear(PictureWaits(number + 7, request, 0, "Nobody asked"))
    assert window.diagram.waiting == ""
    window.pictures.hear(PictureWaits(number, request, 123_456, COMPILING))
    plain = window.diagram.grab().toImage()
    # The first look has come too, drawn without the kernels.
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.image is not None)
    assert window.diagram.waiting == COMPILING
    window.pictures.hear(PictureWaits(number, request, 123_000, COMPILING))
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.waiting == "")
    assert window.diagram.grab().toImage() != plain


def test_a_press_outside_the_plot_does_nothing(window, desks):
    QTest.mouseClick(window.diagram, Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier, QPoint(5, 5))
    assert not desks.refinery.asked
