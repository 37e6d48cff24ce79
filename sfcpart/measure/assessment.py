"""The frozen result of measuring a partition: columns by part, totals, and their plain forms."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from math import isfinite
from typing import TypeAlias

from sfcpart.dtypes import Array, Int32Array
from sfcpart.measure.columns import PART_COLUMNS, TOTAL_COLUMNS, Column
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.step_model import StepModel

__all__ = ["Assessment", "Number"]

Number: TypeAlias = float | int | None


@dataclass(frozen=True, eq=False)
class Assessment:
    """Figures of one partition of one mesh.

    Attributes
    ----------
    part : mapping of str to (n_parts,) array or None
        One entry for each of `PART_COLUMNS`; None where the figure cannot be known (no faces, no
        limit given), NaN where it has no value for one part (the stretch of an empty part).
    total : mapping of str to number or None
        One entry for each of `TOTAL_COLUMNS`.
    empty_parts : (k,) int32
        Parts without a cell.
    split_parts : (k,) int32
        Parts in more than one piece.
    pairs : PartPairs or None
        Which parts meet; None without faces.
    step_model : StepModel
        Numbers behind the predicted times.
    """

    part: Mapping[str, Array | None]
    total: Mapping[str, Number]
    empty_parts: Int32Array
    split_parts: Int32Array
    pairs: PartPairs | None
    step_model: StepModel

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return int(self.total["n_parts"] or 0)

    def rows(self) -> Iterator[dict[str, Number]]:
        """Yield one mapping of column name to plain number (or None) for each part."""
        columns = [(column.name, self._plain_column(column)) for column in PART_COLUMNS]
        for k in range(self.n_parts):
            yield {name: values[k] for name, values in columns}

    def _plain_column(self, column: Column) -> list[Number]:
        """Turn a column into Python numbers, None where there is no value."""
        values = self.part[column.name]
        if values is None:
            return [None] * self.n_parts
        return [_plain(value) for value in values.tolist()]

    def to_json_dict(self) -> dict[str, object]:
        """Return totals, columns and model as plain Python values with stable keys.

        Values without meaning (NaN, infinite) become None, so that the result is strict JSON.
        """
        return {
            "total": {column.name: _plain(self.total[column.name]) for column in TOTAL_COLUMNS},
            "part": {column.name: self._plain_column(column) for column in PART_COLUMNS},
            "empty_parts": self.empty_parts.tolist(),
            "split_parts": self.split_parts.tolist(),
            "step_model": self.step_model.to_json_dict(),
        }


def _plain(value: Number) -> Number:
    """Replace NaN and infinity by None."""
    return None if value is None or not isfinite(value) else value
