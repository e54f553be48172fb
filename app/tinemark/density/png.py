"""A picture as a PNG file, with frame, ticks and Lyapunov strip, without a window (PNG: ISO/IEC 15948)."""

from __future__ import annotations

import os
import struct
import tempfile
import zlib
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from tinemark.density.field import Field
from tinemark.density.glyphs import ADVANCE, HEIGHT, text_mask, text_width
from tinemark.density.request import View
from tinemark.density.ticks import Ticks, ticks
from tinemark.density.tone import DARK_FIRST, colour_table, hatched, tone_map

Colour = tuple[int, int, int]


@dataclass(frozen=True)
class Ground:
    """Colours around the density: what is empty, what is written, and what is set back."""

    surface: Colour
    text: Colour
    muted: Colour
    accent: Colour


LIGHT_GROUND = Ground((255, 255, 255), (28, 34, 43), (128, 137, 150), (176, 74, 20))
DARK_GROUND = Ground((15, 18, 24), (226, 230, 236), (118, 128, 143), (255, 158, 92))
_STRIP_NAME = "Lyapunov"
FEWEST_CELLS = 8
"""Columns and rows that a framed picture is drawn with at least."""


@dataclass(frozen=True)
class Frame:
    """What is written around a picture.

    Attributes
    ----------
    view
        The view that the field was drawn for.
    parameter, observed
        Names along the axes, with units where there are any.
    title
        A line above.
    size
        Width and height asked for, where the field has the cells of `framed_cells`: large letters and small
        ones may both go round the same field.
    """

    view: View
    parameter: str
    observed: str
    title: str = ""
    size: tuple[int, int] | None = None


def framed_cells(width: int, height: int) -> tuple[int, int]:
    """Columns and rows of the field that fills a framed image of that many pixels."""
    layout = _Layout.of(width, height)
    return layout.columns, layout.rows


def smallest_framed() -> tuple[int, int]:
    """Width and height below which axes, strip and names leave no room for a picture."""
    small = _Layout.of(1, 1)
    return (
        small.left + FEWEST_CELLS + 3 * HEIGHT,
        small.strip_top + small.strip_rows + 5 * HEIGHT + FEWEST_CELLS,
    )


def write_picture_png(
    field: Field,
    path: str | Path,
    tone: str = "log",
    palette: str = "ink",
    *,
    frame: Frame | None = None,
    ground: Ground | None = None,
) -> None:
    """Write a picture. The file appears whole or not at all.

    Parameters
    ----------
    tone, palette
        As in `density.tone`.
    frame
        Axes and names; None for the bare cells with the strip below.
    ground
        Colours around; None for a light or dark ground as the palette asks for.

    Raises
    ------
    ValueError
        The tone or the palette is not known.
    OSError
        The file cannot be written.
    """
    write_png(picture_pixels(field, tone, palette, frame=frame, ground=ground), path)


def picture_pixels(
    field: Field, tone: str, palette: str, *, frame: Frame | None = None, ground: Ground | None = None
) -> NDArray[np.uint8]:
    """Pixels of a picture, uint8 of shape (height, width, 3), top row first."""
    chosen = ground or (DARK_GROUND if palette in DARK_FIRST else LIGHT_GROUND)
    rows, columns = field.counts.shape
    cells = colour_table(palette, chosen.surface)[tone_map(field.counts[::-1], tone)]
    cells[hatched(rows, columns, field.escaped)] = chosen.muted
    if frame is None:
        strip = _strip(field, max(24, rows // 6), chosen)
        return np.vstack([cells, np.broadcast_to(_colour(chosen.muted), (1, columns, 3)), strip])
    layout = _Layout.of(*frame.size) if frame.size else _Layout.around(columns, rows)
    canvas = np.empty((layout.height, layout.width, 3), np.uint8)
    canvas[:] = chosen.surface
    _Painter(canvas, layout, chosen).paint(field, cells, frame)
    return canvas


def write_png(pixels: NDArray[np.uint8], path: str | Path) -> None:
    """Write pixels, uint8 of shape (height, width, 3), as an RGB PNG; whole or not at all."""
    target = Path(path)
    height, width, _ = pixels.shape
    # Each line less the one above compresses a density best (filter type 2, "up").
    up = pixels.copy()
    up[1:] -= pixels[:-1]
    lines = np.empty((height, 1 + 3 * width), np.uint8)
    lines[:, 0] = 2
    lines[:, 1:] = up.reshape(height, -1)
    data = b"\x89PNG\r\n\x1a\n" + b"".join(
        (
            _chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, 8, 2, 0, 0, 0)),
            _chunk(b"IDAT", zlib.compress(lines.tobytes(), 6)),
            _chunk(b"IEND", b""),
        )
    )
    handle, temporary = tempfile.mkstemp(dir=target.parent, prefix=".new-", suffix=".png")
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
        # mkstemp makes files private; a picture is as public as any new file.
        mask = os.umask(0)
        os.umask(mask)
        Path(temporary).chmod(0o666 & ~mask)
        Path(temporary).replace(target)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise


def _chunk(kind: bytes, data: bytes) -> bytes:
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def _colour(colour: Colour) -> NDArray[np.uint8]:
    return np.array(colour, np.uint8)


@dataclass(frozen=True)
class _Layout:
    """Where things stand on a framed image, in pixels from the top left."""

    width: int
    height: int
    left: int
    top: int
    columns: int
    rows: int
    strip_top: int
    strip_rows: int
    scale: int

    @staticmethod
    def of(width: int, height: int) -> _Layout:
        scale = 2 if min(width, height) >= 640 else 1
        line = HEIGHT * scale
        left = 11 * ADVANCE * scale
        top = 4 * line
        bottom = 5 * line
        strip = max(16, (height - top - bottom) // 7)
        columns = max(1, width - left - 3 * line)
        rows = max(1, height - top - bottom - strip - line)
        return _Layout(width, height, left, top, columns, rows, top + rows + line, strip, scale)

    @staticmethod
    def around(columns: int, rows: int) -> _Layout:
        """The layout whose picture has this many cells."""
        width, height = columns, rows
        for _ in range(64):
            layout = _Layout.of(width, height)
            short = (columns - layout.columns, rows - layout.rows)
            if short == (0, 0):
                return layout
            width, height = width + short[0], height + short[1]
        raise ValueError("no layout for this number of cells")


class _Painter:
    """Draws on a canvas with whole pixels."""

    def __init__(self, canvas: NDArray[np.uint8], layout: _Layout, ground: Ground) -> None:
        self.canvas, self.at, self.ground = canvas, layout, ground

    def paint(self, field: Field, cells: NDArray[np.uint8], frame: Frame) -> None:
        at, view = self.at, frame.view
        right, bottom = at.left + at.columns, at.top + at.rows
        self.canvas[at.top : bottom, at.left : right] = cells
        strip = _strip(field, at.strip_rows, self.ground)
        self.canvas[at.strip_top : at.strip_top + at.strip_rows, at.left : right] = strip
        for top, rows in ((at.top, at.rows), (at.strip_top, at.strip_rows)):
            self.box(top - 1, at.left - 1, top + rows, right)
        line = HEIGHT * at.scale
        across = ticks(view.left, view.right, max(2, at.columns // (13 * ADVANCE * at.scale)))
        up = ticks(view.bottom, view.top, max(2, at.rows // (5 * line)))
        foot = at.strip_top + at.strip_rows
        edge = 0
        for position, label in zip(across.positions, across.labels, strict=True):
            column = at.left + _place(position, view.left, view.width, at.columns)
            self.fill(foot, column, foot + line // 2, column + 1)
            start = column - text_width(label, at.scale) // 2
            if start > edge:
                self.write(label, foot + line, start)
                edge = start + text_width(label, at.scale) + ADVANCE * at.scale
        for position, label in zip(up.positions, up.labels, strict=True):
            row = at.top + at.rows - 1 - _place(position, view.bottom, view.height, at.rows)
            self.fill(row, at.left - line // 2, row + 1, at.left)
            self.write(label, row - line // 2, at.left - line - text_width(label, at.scale))
        name = _axis_name(frame.parameter, across)
        self.write(name, foot + 3 * line, right - text_width(name, at.scale))
        observed = _axis_name(frame.observed, up)
        self.write(observed, at.top - line - line // 2, at.left)
        if frame.title:
            self.write(frame.title, line // 2, at.left)
        self.write(
            _STRIP_NAME,
            at.strip_top + at.strip_rows // 2 - line // 2,
            at.left - line - text_width(_STRIP_NAME, at.scale),
        )
        self.periods(field, at.left + text_width(observed, at.scale) + ADVANCE * at.scale)

    def periods(self, field: Field, free: int) -> None:
        """Period above the plot where a stretch of columns shares it and the number fits."""
        at = self.at
        edges = np.flatnonzero(np.diff(field.period)) + 1
        line = HEIGHT * at.scale
        for stretch in np.split(np.arange(field.period.size), edges):
            period = int(field.period[stretch[0]])
            label = str(period)
            room = text_width(label, at.scale)
            start = at.left + int(stretch[0]) + (stretch.size - room) // 2
            if period and stretch.size > room + 2 * at.scale and start > free:
                self.write(label, at.top - line - line // 2, start, self.ground.accent)

    def box(self, top: int, left: int, bottom: int, right: int) -> None:
        for row in (top, bottom):
            self.fill(row, left, row + 1, right + 1)
        for column in (left, right):
            self.fill(top, column, bottom + 1, column + 1)

    def fill(self, top: int, left: int, bottom: int, right: int) -> None:
        self.canvas[max(top, 0) : bottom, max(left, 0) : right] = self.ground.muted

    def write(self, text: str, top: int, left: int, colour: Colour | None = None) -> None:
        mask = text_mask(text, self.at.scale)
        height, width, _ = self.canvas.shape
        # What would run over an edge is moved in, then cut.
        left = max(0, min(left, width - mask.shape[1]))
        top = max(0, min(top, height - mask.shape[0]))
        mask = mask[: height - top, : width - left]
        area = self.canvas[top : top + mask.shape[0], left : left + mask.shape[1]]
        area[mask] = colour or self.ground.text


def _axis_name(name: str, found: Ticks) -> str:
    return f"{name} = {found.offset} + label" if found.offset else name


def _place(position: Fraction, low: Fraction, extent: Fraction, cells: int) -> int:
    return min(cells - 1, int((position - low) / extent * cells))


def _strip(field: Field, rows: int, ground: Ground) -> NDArray[np.uint8]:
    """Lyapunov exponent over the columns: bars from the zero line, up where neighbours part (chaos)."""
    columns = field.lyapunov.size
    strip = np.empty((rows, columns, 3), np.uint8)
    strip[:] = ground.surface
    finite = field.lyapunov[np.isfinite(field.lyapunov)]
    top = max(float(finite.max(initial=0.0)), 0.1) * 1.05
    bottom = min(max(float(finite.min(initial=0.0)), -2.0 * top), -0.1) * 1.05
    zero = round((rows - 1) * top / (top - bottom))
    reach = np.clip(np.nan_to_num(field.lyapunov, nan=0.0, posinf=top, neginf=bottom), bottom, top)
    ends = np.rint((rows - 1) * (top - reach) / (top - bottom)).astype(int)
    row = np.arange(rows)[:, None]
    known = ~np.isnan(field.lyapunov)
    strip[(row >= ends) & (row < zero) & known] = ground.accent
    strip[(row <= ends) & (row > zero) & known] = ground.muted
    strip[hatched(rows, columns, field.escaped)] = ground.muted
    strip[zero] = ground.text
    return strip
