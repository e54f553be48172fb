"""`verify`: every proof of a file, checked again with the second implementation."""

from __future__ import annotations

from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING

from tinemark.commands.progress import Progress
from tinemark.systems.errors import NoOnsetFound, TinemarkError

if TYPE_CHECKING:
    from tinemark.verify.claims import Claim, Verdict


def verify(path: Path, minutes: float | None = None) -> bool:
    """Check every proof of a session or an onsets file, and print what came of each.

    Parameters
    ----------
    minutes
        How long one proof may take, about; by default as `verify.watching` has it.

    Returns
    -------
    bool
        Whether all were confirmed.

    Raises
    ------
    NoOnsetFound
        There is no proof in the file.
    TinemarkError
        It is no such file, or cannot be read.
    """
    from tinemark.document.proofs import summary
    from tinemark.verify.check import check
    from tinemark.verify.claims import Outcome
    from tinemark.verify.watching import MINUTES, Watch

    claims = claims_in(path)
    if not claims:
        raise NoOnsetFound("there is no proof in it to check", where=str(path))
    progress = Progress()
    verdicts: list[Verdict] = []
    for number, claim in enumerate(claims, 1):
        words = f"checking {claim.name} ({number} of {len(claims)})"
        progress.step(words)
        verdict = check(claim, Watch(partial(_tell, progress, words), minutes or MINUTES))
        progress.clear()
        print(f"{_plain(claim.name)}: {_plain(verdict.words)}", flush=True)
        verdicts.append(verdict)
    print(f"{summary(verdicts)}")
    return all(verdict.outcome is Outcome.CONFIRMED for verdict in verdicts)


def _tell(progress: Progress, words: str, share: float) -> None:
    progress.step(f"{words}, {share:.0%}")


def claims_in(path: Path) -> tuple[Claim, ...]:
    """The claims of a file, exactly as they stand there.

    Raises
    ------
    TinemarkError
        It is neither a session nor an onsets file.
    """
    from tinemark.document.inspection import inspect_file
    from tinemark.document.onsets_file import read_onsets_bytes
    from tinemark.document.proofs import claims_of, claims_of_file
    from tinemark.document.session_file import read_session

    kind = inspect_file(path).kind
    if kind == "session":
        return tuple(claim for _, claim in claims_of(read_session(path.read_bytes(), file=str(path))))
    if kind == "onsets":
        return claims_of_file(read_onsets_bytes(path.read_bytes(), file=str(path)))
    raise TinemarkError(
        f"is a {kind}, and holds no proofs",
        where=str(path),
        what_to_do="name a session (.tinemark) or a file that was written with --json",
    )


def _plain(text: str) -> str:
    # What stands in a file may hold anything; on a terminal it stays one plain line.
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)
