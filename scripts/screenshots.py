"""Pictures of the window: ``python3 scripts/screenshots.py FOLDER [--only light-100 ...] [--scene NAME
...]``.

Opens the demo in a real window, light and dark, at 100 % and 200 %, 1280x800, and saves what the screen
shows. Without a display it starts an X server of its own (Xvfb). Each picture is taken in a process of
its own, because a scaling holds for a whole process; the user's own settings are not touched.
"""

from __future__ import annotations

import argparse
import os
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[1]
LOOKS = ("light-100", "dark-100", "light-200", "dark-200")
SCENES = ("first", "work", "tolerances", "branches")
SIZE = (1280, 800)
PATIENCE_S = 90.0


@contextmanager
def display() -> Iterator[str]:
    """A display: the one there is, or an X server of our own."""
    present = os.environ.get("DISPLAY")
    if present:
        yield present
        return
    if shutil.which("Xvfb") is None:
        raise SystemExit("there is no display, and Xvfb is not installed; install xvfb, or run on a desktop")
    reading, writing = os.pipe()
    command = ["Xvfb", "-displayfd", str(writing), "-screen", "0", "2720x1760x24", "-nolisten", "tcp"]
    server = subprocess.Popen(
        command, pass_fds=[writing], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL
    )
    os.close(writing)
    try:
        with os.fdopen(reading) as answer:
            # Blocks until the server is ready, or has died.
            number = answer.readline().strip()
        if not number:
            raise SystemExit("Xvfb did not start")
        yield f":{number}"
    finally:
        server.terminate()
        server.wait(10)


def take(folder: Path, look: str, scene: str, screen: str) -> Path:
    """One picture, in a process of its own."""
    theme, percent = look.split("-")
    file = folder / f"{scene}-{look}.png"
    with tempfile.TemporaryDirectory() as private:
        surroundings = os.environ | {
            "DISPLAY": screen,
            "QT_QPA_PLATFORM": "xcb",
            "QT_SCALE_FACTOR": str(int(percent) / 100),
            "TINEMARK_CONFIG": private,
            "PYTHONPATH": str(ROOT / "app"),
        }
        command = [sys.executable, __file__, str(folder), "--shoot", theme, scene, str(file)]
        subprocess.run(command, env=surroundings, check=True, timeout=2 * PATIENCE_S)
    return file


def shoot(theme: str, scene: str, file: Path) -> None:
    """Open the window, set the scene, save what the screen shows. Runs in the picture's own process."""
    from PySide6.QtCore import QTimer

    from tinemark.window.app import application, make_window
    from tinemark.window.layout_memory import LayoutMemory

    app = application()
    memory = LayoutMemory.open()
    memory.theme = theme
    window = make_window(memory)
    window.resize(*SIZE)
    window.move(0, 0)
    window.show()
    window.workers.start()
    steps = _scene(window, scene)
    deadline = time.monotonic() + PATIENCE_S
    waiting: list[Any] = [next(steps)]
    outcome: list[str] = []

    def look() -> None:
        if time.monotonic() > deadline:
            outcome.append("the scene was not ready in time")
        elif waiting[0]():
            following = next(steps, None)
            if following is not None:
                waiting[0] = following
                return
            window.screen().grabWindow(int(window.winId())).save(str(file))
        else:
            return
        timer.stop()
        window.files.may_leave = lambda: True
        window.close()
        app.quit()

    timer = QTimer()
    timer.timeout.connect(look)
    timer.start(50)
    app.exec()
    if outcome:
        raise SystemExit(outcome[0])


def _scene(window: Any, scene: str) -> Iterator[Any]:
    """Conditions to wait for, one after the other; what has to be done is done in between."""
    from fractions import Fraction

    yield lambda: window.diagram.field is not None and window.diagram.field.steps > 5_000_000
    yield lambda: window.ratios.is_up_to_date
    if scene == "tolerances":
        window.tolerances.bring_up("tolerances")
        window.rows.select(window.keeper.session.ledger.rows[1].id)
        yield lambda: True
    if scene == "branches":
        window.branches.switch()
        yield lambda: window.diagram.branches.curves is not None and window.branches.is_up_to_date
    if scene == "work":
        view = window.keeper.session.view
        window.keeper.show_view(type(view)(Fraction(128), Fraction("142"), Fraction(0), Fraction(82)))
        window.keeper.set_probe(Fraction("139.4"))
        window.panels.set_open("probe", True)
        window.panels.set_open("system", True)
        window.rows.pick(Fraction("138.1"), Fraction("16.3"))
        yield lambda: not window.onsets.jobs and window.probes.is_up_to_date
        yield lambda: window.diagram.image_view == window.keeper.session.view
        yield lambda: window.diagram.field.steps > 5_000_000


def main(arguments: Sequence[str]) -> int:
    """Take the pictures."""
    parser = argparse.ArgumentParser(prog="screenshots.py", description="Pictures of the window.")
    parser.add_argument("folder", type=Path, help="where they are saved")
    parser.add_argument("--only", nargs="+", choices=LOOKS, default=list(LOOKS))
    parser.add_argument("--scene", nargs="+", choices=SCENES, default=list(SCENES))
    parser.add_argument("--shoot", nargs=3, help=argparse.SUPPRESS)
    options = parser.parse_args(arguments)
    if options.shoot:
        theme, scene, file = options.shoot
        shoot(theme, scene, Path(file))
        return 0
    options.folder.mkdir(parents=True, exist_ok=True)
    with display() as screen:
        for look in options.only:
            for scene in options.scene:
                print(take(options.folder, look, scene, screen))
    return 0


if __name__ == "__main__":
    sys.path.insert(0, str(ROOT / "app"))
    raise SystemExit(main(sys.argv[1:]))
