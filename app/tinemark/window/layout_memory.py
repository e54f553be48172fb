"""What the window remembers between runs: its layout, the theme and the recent files, in one file of the
user's own.

The file lies in the user's configuration folder, or where TINEMARK_CONFIG says: tests and screenshots point
it elsewhere.
"""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

from PySide6.QtCore import QByteArray, QSettings

FOLDER_VARIABLE = "TINEMARK_CONFIG"
MAX_RECENT = 8
THEME_CHOICES = ("system", "light", "dark")


def config_folder() -> Path:
    """The folder of the program's configuration, made where it does not exist."""
    named = os.environ.get(FOLDER_VARIABLE)
    if named:
        folder = Path(named)
    else:
        from platformdirs import user_config_path

        folder = user_config_path("tinemark", appauthor=False)
    folder.mkdir(parents=True, exist_ok=True)
    return folder


@dataclass
class LayoutMemory:
    """Remembered things, read and written one by one. A file that cannot be read counts as empty."""

    settings: QSettings

    @classmethod
    def open(cls, folder: Path | None = None) -> LayoutMemory:
        """The memory in a folder; by default the user's."""
        where = folder or config_folder()
        return cls(QSettings(str(where / "window.ini"), QSettings.Format.IniFormat))

    def bytes_of(self, key: str) -> QByteArray:
        """Qt's packed state of a window or splitter; empty when there is none."""
        value = self.settings.value(f"layout/{key}")
        return value if isinstance(value, QByteArray) else QByteArray()

    def keep_bytes(self, key: str, value: QByteArray) -> None:
        """Remember the packed state of a window or splitter."""
        self.settings.setValue(f"layout/{key}", value)

    def flag(self, key: str, default: bool) -> bool:
        """A remembered yes or no."""
        value = self.settings.value(f"layout/{key}", default)
        return value if isinstance(value, bool) else str(value).lower() == "true"

    def keep_flag(self, key: str, value: bool) -> None:
        """Remember a yes or no."""
        self.settings.setValue(f"layout/{key}", value)

    @property
    def theme(self) -> str:
        """One of `THEME_CHOICES`."""
        value = str(self.settings.value("theme", "system"))
        return value if value in THEME_CHOICES else "system"

    @theme.setter
    def theme(self, value: str) -> None:
        self.settings.setValue("theme", value)

    @property
    def recent(self) -> list[str]:
        """Session files opened or saved last, latest first."""
        value = self.settings.value("recent", [])
        names = [value] if isinstance(value, str) else value
        return [str(name) for name in names] if isinstance(names, list) else []

    def add_recent(self, path: Path) -> None:
        """Put a file at the head of the recent ones."""
        name = str(path.resolve())
        self.settings.setValue(
            "recent", [name, *(other for other in self.recent if other != name)][:MAX_RECENT]
        )

    def drop_recent(self, name: str) -> None:
        """Forget a file that is gone."""
        self.settings.setValue("recent", [other for other in self.recent if other != name])

    def sync(self) -> None:
        """Write what has changed."""
        self.settings.sync()
