"""Refine and coarsen a forest over ranks, one level at a time, kept graded 2 to 1 across faces.

Each cell first wishes a level: one more where the dye changes much to a neighbour, one less where
it changes little. Wishes are raised until no cell is two levels above a neighbour and no family is
coarsened in part; the least levels that satisfy both do not depend on the order in which they are
found, and so not on the ranks. Families to be coarsened are then moved to the rank of their first
child, and every rank makes its new cells and their neighbours from the old pairs that it knows.
"""

from __future__ import annotations

import numpy as np
from forest import Forest, relation_of, rows_of
from mpi4py import MPI

from sfcpart.parallel import Halo, migrate


def wishes(forest: Forest, cells: dict, world: MPI.Intracomm, *, fine: float, coarse: float):
    """Return the level that each cell wishes: by the largest jump of the dye to a neighbour."""
    halo = Halo.from_graph(*cells["near"], cell_gid=cells["gid"], comm=world)
    dye = np.append(cells["dye"], halo.exchange(cells["dye"]))
    row = rows_of(cells["near"])
    jump = np.zeros(halo.n_owned)
    np.maximum.at(jump, row, np.abs(dye[halo.local_rows(cells["near"].data)] - dye[row]))
    level = cells["level"].astype(np.int64)
    level = level + (jump > fine) - (jump < coarse)
    return np.clip(level, 0, forest.deepest)


def settled(forest: Forest, cells: dict, wish: np.ndarray, world: MPI.Intracomm):
    """Return the least levels above the wishes that are graded, and the owner of each family."""
    level = cells["level"].astype(np.int64)
    beside = Halo.from_graph(*cells["near"], cell_gid=cells["gid"], comm=world)
    row, near = rows_of(cells["near"]), beside.local_rows(cells["near"].data)
    child = np.flatnonzero(level > 0)
    family = forest.siblings(cells["gid"][child], level[child])
    kin = Halo.from_cells(family.ravel(), cell_gid=cells["gid"], comm=world)
    family = kin.local_rows(family)
    level_of_kin = np.append(level, kin.exchange(level))
    whole = (level_of_kin[family] == level[child, None]).all(axis=1)
    owner = np.full(len(level), world.rank, np.int64)
    first = np.append(owner, kin.exchange(owner))[family[:, 0]]
    target = wish.astype(np.int64)
    while True:
        before = target.copy()
        np.maximum.at(target, row, np.append(target, beside.exchange(target))[near] - 1)
        of_kin = np.append(target, kin.exchange(target))[family]
        fits = whole & (of_kin < level[child, None]).all(axis=1)
        kept = child[~fits]
        target[kept] = np.maximum(target[kept], level[kept])
        if not world.allreduce(int(np.any(target != before)), op=MPI.MAX):
            break
    coarsened = target[child] < level[child]
    owner[child[coarsened]] = first[coarsened]
    return target, owner


def adapted(forest: Forest, cells: dict, wish: np.ndarray, world: MPI.Intracomm, *, step: int):
    """Return the cells after refining and coarsening, and how many were made anew here."""
    target, owner = settled(forest, cells, wish, world)
    cells = migrate({**cells, "target": target}, destination=owner, comm=world, order_by="gid")
    halo = Halo.from_graph(*cells["near"], cell_gid=cells["gid"], comm=world)
    levels = np.stack([cells["level"], cells["target"]], axis=1).astype(np.int64)
    levels = np.append(levels, halo.exchange(levels), axis=0)
    gid = np.append(cells["gid"], halo.halo_gid)
    row = rows_of(cells["near"])
    new = _new_cells(forest, cells, step)
    pairs = _new_pairs(forest, gid, levels, row, halo.local_rows(cells["near"].data))
    inner = np.flatnonzero(levels[: halo.n_owned, 1] > levels[: halo.n_owned, 0])
    pairs += _pairs_inside(forest, gid[inner], levels[inner, 0])
    one, other = (np.concatenate(side) for side in zip(*pairs, strict=True))
    place = np.searchsorted(new["gid"], one)
    new["near"] = relation_of(len(new["gid"]), place, other)
    return new, int(np.count_nonzero(new["born"] == step))


def _new_cells(forest: Forest, cells: dict, step: int) -> dict:
    """Copy what is refined, average what is coarsened; sorted by number."""
    level, target, gid = cells["level"].astype(np.int64), cells["target"], cells["gid"]
    same = np.flatnonzero(target == level)
    split = np.flatnonzero(target > level)
    first = np.flatnonzero((target < level) & (forest.parent(gid, level) == gid))
    many = np.repeat(split, forest.n_children)
    made = {
        "gid": np.concatenate([gid[same], forest.children(gid[split], level[split]).ravel(),
                               gid[first]]),
        "level": np.concatenate([level[same], level[many] + 1, level[first] - 1]).astype(np.int8),
        "born": np.concatenate(
            [cells["born"][same], np.full(len(many) + len(first), step, np.int32)]
        ),
    }  # fmt: skip
    for name in ("dye", "bound"):
        value = cells[name]
        mean = np.zeros(len(first))
        for k in range(forest.n_children):  # siblings are neighbours in the order
            mean += value[first + k]
        mean /= forest.n_children
        made[name] = np.concatenate([value[same], value[many], mean])
    order = np.argsort(made["gid"])
    return {name: column[order] for name, column in made.items()}


def _after(forest: Forest, gid: np.ndarray, levels: np.ndarray):
    """Return what becomes of cells, padded to (n, n_children) numbers, -1 for none, and levels."""
    old, new = levels.T
    parent, split = new < old, new > old
    after = np.full((len(gid), forest.n_children), -1, np.int64)
    after[:, 0] = gid
    after[parent, 0] = forest.parent(gid[parent], old[parent])
    after[split] = forest.children(gid[split], old[split])
    return after, new


def _new_pairs(forest: Forest, gid, levels, row, near):
    """Return pairs of new cells that share a face, from the old pairs."""
    after, level = _after(forest, gid, levels)
    pairs = []
    for i in range(forest.n_children):
        for j in range(forest.n_children):
            there = (after[row, i] >= 0) & (after[near, j] >= 0)
            one, other = (after[row[there], i], level[row[there]]), (
                after[near[there], j], level[near[there]])  # fmt: skip
            is_face = forest.contact(one, other)[0]
            pairs.append((one[0][is_face], other[0][is_face]))
    return pairs


def _pairs_inside(forest: Forest, gid, level):
    """Return the pairs of children of one cell that share a face."""
    after = forest.children(gid, level)
    return [
        (after[:, k], after[:, k ^ (1 << axis)])
        for k in range(forest.n_children)
        for axis in range(forest.dim)
    ]
