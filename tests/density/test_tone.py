"""Counts to indices and colours."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from tinemark.density.tone import DARK_FIRST, TONES, colour_table, hatched, palettes, tone_map

COUNTS = arrays(
    np.uint32, st.tuples(st.integers(1, 9), st.integers(1, 9)), elements=st.integers(0, 2**32 - 1)
)


@given(COUNTS, st.sampled_from(TONES))
def test_indices_never_fall_with_the_count_and_empty_cells_stay_empty(counts: np.ndarray, tone: str) -> None:
    indices = tone_map(counts, tone)
    assert indices.dtype == np.uint8
    assert indices.shape == counts.shape
    assert ((indices == 0) == (counts == 0)).all()
    order = np.argsort(counts.ravel(), kind="stable")
    assert (np.diff(indices.ravel()[order].astype(int)) >= 0).all()


def test_log_tone_is_the_slow_formula() -> None:
    counts = np.array([[0, 1, 2, 3, 17, 256, 400, 4096]], np.uint32)
    wanted = [int(1 + 254 * np.log1p(c) / np.log1p(4096)) if c else 0 for c in counts[0].tolist()]
    assert tone_map(counts, "log")[0].tolist() == wanted


def test_linear_tone_is_in_proportion_below_its_cap() -> None:
    counts = np.arange(1, 101, dtype=np.uint32)[None, :].repeat(20, axis=0)
    indices = tone_map(counts, "linear")[0]
    assert indices[:98].tolist() == [int(1 + 254 * c / 99) for c in range(1, 99)]
    assert indices[-1] == 255


def test_equalised_tone_gives_each_index_its_share_of_the_cells() -> None:
    rng = np.random.default_rng(1)
    counts = rng.geometric(0.001, (600, 500)).astype(np.uint32)
    indices = tone_map(counts, "equalised")
    share = np.bincount(indices.ravel() // 32, minlength=8) / indices.size
    assert share == pytest.approx(np.full(8, 1 / 8), abs=0.02)


def test_a_picture_looks_the_same_however_long_it_was_drawn() -> None:
    rng = np.random.default_rng(2)
    counts = rng.integers(0, 60, (50, 50)).astype(np.uint32)
    for tone in TONES:
        assert abs(tone_map(counts, tone).astype(int) - tone_map(counts * np.uint32(16), tone)).max() <= 1


def test_palettes_change_lightness_evenly_in_one_direction() -> None:
    for name, table in palettes().items():
        assert table.shape == (256, 3)
        assert table.dtype == np.uint8
        light = lightness(table[1:])
        steps = np.diff(light) * (1 if name in DARK_FIRST else -1)
        assert steps.min() > -0.35, name
        # Perceptual evenness: no eighth of the table holds more than twice its share of the lightness.
        parts = light[np.linspace(0, 254, 9).astype(int)]
        assert abs(np.diff(parts)).max() < 2 * abs(light[-1] - light[0]) / 8, name
        assert abs(light[-1] - light[0]) > 45


def lightness(colours: np.ndarray) -> np.ndarray:
    """CIE 1976 L* of sRGB colours (IEC 61966-2-1)."""
    share = colours / 255
    linear = np.where(share <= 0.04045, share / 12.92, ((share + 0.055) / 1.055) ** 2.4)
    y = linear @ [0.2126, 0.7152, 0.0722]
    return np.where(y > 216 / 24389, 116 * np.cbrt(y) - 16, y * 24389 / 27)


def test_colour_tables_put_the_ground_under_empty_cells() -> None:
    table = colour_table("ink", (1, 2, 3))
    assert table[0].tolist() == [1, 2, 3]
    assert np.array_equal(table[1:], palettes()["ink"][1:])


def test_unknown_names_are_refused_with_the_known_ones() -> None:
    with pytest.raises(ValueError, match="linear, log, equalised"):
        tone_map(np.zeros((1, 1), np.uint32), "loud")
    with pytest.raises(ValueError, match="ink"):
        colour_table("mauve", (0, 0, 0))


def test_the_hatch_marks_escaped_columns_only() -> None:
    escaped = np.zeros(40, bool)
    escaped[10:30] = True
    marks = hatched(64, 40, escaped)
    assert not marks[:, ~escaped].any()
    assert (marks[:, escaped].sum(axis=0) == 8).all()
