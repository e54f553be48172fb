"""A normal session in the real window, off screen: its longest pauses, and the memory it all takes."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path
from typing import Any

from benches.measuring import Figure, at_most, reading

SIZE = (1280, 800)
PATIENCE_S = 120.0
BEAT_MS = 2
REST_S = 0.5
LONGEST_PAUSE_MS = 50.0
MOST_MEMORY_MB = 500.0


def figures() -> Iterator[Figure]:
    """Pauses while zooming, refining, probing, changing the theme, opening panels and drawing branches; peak
    memory.
    """
    with tempfile.TemporaryDirectory() as private:
        surroundings = os.environ | {
            "QT_QPA_PLATFORM": "offscreen",
            "TINEMARK_CONFIG": private,
            "PYTHONPATH": os.pathsep.join(sys.path),
        }
        session = subprocess.Popen(
            [sys.executable, "-m", "benches.session"], env=surroundings, stdout=subprocess.PIPE, text=True
        )
        peak = 0.0
        while session.poll() is None:
            peak = max(peak, _memory_of_tree(session.pid))
            time.sleep(0.05)
        assert session.stdout is not None
        told = session.stdout.read()
    if session.returncode != 0:
        raise RuntimeError("the session did not come to its end")
    pauses, work, first_s, drawn_s = json.loads(told)
    yield reading("from showing the window to a first look at its picture (ms)", first_s * 1e3)
    yield reading("from showing the window to a picture out of compiled kernels (ms)", drawn_s * 1e3)
    for name, seconds in pauses.items():
        figure = f"longest pause of the window's thread while {name} (ms)"
        # The first picture of a session comes while modules are still being loaded; nothing is asked of it.
        yield (
            reading(figure, seconds * 1e3)
            if name == "starting"
            else at_most(figure, seconds * 1e3, LONGEST_PAUSE_MS)
        )
    worst = max((name for name in work if name != "starting"), key=work.__getitem__)
    # What a pause is made of where nothing else keeps the machine busy.
    yield reading(
        f"most work of the window's thread between two beats, while {worst} (ms)", work[worst] * 1e3
    )
    if peak:
        yield at_most("peak memory of a session, all processes, shared pages once (MB)", peak, MOST_MEMORY_MB)


def _memory_of_tree(pid: int) -> float:
    """Proportional memory of a process and all below it, in megabytes; 0 where the system does not tell."""
    total = 0.0
    for member in _tree(pid):
        try:
            lines = Path(f"/proc/{member}/smaps_rollup").read_text().splitlines()
        except OSError:
            continue
        total += sum(int(line.split()[1]) for line in lines if line.startswith("Pss:")) / 1024
    return total


def _tree(pid: int) -> list[int]:
    members = [pid]
    for member in members:
        for children in Path(f"/proc/{member}/task").glob("*/children"):
            try:
                members += [int(word) for word in children.read_text().split()]
            except OSError:
                continue
    return members


def run_session() -> tuple[dict[str, float], dict[str, float], float, float]:
    """Longest pause of each part, most processor time between two beats, and when the first look and the
    first picture came; in seconds. Runs in the session's own process.
    """
    import numpy as np
    from PySide6.QtCore import Qt, QTimer

    from tinemark.window.app import application, make_window

    app = application()
    window = make_window()
    window.resize(*SIZE)
    window.show()
    began = time.perf_counter()
    came: list[float] = []

    def note(painted: Any) -> None:
        # A picture out of the kernels knows exponents.
        if not came or (len(came) == 1 and not np.isnan(painted.field.lyapunov).all()):
            came.append(time.perf_counter() - began)

    window.bridge.picture_ready.connect(note)
    window.workers.start()
    parts = _parts(window)
    name, ready = next(parts)
    pauses, work = {name: 0.0}, {name: 0.0}
    last, worked = time.perf_counter(), time.thread_time()
    deadline = last + PATIENCE_S
    beat = QTimer()
    beat.setTimerType(Qt.TimerType.PreciseTimer)

    def look() -> None:
        nonlocal last, worked, name, ready
        now, used = time.perf_counter(), time.thread_time()
        pauses[name] = max(pauses[name], now - last)
        work[name] = max(work[name], used - worked)
        last, worked = now, used
        if ready():
            try:
                name, ready = next(parts)
            except StopIteration:
                beat.stop()
                window.files.may_leave = lambda: True
                window.close()
                app.quit()
                return
            pauses.setdefault(name, 0.0)
            work.setdefault(name, 0.0)
        elif now > deadline:
            app.exit(1)

    beat.timeout.connect(look)
    beat.start(BEAT_MS)
    if app.exec() != 0:
        raise SystemExit(f"{name} did not come to its end")
    return pauses, work, came[0], came[-1]


def _parts(window: Any) -> Iterator[tuple[str, Any]]:
    """Names and ends of the parts; each begins when the one before has ended."""
    yield "starting", lambda: window.diagram.field is not None and window.diagram.field.steps > 5_000_000
    view = window.keeper.session.view
    for left, right, click in (("100", "142", "131.2"), ("128", "142", "138.2"), ("138", "141", "139.4")):
        window.keeper.show_view(type(view)(Fraction(left), Fraction(right), view.bottom, view.top))
        yield (
            "zooming",
            lambda: (
                window.diagram.image_view == window.keeper.session.view
                and window.diagram.field.steps > 5_000_000
            ),
        )
        window.rows.pick(Fraction(click), Fraction("16.3"))
        yield "refining", lambda: not window.onsets.jobs
    window.keeper.set_probe(Fraction("139.4"))
    yield "probing", lambda: window.probes.is_up_to_date
    for theme in ("dark", "light"):
        window.set_theme(theme)
        yield "changing the theme", _rested()
    for panel in ("probe", "system", "picture", "ledger"):
        for _ in range(2):
            window.panels.toggle(panel)
            yield "opening and folding panels", _rested()
    window.files.may_leave = lambda: True
    window.files.open_builtin("henon")
    yield "changing the system", _rested(2.0)
    window.keeper.undo()
    yield "undoing a system", _rested(2.0)
    window.branches.switch()
    yield "following branches", lambda: window.diagram.branches.curves is not None
    window.surveys.ask(6)
    yield "picking every onset of the view", lambda: not window.surveys.busy


def _rested(seconds: float = REST_S) -> Any:
    """True some time from now: by then whatever an action has put off is done."""
    end = time.perf_counter() + seconds
    return lambda: time.perf_counter() > end


if __name__ == "__main__":
    print(json.dumps(run_session()))
