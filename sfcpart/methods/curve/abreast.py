"""Several tasks over the same ranks, abreast: what they ask of the ranks goes in one message.

A task is a generator that yields what it asks of all ranks (`Ask`) and is sent the answer. All
ranks run the same tasks, and what a task does next follows from the answers alone, so that ranks
agree about what is asked when. Each turn answers every task once, with one collective for each
kind of question: the rounds are those of the longest task, not their sum.

Source: common practice, no source.
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass
from typing import Any, Literal, TypeAlias, TypeVar

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Int64Array
from sfcpart.errors import PartitionError

__all__ = ["Ask", "Asking", "answered"]

T = TypeVar("T")
Step: TypeAlias = Callable[[Int64Array], Int64Array]
Kind: TypeAlias = Literal["sum", "max", "gather", "first", "last"]


@dataclass(frozen=True, eq=False)
class Ask:
    """What a task asks of all ranks.

    Attributes
    ----------
    kind : {"sum", "max", "gather", "first", "last"}
        A reduction; the rows of all ranks; a relay towards the first or last rank.
    array : int64
        What this rank brings; for relays, what they begin with (one axis).
    step : callable, optional
        Of a relay.
    """

    kind: Kind
    array: Int64Array
    step: Step | None = None


Asking: TypeAlias = Generator[Ask, Any, T]


def answered(comm: Comm, tasks: Sequence[Asking[T]]) -> list[T]:
    """Run tasks to their ends; return what they return.

    Raises
    ------
    PartitionError
        The first task's that raises one, after all have ended.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def double(number):
    ...     return 2 * (yield Ask("sum", np.array([number])))[0]
    >>> run_ranks(3, lambda comm: [int(n) for n in answered(comm, [double(1), double(comm.rank)])])
    [[6, 6], [6, 6], [6, 6]]
    """
    results: dict[int, T] = {}
    errors: dict[int, PartitionError] = {}
    answers: dict[int, Any] = dict.fromkeys(range(len(tasks)))
    while answers:
        asks: dict[int, Ask] = {}
        for k, answer in answers.items():
            try:
                asks[k] = tasks[k].send(answer)
            except StopIteration as done:
                results[k] = done.value
            except PartitionError as error:
                errors[k] = error
        answers = {}
        for kind in dict.fromkeys(ask.kind for ask in asks.values()):
            group = {k: ask for k, ask in asks.items() if ask.kind == kind}
            answers |= zip(group, _answers(comm, kind, list(group.values())), strict=True)
        answers = dict(sorted(answers.items()))
    if errors:
        raise errors[min(errors)]
    return [results[k] for k in range(len(tasks))]


def _answers(comm: Comm, kind: Kind, asks: list[Ask]) -> list[Any]:
    """Answer questions of one kind with one collective."""
    if kind == "gather":
        return _gathered(comm, asks)
    if kind == "first" or kind == "last":
        return _relayed(comm, asks, towards=kind)
    flat = comm.allreduce(np.concatenate([ask.array.ravel() for ask in asks]), kind)
    edge = np.cumsum([ask.array.size for ask in asks])[:-1]
    pieces = np.split(flat, edge)
    return [piece.reshape(ask.array.shape) for piece, ask in zip(pieces, asks, strict=True)]


def _gathered(comm: Comm, asks: list[Ask]) -> list[list[Int64Array]]:
    """Return the rows of all ranks for each task."""
    came = [_unpack(packed) for packed in comm.allgather(_pack([a.array.ravel() for a in asks]))]
    return [
        [pieces[k].reshape(-1, *ask.array.shape[1:]) for pieces in came]
        for k, ask in enumerate(asks)
    ]


def _relayed(comm: Comm, asks: list[Ask], *, towards: Literal["first", "last"]) -> list[Int64Array]:
    """Hand on the arrays of all tasks together."""

    def step(packed: Int64Array) -> Int64Array:
        pieces = zip(asks, _unpack(packed), strict=True)
        return _pack([piece if ask.step is None else ask.step(piece) for ask, piece in pieces])

    return _unpack(comm.relay(_pack([ask.array for ask in asks]), step, towards=towards))


def _pack(arrays: list[Int64Array]) -> Int64Array:
    """Return arrays of one axis in one, their number and lengths in front."""
    head = [len(arrays), *map(len, arrays)]
    return np.concatenate([np.array(head, np.int64), *arrays]).astype(np.int64, copy=False)


def _unpack(packed: Int64Array) -> list[Int64Array]:
    """Take arrays apart."""
    n = int(packed[0])
    edge = n + 1 + np.cumsum(packed[1 : n + 1])
    return np.split(packed[: edge[-1]], np.append(n + 1, edge[:-1]))[1:]
