"""Costs of classes and speeds of ranks from measured seconds."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import lsq_linear

import sfcpart
from sfcpart.errors import InputError, WeightError
from sfcpart.weights.fit import fit_weights

CLASSES = ("tetra", "hexahedron", "zone:1", "face")


def drawn(rng, n_ranks: int = 64, n_classes: int = 4):
    """Draw counts of ranks that differ in what they hold, and true costs within a factor of 10."""
    share = rng.dirichlet(np.full(n_classes, 0.8), n_ranks)
    count = np.rint(share * rng.uniform(5e3, 3e4, n_ranks)[:, None])
    return count, rng.uniform(1e-7, 1e-6, n_classes)


def table(count):
    return dict(zip(CLASSES, count.T, strict=False))


def noisy(rng, seconds, n_steps: int = 1):
    return seconds * (1 + 0.02 * rng.standard_normal((n_steps, len(seconds))))


def test_four_classes_are_recovered_within_five_per_cent_from_two_per_cent_noise():
    # The aim of the project: 64 ranks, one step, mean over 50 drawn cases.
    rng = np.random.default_rng(5)
    errors, covered = [], []
    for _ in range(50):
        count, cost = drawn(rng)
        fit = fit_weights(noisy(rng, count @ cost), table(count))
        errors.append(np.abs(fit.cost / cost - 1))
        covered.append(np.abs(fit.cost - cost) <= 2 * fit.standard_error)
    assert np.mean(errors) < 0.05
    assert np.mean(np.max(errors, axis=1)) < 0.05
    assert 0.88 < np.mean(covered) < 0.99  # two standard errors: 95 %


def test_exact_times_give_exact_costs_and_speeds():
    rng = np.random.default_rng(0)
    _, cost = drawn(rng)
    speed = rng.uniform(0.5, 1.5, 64)
    speed /= speed.mean()
    counts = [drawn(rng)[0] for _ in range(2)]
    fit = fit_weights([c @ cost / speed for c in counts], [table(c) for c in counts])
    assert fit.cost == pytest.approx(cost, rel=1e-8)
    assert fit.speed == pytest.approx(speed, rel=1e-8)
    assert fit.residual < 1e-8
    assert fit.notes == ()


def test_speeds_and_costs_are_told_apart_by_several_partitions():
    rng = np.random.default_rng(1)
    errors = []
    for _ in range(10):
        _, cost = drawn(rng)
        speed = np.where(np.arange(64) < 16, 0.5, 1.0)
        speed /= speed.mean()
        counts = [drawn(rng)[0] for _ in range(3)]
        times = [noisy(rng, c @ cost / speed, 4) for c in counts]
        fit = fit_weights(times, [table(c) for c in counts])
        errors.append(np.abs(fit.cost / cost - 1))
        assert np.abs(fit.speed / speed - 1).mean() < 0.02
        assert fit.speed.mean() == pytest.approx(1)
    assert np.mean(errors) < 0.02


def test_equal_ranks_are_taken_as_alike():
    rng = np.random.default_rng(2)
    counts = [drawn(rng)[0] for _ in range(3)]
    cost = np.array([1.0, 2.0, 3.0, 4.0]) * 1e-7
    fit = fit_weights([noisy(rng, c @ cost) for c in counts], [table(c) for c in counts])
    assert fit.speed is None
    assert "no more than chance" in fit.notes[0]
    forced = fit_weights(
        [noisy(rng, c @ cost) for c in counts], [table(c) for c in counts], speeds="fit"
    )
    assert forced.speed == pytest.approx(np.ones(64), abs=0.1)


def test_exactly_equal_ranks_stay_alike_without_noise():
    counts = [drawn(np.random.default_rng(k))[0] for k in range(2)]
    fit = fit_weights([c.sum(axis=1) for c in counts], [table(c) for c in counts])
    assert fit.speed is None


def test_costs_are_never_negative_and_their_errors_say_how_far_above_zero():
    rng = np.random.default_rng(3)
    count, cost = drawn(rng)
    cost[2] = 0.0
    fits = [fit_weights(noisy(rng, count @ cost), table(count)) for _ in range(20)]
    assert all((fit.cost >= 0).all() for fit in fits)
    at_bound = [fit for fit in fits if fit.cost[2] == 0]
    assert at_bound
    assert all(0 < fit.standard_error[2] < 1e-7 for fit in at_bound)


def test_the_fit_is_that_of_a_general_solver():
    # scipy.optimize.lsq_linear (bounded, another algorithm than nnls) as an independent referee,
    # over relative errors of the prediction itself.
    rng = np.random.default_rng(4)
    count, cost = drawn(rng)
    seconds = noisy(rng, count @ cost)[0]
    fit = fit_weights(seconds, table(count))
    scale = (count @ fit.cost)[:, None]
    found = lsq_linear(count / scale, seconds / scale[:, 0], bounds=(0, np.inf), tol=1e-14)
    assert fit.cost == pytest.approx(found.x, rel=1e-6)


def test_one_class_tells_speeds_from_a_single_table():
    fit = fit_weights([1.0, 4.0], {"cell": [10, 10]}, speeds="fit")
    assert fit.speed == pytest.approx([1.6, 0.4])
    assert np.isnan(fit.residual)


def test_steps_tell_the_error_where_ranks_leave_no_freedom():
    seconds = [[1.0, 3.0], [1.1, 2.9]]
    fit = fit_weights(seconds, {"a": [1, 0], "b": [0, 1]})
    assert fit.cost == pytest.approx([1.05, 2.95])
    assert (fit.standard_error > 0).all()
    assert fit.n_steps == 2
    alone = fit_weights(seconds[0], {"a": [1, 0], "b": [0, 1]})
    assert np.isnan(alone.standard_error).all()


def test_ranks_without_cells_do_not_count():
    with_empty = fit_weights([2.0, 0.5, 4.0], {"cell": [10, 0, 20]})
    assert with_empty.cost == pytest.approx([0.2])
    assert with_empty.n_rows == 2


def test_what_a_rank_costs_by_itself_is_a_class():
    rng = np.random.default_rng(6)
    count = drawn(rng)[0][:, :2]
    counts = {"tetra": count[:, 0], "wedge": count[:, 1], "rank": np.ones(64)}
    fit = fit_weights(1e-3 + count @ [1e-7, 2e-7], counts)
    assert fit.cost == pytest.approx([1e-7, 2e-7, 1e-3], rel=1e-6)
    assert len(fit.to_weights().terms[0].addends) == 1


@pytest.mark.parametrize(
    ("counts", "words"),
    [
        ({"tetra": [1, 2, 3], "wedge": [2, 4, 6]}, "'tetra', 'wedge' cannot be told apart"),
        (
            {"cell": [3, 5, 4, 2], "a": [1, 2, 3, 0], "b": [2, 3, 1, 2]},
            "'cell', 'a', 'b' cannot be told apart",
        ),
        ({"a": [1, 2, 3], "b": [0, 0, 0]}, "class 'b' is on no rank"),
    ],
)
def test_classes_that_go_together_are_named(counts, words):
    n_ranks = len(next(iter(counts.values())))
    with pytest.raises(WeightError, match=words):
        fit_weights(np.arange(1.0, n_ranks + 1), counts)


def test_classes_that_nearly_go_together_are_noted():
    rng = np.random.default_rng(7)
    a = rng.uniform(1e3, 1e4, 64)
    counts = {"a": a, "b": a * rng.uniform(0.98, 1.02, 64)}
    fit = fit_weights(noisy(rng, a * 3e-7), counts)
    assert any("'a' and 'b' are hard to tell apart" in note for note in fit.notes) or 0 in fit.cost
    assert fit.condition > 50


def test_a_slow_rank_is_named_where_speeds_cannot_be_fitted():
    rng = np.random.default_rng(8)
    count, cost = drawn(rng)
    seconds = noisy(rng, count @ cost)[0]
    seconds[17] *= 2
    notes = fit_weights(seconds, table(count)).notes
    assert any("rank 17 takes" in note for note in notes)
    assert "one table of counts cannot tell" in notes[0]


@pytest.mark.parametrize(
    ("seconds", "counts", "words"),
    [
        ([1.0, -2.0], {"cell": [1, 2]}, r"seconds \(table 0\)\[1\] is -2.0; wanted numbers >= 0"),
        ([1.0, np.nan], {"cell": [1, 2]}, r"\[1\] is nan"),
        ([[1.0, 2.0], [np.inf, 1.0]], {"cell": [1, 2]}, r"\[1, 0\] is inf"),
        ([1.0, 2.0], {"cell": [1, -2]}, r"counts of 'cell' \(table 0\)\[1\] is -2.0"),
        ([1.0, 2.0], {"a": [1, 0], "b": [0, 1], "c": [1, 1]}, "too few observations: 2 ranks"),
        ([1.0, 2.0, 3.0], {"cell": [1, 2]}, r"shape \(3,\); wanted \(2,\)"),
        ([1.0, 2.0], {"a": [1, 2], "b": [1, 2, 3]}, "wanted one number a rank"),
        ([0.0, 0.0], {"cell": [1, 2]}, "all seconds of table 0 are 0"),
        ([1.0, 2.0], {}, "has no class"),
        ([], [], "at least one"),
        ([[1.0, 2.0]], [{"cell": [1, 2]}, {"cell": [1, 2]}], "1 arrays of seconds for 2 tables"),
        ([[1.0, 2.0]] * 2, [{"a": [1, 2]}, {"b": [1, 2]}], "'a' is in one table of counts"),
        (["x", "y"], {"cell": [1, 2]}, "no table of numbers"),
        (np.empty((0, 2)), {"cell": [1, 2]}, "wanted"),
    ],
)
def test_unusable_observations_are_refused(seconds, counts, words):
    with pytest.raises(InputError, match=words):
        fit_weights(seconds, counts)


def test_speeds_that_cannot_be_told_are_refused_if_asked_for():
    with pytest.raises(InputError, match="one table of counts cannot tell slow ranks"):
        fit_weights([1.0, 2.0, 4.0], {"a": [1, 2, 3], "b": [3, 1, 1]}, speeds="fit")
    twice = [{"a": [1, 2, 3], "b": [3, 1, 1]}] * 2
    with pytest.raises(InputError, match="too alike"):
        fit_weights([[1.0, 2.0, 4.0]] * 2, twice, speeds="fit")
    uneven = [{"a": [1, 2, 3], "b": [3, 1, 1]}, {"a": [1, 2], "b": [3, 1]}]
    with pytest.raises(InputError, match="different numbers of ranks"):
        fit_weights([[1.0, 2.0, 4.0], [1.0, 2.0]], uneven, speeds="fit")
    with pytest.raises(InputError, match="wanted auto, fit or alike"):
        fit_weights([1.0], {"a": [1]}, speeds="maybe")


def test_figures_are_plain_values():
    fit = fit_weights([2.0, 4.1], {"cell": [10, 20]}, speeds="alike")
    found = fit.to_json_dict()
    assert found["classes"] == ["cell"]
    assert found["speed"] is None
    assert found["cost"] == fit.cost.tolist()


def test_costs_of_a_split_mesh_come_back():
    # The whole way: count a split mesh, make up times, fit, weigh the same mesh by the fit.
    mesh = sfcpart.read_mesh("meshes/channel_mixed.vtu")
    partition = sfcpart.split(mesh, 16)
    counts = sfcpart.class_counts(mesh, partition)
    cost = np.array([4e-7, 2e-7, 3e-7, 1e-7])
    fit = fit_weights(sum(c * n for c, n in zip(cost, counts.values(), strict=True)), counts)
    assert fit.cost == pytest.approx(cost, rel=1e-6)
    again = sfcpart.split(mesh, 16, weights=fit.to_weights())
    heavy = sfcpart.assess(mesh, again, weights=fit.to_weights()).total["imbalance"]
    assert heavy < 0.02
