"""System libraries on Linux: which are missing, and the line that installs them."""

from __future__ import annotations

import ctypes
import importlib.util
import os
import shutil
import subprocess
import sys
from collections.abc import Mapping

# What the Qt wheels load from the system to open a window: library -> Debian package.
WINDOW: Mapping[str, str] = {
    "libEGL.so.1": "libegl1",
    "libGL.so.1": "libgl1",
    "libX11-xcb.so.1": "libx11-xcb1",
    "libdbus-1.so.3": "libdbus-1-3",
    "libfontconfig.so.1": "libfontconfig1",
    "libfreetype.so.6": "libfreetype6",
    "libglib-2.0.so.0": "libglib2.0-0",
    "libxcb-cursor.so.0": "libxcb-cursor0",
    "libxcb-icccm.so.4": "libxcb-icccm4",
    "libxcb-image.so.0": "libxcb-image0",
    "libxcb-keysyms.so.1": "libxcb-keysyms1",
    "libxcb-randr.so.0": "libxcb-randr0",
    "libxcb-render-util.so.0": "libxcb-render-util0",
    "libxcb-shape.so.0": "libxcb-shape0",
    "libxcb-sync.so.1": "libxcb-sync1",
    "libxcb-xfixes.so.0": "libxcb-xfixes0",
    "libxcb-xkb.so.1": "libxcb-xkb1",
    "libxkbcommon-x11.so.0": "libxkbcommon-x11-0",
    "libxkbcommon.so.0": "libxkbcommon0",
}
# The tests also open a window on a screen of their own.
TESTS: Mapping[str, str] = {**WINDOW, "Xvfb": "xvfb"}


def missing(wanted: Mapping[str, str]) -> list[str]:
    """Debian packages of what is wanted and not there, each once."""
    return sorted({package for name, package in wanted.items() if not _is_there(name)})


def provide(wanted: Mapping[str, str], *, optional: bool = False) -> bool:
    """Make sure that what is wanted is there, and return whether it is.

    Installs only as root, and only what is missing. Otherwise prints the line that installs it.

    Raises
    ------
    SystemExit
        Something is missing, cannot be installed from here, and is not `optional`.
    """
    packages = missing(wanted)
    if not packages:
        return True
    line = "apt-get install --no-install-recommends " + " ".join(packages)
    if os.geteuid() == 0 and shutil.which("apt-get"):
        print(
            f"tinemark: installing missing system libraries: {' '.join(packages)}",
            file=sys.stderr,
            flush=True,
        )
        _install(packages)
        packages = missing(wanted)
        if not packages:
            return True
    text = (
        f"missing system libraries: {' '.join(packages)}; on Debian and Ubuntu install them with: sudo {line}"
    )
    if not optional:
        sys.exit(f"tinemark: {text}")
    print(f"tinemark: the window may not open: {text}", file=sys.stderr, flush=True)
    return False


def _is_there(name: str) -> bool:
    if name == "ensurepip":
        return importlib.util.find_spec(name) is not None
    if ".so" not in name:
        return shutil.which(name) is not None
    try:
        # The loader's own answer counts, whatever folders it searches.
        ctypes.CDLL(name)
    except OSError:
        return False
    return True


def _install(packages: list[str]) -> None:
    quiet = {**os.environ, "DEBIAN_FRONTEND": "noninteractive"}
    install = ["apt-get", "install", "--yes", "--quiet", "--no-install-recommends", *packages]
    if subprocess.run(install, check=False, env=quiet, stdout=sys.stderr).returncode != 0:
        # On a fresh machine the package lists may be absent or old.
        subprocess.run(["apt-get", "update", "--quiet"], check=False, env=quiet, stdout=sys.stderr)
        subprocess.run(install, check=False, env=quiet, stdout=sys.stderr)
