"""What every test can rely on: private folders, fresh precision, nothing left behind."""

from __future__ import annotations

import atexit
import gc
import os
import shutil
import subprocess
import sys
import tempfile
import threading
import weakref
from collections.abc import Iterator
from pathlib import Path

import pytest

# Before anything of ours is loaded: no test ever reads or writes the user's own files.
_PRIVATE = Path(tempfile.mkdtemp(prefix="tinemark-tests-"))
atexit.register(shutil.rmtree, _PRIVATE, ignore_errors=True)
for _name in (
    "XDG_CONFIG_HOME",
    "XDG_CACHE_HOME",
    "XDG_DATA_HOME",
    "XDG_STATE_HOME",
    "APPDATA",
    "LOCALAPPDATA",
):
    os.environ[_name] = str(_PRIVATE / _name.lower())
# A developer may keep the compiled kernels from run to run; by default every run compiles its own.
os.environ["TINEMARK_CACHE_DIR"] = os.environ.get("TINEMARK_TEST_CACHE_DIR", str(_PRIVATE / "cache"))
os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")

ROOT = Path(__file__).resolve().parents[1]
# Children import the checkout too.
os.environ["PYTHONPATH"] = os.pathsep.join([str(ROOT / "app"), *filter(None, [os.environ.get("PYTHONPATH")])])


@pytest.fixture
def root() -> Path:
    """The checkout."""
    return ROOT


@pytest.fixture(autouse=True)
def _fresh_precision() -> None:
    """Precision is one value per process: no test inherits another's."""
    flint = sys.modules.get("flint")
    if flint is not None:
        flint.ctx.default()
    mpmath = sys.modules.get("mpmath")
    if mpmath is not None:
        mpmath.mp.prec = 53
        mpmath.iv.prec = 53


@pytest.fixture(autouse=True)
def _no_threads_left() -> Iterator[None]:
    """A test that leaves a thread running fails. A thread that is ending is given the time to."""
    before = set(threading.enumerate())
    yield
    left = [thread for thread in threading.enumerate() if thread not in before]
    for thread in left:
        if not isinstance(thread, threading._DummyThread):
            thread.join(5)
    left = [t for t in left if t.is_alive() and not isinstance(t, threading._DummyThread)]
    if left:
        pytest.fail(f"threads left running: {', '.join(thread.name for thread in left)}")


@pytest.fixture(autouse=True)
def _no_qt_left(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """A window test that leaves a running timer, a running Qt thread or a top-level widget fails."""
    if "window" not in request.path.parts and "qtbot" not in request.fixturenames:
        yield
        return
    from PySide6 import QtCore, QtWidgets
    from shiboken6 import isValid

    started: list[weakref.ref[QtCore.QTimer] | weakref.ref[QtCore.QThread]] = []

    def watched(kind: type) -> None:
        original = kind.start

        def start(self: object, *arguments: object) -> object:
            started.append(weakref.ref(self))
            return original(self, *arguments)

        monkeypatch.setattr(kind, "start", start)

    watched(QtCore.QTimer)
    watched(QtCore.QThread)
    application = QtWidgets.QApplication.instance()
    # The objects themselves are kept, not their ids: an id may be given out again.
    before = list(QtWidgets.QApplication.topLevelWidgets()) if application else []
    yield
    application = QtWidgets.QApplication.instance()
    if application is None:
        return
    left = _top_level(before)
    if left:
        gc.collect()
        left = _top_level(before)
    running = [thing() for thing in started]
    busy = [
        thing
        for thing in running
        if thing is not None
        and isValid(thing)
        and (thing.isActive() if isinstance(thing, QtCore.QTimer) else thing.isRunning())
    ]
    del running
    problems = []
    if left:
        problems.append("top-level widgets: " + ", ".join(_name_of(widget) for widget in left))
    if busy:
        problems.append("running timers or threads: " + ", ".join(_name_of(thing) for thing in busy))
    if problems:
        # What leaked is put away, so that only this test fails.
        for thing in busy:
            if isinstance(thing, QtCore.QTimer):
                thing.stop()
        for widget in left:
            widget.close()
            widget.deleteLater()
        QtCore.QCoreApplication.sendPostedEvents(None, QtCore.QEvent.Type.DeferredDelete)
        pytest.fail("left behind: " + "; ".join(problems))


def _top_level(before: list) -> list:
    from PySide6 import QtCore, QtWidgets

    QtCore.QCoreApplication.sendPostedEvents(None, QtCore.QEvent.Type.DeferredDelete)
    return [widget for widget in QtWidgets.QApplication.topLevelWidgets() if widget not in before]


def _name_of(thing: object) -> str:
    name = thing.objectName()
    return f"{type(thing).__name__} {name}".strip()


@pytest.fixture(scope="session")
def screen() -> Iterator[str]:
    """An X server of the tests' own: the value for DISPLAY. For windows in processes of their own."""
    if shutil.which("Xvfb") is None:
        if os.environ.get("CI"):
            pytest.fail("Xvfb is missing on a machine that should have it")
        pytest.skip("needs Xvfb")
    reading, writing = os.pipe()
    server = subprocess.Popen(
        ["Xvfb", "-displayfd", str(writing), "-screen", "0", "1600x1200x24", "-nolisten", "tcp"],
        pass_fds=[writing],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    os.close(writing)
    try:
        with os.fdopen(reading) as answer:
            # Blocks until the server is ready, or ends at once when it has died.
            number = answer.readline().strip()
        assert number, "Xvfb did not start"
        yield f":{number}"
    finally:
        server.terminate()
        server.wait(10)
