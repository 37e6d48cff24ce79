"""Cost of each class of cells, and speed of each rank, from measured seconds.

Model: rank r takes `sum over classes of cost * count / speed[r]` seconds a step, with errors in
proportion to what it takes. Steps of one table of counts are averaged. Costs are non-negative
least squares (`scipy.optimize.nnls`) over relative errors, reweighted by the prediction; speeds
are taken out by subtracting each rank's mean from its rows, which leaves a small problem in the
costs alone (Gauss-Newton with the speeds projected out; G. Golub and V. Pereyra, SIAM J. Numer.
Anal. 10:413, 1973, from memory). Standard errors come from the covariance of the costs that are
not at their bound. Cost: O(rows classes^2) a sweep, a handful of sweeps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import BoolArray, FloatArray, Int64Array
from sfcpart.errors import InputError, WeightError
from sfcpart.weights.fitted import WeightFit
from sfcpart.weights.measured import Measured, Rows, gather_rows

__all__ = ["Speeds", "WeightFit", "fit_weights"]

Speeds: TypeAlias = Literal["auto", "fit", "alike"]

_SAME = 1e-9  # of the largest singular value: below, a direction counts as absent
_SWEEPS = 60
_SETTLED = 1e-12
_NOTHING = 1e-10  # a cost that makes out less than this of every row is rounding
_CHANCE = 1e-3  # speeds are fitted if less likely than this by chance
_VAGUE = 0.95  # correlation above which two costs are said to go together


def fit_weights(
    seconds: Measured,
    counts: Mapping[str, ArrayLike] | Sequence[Mapping[str, ArrayLike]],
    *,
    speeds: Speeds = "auto",
) -> WeightFit:
    """Fit what one of each class of cells costs, and how fast ranks are, to measured seconds.

    Parameters
    ----------
    seconds : (n_ranks,) or (n_steps, n_ranks) numbers, or a sequence of these
        What each rank computed, without waiting for others; a sequence has one array for each
        table of counts.
    counts : mapping of str to (n_ranks,) numbers, or a sequence of these
        How many of each class each rank holds (`sfcpart.class_counts`): kinds of cells, faces,
        regions, anything. Several tables (partitions, or states of the mesh) have the same
        classes. A class "rank" with 1 each stands for what a rank costs whatever it holds.
    speeds : {"auto", "fit", "alike"}
        Whether ranks differ in speed: fit it, take them as alike, or decide by the data (an
        F-test) where the data can tell.

    Returns
    -------
    WeightFit

    Raises
    ------
    InputError
        If shapes do not fit together, a number is negative or not finite, there are too few
        observations, or speeds shall be fitted and cannot be told from costs.
    WeightError
        If classes cannot be told apart: their counts go together on all ranks. They are named.

    Examples
    --------
    >>> counts = {"tetra": [100, 300, 200], "hexahedron": [50, 10, 90]}
    >>> fit = fit_weights([0.2, 0.32, 0.38], counts)
    >>> fit.cost.round(6).tolist()
    [0.001, 0.002]
    """
    if speeds not in ("auto", "fit", "alike"):
        raise InputError(f"speeds is {speeds!r}; wanted auto, fit or alike")
    rows = gather_rows(seconds, counts)
    alike = _settle(rows, with_speeds=False)
    _refuse_twins(rows, alike.design)
    if speeds == "alike":
        return _result(rows, alike, [])
    if not _separable(rows, alike):
        return _result(rows, alike, [_inseparable(rows, speeds)])
    fitted = _settle(rows, with_speeds=True)
    if speeds == "auto" and not _worth_it(rows, alike, fitted):
        return _result(
            rows, alike, ["ranks differ in speed by no more than chance: taken as alike"]
        )
    return _result(rows, fitted, [])


@dataclass(frozen=True, eq=False)
class _State:
    """Costs and speeds with the design and the errors around them."""

    cost: FloatArray
    speed: FloatArray
    design: FloatArray
    error: FloatArray
    with_speeds: bool

    @property
    def loss(self) -> float:
        """Return the sum of squared relative errors."""
        return float(self.error @ self.error)

    @property
    def n_free(self) -> int:
        """Return how many numbers were fitted and are not at their bound."""
        return int((self.cost > 0).sum()) + (len(self.speed) - 1) * self.with_speeds


def _settle(rows: Rows, *, with_speeds: bool) -> _State:
    """Sweep until costs and speeds stay."""
    speed = np.ones(rows.n_ranks)
    predicted = np.maximum(rows.seconds, 1e-3 * rows.seconds.mean())
    cost = np.zeros(rows.count.shape[1])
    for _ in range(_SWEEPS):
        relative = rows.count / (speed[rows.rank] * predicted)[:, None]
        design = _between(relative, rows) if with_speeds else relative
        wanted = (rows.seconds / predicted)[:, None]
        target = _between(wanted, rows) if with_speeds else wanted
        before, cost = cost, _non_negative(design, target[:, 0])
        predicted, speed = _refreshed(rows, cost, speed, with_speeds=with_speeds)
        if np.abs(cost - before).max() <= _SETTLED * cost.max():
            break
    relative = rows.count / (speed[rows.rank] * predicted)[:, None]
    cost = np.where(cost * relative.max(axis=0) > _NOTHING, cost, 0.0)
    design = _between(relative, rows) if with_speeds else relative
    return _State(cost, speed, design, rows.seconds / predicted - 1.0, with_speeds)


def _refreshed(
    rows: Rows, cost: FloatArray, speed: FloatArray, *, with_speeds: bool
) -> tuple[FloatArray, FloatArray]:
    """Return what costs predict, and speeds of mean 1 that fit it best."""
    alone = rows.count @ cost
    alone = np.maximum(alone, 1e-6 * max(float(alone.max()), 1e-300))
    if with_speeds:
        slow = rows.rank_means(rows.seconds / alone)
        speed = 1.0 / np.maximum(slow, 1e-6 * max(float(slow.max()), 1e-300))
        speed /= speed.mean()
    return alone / speed[rows.rank], speed


def _between(matrix: FloatArray, rows: Rows) -> FloatArray:
    """Take each rank's mean from its rows; one row more holds what all have in common."""
    means = np.stack([rows.rank_means(column) for column in matrix.T], axis=1)
    common = np.sqrt(len(matrix)) * matrix.mean(axis=0, keepdims=True)
    return np.concatenate([matrix - means[rows.rank], common])


def _non_negative(design: FloatArray, target: FloatArray) -> FloatArray:
    """Solve least squares with costs >= 0, columns scaled to length 1."""
    from scipy.optimize import nnls

    length = np.linalg.norm(design, axis=0)
    length[length == 0] = 1.0
    q, r = np.linalg.qr(design / length)  # few rows instead of one a rank
    return np.asarray(nnls(r, q.T @ target)[0] / length)


def _singular(design: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return singular values and right vectors of the columns scaled to length 1."""
    length = np.linalg.norm(design, axis=0)
    scaled = design / np.where(length > 0, length, 1.0)
    values, vectors = np.linalg.svd(np.linalg.qr(scaled, mode="r"))[1:]
    padded = np.zeros(design.shape[1])
    padded[: len(values)] = values
    return padded, vectors


def _refuse_twins(rows: Rows, design: FloatArray) -> None:
    """Raise an error that names the classes whose counts go together."""
    values, vectors = _singular(design)
    absent = values <= _SAME * values.max(initial=0.0)
    if not absent.any():
        return
    share = np.abs(vectors[absent]).max(axis=0)
    names = [name for name, much in zip(rows.classes, share, strict=True) if much > 1e-3]
    if len(names) == 1:
        raise WeightError(f"class {names[0]!r} is on no rank; leave it out")
    raise WeightError(
        f"the costs of {', '.join(map(repr, names))} cannot be told apart: on every rank their "
        "counts follow from each other; join them, leave one out, or measure another partition"
    )


def _separable(rows: Rows, alike: _State) -> bool:
    """Tell whether the observations can tell speeds from costs."""
    values, _ = _singular(_between(alike.design, rows))
    return bool(values.min() > 1e-6 * values.max()) and rows.n_tables_alike


def _inseparable(rows: Rows, speeds: Speeds) -> str:
    """Say why speeds are not fitted, or raise it if they must be."""
    if rows.n_tables == 1:
        why = "one table of counts cannot tell slow ranks from dear cells"
    elif not rows.n_tables_alike:
        why = "the tables of counts are of different numbers of ranks"
    else:
        why = "the tables of counts are too alike to tell slow ranks from dear cells"
    todo = "measure another partition on the same ranks"
    if speeds == "fit":
        raise InputError(f"speeds cannot be fitted: {why}; {todo}")
    return f"speeds are not fitted: {why}; {todo}"


def _worth_it(rows: Rows, alike: _State, fitted: _State) -> bool:
    """Tell by an F-test whether speeds explain more than chance would."""
    from scipy.stats import f as f_distribution

    more, left = fitted.n_free - alike.n_free, len(rows.seconds) - fitted.n_free
    if more <= 0 or left <= 0:
        return False
    if fitted.loss <= 1e-24 * len(rows.seconds):
        return alike.loss > 1e-20 * len(rows.seconds)
    ratio = (alike.loss - fitted.loss) / more / (fitted.loss / left)
    return bool(f_distribution.sf(ratio, more, left) < _CHANCE)


def _result(rows: Rows, state: _State, notes: list[str]) -> WeightFit:
    """Add errors, condition and what a user must know."""
    free = state.cost > 0
    left = len(rows.seconds) - state.n_free
    sigma = np.sqrt(state.loss / left) if left > 0 else rows.repeat_error
    covariance = _covariance(state.design, free)
    error = sigma * np.sqrt(np.diag(covariance))
    values, _ = _singular(state.design)
    notes = [*notes, *_vague(rows.classes, covariance, free), *_odd_rank(rows, state, sigma)]
    return WeightFit(
        classes=rows.classes,
        cost=state.cost,
        standard_error=error,
        speed=state.speed if state.with_speeds else None,
        residual=float(np.sqrt(state.loss / left)) if left > 0 else float("nan"),
        condition=float(values.max() / values.min()),
        n_rows=len(rows.seconds),
        n_steps=rows.n_steps,
        notes=tuple(notes),
    )


def _covariance(design: FloatArray, free: BoolArray) -> FloatArray:
    """Return the covariance of unit errors; a cost at its bound is freed alone with the others."""
    n_classes = design.shape[1]
    covariance = np.zeros((n_classes, n_classes))
    own = np.flatnonzero(free)
    covariance[np.ix_(own, own)] = _inverse(design[:, own])
    for bound in np.flatnonzero(~free):
        columns: Int64Array = np.append(own, bound)
        covariance[bound, bound] = _inverse(design[:, columns])[-1, -1]
    return covariance


def _inverse(design: FloatArray) -> FloatArray:
    """Invert the normal matrix of columns scaled to length 1."""
    length = np.linalg.norm(design, axis=0)
    scaled = design / length
    return np.asarray(np.linalg.pinv(scaled.T @ scaled) / np.outer(length, length))


def _vague(classes: tuple[str, ...], covariance: FloatArray, free: BoolArray) -> list[str]:
    """Name pairs of costs of which only a sum is well known."""
    own = np.flatnonzero(free)
    deviation = np.sqrt(np.diag(covariance))
    notes = []
    for k, first in enumerate(own):
        for second in own[k + 1 :]:
            correlation = covariance[first, second] / (deviation[first] * deviation[second])
            if abs(correlation) > _VAGUE:
                notes.append(
                    f"the costs of {classes[first]!r} and {classes[second]!r} are hard to tell "
                    f"apart (correlation {correlation:.2f}): their counts go together"
                )
    return notes


def _odd_rank(rows: Rows, state: _State, sigma: float) -> list[str]:
    """Name the rank that takes longest beyond what its cells explain, if it stands out."""
    extra = rows.rank_means(state.error)
    if len(extra) < 4:
        return []
    usual = float(np.median(np.abs(extra - np.median(extra))))
    worst = int(np.argmax(extra))
    if extra[worst] < max(0.05, 8.0 * usual) or state.with_speeds or not np.isfinite(sigma):
        return []
    return [
        f"rank {worst} takes {extra[worst]:.0%} longer than its cells explain: a slow rank, or a "
        "class is missing"
    ]
