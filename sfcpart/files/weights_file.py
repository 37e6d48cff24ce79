"""Files of costs of classes, which stand wherever weights do: `--weight costs.json`.

JSON, one object:

================== ============================ ==================================================
key                value                        meaning
================== ============================ ==================================================
`sfcpart_costs`    1                            version of this layout
`unit`             text                         what costs are in ("seconds a step"); not used
`cost`             object: class to number      what one of each class costs, >= 0; a cell weighs
                                                the sum over its classes
`standard_error`   object: class to number      optional; null where unknown
`speed`            list of numbers, or null     optional: relative speed of each rank
`fit`              object                       optional: how the costs were found; not used
================== ============================ ==================================================

Classes are spelled as in `sfcpart.weights.classes`; `other` stands for kinds of cells and
`FIELD:other` for values of a field that are not listed.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import Any

from sfcpart.errors import FileError, WeightError
from sfcpart.weights.fitted import WeightFit
from sfcpart.weights.spec import WeightSpec, costs_spec

__all__ = ["CostFile", "cost_file_content", "is_cost_file", "read_costs"]

_VERSION = 1
_KEY = "sfcpart_costs"


@dataclass(frozen=True)
class CostFile:
    """What a file of costs holds.

    Attributes
    ----------
    spec : WeightSpec
        Weights of cells.
    speed : tuple of float or None
        Relative speed of each rank.
    """

    spec: WeightSpec
    speed: tuple[float, ...] | None


def is_cost_file(text: str) -> bool:
    """Tell whether a specification of weights names a file of costs.

    Examples
    --------
    >>> is_cost_file("costs.json"), is_cost_file("tetra=1,other=2")
    (True, False)
    """
    return text.strip().lower().endswith(".json")


def read_costs(path: str | PathLike[str]) -> CostFile:
    """Read a file of costs.

    Parameters
    ----------
    path : path

    Raises
    ------
    FileError
        If it cannot be read or is no JSON of this layout.
    WeightError
        If a class or a cost is none.
    """
    place = Path(path)
    try:
        content = json.loads(place.read_text("utf-8-sig"))
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {error.strerror or error}") from error
    except ValueError as error:
        raise FileError(f"{place}: is no JSON: {error}") from error
    if not isinstance(content, dict) or content.get(_KEY) != _VERSION:
        found = content.get(_KEY) if isinstance(content, dict) else None
        raise FileError(f"{place}: {_KEY} is {found!r}; wanted {_VERSION}: a file of costs")
    cost = content.get("cost")
    if not isinstance(cost, dict) or not cost or not all(map(_is_number, cost.values())):
        raise FileError(f"{place}: wanted an object of numbers as 'cost', a number a class")
    speed = content.get("speed")
    if speed is not None and not (isinstance(speed, list) and all(map(_is_number, speed))):
        raise FileError(f"{place}: wanted a list of numbers as 'speed', or null")
    spec = costs_spec({name: float(value) for name, value in cost.items()}, text=str(place))
    return CostFile(spec, None if speed is None else tuple(map(float, speed)))


def cost_file_content(fit: WeightFit) -> Mapping[str, Any]:
    """Return what a file of fitted costs holds.

    Raises
    ------
    WeightError
        If a class of the fit is none that cells can have, or all costs are 0.
    """
    cost = dict(zip(fit.classes, fit.cost.tolist(), strict=True))
    costs_spec(cost, text="the fit")
    if not any(value for name, value in cost.items() if name != "rank"):
        raise WeightError("all fitted costs are 0; wanted one above 0 to weigh cells by")
    figures = fit.to_json_dict()
    about = ("residual", "condition", "n_rows", "n_steps", "notes")
    return {
        _KEY: _VERSION,
        "unit": "seconds a step",
        "cost": cost,
        "standard_error": dict(zip(fit.classes, fit.standard_error.tolist(), strict=True)),
        "speed": figures["speed"],
        "fit": {name: figures[name] for name in about},
    }


def _is_number(value: object) -> bool:
    """Tell numbers from what else JSON has."""
    return isinstance(value, int | float) and not isinstance(value, bool)
