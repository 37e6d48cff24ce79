"""What a re-split returns: the new partition, what moves, and whether it pays."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from sfcpart.measure import Assessment
from sfcpart.partition import Partition
from sfcpart.resplit.choose import Trial
from sfcpart.resplit.migration import Migration
from sfcpart.resplit.verdict import Verdict

__all__ = ["Rebalance"]


@dataclass(frozen=True, eq=False)
class Rebalance:
    """A new split beside the old one.

    Attributes
    ----------
    partition : Partition
        The new parts of the cells.
    home : Partition
        The part that holds each cell now (the old one, carried over to a mesh that changed).
    way : str
        How it was re-split; of `sfcpart.resplit.ways.WAYS`.
    migration : Migration
        Who sends how much to whom, how long that takes, and the least possible.
    verdict : Verdict
        Whether it pays, and after how many steps.
    before : Assessment or None
        The old split under the new weights; None if the number of parts changes.
    after : Assessment
        The new split.
    trials : tuple of Trial
        All ways that were tried, in order.
    """

    partition: Partition
    home: Partition
    way: str
    migration: Migration
    verdict: Verdict
    before: Assessment | None
    after: Assessment
    trials: tuple[Trial, ...]

    def to_json_dict(self) -> dict[str, Any]:
        """Return all figures as plain Python values, stable keys, strict JSON."""
        return {
            "way": self.way,
            **self.verdict.to_json_dict(),
            "migration": self.migration.to_json_dict(),
            "trials": [trial.to_json_dict() for trial in self.trials],
            "before": None if self.before is None else self.before.to_json_dict()["total"],
            "after": self.after.to_json_dict()["total"],
        }
