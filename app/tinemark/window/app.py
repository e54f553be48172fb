"""Starting the window: on screen first, everything heavy after."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable
from pathlib import Path
from types import TracebackType

from PySide6.QtCore import QTimer
from PySide6.QtWidgets import QApplication
from shiboken6 import isValid

from tinemark import __version__
from tinemark.document.session import demo_session
from tinemark.systems.errors import TinemarkError
from tinemark.window.icons import program_icon
from tinemark.window.layout_memory import LayoutMemory
from tinemark.window.main_window import MainWindow
from tinemark.window.session_keeper import SessionKeeper

ExceptHook = Callable[[type[BaseException], BaseException, TracebackType | None], object]

HANDOVER_S = 0.0005


def application() -> QApplication:
    """The running application, made where there is none."""
    app = QApplication.instance()
    if not isinstance(app, QApplication):
        app = QApplication([sys.argv[0] or "tinemark"])
    # A thread that computes in Python hands over to the window's after this long, not after 5 ms: one
    # gesture takes the interpreter back many times.
    sys.setswitchinterval(HANDOVER_S)
    app.setApplicationName("tinemark")
    app.setApplicationDisplayName("Tinemark")
    app.setApplicationVersion(__version__)
    app.setDesktopFileName("tinemark")
    app.setWindowIcon(program_icon())
    return app


def make_window(memory: LayoutMemory | None = None) -> MainWindow:
    """The main window with the demonstration, not yet shown and with nothing running."""
    return MainWindow(SessionKeeper(demo_session()), memory or LayoutMemory.open())


def open_window(path: str | Path | None = None) -> int:
    """Open the window and run until it is closed.

    Parameters
    ----------
    path
        A session or system file; None opens the demonstration.

    Returns ------- int The program's exit code. A file that cannot be opened leaves the window with the
    demonstration and says what is wrong; the code is 0 all the same, as the window has been of use.
    """
    app = application()
    window = make_window()
    sys.excepthook = _telling(window, sys.excepthook)
    window.show()
    if path is not None:
        try:
            window.open_path(Path(path))
        except TinemarkError as error:
            window.say_trouble(str(error))
    # The first paint comes before the first import of a compiler.
    QTimer.singleShot(0, window.workers.start)
    # Ctrl-C in the terminal closes the window as its cross does; Python sees signals only between two turns.
    signal.signal(signal.SIGINT, lambda *_: window.close())
    pulse = QTimer()
    pulse.timeout.connect(lambda: None)
    pulse.start(250)
    code = app.exec()
    pulse.stop()
    return code


def _telling(window: MainWindow, usual: ExceptHook) -> ExceptHook:
    """An exception hook that also tells the user: a defect of ours must not pass in silence."""

    def tell(kind: type[BaseException], error: BaseException, trace: TracebackType | None) -> None:
        usual(kind, error, trace)
        if isValid(window):
            window.status.show_words(
                f"Something went wrong inside Tinemark ({kind.__name__}: {error}). "
                "Your session is kept; save it.",
                "error",
            )

    return tell
