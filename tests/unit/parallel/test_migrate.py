"""Migration on ranks as threads, against a serial twin; bytes and buffers counted."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError
from sfcpart.parallel import Ragged, migrate
from tests.unit.parallel.clouds import DTYPES, TRAILING, Counting, Spread, values_of

SPREADS = st.builds(Spread.of, st.integers(0, 2**32), st.integers(1, 5))
CHUNKS = st.sampled_from([1, 100, 1000, 1 << 26])


def goals(gid: np.ndarray, size: int, seed: int) -> np.ndarray:
    """Return where cells go; about half of them to rank 0, a few ranks may get none."""
    drawn = [int(np.random.default_rng([seed, cell]).integers(0, 2 * size)) for cell in gid]
    return np.array([min(goal, size) % size for goal in drawn], np.int64)


def ragged_of(gid: np.ndarray, dtype, trailing: tuple[int, ...]) -> Ragged:
    """Make ragged rows of cells, some of them empty, one in a while long."""
    length = [cell % 4 if cell % 11 else 300 for cell in gid.tolist()]
    indptr = np.concatenate(([0], np.cumsum(length))).astype(np.int64)
    entries = np.array([5 * c + k for c, n in zip(gid, length, strict=True) for k in range(n)], int)
    return Ragged(indptr, values_of(entries, dtype, trailing))


def arrived(spread: Spread, rank: int, seed: int) -> np.ndarray:
    """Return which cells must be on a rank afterwards, in the written order."""
    cells = [spread.cells(source) for source in range(spread.size)]
    return np.concatenate([mine[goals(mine, spread.size, seed) == rank] for mine in cells])


@given(
    SPREADS,
    st.integers(0, 99),
    CHUNKS,
    st.sampled_from(DTYPES),
    st.sampled_from(TRAILING),
    st.booleans(),
)
def test_every_row_arrives_once_in_the_written_order(spread, seed, chunk, dtype, trailing, by_gid):
    def act(comm):
        gid = spread.cells(comm.rank)
        arrays = {
            "gid": gid,
            "fixed": values_of(gid, dtype, trailing),
            "ragged": ragged_of(gid, dtype, trailing),
            "turned": np.asfortranarray(values_of(gid, "f8", (2, 2))),
        }
        kept = {name: np.copy(arrays[name]) for name in ("gid", "fixed")}
        moved = migrate(
            arrays,
            destination=goals(gid, comm.size, seed),
            comm=comm,
            chunk_bytes=chunk,
            order_by="gid" if by_gid else None,
        )
        assert all(np.array_equal(arrays[name], old) for name, old in kept.items())
        return moved

    for rank, moved in enumerate(run_ranks(spread.size, act)):
        gid = arrived(spread, rank, seed)
        gid = np.sort(gid) if by_gid else gid
        native = np.dtype(dtype).newbyteorder("=")
        assert list(moved) == ["gid", "fixed", "ragged", "turned"]
        assert moved["gid"].tolist() == gid.tolist()
        ragged = ragged_of(gid, native, trailing)
        assert moved["ragged"].indptr.tolist() == ragged.indptr.tolist()
        for found, wanted in (
            (moved["fixed"], values_of(gid, native, trailing)),
            (moved["ragged"].data, ragged.data),
            (moved["turned"], values_of(gid, "f8", (2, 2))),
        ):
            assert (found.dtype, found.shape) == (wanted.dtype, wanted.shape)
            assert found.tobytes() == wanted.tobytes()


@pytest.mark.parametrize("share", [0, 1, 3, 10])
def test_bytes_sent_are_those_of_the_moved_cells_and_two_per_cent(share):
    n, size, chunk = 5000, 4, 20_000

    def act(comm):
        counting = Counting(comm)
        gid = np.arange(comm.rank * n, (comm.rank + 1) * n)
        arrays = {
            "gid": gid,
            "state": np.ones((n, 5)),
            "faces": (np.arange(n + 1) * 6, np.ones(6 * n, np.int64)),
        }
        goal = np.where(gid % 10 < share, (comm.rank + 1 + gid % 2) % size, comm.rank)
        migrate(arrays, destination=goal, comm=counting, chunk_bytes=chunk)
        return counting.sent, counting.largest, counting.rounds

    record = 8 + 40 + 1 + 6 * 8  # one byte tells the length of a row of faces
    moved_bytes = n * share // 10 * record
    for sent, largest, rounds in run_ranks(size, act):
        assert moved_bytes <= sent <= 1.02 * moved_bytes + (share == 0) * 200
        assert largest <= chunk
        assert (rounds > 5) == (share > 0)


def test_rows_larger_than_the_bound_still_move():
    def act(comm):
        counting = Counting(comm)
        rows = np.full((3, 100), comm.rank)
        moved = migrate({"a": rows}, destination=[0, 1, 1], comm=counting, chunk_bytes=1)
        return moved["a"][:, 0].tolist(), counting.largest

    assert run_ranks(2, act) == [([0, 1], 800), ([0, 0, 1, 1], 800)]


def test_scratch_memory_is_bounded():
    import tracemalloc

    n, chunk = 100_000, 200_000
    column = Ragged(np.arange(n + 1) * 4, np.ones(4 * n, np.int32))
    tracemalloc.start()
    moved = migrate(
        {"a": column}, destination=np.zeros(n, int), comm=SerialComm(), chunk_bytes=chunk
    )
    held, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert moved["a"].data.nbytes + moved["a"].indptr.nbytes <= held
    assert peak - moved["a"].data.nbytes - moved["a"].indptr.nbytes <= 48 * n + chunk + 20_000


@pytest.mark.parametrize(
    ("arrays", "goal", "options", "message"),
    [
        ({"a": [1.0]}, [0, 1], {}, "array 'a' has 1 rows; wanted one for each of the 2 cells"),
        ({"a": [1.0]}, [2], {}, "cell 0 goes to rank 2; ranks go from 0 to 1"),
        ({"a": [1.0]}, [-1], {}, "cell 0 goes to rank -1"),
        ({"a": [1.0]}, [0.5], {}, "destination is float64 of shape"),
        ({"a": [None]}, [0], {}, "array 'a' is no array of rows of a fixed-size dtype"),
        ({"a": ([0, 1, 1], [5])}, [0], {}, "indptr of 'a' is int64 of shape .3,."),
        ({"a": ([0, 2], [5])}, [0], {}, "indptr of 'a' goes from 0 to 2 for 1 entries"),
        ({"a": ([0], [5], [6])}, [0], {}, "array 'a' is a tuple of 3"),
        ({"a": [1]}, [0], {"order_by": "b"}, "order_by is 'b'; .* among 'a'"),
        ({"a": [1.0]}, [0], {"order_by": "a"}, "order_by is 'a'"),
        ({"a": [1.0]}, [0], {"chunk_bytes": 0}, "chunk_bytes is 0"),
        ({"b": [1.0]}, [0], {}, "rank 1 migrates 'b' float64 .*, rank 0 something else"),
        ({"a": np.ones(1, "f4")}, [0], {}, "rank 1 migrates 'a' float32"),
    ],
)
def test_an_error_of_one_rank_is_an_error_of_all(arrays, goal, options, message):
    def act(comm):
        mine = (arrays, goal, options) if comm.rank == 1 else ({"a": np.ones(1)}, [0], {})
        with pytest.raises(InputError, match=message):
            migrate(mine[0], destination=mine[1], comm=comm, **mine[2])

    run_ranks(2, act)


def test_no_arrays_no_cells():
    assert migrate({}, destination=[], comm=SerialComm()) == {}
    moved = migrate({"a": np.zeros((0, 3), "i2")}, destination=[], comm=SerialComm())
    assert (moved["a"].shape, moved["a"].dtype) == ((0, 3), np.int16)
