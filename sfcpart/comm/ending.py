"""How a job ends when a rank fails: within seconds, with one message, and nothing half-written.

An error that all ranks meet (one passed through `Comm.check`, or the same mistake found by each)
is told once, and every rank leaves by itself. An error of some ranks alone would let the others
wait for ever: the first of them to notice says so with its number, removes what was being
written, and aborts the job. A rank that a signal kills is noticed by the launcher, which ends the
others; which rank it was, its witness tells, which removes what was being written, too
(`sfcpart.comm.witness`).

All ranks are asked whether they failed too with a barrier that nobody waits in (`MPI_Ibarrier`),
on a communicator of its own.
"""

from __future__ import annotations

import shutil
import sys
import traceback
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

from sfcpart.launcher import launched

if TYPE_CHECKING:
    from sfcpart.comm.witness import Witness

__all__ = ["end_rank", "ending_together", "found_on", "removed_on_abort"]

_half_written: set[Path] = set()


@contextmanager
def removed_on_abort(path: Path) -> Iterator[None]:
    """Name a file or folder that is half-written during a block, on every rank that knows it.

    Whichever of them aborts the job removes it first, and the witness of one that a signal kills.
    (What a machine that goes down leaves is removed by the next run.)

    Examples
    --------
    >>> with removed_on_abort(Path(".parts.tmp")):
    ...     pass  # write there, rename in the end
    """
    _half_written.add(path)
    witness = _witness()
    if witness is not None:
        witness.is_written(path)
    try:
        yield
    finally:
        # not while an error is on its way out: whoever aborts still needs the name
        if sys.exc_info()[0] is None:
            _half_written.discard(path)
            if witness is not None:
                witness.has_written(path)


def _witness() -> Witness | None:
    """Return who tells of this rank's death, if a launcher started it."""
    if not launched():
        return None
    from sfcpart.comm.mpi.ending import witness

    return witness()


def found_on(error: BaseException) -> int | None:
    """Return the rank on which an error was found that all ranks share: -1 all, None not shared.

    Examples
    --------
    >>> found_on(ValueError("of this rank alone")) is None
    True
    """
    seen: BaseException | None = error
    while seen is not None:
        rank = getattr(seen, "on_rank", None)
        if rank is not None:
            return int(rank)
        seen = seen.__cause__
    return None


def end_rank(error: BaseException, *, text: str, code: int, say: Callable[[str], object]) -> int:
    """Tell an error once for the whole job; return the exit code, or abort the job with it.

    Parameters
    ----------
    error : BaseException
        What ended the work of this rank.
    text : str
        The message.
    code : int
        Exit code.
    say : callable
        Prints a message.

    Examples
    --------
    >>> end_rank(ValueError("no"), text="no", code=3, say=print)
    no
    3
    """
    rank = found_on(error)
    if not launched():
        say(text)
        return code
    from sfcpart.comm.mpi.ending import everyone_failed, silent_abort, this_rank

    if everyone_failed(lambda: _speak_up(this_rank() if rank in (None, -1) else rank, text, say)):
        if this_rank() == 0:
            say(text if rank in (None, -1) else f"rank {rank}: {text}")
        return code
    return silent_abort(code)


def _speak_up(rank: int, text: str, say: Callable[[str], object]) -> None:
    """Say what failed, before this rank aborts the job."""
    say(f"rank {rank}: {text}")
    remove_half_written()


def remove_half_written() -> None:
    """Remove what was being written."""
    for path in _half_written:
        shutil.rmtree(path, ignore_errors=True)
        with suppress(OSError):
            path.unlink()


@contextmanager
def ending_together(comm: Any = None) -> Iterator[None]:
    """End the whole job if this rank fails in a block, instead of leaving the others to wait.

    For the outermost level of a solver's script; all ranks enter and leave it. The traceback of
    the first rank that failed is printed with its number, then the job is aborted.

    Parameters
    ----------
    comm : mpi4py communicator, optional
        Any: it is not used but to show that MPI is there.

    Raises
    ------
    SystemExit
        With status 1, where all ranks failed.

    Notes
    -----
    Costs nothing until a rank fails. Without a launcher errors pass as they are.

    Examples
    --------
    >>> with ending_together():
    ...     steps = 20  # the solver's work
    """
    if launched():
        from sfcpart.comm.mpi.ending import prepare

        prepare()
    try:
        yield
    except Exception as error:
        if not launched():
            raise
        text = "".join(traceback.format_exception(error)).rstrip()
        sys.exit(end_rank(error, text=text, code=1, say=_to_stderr))


def _to_stderr(text: str) -> None:
    """Print on the error stream."""
    sys.stderr.write(text + "\n")
    sys.stderr.flush()
