"""Run a command line: every way it can end becomes one line at most and a documented exit code."""

from __future__ import annotations

import io
import os
import sys
import warnings
from collections.abc import Sequence
from typing import Any

import click

from sfcpart.cli.exits import code_of
from sfcpart.cli.verbs import PROGRAM, sfcpart
from sfcpart.launcher import launched

__all__ = ["run"]

_COMPLETE = "_SFCPART_COMPLETE"


def run(arguments: Sequence[str]) -> int:
    """Run `sfcpart` with these arguments and return the exit code.

    `SFCPART_DEBUG=1` in the environment lets errors through with their traceback.
    """
    if _COMPLETE in os.environ:
        return _complete(os.environ[_COMPLETE])
    warnings.showwarning = _show_warning
    _print_any_name()
    try:
        _meet_the_other_ranks()
        if launched() and not _are_for_all_ranks(arguments):
            return _run_on_rank_0(arguments)
        _invoke(arguments)
        sys.stdout.flush()
    except click.exceptions.Exit as leave:
        return _flushed(leave.exit_code)
    except (KeyboardInterrupt, click.Abort) as error:
        return _end(error, "interrupted; nothing was left half-written", 130)
    except BrokenPipeError as error:
        return _end(error, "", _forget_output())
    except Exception as error:
        if os.environ.get("SFCPART_DEBUG", "0") not in ("", "0"):
            if not launched():
                raise
            _print_traceback(error)
        return _end(error, _one_line(error), code_of(error))
    return 0


def _meet_the_other_ranks() -> None:
    """Start MPI where a launcher did, so that a rank that fails early can tell the others."""
    if launched():
        from sfcpart.cli.ranks import hush_others
        from sfcpart.comm.mpi.ending import prepare

        prepare()
        hush_others()


def _invoke(arguments: Sequence[str]) -> None:
    """Parse, and run the verb."""
    with sfcpart.make_context(PROGRAM, list(arguments)) as context:
        sfcpart.invoke(context)


def _are_for_all_ranks(arguments: Sequence[str]) -> bool:
    """Tell whether these are of a verb that all ranks run."""
    from sfcpart.cli.ranks import TOGETHER

    return next((word for word in arguments if not word.startswith("-")), "") in TOGETHER


def _run_on_rank_0(arguments: Sequence[str]) -> int:
    """Run a verb on one rank; all return its exit code."""
    from sfcpart.cli.ranks import is_spokesman, run_alone

    text, code = run_alone(
        arguments,
        lambda: _invoke(arguments),
        lambda error: (_one_line(error), code_of(error)),
    )
    if text and is_spokesman():
        return _say(text, code)
    return _flushed(code)


def _print_traceback(error: Exception) -> None:
    """Print where an error came from; the process goes on, so that the other ranks are told."""
    import traceback

    traceback.print_exception(error)


def _end(error: BaseException, text: str, code: int) -> int:
    """Tell an error once, however many ranks there are; return the code or end the job.

    There is nothing to tell where the reader of the output went away.
    """
    if not launched():
        return _say(text, code)
    from sfcpart.comm.ending import end_rank

    codes = [code]
    end_rank(error, text=text, code=code, say=lambda line: codes.append(_say(line, code)))
    return codes[-1]


def _print_any_name() -> None:
    """Let the output carry names that its encoding cannot, with escapes in their place."""
    if isinstance(sys.stdout, io.TextIOWrapper):
        sys.stdout.reconfigure(errors="backslashreplace")


def _one_line(error: Exception) -> str:
    """Describe an error in one line, whatever it is."""
    from sfcpart.errors import SfcpartError

    if isinstance(error, click.UsageError):
        where = error.ctx.command_path if error.ctx else PROGRAM
        text = f"{error.format_message()} (see '{where} --help')"
    elif isinstance(error, SfcpartError | click.ClickException):
        text = error.format_message() if isinstance(error, click.ClickException) else str(error)
    elif isinstance(error, MemoryError):
        text = f"not enough memory{': ' if str(error) else ''}{error}; use a larger machine"
    elif isinstance(error, OSError):
        text = f"{error.strerror or error}{': ' if error.filename else ''}{error.filename or ''}"
    else:
        text = (
            f"unexpected {type(error).__name__}: {error}; this is a defect in sfcpart: please "
            "report it with the command, and the traceback that SFCPART_DEBUG=1 shows"
        )
    return " ".join(text.split())


def _say(text: str, code: int) -> int:
    """Print one line on the error stream; return the code."""
    try:
        sys.stdout.flush()
        print(f"{PROGRAM}: {'error: ' if code != 130 else ''}{text}", file=sys.stderr, flush=True)
    except BrokenPipeError:
        return _forget_output()
    return code


def _flushed(code: int) -> int:
    """Flush what help or version printed; a reader that went away is no error to talk about."""
    try:
        sys.stdout.flush()
    except BrokenPipeError:
        return _forget_output()
    return code


def _forget_output() -> int:
    """Point the output at nothing, so that the interpreter's last flush cannot fail."""
    nowhere = os.open(os.devnull, os.O_WRONLY)
    for stream in (1, 2):
        try:
            os.fstat(stream)
            os.dup2(nowhere, stream)
        except OSError:
            continue
    return 141


def _complete(instruction: str) -> int:
    """Answer the shell's question for completions (open protocol of click)."""
    from click.shell_completion import shell_complete

    return shell_complete(sfcpart, {}, PROGRAM, _COMPLETE, instruction)


def _show_warning(message: Warning | str, *_: Any, **__: Any) -> None:
    """Print a warning of the library as one line on the error stream."""
    from sfcpart.cli.console import note

    note(f"note: {' '.join(str(message).split())}")
