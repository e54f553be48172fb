"""Where the files that ship with Tinemark lie: in the checkout, or packed into the wheel."""

from __future__ import annotations

from pathlib import Path

_PACKAGE = Path(__file__).resolve().parent


def resource(*parts: str) -> Path:
    """Path of a shipped file or folder, for example ``resource("systems", "logistic.toml")``.

    A wheel is always unpacked on disk, so a plain path serves in both places. The file need not
    exist: the reader of it says so in its own words.
    """
    packed = _PACKAGE / "resources"
    root = packed if packed.is_dir() else _PACKAGE.parents[1] / "resources"
    return root.joinpath(*parts)
