"""Halo lists and exchanges on ranks as threads, against a serial twin that knows all cells."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError, RankError
from sfcpart.parallel import Halo
from tests.unit.parallel.clouds import DTYPES, TRAILING, Spread, values_of

SPREADS = st.builds(Spread.of, st.integers(0, 2**32), st.integers(1, 5))


def halos(spread: Spread, comm) -> list[Halo]:
    """Make the same halo in each way there is."""
    cell_gid, indptr_indices = spread.cells(comm.rank), spread.graph(comm.rank)
    return [
        Halo.from_graph(*indptr_indices, cell_gid=cell_gid, comm=comm),
        Halo.from_faces(spread.faces(comm.rank), cell_gid=cell_gid, comm=comm),
        Halo.from_cells(indptr_indices[1][::-1], cell_gid=cell_gid, comm=comm),
    ]


@given(SPREADS)
def test_the_halo_is_the_foreign_neighbours_by_owner_and_number(spread):
    found = run_ranks(
        spread.size, lambda comm: [halo.halo_gid.tolist() for halo in halos(spread, comm)]
    )
    assert found == [[spread.halo(rank)] * 3 for rank in range(spread.size)]


@given(SPREADS)
def test_lists_of_both_sides_name_the_same_cells(spread):
    def act(comm):
        plan = halos(spread, comm)[0].plan
        cell_gid = spread.cells(comm.rank)
        sent = {to: cell_gid[plan.send[lo:hi]].tolist() for to, lo, hi in plan.targets()}
        came = {source: plan.halo_gid[lo:hi].tolist() for source, lo, hi in plan.sources()}
        return sent, came

    seen = run_ranks(spread.size, act)
    for rank, (sent, _) in enumerate(seen):
        assert sent == {to: came[rank] for to, (_, came) in enumerate(seen) if rank in came}
        assert all(cells == sorted(cells) and cells for cells in sent.values())


@given(SPREADS, st.sampled_from(DTYPES), st.sampled_from(TRAILING))
def test_halo_rows_become_those_of_their_owners(spread, dtype, trailing):
    def act(comm):
        halo = halos(spread, comm)[0]
        owned = values_of(spread.cells(comm.rank), dtype, trailing)
        blank = np.zeros((halo.n_halo, *trailing), dtype)
        whole = np.concatenate([owned, blank]).astype(dtype, copy=False)
        strided = np.repeat(whole, 2, axis=0)[::2]
        before = whole.copy()
        returned = halo.exchange(whole)
        assert np.shares_memory(returned, whole) or not returned.nbytes
        halo.exchange(strided)
        return before[: halo.n_owned], whole, strided, halo.exchange(owned), returned

    for rank, (owned, whole, strided, alone, returned) in enumerate(run_ranks(spread.size, act)):
        wanted = values_of(np.array(spread.halo(rank), np.int64), dtype, trailing)
        n_owned = len(owned)
        for found in (whole[n_owned:], strided[n_owned:], alone, returned):
            assert (found.dtype, found.shape) == (wanted.dtype, wanted.shape)
            assert found.tobytes() == wanted.tobytes()
        assert whole[:n_owned].tobytes() == strided[:n_owned].tobytes() == owned.tobytes()


@given(SPREADS)
def test_several_exchanges_on_their_way(spread):
    def act(comm):
        halo = halos(spread, comm)[1]
        cell_gid = np.append(spread.cells(comm.rank), np.zeros(halo.n_halo, np.int64))
        first, second, third = cell_gid.copy(), 2 * cell_gid, 0.5 * cell_gid
        ways = [halo.start(first), halo.start(second), halo.start(third)]
        first[: halo.n_owned] = -1  # what was started is on its way already
        for way in reversed(ways):
            way.finish()
        return [array[halo.n_owned :].tolist() for array in (first, second, third)]

    for rank, (first, second, third) in enumerate(run_ranks(spread.size, act)):
        wanted = spread.halo(rank)
        assert first == wanted
        assert second == [2 * cell for cell in wanted]
        assert third == [0.5 * cell for cell in wanted]


@given(SPREADS, st.sampled_from(["i4", "i8", "f8", ">f8", "c16"]), st.sampled_from(TRAILING))
def test_add_back_is_the_adjoint(spread, dtype, trailing):
    def act(comm):
        halo = halos(spread, comm)[0]
        rng = np.random.default_rng(comm.rank)
        shape = (halo.n_owned + halo.n_halo, *trailing)
        x, y = rng.integers(-9, 9, (2, *shape)).astype(dtype)
        left, right = x.copy(), y.copy()
        halo.exchange(left)
        owned = halo.add_back(right)
        assert owned.shape == (halo.n_owned, *trailing)
        assert not right[halo.n_owned :].any()
        return (left * y).sum(), (x * right).sum(), right[: halo.n_owned], y

    seen = run_ranks(spread.size, act)
    assert sum(item[0] for item in seen) == sum(item[1] for item in seen)  # <E x, y> = <x, E' y>
    total = {}
    for rank, (*_, y) in enumerate(seen):
        for cell, row in zip([*spread.cells(rank).tolist(), *spread.halo(rank)], y, strict=True):
            total[cell] = total.get(cell, 0) + row
    for rank, (_, _, owned, _) in enumerate(seen):
        assert owned.tolist() == [total[cell].tolist() for cell in spread.cells(rank).tolist()]


def test_contributions_are_added_in_the_order_of_ranks():
    # ((1 + 2^-53) + 2^-53) rounds to 1 each time; added the other way the two make a difference.
    def act(comm):
        halo = Halo.from_cells([0], cell_gid=[0] if comm.rank == 0 else [], comm=comm)
        array = np.array([[1.0], [2.0**-53], [2.0**-53], [-1.0]][comm.rank])
        halo.add_back(array)
        return array.tolist()

    assert run_ranks(4, act)[0] == [0.0]


@given(SPREADS)
def test_numbers_lead_to_local_rows(spread):
    def act(comm):
        halo = halos(spread, comm)[2]
        known = np.concatenate([spread.cells(comm.rank), halo.halo_gid])
        assert halo.local_rows(known).tolist() == list(range(halo.n_owned + halo.n_halo))
        assert halo.local_rows(np.array([[-1, -7]])).tolist() == [[-1, -1]]
        with pytest.raises(InputError, match=f"cell {2**50} is neither owned nor in the halo"):
            halo.local_rows([2**50])

    run_ranks(spread.size, act)


def test_no_rank_holds_more_than_its_block_of_the_directory():
    n, size = 4000, 4

    def act(comm):
        from sfcpart.slices.directory import Directory

        mine = np.arange(comm.rank, n, size)
        held = Directory.of(mine, comm=comm)
        return len(held.gid), held.owners(np.arange(0, n, 7)).tolist()

    for held, owners in run_ranks(size, act):
        assert held == n // size
        assert owners == [cell % size for cell in range(0, n, 7)]


@pytest.mark.parametrize(
    ("cells", "needed", "message"),
    [
        ([[0, 1], [1]], [[], []], "ranks 0 and 1 both own cell 1"),
        ([[3, 3], []], [[], []], "rows 0 and 1 are both cell 3"),
        ([[0], [-2]], [[], []], "row 0 has cell_gid -2"),
        ([[0], [1]], [[], [0, 9]], "rank 1 needs cell 9, which no rank owns"),
        ([[], []], [[5], []], "rank 0 needs cell 5, which no rank owns"),
        ([[0.5], [1]], [[], []], "cell_gid is float64 of shape"),
        ([[0], [1]], [[], [[1, 2]]], "needed_gid is int64 of shape"),
        ([[2**63], [1]], [[], []], "cell_gid holds 9223372036854775808"),
    ],
)
def test_wrong_cells_are_an_error_of_all_ranks(cells, needed, message):
    def act(comm):
        with pytest.raises(InputError, match=message):
            Halo.from_cells(needed[comm.rank], cell_gid=cells[comm.rank], comm=comm)

    run_ranks(2, act)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda **c: Halo.from_graph([0, 1], [1], **c), "indptr has 2 entries for 2 owned cells"),
        (lambda **c: Halo.from_graph([0, 1, 1], [1, 0], **c), "indptr goes from 0 to 1 for 2"),
        (lambda **c: Halo.from_graph([0, 3, 2], [1, 0], **c), "wanted it to rise from 0"),
        (lambda **c: Halo.from_faces([[0, 1], [4, 5]], **c), "face 1 joins cells 4 and 5"),
        (lambda **c: Halo.from_faces([0, 1], **c), "face_cell_gid has shape"),
    ],
)
def test_wrong_relations_are_refused(make, message):
    with pytest.raises(InputError, match=message):
        make(cell_gid=[0, 1], comm=SerialComm())


def test_arrays_that_do_not_fit_are_refused():
    halo = Halo.from_cells([], cell_gid=[4, 5], comm=SerialComm())
    frozen = np.zeros(2)
    frozen.flags.writeable = False
    for array, message in [
        (np.zeros(3), "an array of shape .3,. to exchange; wanted an array of 2 rows, 2 owned"),
        ([0.0, 1.0], "wanted an array of 2 rows"),
        (np.array(1.0), "wanted an array of 2 rows"),
        (np.array([None, None]), "object rows to exchange"),
    ]:
        with pytest.raises(InputError, match=message):
            halo.exchange(array)
    assert halo.exchange(frozen).shape == (0,)  # nothing is written to it
    with pytest.raises(InputError, match="bool rows to add"):
        halo.add_back(np.zeros(2, bool))
    way = halo.start(np.zeros(2))
    way.finish()
    with pytest.raises(InputError, match="finished twice"):
        way.finish()


def test_a_read_only_array_with_halo_rows_is_refused():
    def act(comm):
        halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        frozen = np.zeros(2)
        frozen.flags.writeable = False
        with pytest.raises(InputError, match="read-only"):
            halo.exchange(frozen)
        with pytest.raises(
            InputError, match="wanted an array of 2 rows, 1 owned and 1 in the halo"
        ):
            halo.add_back(np.zeros(1))

    run_ranks(2, act)


def test_rows_of_different_form_are_an_error_not_a_wrong_answer():
    def act(comm):
        halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        with pytest.raises(RankError):
            halo.exchange(np.zeros(2, [np.float32, np.float64][comm.rank]))

    run_ranks(2, act)


def test_buffers_are_used_again():
    def act(comm):
        halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        for step in range(5):
            array = np.array([comm.rank + 10 * step, -1])
            halo.exchange(array)
            assert array[1] == 1 - comm.rank + 10 * step
        return [len(lanes) for lanes in halo._lanes._idle.values()]

    assert run_ranks(2, act) == [[1], [1]]
