"""What a fit of weights tells: costs, speeds, their errors, and what to know about them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from sfcpart.dtypes import FloatArray
from sfcpart.weights.spec import WeightSpec, costs_spec

__all__ = ["WeightFit"]


@dataclass(frozen=True, eq=False)
class WeightFit:
    """What one of each class costs, and how fast each rank is.

    Attributes
    ----------
    classes : tuple of str
    cost : (n_classes,) float64
        Seconds a step of one of the class on a rank of mean speed, >= 0.
    standard_error : (n_classes,) float64
        NaN where the observations leave nothing to tell it from. For a cost of 0: how far above
        0 it may be.
    speed : (n_ranks,) float64 or None
        Relative, mean 1; None where ranks are taken as alike.
    residual : float
        Root mean square of the relative errors that remain, freedom taken into account (NaN if
        none is left).
    condition : float
        Condition of the scaled counts: 1 is best, above 1e3 costs are vague.
    n_rows, n_steps : int
        Ranks times tables of counts; all steps together.
    notes : tuple of str
        What a user must know, a sentence each.

    Examples
    --------
    >>> from sfcpart.weights.fit import fit_weights
    >>> fit = fit_weights([3.0, 5.0, 4.0], {"tetra": [1, 1, 2], "wedge": [1, 2, 1]})
    >>> fit.to_json_dict()["classes"]
    ['tetra', 'wedge']
    """

    classes: tuple[str, ...]
    cost: FloatArray
    standard_error: FloatArray
    speed: FloatArray | None
    residual: float
    condition: float
    n_rows: int
    n_steps: int
    notes: tuple[str, ...] = field(default=())

    def to_weights(self) -> WeightSpec:
        """Return the costs as a specification of weights, which every call takes.

        Raises
        ------
        WeightError
            If a class is none that cells can have.

        Examples
        --------
        >>> from sfcpart.weights.fit import fit_weights
        >>> fit_weights([2.0, 4.0], {"cell": [10, 20]}).to_weights().needs_graph
        True
        """
        cost = dict(zip(self.classes, self.cost.tolist(), strict=True))
        return costs_spec(cost, text="the fit")

    def to_json_dict(self) -> dict[str, Any]:
        """Return all figures as plain Python values (NaN is for the writer to replace).

        Examples
        --------
        >>> from sfcpart.weights.fit import fit_weights
        >>> fit_weights([2.0, 4.0], {"cell": [10, 20]}).to_json_dict()["n_rows"]
        2
        """
        return {
            "classes": list(self.classes),
            "cost": self.cost.tolist(),
            "standard_error": self.standard_error.tolist(),
            "speed": None if self.speed is None else self.speed.tolist(),
            "residual": self.residual,
            "condition": self.condition,
            "n_rows": self.n_rows,
            "n_steps": self.n_steps,
            "notes": list(self.notes),
        }
