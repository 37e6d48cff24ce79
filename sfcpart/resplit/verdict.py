"""Does it pay to split again? Steps of the solver against the cost of splitting and moving.

A new split is accepted only if the time its faster steps save until the next one exceeds what it
costs: steps x (T_old - T_new) > cost (L. Oliker, R. Biswas, JPDC 51 (1998), as read in its
abstract). The prediction of a step is that of `sfcpart.measure.step_model`: it ranks, it does not
replace a measurement.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, isfinite
from typing import Any

from sfcpart.errors import InputError

__all__ = ["Verdict"]


@dataclass(frozen=True)
class Verdict:
    """What a new split costs and saves.

    Attributes
    ----------
    step_before, step_after : float or None
        Predicted seconds of a step with the old and the new split; None where that is unknown (no
        faces), or where the old split cannot be kept (before).
    split_seconds : float
        What the splitting took.
    move_seconds : float
        What moving is predicted to take.
    steps : int
        Steps until the next time the split is looked at.

    Examples
    --------
    >>> Verdict.of(0.5, 0.25, split_seconds=4.0, move_seconds=6.0, steps=100).text
    're-split now: pays back after 40 steps'
    >>> Verdict.of(0.5, 0.25, split_seconds=4.0, move_seconds=6.0, steps=20).text
    'keep the old split: a new one pays back after 40 steps, but only 20 remain'
    """

    step_before: float | None
    step_after: float | None
    split_seconds: float
    move_seconds: float
    steps: int

    @classmethod
    def of(
        cls,
        step_before: float | None,
        step_after: float | None,
        *,
        split_seconds: float,
        move_seconds: float,
        steps: int,
    ) -> Verdict:
        """Check the numbers and keep them.

        Raises
        ------
        InputError
            If a time is negative or not finite, or there is not one step at least.
        """
        times = {
            "step_before": step_before,
            "step_after": step_after,
            "split_seconds": split_seconds,
            "move_seconds": move_seconds,
        }
        for name, value in times.items():
            if value is not None and not (isfinite(value) and value >= 0):
                raise InputError(f"{name} is {value}; wanted a finite number of seconds >= 0")
        if isinstance(steps, bool) or int(steps) != steps or steps < 1:
            raise InputError(f"steps is {steps!r}; wanted a whole number, 1 or more")
        return cls(step_before, step_after, float(split_seconds), float(move_seconds), int(steps))

    @property
    def cost_seconds(self) -> float:
        """Seconds that splitting and moving take."""
        return self.split_seconds + self.move_seconds

    @property
    def saved_seconds(self) -> float | None:
        """Seconds that each step saves (negative: loses), None where unknown."""
        if self.step_before is None or self.step_after is None:
            return None
        return self.step_before - self.step_after

    @property
    def break_even(self) -> int | None:
        """Steps after which the new split has paid back; None if it never does or is unknown."""
        saved = self.saved_seconds
        if saved is None or saved <= 0:
            return None
        return max(1, ceil(self.cost_seconds / saved))

    @property
    def pays(self) -> bool | None:
        """Whether it pays back before the next look; None where that is unknown.

        A split that cannot be kept (another number of parts) has to be replaced: True.
        """
        if self.step_before is None:
            return True if self.step_after is not None else None
        if self.step_after is None:
            return None
        steps = self.break_even
        return steps is not None and steps < self.steps

    @property
    def text(self) -> str:
        """The verdict in one line."""
        if self.pays is None:
            return "unknown: without faces no step can be predicted"
        if self.step_before is None:
            return "re-split now: the old split cannot be kept"
        steps = self.break_even
        if steps is None:
            return "keep the old split: steps would not be faster with the new one"
        after = f"pays back after {steps:,} step{'' if steps == 1 else 's'}"
        if self.pays:
            return f"re-split now: {after}"
        return f"keep the old split: a new one {after}, but only {self.steps:,} remain"

    def to_json_dict(self) -> dict[str, Any]:
        """Return all figures as plain values."""
        return {
            "verdict": self.text,
            "pays": self.pays,
            "break_even_steps": self.break_even,
            "steps": self.steps,
            "step_seconds_before": self.step_before,
            "step_seconds_after": self.step_after,
            "saved_seconds_a_step": self.saved_seconds,
            "split_seconds": self.split_seconds,
            "move_seconds": self.move_seconds,
        }
