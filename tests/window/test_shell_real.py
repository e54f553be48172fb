"""The program in a real window, under an X server of the tests' own."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from PySide6.QtGui import QImage

from tinemark.window.theme import DARK, LIGHT, contrast

ROOT = Path(__file__).parents[2]


@pytest.mark.real_window
def test_the_demo_is_worked_with_on_a_real_screen(screen, tmp_path):
    theme, look, scene = LIGHT, "light-100", "work"
    ended = subprocess.run(
        [sys.executable, ROOT / "scripts" / "screenshots.py", tmp_path, "--only", look, "--scene", scene],
        env=os.environ | {"DISPLAY": screen},
        capture_output=True,
        text=True,
        timeout=200,
        check=False,
    )
    assert ended.returncode == 0, ended.stderr
    # Qt has nothing to complain about.
    assert not [line for line in ended.stderr.splitlines() if line.strip()], ended.stderr
    image = QImage(str(tmp_path / f"{scene}-{look}.png"))
    assert (image.width(), image.height()) == (1280, 800)
    seen: dict[str, int] = {}
    for y in range(0, 800, 2):
        for x in range(0, 1280, 2):
            name = image.pixelColor(x, y).name()
            seen[name] = seen.get(name, 0) + 1
    assert seen[theme.surface] > 20_000
    # The accent is there, and little of it; the picture brings many tones of its own.
    assert 50 < seen.get(theme.accent, 0) < 20_000
    assert len(seen) > 150


@pytest.mark.parametrize("theme", [LIGHT, DARK], ids=lambda theme: theme.name)
def test_contrast_of_words_and_outlines(theme):
    grounds = (theme.surface, theme.raised, theme.sunken, theme.plot)
    for ground in grounds:
        for words in (theme.text, theme.muted, theme.accent, theme.warning, theme.error, theme.good):
            assert contrast(words, ground) >= 4.5, (words, ground)
        assert contrast(theme.edge, ground) >= 3.0, ground
        assert contrast(theme.cool, ground) >= 3.0, ground
    assert contrast(theme.text, theme.accent_soft) >= 4.5
    assert contrast(theme.muted, theme.accent_soft) >= 4.5
    assert contrast(theme.on_accent, theme.accent) >= 4.5


def test_contrast_is_that_of_the_standard():
    # WCAG 2: black on white is 21 to 1, and a colour on itself is 1 to 1.
    assert contrast("#000000", "#ffffff") == pytest.approx(21.0)
    assert contrast("#777777", "#777777") == pytest.approx(1.0)
    assert contrast("#767676", "#ffffff") == pytest.approx(4.54, abs=0.01)


def test_nothing_heavy_is_loaded_before_the_window_is_on_screen(tmp_path):
    script = (
        "import sys\n"
        "from PySide6.QtWidgets import QApplication\n"
        "from tinemark.window.app import application, make_window\n"
        "app = application()\n"
        "window = make_window()\n"
        "window.show()\n"
        "app.processEvents()\n"
        "print(sorted({'numba', 'llvmlite', 'sympy', 'flint', 'scipy', 'mpmath'} & set(sys.modules)))\n"
        "window.close()\n"
    )
    ended = subprocess.run(
        [sys.executable, "-c", script],
        env=os.environ | {"QT_QPA_PLATFORM": "offscreen", "TINEMARK_CONFIG": str(tmp_path)},
        capture_output=True,
        text=True,
        timeout=100,
        check=False,
    )
    assert ended.returncode == 0, ended.stderr
    assert ended.stdout.strip() == "[]"
