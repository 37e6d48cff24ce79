"""The decision for a running solver: a few numbers a step in, re-split or not out."""

from __future__ import annotations

from math import isfinite
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.comm import SerialComm, adopt
from sfcpart.errors import InputError
from sfcpart.resplit.policies import Regret

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["RebalanceClock"]

_TICK = 1e-9  # seconds are summed over ranks as whole nanoseconds, so that all ranks agree


class RebalanceClock:
    """Says after each step of a running solver whether to re-split before the next.

    Fed with the solver's own timings and with what re-splits cost, it re-splits when what a
    re-split would have saved reaches what it costs (`sfcpart.resplit.policies.Regret`). Every
    rank gets the same answer, since every rank sees the same reduced numbers.

    Parameters
    ----------
    comm : Comm or mpi4py.MPI.Intracomm, optional
        The solver's ranks; this process alone by default.
    cost : float
        Seconds that the first split took, or a guess of what a re-split takes; replaced by what
        the first re-split is measured to take.
    n_steps : int, optional
        Steps of the whole run, if known: near its end a re-split no longer pays.

    Raises
    ------
    InputError
        If the cost is no finite number >= 0 or the number of steps is below 1.

    Notes
    -----
    Two reductions of two numbers a step. What a rank is fed is the time it *computed*, without
    the time it waited for others; otherwise all ranks look equally slow.

    Examples
    --------
    A loss that grows by 0.2 s a step, and re-splits that cost 10 s:

    >>> clock = RebalanceClock(cost=10.0)
    >>> steps = []
    >>> growth = 0
    >>> for step in range(30):
    ...     growth += 1
    ...     if clock.after_reduced_step(slowest=1.0 + 0.2 * growth, mean=1.0):
    ...         clock.after_resplit(10.0)
    ...         steps.append(step)
    ...         growth = 0
    >>> steps
    [9, 19, 29]
    """

    def __init__(self, comm: Any = None, *, cost: float, n_steps: int | None = None) -> None:
        if n_steps is not None and n_steps < 1:
            raise InputError(f"n_steps is {n_steps}; wanted 1 or more, or None if not known")
        self._comm: Comm = SerialComm() if comm is None else adopt(comm)
        self._rule = Regret(_seconds(cost, "cost"), n_steps)
        self._imbalance = 0.0
        self._n_resplits = 0

    def after_step(self, seconds: float) -> bool:
        """Take in what this rank computed in a step; all ranks call it and get the same answer.

        Parameters
        ----------
        seconds : float
            Of this rank, >= 0, without waiting.

        Returns
        -------
        bool
            Whether to re-split before the next step.

        Raises
        ------
        InputError
            On all ranks, if on any one the time is negative or not finite.

        Examples
        --------
        >>> RebalanceClock(cost=3.0).after_step(0.5)
        False
        """
        slowest = self._slowest(seconds, "the time of a step")
        ticks = np.array([round(seconds / _TICK), 1], np.int64)
        total, size = (int(x) for x in self._comm.allreduce(ticks))
        return self._decide(slowest, min(slowest, total * _TICK / size))

    def after_reduced_step(self, *, slowest: float, mean: float) -> bool:
        """Take in a step whose times were reduced over the ranks already (alike on all ranks).

        Parameters
        ----------
        slowest, mean : float
            Seconds that the slowest rank and the mean rank computed, 0 <= mean <= slowest.

        Returns
        -------
        bool
            Whether to re-split before the next step.

        Raises
        ------
        InputError
            If a time is negative or not finite, or the mean is above the slowest.

        Examples
        --------
        >>> RebalanceClock(cost=0.5).after_reduced_step(slowest=1.0, mean=0.9)
        False
        """
        slowest, mean = _seconds(slowest, "slowest"), _seconds(mean, "mean")
        if mean > slowest * (1 + 1e-9):
            raise InputError(f"the mean rank took {mean} s, the slowest {slowest} s; swapped?")
        return self._decide(slowest, mean)

    def after_resplit(self, seconds: float) -> None:
        """Take in what a re-split cost: splitting, moving and setting up again.

        Parameters
        ----------
        seconds : float
            Of this rank; the slowest rank counts. All ranks call it, whatever made them re-split.

        Raises
        ------
        InputError
            On all ranks, if on any one the time is negative or not finite.

        Examples
        --------
        >>> clock = RebalanceClock(cost=3.0)
        >>> clock.after_resplit(2.0)
        >>> clock.n_resplits, clock.cost
        (1, 2.0)
        """
        self._rule.after_resplit(self._slowest(seconds, "the cost of a re-split"))
        self._n_resplits += 1

    @property
    def cost(self) -> float:
        """Seconds that the next re-split is taken to cost."""
        return self._rule.cost

    @property
    def imbalance(self) -> float:
        """Slowest over mean rank in the last step, minus 1."""
        return self._imbalance

    @property
    def n_resplits(self) -> int:
        """How often the solver has re-split."""
        return self._n_resplits

    @property
    def reason(self) -> str:
        """Why the last answer was what it was, in one line."""
        rule = self._rule
        return (
            f"imbalance {self._imbalance:.1%}; lost since the last re-split {rule.lost:.3g} s, "
            f"of which a re-split would have saved {max(0.0, rule.saved):.3g} s; it costs "
            f"{rule.cost:.3g} s"
        )

    def _decide(self, slowest: float, mean: float) -> bool:
        """Ask the rule."""
        self._imbalance = slowest / mean - 1.0 if mean > 0 else 0.0
        return self._rule.after_step(slowest, mean)

    def _slowest(self, seconds: float, what: str) -> float:
        """Return the largest time over the ranks; an error of one rank is raised on all."""
        error = None
        try:
            seconds = _seconds(seconds, what)
        except InputError as caught:
            error = caught
        told = np.array([0.0 if error else seconds, float(error is not None)])
        slowest, wrong = self._comm.allreduce(told, "max").tolist()
        if wrong:
            self._comm.check(error)
        return float(slowest)


def _seconds(value: float, what: str) -> float:
    """Return a finite time >= 0."""
    try:
        number = float(value)
    except (TypeError, ValueError):
        raise InputError(f"{what} is {value!r}; wanted seconds") from None
    if not (isfinite(number) and number >= 0):
        raise InputError(f"{what} is {number} s; wanted a finite number >= 0")
    return number
