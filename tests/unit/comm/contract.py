"""What every communicator must do, as scenarios: what each rank does, and what it must see.

A scenario's `act(comm)` runs on every rank and returns lines of text; `expect(rank, size)` makes
the lines that rank must have returned, by another route (plain numpy over all ranks' inputs).
Nothing is asserted on a rank, so nothing can hang because of an assert.
"""

from __future__ import annotations

import errno
from collections.abc import Callable, Iterable
from typing import Any

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.errors import FileError, MeshError, WeightError

Lines = list[str]
Scenario = tuple[Callable[[Comm], Lines], Callable[[int, int], Lines]]

SCENARIOS: dict[str, Scenario] = {}

PAIR = np.dtype([("gid", np.int64), ("flag", np.bool_), ("xyz", np.float32, (3,))])
DTYPES = ["?", "i1", "u2", "i4", "i8", "u8", "f4", "f8", "c16", "S3", "M8[s]", PAIR]
TRAILING = [(), (3,), (2, 2), (0,), (2, 0)]


def shown(array: np.ndarray) -> str:
    """Write an array down exactly: dtype, shape, values (repr of a float is exact)."""
    return f"{np.dtype(array.dtype).descr} {array.shape} {array.tolist()}"


def attempted(action: Callable[[], Any]) -> str:
    """Write down the error that an action raises."""
    try:
        action()
    except BaseException as error:
        return f"{type(error).__name__}: {error}"
    return "no error"


def made(dtype: Any, n: int, trailing: tuple[int, ...], seed: int) -> np.ndarray:
    """Make an array of n rows of any dtype from a seed."""
    dtype = np.dtype(dtype)
    shape = (n, *trailing)
    rng = np.random.default_rng(seed)
    if dtype.names:
        array = np.zeros(shape, dtype)
        array["gid"] = rng.integers(-(2**62), 2**62, shape)
        array["flag"] = rng.integers(0, 2, shape)
        array["xyz"] = rng.random((*shape, 3))
        return array
    if dtype.kind in "fc":
        return rng.random(shape).astype(dtype)
    return rng.integers(0, 100, shape).astype(dtype)


def scenario(expect: Callable[[int, int], Lines]) -> Callable[..., Callable[[Comm], Lines]]:
    """Register an act under its own name with what it must give."""

    def register(act: Callable[[Comm], Lines]) -> Callable[[Comm], Lines]:
        SCENARIOS[act.__name__] = (act, expect)
        return act

    return register


@scenario(lambda rank, size: [f"{rank} of {size}"])
def rank_and_size(comm: Comm) -> Lines:
    comm.barrier()
    return [f"{comm.rank} of {comm.size}"]


# -- reductions -----------------------------------------------------------------------------------

INTEGERS = ["i1", "u1", "i4", "i8", "u8"]
REDUCED_SHAPES = [(), (0,), (5,), (2, 3)]


def _integers(dtype: str, shape: tuple[int, ...], rank: int) -> np.ndarray:
    return np.random.default_rng([rank, len(shape)]).integers(0, 127, shape).astype(dtype)


def _expect_integers(rank: int, size: int) -> Lines:
    lines = []
    for dtype in INTEGERS:
        for shape in REDUCED_SHAPES:
            all_ranks = np.stack([_integers(dtype, shape, r) for r in range(size)])
            wide = np.uint64 if dtype == "u8" else np.int64
            below = sum((row.astype(wide) for row in all_ranks[:rank]), np.zeros(shape, wide))
            lines += [
                shown(np.asarray(all_ranks.astype(wide).sum(axis=0))),
                shown(np.asarray(all_ranks.min(axis=0))),
                shown(np.asarray(all_ranks.max(axis=0))),
                shown(np.asarray(below)),
            ]
    return lines


@scenario(_expect_integers)
def integers_reduce(comm: Comm) -> Lines:
    lines = []
    for dtype in INTEGERS:
        for shape in REDUCED_SHAPES:
            array = _integers(dtype, shape, comm.rank)
            lines += [
                shown(comm.allreduce(array)),
                shown(comm.allreduce(array, "min")),
                shown(comm.allreduce(array, "max")),
                shown(comm.exscan(array)),
            ]
    return lines


def _wide(rank: int) -> np.ndarray:
    return np.array([2**61 + rank, -(2**61) - rank, 2**31 - 1])


@scenario(
    lambda rank, size: [
        str(
            [
                size * (2**61) + sum(range(size)),
                -size * 2**61 - sum(range(size)),
                size * (2**31 - 1),
            ]
        )
        if size <= 3
        else "skipped: the sum would not fit int64"
    ]
)
def sums_beyond_float_precision(comm: Comm) -> Lines:
    if comm.size > 3:
        return ["skipped: the sum would not fit int64"]
    return [str(comm.allreduce(_wide(comm.rank)).tolist())]


def _floats(rank: int) -> np.ndarray:
    special = np.nan if rank == 1 else float(rank)
    return np.array([0.1 * rank, -0.1 * rank, -0.0 if rank % 2 else 0.0, special, np.inf])


def _expect_extremes(rank: int, size: int) -> Lines:
    highest, special = 0.1 * (size - 1), np.nan if size > 1 else 0.0
    low = np.array([0.0, -highest + 0.0, 0.0, special, np.inf])
    high = np.array([highest, 0.0, 0.0, special, np.inf])
    odd = [size > 1, False, True]  # some rank is odd; none is both; all are one of them
    even_only = [False, False, True]
    return [
        shown(low),
        shown(high),
        shown(low[:0].astype(np.float32)),
        shown(np.array(odd)),
        shown(np.array(even_only)),
    ]


@scenario(_expect_extremes)
def floats_and_bools_reduce(comm: Comm) -> Lines:
    odd = comm.rank % 2 == 1
    flags = np.array([odd, False, True])
    return [
        shown(comm.allreduce(_floats(comm.rank), "min")),
        shown(comm.allreduce(_floats(comm.rank), "max")),
        shown(comm.allreduce(np.zeros(0, np.float32), "max")),
        shown(comm.allreduce(flags, "max")),
        shown(comm.allreduce(flags, "min")),
    ]


_NO_SUM = (
    "InputError: sum over ranks of {} values; wanted integers: quantise floats to int64 "
    "(their order would show) and cast bools to int64"
)


@scenario(
    lambda rank, size: [
        _NO_SUM.format("float64"),
        _NO_SUM.format("bool"),
        _NO_SUM.format("float32"),
        "InputError: reduction 'prod'; wanted 'sum', 'min' or 'max'",
        "InputError: min or max over ranks of complex128 values; wanted bools, integers or floats",
    ]
)
def unfit_reductions_are_refused(comm: Comm) -> Lines:
    return [
        attempted(lambda: comm.allreduce(np.ones(2))),
        attempted(lambda: comm.allreduce(np.ones(2, bool))),
        attempted(lambda: comm.exscan(np.ones(2, np.float32))),
        attempted(lambda: comm.allreduce(np.ones(2, int), "prod")),  # type: ignore[arg-type]
        attempted(lambda: comm.allreduce(np.ones(2, complex), "min")),
    ]


# -- moving rows ----------------------------------------------------------------------------------


def _forms() -> Iterable[tuple[int, Any, tuple[int, ...]]]:
    every = [(dtype, trailing) for dtype in DTYPES for trailing in TRAILING]
    return ((number, dtype, trailing) for number, (dtype, trailing) in enumerate(every))


def _ragged(number: int, dtype: Any, trailing: tuple[int, ...], rank: int) -> np.ndarray:
    return made(dtype, (2 * rank + number) % 4, trailing, 1000 * number + rank)


@scenario(lambda rank, size: [shown(_ragged(*form, r)) for form in _forms() for r in range(size)])
def allgather_moves_any_rows(comm: Comm) -> Lines:
    return [
        shown(array) for form in _forms() for array in comm.allgather(_ragged(*form, comm.rank))
    ]


@scenario(
    lambda rank, size: [shown(_ragged(*form, root)) for form in _forms() for root in range(size)]
)
def bcast_moves_any_rows(comm: Comm) -> Lines:
    return [
        shown(comm.bcast(_ragged(*form, root) if comm.rank == root else None, root))
        for form in _forms()
        for root in range(comm.size)
    ]


def _letter(
    number: int, dtype: Any, trailing: tuple[int, ...], sender: int, receiver: int
) -> np.ndarray:
    n = (sender + 2 * receiver + number) % 3
    return made(dtype, n, trailing, 10_000 * number + 100 * sender + receiver)


@scenario(
    lambda rank, size: [
        shown(_letter(*form, sender, rank)) for form in _forms() for sender in range(size)
    ]
)
def alltoall_moves_any_rows(comm: Comm) -> Lines:
    lines = []
    for form in _forms():
        sent = [_letter(*form, comm.rank, receiver) for receiver in range(comm.size)]
        lines += [shown(array) for array in comm.alltoall(sent)]
    return lines


@scenario(lambda rank, size: [shown(np.zeros((0, 3)))] * (2 * size))
def nobody_has_anything(comm: Comm) -> Lines:
    empty = np.zeros((0, 3))
    return [shown(array) for array in comm.allgather(empty) + comm.alltoall([empty] * comm.size)]


def _large(sender: int, receiver: int) -> np.ndarray:
    """Make an array too large for any eager protocol, of a length no power of two divides."""
    return np.arange(100_003 + sender, dtype=np.int64) * 3 + receiver


@scenario(
    lambda rank, size: [
        f"{len(_large(sender, rank))} {np.bitwise_xor.reduce(_large(sender, rank))}"
        for sender in range(size)
    ]
)
def large_arrays_cross(comm: Comm) -> Lines:
    received = comm.alltoall([_large(comm.rank, receiver) for receiver in range(comm.size)])
    return [f"{len(array)} {np.bitwise_xor.reduce(array)}" for array in received]


@scenario(
    lambda rank, size: (
        [shown(np.array([[0, 10], [1, 11], [2, 12]]) + 100 * r) for r in range(size)]
        + [shown(np.array([1, 3], np.int64) + r) for r in range(size)]
    )
)
def memory_layout_does_not_matter(comm: Comm) -> Lines:
    turned = np.array([[0, 1, 2], [10, 11, 12]]).T + 100 * comm.rank
    foreign = (np.arange(5) + comm.rank).astype(">i8")[1::2]
    return [shown(array) for array in comm.allgather(turned) + comm.allgather(foreign)]


@scenario(
    lambda rank, size: [str([n * 1000 + s * 10 + rank for s in range(size)]) for n in range(20)]
)
def exchanges_do_not_mix(comm: Comm) -> Lines:
    lines = []
    for n in range(20):
        sent = [np.array([n * 1000 + comm.rank * 10 + r]) for r in range(comm.size)]
        lines.append(str([int(array[0]) for array in comm.alltoall(sent)]))
    return lines


@scenario(lambda rank, size: [f"{rank + 1} {rank + 1} {rank + 1} {rank + 1} {size}"])
def results_may_be_written_to(comm: Comm) -> Lines:
    zero = np.zeros(1, np.int64)
    gathered = comm.allgather(zero.copy())[-1]
    sent = comm.bcast(zero.copy())
    swapped = comm.alltoall([zero.copy() for _ in range(comm.size)])[0]
    before = comm.exscan(zero.copy())
    reduced = comm.allreduce(zero.copy() + 1)
    for array in (gathered, sent, swapped, before):
        array += comm.rank + 1
    comm.barrier()
    return [f"{gathered[0]} {sent[0]} {swapped[0]} {before[0]} {reduced[0]}"]


@scenario(
    lambda rank, size: [
        f"InputError: {size + 1} arrays for {size} ranks; wanted one for each rank",
        "InputError: object values to exchange; wanted an array of rows of a fixed-size dtype",
        "InputError: a single value to exchange; wanted an array of rows of a fixed-size dtype",
        f"InputError: root is {size}; ranks go from 0 to {size - 1}",
        f"InputError: root is -1; ranks go from 0 to {size - 1}",
    ]
)
def unfit_arrays_are_refused(comm: Comm) -> Lines:
    return [
        attempted(lambda: comm.alltoall([np.zeros(1)] * (comm.size + 1))),
        attempted(lambda: comm.allgather(np.array([None]))),
        attempted(lambda: comm.allgather(np.array(1.0))),
        attempted(lambda: comm.bcast(np.zeros(1), comm.size)),
        attempted(lambda: comm.bcast_object(1, -1)),
    ]


@scenario(lambda rank, size: ["RankError" if size > 1 else "no error"] * 3)
def ranks_that_differ_in_form_all_hear_of_it(comm: Comm) -> Lines:
    narrow = np.zeros(1, np.int32 if comm.rank == comm.size - 1 else np.int64)
    narrow = narrow if comm.size > 1 else np.zeros(1)
    wide = np.zeros((1, 2) if comm.rank == comm.size - 1 else (1, 3))
    return [
        attempted(lambda: comm.allgather(narrow)).split(":")[0],
        attempted(lambda: comm.alltoall([narrow] * comm.size)).split(":")[0],
        attempted(lambda: comm.alltoall([wide] * comm.size)).split(":")[0],
    ]


# -- links ----------------------------------------------------------------------------------------


def _ring(number: int, dtype: Any, trailing: tuple[int, ...], rank: int, turn: int) -> np.ndarray:
    """Make what a rank sends to the next rank and the one after it in one turn."""
    return made(dtype, 5, trailing, 10_000 * number + 100 * turn + rank)


def _around(comm_rank: int, size: int) -> tuple[list[tuple[int, int, int]], ...]:
    """Return stretches: rows 0-2 to the next rank, 1-4 to the one after (if they differ)."""
    targets = {(comm_rank + 1) % size: (0, 3), (comm_rank + 2) % size: (1, 5)}
    sources = {(comm_rank - 1) % size: (4, 7), (comm_rank - 2) % size: (0, 4)}
    if size in (1, 2):  # one stretch a rank: the last written counts, on both sides
        targets = {(comm_rank + 2) % size: (1, 5)}
        sources = {(comm_rank - 2) % size: (0, 4)}
    return (
        [(rank, *rows) for rank, rows in targets.items()],
        [(rank, *rows) for rank, rows in sources.items()],
    )


def _expect_ring(rank: int, size: int) -> Lines:
    lines = []
    for number, dtype, trailing in _forms():
        for turn in range(2):
            got = made(dtype, 8, trailing, 77)
            far = _ring(number, dtype, trailing, (rank - 2) % size, turn)
            near = _ring(number, dtype, trailing, (rank - 1) % size, turn)
            got[0:4] = far[1:5]
            if size > 2:
                got[4:7] = near[0:3]
            lines.append(shown(got))
    return lines


@scenario(_expect_ring)
def links_move_rows_between_neighbours(comm: Comm) -> Lines:
    lines = []
    targets, sources = _around(comm.rank, comm.size)
    for number, dtype, trailing in _forms():
        sent, received = made(dtype, 5, trailing, 0), made(dtype, 8, trailing, 77)
        link = comm.link(sent, received, targets=targets, sources=sources)
        for turn in range(2):
            sent[...] = _ring(number, dtype, trailing, comm.rank, turn)
            link.start()
            link.finish()
            lines.append(shown(received))
    return lines


@scenario(
    lambda rank, size: [
        str([100 * ((rank - 1) % size) + k for k in range(3)]),
        str([1000 + (rank - 1) % size] * 3),
        str([size]),
        str(list(range(size))),
    ]
)
def links_on_their_way_do_not_mix(comm: Comm) -> Lines:
    ahead, behind = (comm.rank + 1) % comm.size, (comm.rank - 1) % comm.size
    here, there = {"targets": [(ahead, 0, 3)]}, {"sources": [(behind, 0, 3)]}
    first, second = np.zeros(3, int), np.zeros(3, int)
    one = comm.link(100 * comm.rank + np.arange(3), first, **here, **there)
    two = comm.link(np.full(3, 1000 + comm.rank), second, **here, **there)
    one.start()
    two.start()
    between = comm.allreduce(np.ones(1, int))
    swapped = comm.alltoall([np.array([comm.rank])] * comm.size)
    two.finish()
    one.finish()
    arrived = [int(array[0]) for array in swapped]
    return [str(first.tolist()), str(second.tolist()), str(between.tolist()), str(arrived)]


@scenario(lambda rank, size: [f"{200_003 * 7 if rank == 0 and size > 1 else 0} (3, 0)"])
def one_sided_and_large_links(comm: Comm) -> Lines:
    last = comm.size - 1
    sends = last > 0 and comm.rank == last
    gets = last > 0 and comm.rank == 0
    received = np.zeros(200_003, np.int64)
    link = comm.link(
        np.full(200_003 if sends else 0, 7),
        received,
        targets=[(0, 0, 200_003)] if sends else [],
        sources=[(last, 0, 200_003)] if gets else [],
    )
    link.start()
    link.finish()
    flat = np.zeros((3, 0))
    nothing = comm.link(flat, flat, targets=[(last, 0, 3 * gets)], sources=[(0, 0, 3 * sends)])
    nothing.start()
    nothing.finish()
    return [f"{received.sum()} {flat.shape}"]


@scenario(
    lambda rank, size: [
        f"InputError: a stretch for rank {size}; ranks go from 0 to {size - 1}",
        "InputError: rows 1 to 3 for rank 0 of a buffer of 2 rows",
        "InputError: two stretches for rank 0; wanted one",
        "InputError: the buffers hold <f8 rows of shape () and <i8 rows of shape (); "
        "wanted one dtype and trailing shape",
        "InputError: a buffer of <f8 rows of shape () is not C-contiguous in native byte order; "
        "wanted one that rows can be sent from as they are",
        "InputError: the buffer to receive into is read-only; wanted a writable one",
        "InputError: a link is finished before it is started",
        "InputError: a link is started twice; finish it before it is started again",
    ]
)
def unfit_links_are_refused(comm: Comm) -> Lines:
    two, frozen = np.zeros(2), np.zeros(2)
    frozen.flags.writeable = False

    def link(sent: np.ndarray = two, received: np.ndarray = two, **ends: Any) -> Any:
        return comm.link(sent, received, **{"targets": [], "sources": [], **ends})

    idle, twice = link(), link()
    twice.start()
    lines = [
        attempted(lambda: link(targets=[(comm.size, 0, 1)])),
        attempted(lambda: link(sources=[(0, 1, 3)])),
        attempted(lambda: link(targets=[(0, 0, 1), (0, 1, 2)])),
        attempted(lambda: link(received=np.zeros(2, int))),
        attempted(lambda: link(sent=np.zeros(4)[::2])),
        attempted(lambda: link(received=frozen)),
        attempted(idle.finish),
        attempted(twice.start),
    ]
    twice.finish()
    return lines


@scenario(lambda rank, size: ["RankError" if size > 1 and rank == 0 else "no error"] * 2)
def fewer_or_more_rows_than_meant_are_noticed(comm: Comm) -> Lines:
    lines = []
    for n_meant, n_sent in ((3, 2), (2, 3)):
        meant = [(1, 0, n_meant)] if comm.rank == 0 and comm.size > 1 else []
        sent = [(0, 0, n_sent)] if comm.rank == 1 else []
        link = comm.link(np.zeros(3), np.zeros(3), targets=sent, sources=meant)
        link.start()
        lines.append(attempted(link.finish).split(":")[0])
    return lines


@scenario(lambda rank, size: [str([turn + (rank - 1) % size for turn in range(3)])])
def links_may_be_dropped_on_their_way(comm: Comm) -> Lines:
    seen = []
    for turn in range(3):
        received = np.zeros(100_000, int)
        ends = {
            "targets": [((comm.rank + 1) % comm.size, 0, 100_000)],
            "sources": [((comm.rank - 1) % comm.size, 0, 100_000)],
        }
        comm.link(np.full(100_000, -1), np.zeros(100_000, int), **ends).start()
        link = comm.link(np.full(100_000, comm.rank + turn), received, **ends)
        link.start()
        link.finish()
        seen.append(int(received[-1]))
    return [str(seen)]


# -- values and errors ----------------------------------------------------------------------------


@scenario(lambda rank, size: [str({"from": r, "x": (0.1, None)}) for r in range(size)])
def objects_are_sent(comm: Comm) -> Lines:
    return [
        str(comm.bcast_object({"from": r, "x": (0.1, None)} if comm.rank == r else None, r))
        for r in range(comm.size)
    ]


class _StuckError(Exception):
    """An error that cannot be pickled: its constructor wants more than the text."""

    def __init__(self, where: str, what: str) -> None:
        super().__init__(f"{what} at {where}")


def _expect_checks(rank: int, size: int) -> Lines:
    lowest = size // 2
    file_error = str(FileError(errno.ENOSPC, "No space left on device", "parts.vtkhdf"))
    return [
        "no error",
        f"MeshError: cell {size - 1} is no cell",
        f"WeightError: weight {lowest}",
        f"FileError: {file_error}",
        "RankError: rank 0 failed with _StuckError: stuck at sea" if size > 1 else "no error",
        "MemoryError: ",
        "no error",
    ]


@scenario(_expect_checks)
def errors_become_collective(comm: Comm) -> Lines:
    rank, last, lowest = comm.rank, comm.size - 1, comm.size // 2
    full = FileError(errno.ENOSPC, "No space left on device", "parts.vtkhdf")
    errors: list[BaseException | None] = [
        None,
        MeshError(f"cell {rank} is no cell") if rank == last else None,
        WeightError(f"weight {rank}") if rank >= lowest else None,
        full if rank == last else None,
        _StuckError("sea", "stuck") if rank == 0 and last > 0 else None,  # alone it need not travel
        MemoryError() if rank == last else None,
        None,
    ]
    return [attempted(lambda error=error: comm.check(error)) for error in errors]  # type: ignore[misc]


@scenario(lambda rank, size: ["-1"] + ([str(size - 1)] if size > 1 else []))
def errors_tell_where_they_were_found(comm: Comm) -> Lines:
    lines = []
    for failing in (True, comm.rank == comm.size - 1):
        try:
            comm.check(MeshError("no cell") if failing else None)
        except MeshError as error:
            lines.append(str(getattr(error, "on_rank", -1)))
    return lines[: comm.size]  # a rank that is alone has nobody to tell


# -- relays ---------------------------------------------------------------------------------------


@scenario(
    lambda rank, size: [
        str([*range(size), size]),
        str([*range(size)[::-1], size]),
        str([0]),
    ]
)
def arrays_are_handed_on(comm: Comm) -> Lines:
    none = np.empty(0, np.int64)
    seen = []
    for towards in ("last", "first"):
        seen.append(comm.relay(none, lambda came: np.append(came, comm.rank), towards=towards))
        seen[-1] = np.append(seen[-1], comm.size)  # the result is this rank's own
        seen[-1][-1] = comm.size
    last = comm.relay(np.arange(3), lambda came: came[: max(1, len(came) - 1)] * 0, towards="last")
    return [str(array.tolist()) for array in [*seen, last[:1]]]


@scenario(lambda rank, size: [str([*range(size)]), str([(rank - 1) % size])])
def a_relay_minds_no_link_on_its_way(comm: Comm) -> Lines:
    received = np.zeros(1, np.int64)
    link = comm.link(
        np.array([comm.rank]),
        received,
        targets=[((comm.rank + 1) % comm.size, 0, 1)],
        sources=[((comm.rank - 1) % comm.size, 0, 1)],
    )
    link.start()
    none = np.empty(0, np.int64)
    seen = comm.relay(none, lambda came: np.append(came, comm.rank), towards="last")
    link.finish()
    return [str(seen.tolist()), str(received.tolist())]


def _expect_broken_relay(rank: int, size: int) -> Lines:
    failing = size // 2
    return [
        f"WeightError: weight {failing}",
        f"{failing}" if size > 1 else "0",
        f"[{failing}]",
        "InputError: array([1.]) to hand on; wanted an int64 array of one axis",
    ]


@scenario(_expect_broken_relay)
def a_relay_that_breaks_breaks_for_all(comm: Comm) -> Lines:
    asked: list[int] = []

    def step(came: np.ndarray) -> np.ndarray:
        asked.append(comm.rank)
        if comm.rank == comm.size // 2:
            raise WeightError(f"weight {comm.rank}")
        return came

    lines = []
    try:
        comm.relay(np.arange(2), step, towards="last")
    except WeightError as error:
        lines = [f"WeightError: {error}", str(getattr(error, "on_rank", 0))]
    last = comm.allreduce(np.array(max(asked, default=-1)), "max")
    unfit = attempted(lambda: comm.relay(np.arange(1), lambda came: np.ones(1), towards="first"))
    return [*lines, f"[{last}]", unfit]
