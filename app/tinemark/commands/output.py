"""Where results go: tables on standard output, files whole or not at all."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from tinemark.systems.errors import TinemarkError

if TYPE_CHECKING:
    from tinemark.document.onsets_file import Found
    from tinemark.onsets.scaling import Scaling
    from tinemark.systems.system import System


def print_onsets(
    system: str,
    parameter: str,
    found: Sequence[Found],
    scaled: Scaling | None,
    json: str | None,
    known: System | None = None,
) -> None:
    """Print onsets as a table; where `json` names a file write that too, where it is "-" print JSON alone.

    Parameters
    ----------
    known
        The onsets' system, for what its tolerances say; None leaves that out.
    """
    from tinemark.document.onsets_file import onsets_file, write_onsets_text
    from tinemark.document.text_table import onsets_table, scaling_lines
    from tinemark.document.tolerance_tables import tolerance_lines

    if json is not None:
        text = write_onsets_text(onsets_file(system, parameter, found, scaled, known))
        if json == "-":
            sys.stdout.write(text)
            return
        _write(Path(json), text.encode())
    print(onsets_table(found, scaled))
    for reason in dict.fromkeys(onset.reason for _, onset in found if onset.reason):
        print(f"not proved: {reason}")
    if scaled is not None:
        print("\n" + "\n".join(scaling_lines(scaled, parameter)))
    for line in tolerance_lines([onset for _, onset in found], known):
        print(line)


def check_json(json: str | None) -> None:
    """As `check_target`, for the argument of --json."""
    if json is not None and json != "-":
        check_target(Path(json))


def check_target(path: Path) -> None:
    """Make sure, before any work, that a file can be written there."""
    if path.is_dir():
        raise TinemarkError("is a folder", where=str(path), what_to_do="name a file in it")
    if not path.parent.is_dir():
        raise TinemarkError(
            "cannot be written: its folder does not exist",
            where=str(path),
            what_to_do="make the folder first",
        )
    if not os.access(path if path.exists() else path.parent, os.W_OK):
        raise TinemarkError(
            "cannot be written: no permission", where=str(path), what_to_do="name another file or folder"
        )


def write_json(target: str, text: str) -> None:
    """Write a JSON text to the file that --json names."""
    _write(Path(target), text.encode())


def _write(path: Path, data: bytes) -> None:
    from tinemark.document.atomic_file import write_whole

    try:
        write_whole(path, data)
    except OSError as error:
        raise not_written(path, error) from error


def not_written(path: Path, error: OSError) -> TinemarkError:
    """The system's refusal in our words."""
    reason = (error.strerror or str(error)).lower()
    return TinemarkError(
        f"cannot be written ({reason})", where=str(path), what_to_do="name another file or folder"
    )
