"""Pictures as files, read back with a decoder of our own."""

from __future__ import annotations

import struct
import zlib
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from naive_density import drawn, picture, view

from tinemark.density.field import Field
from tinemark.density.glyphs import HEIGHT, text_mask, text_width
from tinemark.density.png import (
    DARK_GROUND,
    LIGHT_GROUND,
    Frame,
    framed_cells,
    picture_pixels,
    smallest_framed,
    write_picture_png,
)
from tinemark.density.tone import colour_table, tone_map


def decoded(data: bytes) -> np.ndarray:
    """Pixels of an RGB PNG with filter types 0 to 2; checks every checksum."""
    assert data[:8] == b"\x89PNG\r\n\x1a\n"
    at, parts = 8, {}
    while at < len(data):
        (length,) = struct.unpack(">I", data[at : at + 4])
        kind, body = data[at + 4 : at + 8], data[at + 8 : at + 8 + length]
        (check,) = struct.unpack(">I", data[at + 8 + length : at + 12 + length])
        assert check == zlib.crc32(kind + body)
        parts[kind] = body
        at += 12 + length
    width, height, depth, colour = struct.unpack(">IIBB", parts[b"IHDR"][:10])
    assert (depth, colour) == (8, 2)
    lines = np.frombuffer(zlib.decompress(parts[b"IDAT"]), np.uint8).reshape(height, 1 + 3 * width)
    pixels = np.zeros((height, 3 * width), np.uint8)
    for row in range(height):
        assert lines[row, 0] in (0, 2)
        above = pixels[row - 1] if row and lines[row, 0] == 2 else np.uint8(0)
        pixels[row] = lines[row, 1:] + above
    return pixels.reshape(height, width, 3)


@pytest.fixture(scope="module")
def field() -> Field:
    return drawn(picture("quadratic", view("-0.5", "2.5", "-2", "2"), columns=300, rows=200), 1024)


def test_bare_picture_has_the_cells_as_they_are_toned(field: Field, tmp_path: Path) -> None:
    file = tmp_path / "picture.png"
    write_picture_png(field, file, "log", "glow")
    pixels = decoded(file.read_bytes())
    assert pixels.shape == (200 + 1 + 33, 300, 3)
    wanted = colour_table("glow", DARK_GROUND.surface)[tone_map(field.counts, "log")][::-1]
    calm = ~field.escaped
    assert calm.any()
    assert np.array_equal(pixels[:200][:, calm], wanted[:, calm])
    # Escaped columns carry the hatch: neither empty nor density.
    hatch = (pixels[:200][:, field.escaped] == DARK_GROUND.muted).all(axis=2)
    assert 0.1 < hatch.mean() < 0.15
    assert [path.name for path in tmp_path.iterdir()] == ["picture.png"]


@pytest.mark.parametrize("size", [smallest_framed(), (639, 639), (640, 640), (700, 641)])
def test_framed_picture_has_the_size_asked_for_where_letters_grow(size: tuple[int, int]) -> None:
    columns, rows = framed_cells(*size)
    blank = drawn(picture("quadratic", view("-0.5", "2.5", "-2", "2"), columns=columns, rows=rows), 1)
    frame = Frame(view("-0.5", "2.5", "-2", "2"), "a (1)", "x", "Quadratic maximum", size)
    assert picture_pixels(blank, "equalised", "ink", frame=frame).shape == (size[1], size[0], 3)


def test_framed_picture_has_the_size_asked_for(field: Field) -> None:
    columns, rows = framed_cells(640, 400)
    small = drawn(picture("quadratic", view("-0.5", "2.5", "-2", "2"), columns=columns, rows=rows), 256)
    frame = Frame(view("-0.5", "2.5", "-2", "2"), "a (1)", "x", "Quadratic maximum")
    pixels = picture_pixels(small, "equalised", "ink", frame=frame)
    assert pixels.shape == (400, 640, 3)
    cells = colour_table("ink", LIGHT_GROUND.surface)[tone_map(small.counts, "equalised")][::-1]
    calm = ~small.escaped
    found = False
    for top in range(10, 60):
        for left in range(40, 100):
            part = pixels[top : top + rows, left : left + columns]
            fits = part.shape == cells.shape and np.array_equal(part[-1, calm], cells[-1, calm])
            found |= fits and np.array_equal(part[:, calm], cells[:, calm])
    assert found


def test_a_deep_frame_says_its_offset() -> None:
    field = drawn(picture("logistic", view("2.8", "4"), columns=330, rows=150), 256)
    low = Fraction("3.56994567187")
    frame = Frame(view(str(low), str(low + Fraction("1e-12")), "0", "1"), "r", "x")
    pixels = picture_pixels(field, "log", "ink", frame=frame)
    words = text_mask("r = 3.56994567187 + label", 1)
    ink = (pixels == LIGHT_GROUND.text).all(axis=2)
    height, width = words.shape
    foot = ink[-6 * height :]
    assert any(
        np.array_equal(foot[top : top + height, left : left + width], words)
        for top in range(foot.shape[0] - height)
        for left in range(foot.shape[1] - width)
    )


def test_a_picture_that_cannot_be_written_leaves_nothing(field: Field, tmp_path: Path) -> None:
    with pytest.raises(OSError, match="nowhere"):
        write_picture_png(field, tmp_path / "nowhere" / "picture.png")
    with pytest.raises(ValueError, match="palette"):
        write_picture_png(field, tmp_path / "picture.png", palette="mauve")
    assert not list(tmp_path.iterdir())


def test_letters_are_all_different_and_in_their_box() -> None:
    letters = [chr(code) for code in range(33, 127)]
    shapes = {text_mask(letter, 1).tobytes() for letter in letters}
    assert len(shapes) == len(letters)
    assert not text_mask(" ", 1).any()
    assert np.array_equal(text_mask("\u00b5", 1), text_mask("?", 1))
    assert text_mask("3.5", 2).shape == (2 * HEIGHT, text_width("3.5", 2))
