"""Writing a whole file or nothing."""

from __future__ import annotations

import contextlib
import os
import secrets
import stat
from pathlib import Path


def write_whole(path: str | Path, data: bytes) -> None:
    """Write a file so that at every moment either the old or the new content is there, whole.

    The data go to a new file beside the old one, are forced to the disk, and take its name.
    A link is followed and stays a link. An existing file keeps its permissions and, where
    allowed, its owner.

    Raises
    ------
    OSError
        Nothing was written; the old file is as it was.
    """
    target = Path(os.path.realpath(path))
    old = _existing(target)
    # Renaming would also replace a file that its owner has protected against writing.
    if old is not None and not os.access(target, os.W_OK):
        raise PermissionError(13, "Permission denied", str(target))
    # A new file gets what the user's mask allows; one that takes an old file's place must not be
    # more open than it, not even before its permissions are set.
    beside = target.with_name(f".{target.name[:100]}.{secrets.token_hex(6)}.tmp")
    flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0) | getattr(os, "O_NOFOLLOW", 0)
    handle = os.open(beside, flags, 0o666 if old is None else 0o600)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            if old is not None:
                _dress(file.fileno(), beside, old)
            os.fsync(file.fileno())
        os.replace(beside, target)  # noqa: PTH105 - replaces on every system
    except BaseException:
        with contextlib.suppress(OSError):
            beside.unlink()
        raise
    _sync_folder(target.parent)


def _existing(target: Path) -> os.stat_result | None:
    try:
        found = target.stat()
    except FileNotFoundError:
        return None
    if stat.S_ISDIR(found.st_mode):
        raise IsADirectoryError(21, "Is a directory", str(target))
    if not stat.S_ISREG(found.st_mode):
        raise OSError(22, "Not a regular file", str(target))
    return found


def _dress(handle: int, beside: Path, old: os.stat_result) -> None:
    """Give the new file the old one's owner, as far as allowed, and its permissions."""
    if hasattr(os, "fchown"):
        with contextlib.suppress(OSError):
            os.fchown(handle, -1, old.st_gid)
        with contextlib.suppress(OSError):
            os.fchown(handle, old.st_uid, -1)
    mode = stat.S_IMODE(old.st_mode)
    if hasattr(os, "fchmod"):
        os.fchmod(handle, mode)
    else:
        beside.chmod(mode)


def _sync_folder(folder: Path) -> None:
    """Force the new name to the disk, where folders can be opened."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY | getattr(os, "O_DIRECTORY", 0))
        try:
            os.fsync(handle)
        finally:
            os.close(handle)
