"""The command line: arguments, and how every run ends. No Qt here.

Exit codes: 0 done; 1 the question has no answer there; 2 bad input, and nothing was written.
"""

from __future__ import annotations

import argparse
import difflib
import os
import re
import signal
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import NoReturn

from tinemark import __version__
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.exact import Exact, exact

DONE, NO_ANSWER, BAD_INPUT = 0, 1, 2
DEFECT, STOPPED, PIPE_CLOSED = 70, 128 + signal.SIGINT, 141

MAX_LEVELS = 40
MAX_DIGITS = 150
MAX_BASE_PERIOD = 4096
MAX_PERIOD = 64
MOST_BENCH_LEVELS = 8
MIN_SIDE, MAX_SIDE, MAX_PIXELS = 16, 20_000, 100_000_000

_NEGATIVE = re.compile(r"-(?:\d|\.\d|inf|nan)", re.IGNORECASE)


class _UsageError(TinemarkError):
    """Arguments that cannot be understood."""


class _Parser(argparse.ArgumentParser):
    def error(self, message: str) -> NoReturn:
        raise _UsageError(message, what_to_do=f"see: {self.prog} --help")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the program.

    Parameters
    ----------
    arguments
        Without the program's name; None for those of the process.

    Returns
    -------
    int
        The exit code.
    """
    words = list(sys.argv[1:] if arguments is None else arguments)
    _tolerate_plain_terminals()
    try:
        code = _dispatch(words)
        sys.stdout.flush()
        return code
    except NoOnsetFound as error:
        return _end(str(error), NO_ANSWER)
    except TinemarkError as error:
        return _end(str(error), BAD_INPUT)
    except KeyboardInterrupt:
        return _end("stopped", STOPPED)
    except BrokenPipeError:
        # Whoever read our output has had enough; the interpreter must not complain about it either.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return PIPE_CLOSED
    except SystemExit as end:  # --help and --version
        return end.code if isinstance(end.code, int) else DONE
    except Exception as error:  # the last stop: a sentence instead of a page of code
        if os.environ.get("TINEMARK_TRACEBACK"):
            raise
        text = f"a defect of Tinemark ({type(error).__name__}: {error})"
        return _end(f"{text}; please report it, with TINEMARK_TRACEBACK=1 set for the details", DEFECT)


def _end(text: str, code: int) -> int:
    # File names and quoted input may hold anything; on a terminal it must stay one plain line.
    plain = "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)
    print(f"tinemark: {plain}", file=sys.stderr, flush=True)
    return code


def _tolerate_plain_terminals() -> None:
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="replace")


def _dispatch(words: list[str]) -> int:
    if words and words[0] in COMMANDS:
        parser, run = COMMANDS[words[0]]
        # A number may be negative: with a space before it, it is not taken for an option.
        values = [f" {word}" if _NEGATIVE.match(word) else word for word in words[1:]]
        return run(parser().parse_args(values)) or DONE
    if words and words[0].startswith("-") and words[0] != "--":
        _top_parser().parse_args(words)
    return _open(words[1:] if words[:1] == ["--"] else words)


def _open(words: list[str]) -> int:
    """Open the window, or do its job where there is no display."""
    if len(words) > 1:
        raise _UsageError(f'"{_short(words[1])}" was not expected', what_to_do="see: tinemark --help")
    path = Path(words[0]) if words else None
    if path is not None:
        _check_names_a_file(words[0])
    from tinemark.commands import sessions

    if not has_display():
        sessions.without_display(path)
        return DONE
    if path is not None:
        # Whatever is wrong with the file is said here, before a window appears.
        sessions.session_of(path)
    try:
        from tinemark.window.app import open_window
    except ImportError as error:
        raise TinemarkError(
            f"the window cannot be opened ({error})",
            what_to_do="start with scripts/run.py, which names what is missing",
        ) from error
    return int(open_window(path))


def has_display() -> bool:
    """Whether there is a screen to open a window on."""
    if sys.platform in ("win32", "darwin"):
        return True
    return bool(os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY"))


def _check_names_a_file(word: str) -> None:
    try:
        there = Path(word).exists()
    except (OSError, ValueError):
        there = False
    if there:
        return
    close = difflib.get_close_matches(word[:60], COMMANDS, 1)
    hint = f'did you mean "{close[0]}"?' if close else "commands: " + ", ".join(COMMANDS)
    raise _UsageError(f'"{_short(word)}" is neither a file nor a command', what_to_do=hint)


def _short(text: str) -> str:
    shown = text.encode("unicode_escape").decode("ascii") if not text.isprintable() else text
    return shown if len(shown) <= 60 else shown[:57] + "..."


# Arguments


def _top_parser() -> argparse.ArgumentParser:
    parser = _Parser(
        prog="tinemark",
        usage="tinemark [FILE]\n       tinemark COMMAND ...",
        description="Where a periodically operated system stops repeating, as proved numbers.",
        epilog="commands: "
        + "; ".join(f"{name} ({first_line(run)})" for name, (_, run) in COMMANDS.items())
        + ". Each has --help of its own. Without a command the window opens, with the demo or with FILE.",
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"tinemark {__version__}")
    return parser


def first_line(function: Callable[..., object]) -> str:
    """First line of a function's docstring, as a phrase."""
    line = (function.__doc__ or "").partition("\n")[0].rstrip(".")
    return line[:1].lower() + line[1:]


def _parser(name: str, description: str) -> argparse.ArgumentParser:
    parser = _Parser(prog=f"tinemark {name}", description=description, allow_abbrev=False)
    if name not in ("inspect", "verify"):
        parser.add_argument(
            "system", metavar="SYSTEM", help="name of a built-in system, or path of a TOML file"
        )
    return parser


def _add_output(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--digits", default="20", help="significant digits wanted (default 20)")
    parser.add_argument(
        "--json", metavar="FILE", help="also write the onsets as JSON; - for standard output only"
    )


def _add_kinds(parser: argparse.ArgumentParser, what: str) -> None:
    parser.add_argument("--kinds", metavar="KINDS", help=f"{what}, such as flip,fold (default: all)")


def _ladder_parser() -> argparse.ArgumentParser:
    parser = _parser("ladder", "Follow a cascade of period doublings level by level.")
    parser.add_argument("--parameter", metavar="P", help="swept parameter (default: the diagram's)")
    parser.add_argument(
        "--from", dest="start", metavar="A", help="where to start (default: the parameter's range)"
    )
    parser.add_argument(
        "--to", dest="stop", metavar="B", help="where to stop (default: the parameter's range)"
    )
    parser.add_argument(
        "--base-period", default="1", metavar="N", help="period that splits first (default 1)"
    )
    parser.add_argument("--levels", default="8", metavar="N", help="how many onsets (default 8)")
    parser.add_argument(
        "--kinds",
        metavar="KINDS",
        help="kinds listed, such as flip,fold: flip is a must, and with others the onset at which the "
        "first cycle appears comes before the levels (default flip)",
    )
    _add_output(parser)
    return parser


def _refine_parser() -> argparse.ArgumentParser:
    parser = _parser("refine", "Find the onset nearest to a place, as a click in the diagram does.")
    parser.add_argument("--near", required=True, metavar="VALUE[,OBSERVED]", help="where the click falls")
    parser.add_argument(
        "--window", required=True, metavar="WIDTH", help="width of the parameter range searched"
    )
    _add_kinds(parser, "kinds of onsets to look for")
    _add_output(parser)
    return parser


def _onsets_parser() -> argparse.ArgumentParser:
    parser = _parser("onsets", "List every onset of a range, and say what may be missing.")
    parser.add_argument("--range", nargs=2, required=True, metavar=("A", "B"), help="ends of the range")
    parser.add_argument(
        "--max-period", required=True, metavar="P", help="longest period of the cycles looked at"
    )
    parser.add_argument("--parameter", metavar="NAME", help="swept parameter (default: the diagram's)")
    _add_kinds(parser, "kinds of onsets to list")
    _add_output(parser)
    return parser


def _compare_parser() -> argparse.ArgumentParser:
    parser = _parser(
        "compare", "Pick the splits of a bench sweep and say whether they agree with the model's."
    )
    parser.add_argument(
        "--bench", required=True, metavar="FILE.csv", help="measured sweep: text, .npy or .npz"
    )
    parser.add_argument(
        "--knob", default="", metavar="COLUMN", help="column of the knob (default: the first)"
    )
    parser.add_argument(
        "--sample", default="", metavar="COLUMN", help="column of the samples (default: the last)"
    )
    parser.add_argument("--time", default="", metavar="COLUMN", help="of a waveform: column of the time")
    parser.add_argument("--trigger", default="", metavar="COLUMN", help="of a waveform: cut where this rises")
    parser.add_argument("--strobe", default="0", metavar="PERIOD", help="of a waveform: cut once so often")
    parser.add_argument(
        "--knob-step", default="0", metavar="STEP", help="round knob values to multiples of this"
    )
    parser.add_argument(
        "--knob-uncertainty", default="0", metavar="U", help="standard uncertainty of a knob setting"
    )
    parser.add_argument(
        "--direction", default="up", choices=("up", "down"), help="way of the sweep looked at"
    )
    parser.add_argument("--levels", default="3", metavar="N", help="how many splits (default 3)")
    parser.add_argument(
        "--scale",
        metavar="S",
        help="calibration: parameter = offset + scale * knob (default: fitted to the onsets)",
    )
    parser.add_argument("--offset", metavar="O", help="calibration: see --scale")
    parser.add_argument("--seed", default="1", metavar="N", help="of the resampling (default 1)")
    parser.add_argument(
        "--json", metavar="FILE", help="also write the comparison as JSON; - for standard output only"
    )
    return parser


def _picture_parser() -> argparse.ArgumentParser:
    parser = _parser("picture", "Write the diagram as a PNG picture.")
    parser.add_argument("--range", nargs=2, required=True, metavar=("A", "B"), help="ends of the sweep")
    parser.add_argument("--size", default="1600x1000", metavar="WxH", help="pixels (default 1600x1000)")
    parser.add_argument("-o", "--output", required=True, metavar="FILE.png", help="file to write")
    parser.add_argument(
        "--accuracy",
        default="",
        metavar="LEVEL",
        help="of equations: error of a sample at most, picture (1e-6 of a state's size, finer where the "
        "pixels show it), bench (1e-8) or reference (1e-11)",
    )
    return parser


def _inspect_parser() -> argparse.ArgumentParser:
    parser = _parser("inspect", "Say what a file of Tinemark's is, or what is wrong with it and where.")
    parser.add_argument("file", metavar="FILE")
    return parser


def _verify_parser() -> argparse.ArgumentParser:
    parser = _parser(
        "verify",
        "Check every proof of a session or an onsets file again, with a second implementation that shares no "
        "code with the first. Exit code 0 when all are confirmed, 1 when one is not.",
    )
    parser.add_argument("file", metavar="FILE")
    parser.add_argument(
        "--longest",
        metavar="MINUTES",
        help="how long the check of one proof may take, about (default 10); long cycles may ask for more",
    )
    return parser


def _ladder(given: argparse.Namespace) -> None:
    """Follow a cascade."""
    from tinemark.commands import onsets

    onsets.ladder(
        onsets.LadderOptions(
            system=given.system,
            parameter=given.parameter,
            start=None if given.start is None else _number(given.start, "--from"),
            stop=None if given.stop is None else _number(given.stop, "--to"),
            base_period=_whole(given.base_period, "--base-period", MAX_BASE_PERIOD),
            levels=_whole(given.levels, "--levels", MAX_LEVELS),
            digits=_whole(given.digits, "--digits", MAX_DIGITS),
            json=given.json,
            kinds=given.kinds,
        )
    )


def _refine(given: argparse.Namespace) -> None:
    """Find the onset nearest to a place."""
    from tinemark.commands import onsets

    near, *observed = given.near.split(",")
    if len(observed) > 1:
        raise _UsageError(
            f'"{_short(given.near)}" is not VALUE or VALUE,OBSERVED',
            where="--near",
            what_to_do="write 3.45 or 3.45,0.85",
        )
    window = _number(given.window, "--window")
    if window.fraction <= 0:
        raise _UsageError("the width must be above zero", where="--window")
    onsets.refine(
        onsets.RefineOptions(
            system=given.system,
            near=_number(near, "--near"),
            observed=_number(observed[0], "--near") if observed else None,
            window=window,
            digits=_whole(given.digits, "--digits", MAX_DIGITS),
            json=given.json,
            kinds=given.kinds,
        )
    )


def _onsets(given: argparse.Namespace) -> None:
    """List every onset of a range."""
    from tinemark.commands import surveys

    start, stop = _range(given.range)
    surveys.onsets(
        surveys.SurveyOptions(
            system=given.system,
            parameter=given.parameter,
            start=start,
            stop=stop,
            max_period=_whole(given.max_period, "--max-period", MAX_PERIOD),
            digits=_whole(given.digits, "--digits", MAX_DIGITS),
            kinds=given.kinds,
            json=given.json,
        )
    )


def _compare(given: argparse.Namespace) -> None:
    """Hold a bench sweep against the model."""
    from tinemark.commands import comparison

    comparison.compare(
        comparison.CompareOptions(
            system=given.system,
            bench=given.bench,
            knob=given.knob,
            sample=given.sample,
            time=given.time,
            trigger=given.trigger,
            strobe_period=_not_negative(given.strobe, "--strobe"),
            knob_step=_not_negative(given.knob_step, "--knob-step"),
            knob_uncertainty=_not_negative(given.knob_uncertainty, "--knob-uncertainty"),
            direction=given.direction,
            levels=_whole(given.levels, "--levels", MOST_BENCH_LEVELS),
            scale=None if given.scale is None else float(_number(given.scale, "--scale")),
            offset=None if given.offset is None else float(_number(given.offset, "--offset")),
            seed=_whole(given.seed, "--seed", 2**31 - 1),
            json=given.json,
        )
    )


def _picture(given: argparse.Namespace) -> None:
    """Write the diagram as a PNG."""
    from tinemark.commands import pictures

    start, stop = _range(given.range)
    output = Path(given.output)
    if output.suffix.lower() != ".png":
        raise _UsageError(
            "a picture is written as PNG", where="--output", what_to_do="name the file FILE.png"
        )
    pictures.picture(
        pictures.PictureOptions(given.system, start, stop, _size(given.size), output, given.accuracy.strip())
    )


def _inspect(given: argparse.Namespace) -> None:
    """Say what a file is."""
    from tinemark.commands import sessions

    sessions.inspect(Path(given.file))


def _verify(given: argparse.Namespace) -> int:
    """Check the proofs of a file again."""
    from tinemark.commands import proofs

    minutes = None if given.longest is None else float(_number(given.longest, "--longest"))
    if minutes is not None and not minutes > 0:
        raise _UsageError("is not above zero", where="--longest", what_to_do="give a number of minutes")
    return DONE if proofs.verify(Path(given.file), minutes) else NO_ANSWER


def _range(texts: Sequence[str]) -> tuple[Exact, Exact]:
    start, stop = (_number(text, "--range") for text in texts)
    if start.fraction == stop.fraction:
        raise _UsageError("both ends are the same", where="--range", what_to_do="give two different ends")
    return start, stop


def _number(text: str, option: str) -> Exact:
    return exact(text, where=option)


def _not_negative(text: str, option: str) -> float:
    value = float(_number(text, option))
    if value < 0:
        raise _UsageError(f"{text.strip()} is negative", where=option, what_to_do="give 0 or more")
    return value


def _whole(text: str, option: str, most: int) -> int:
    if not re.fullmatch(r"\d{1,9}", text.strip()) or not 1 <= int(text) <= most:
        raise _UsageError(
            f'"{_short(text.strip())}" is not a whole number from 1 to {most}',
            where=option,
            what_to_do="change it",
        )
    return int(text)


def _size(text: str) -> tuple[int, int]:
    match = re.fullmatch(r"(\d{1,6})[xX](\d{1,6})", text.strip())
    if match is None:
        raise _UsageError(
            f'"{_short(text)}" is not a size', where="--size", what_to_do="write it as 1600x1000"
        )
    width, height = int(match[1]), int(match[2])
    if not (
        min(width, height) >= MIN_SIDE and max(width, height) <= MAX_SIDE and width * height <= MAX_PIXELS
    ):
        raise _UsageError(
            f"{width} x {height} pixels cannot be drawn",
            where="--size",
            what_to_do=f"stay between {MIN_SIDE} and {MAX_SIDE} a side, and below a hundred million in all",
        )
    return width, height


COMMANDS: dict[
    str, tuple[Callable[[], argparse.ArgumentParser], Callable[[argparse.Namespace], int | None]]
] = {
    "ladder": (_ladder_parser, _ladder),
    "refine": (_refine_parser, _refine),
    "onsets": (_onsets_parser, _onsets),
    "compare": (_compare_parser, _compare),
    "picture": (_picture_parser, _picture),
    "inspect": (_inspect_parser, _inspect),
    "verify": (_verify_parser, _verify),
}
