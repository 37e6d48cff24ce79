"""A run replayed under several rules, side by side, with the regret of each against hindsight."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from sfcpart.errors import InputError
from sfcpart.resplit.hindsight import Path, best_period, follow, hindsight
from sfcpart.resplit.policies import Every, Never, Regret, Rule, StopAtRise, Threshold
from sfcpart.resplit.timetable import Timetable

__all__ = ["DEFAULT_RULES", "Replay", "RuleOutcome", "check_rules", "replay_rules"]

DEFAULT_RULES = (
    "never",
    "every:1",
    "every:10",
    "threshold:0.1",
    "threshold:0.5",
    "stop-at-rise",
    "clock",
    "best-period",
    "hindsight",
)

SPELLING = (
    "never, every:N (frames), threshold:X (imbalance), stop-at-rise, clock, best-period, hindsight"
)


@dataclass(frozen=True, eq=False)
class RuleOutcome:
    """What became of the run under one rule.

    Attributes
    ----------
    rule : str
        As asked for.
    path : Path
    regret : float
        Seconds over those of hindsight, minus 1; never negative.
    period : int or None
        The best period, in frames, for that rule.
    """

    rule: str
    path: Path
    regret: float
    period: int | None = None

    def figures(self) -> dict[str, Any]:
        """Return name and figures as plain values."""
        return {
            "rule": self.rule,
            "seconds": self.path.seconds,
            "step_seconds": self.path.step_seconds,
            "resplit_seconds": self.path.resplit_seconds,
            "n_resplits": len(self.path.resplits),
            "moved_bytes": self.path.moved_bytes,
            "mean_imbalance": float(self.path.imbalance.mean()),
            "largest_imbalance": float(self.path.imbalance.max()),
            "regret": self.regret,
            "period": self.period,
        }


@dataclass(frozen=True, eq=False)
class Replay:
    """A run under several rules.

    Attributes
    ----------
    outcomes : tuple of RuleOutcome
        In the order asked for.
    timetable : Timetable
        What every split costs in every later frame.
    balanced_seconds : float
        Were every step as short as its mean rank takes, with the newest split: no rule gets there.
    """

    outcomes: tuple[RuleOutcome, ...]
    timetable: Timetable
    balanced_seconds: float

    def figures(self) -> Iterator[dict[str, Any]]:
        """Yield the figures of each rule."""
        for outcome in self.outcomes:
            yield outcome.figures()

    def to_json_dict(self) -> dict[str, Any]:
        """Return all figures, re-splits and imbalances as plain Python values."""
        table = self.timetable
        return {
            "n_parts": table.n_parts,
            "n_frames": table.n_frames,
            "steps": table.steps.tolist(),
            "n_cells": table.n_cells.tolist(),
            "balanced_seconds": self.balanced_seconds,
            "rules": [
                {
                    **outcome.figures(),
                    "resplits": list(outcome.path.resplits),
                    "imbalance": outcome.path.imbalance.tolist(),
                }
                for outcome in self.outcomes
            ],
        }


def replay_rules(table: Timetable, rules: Sequence[str] = DEFAULT_RULES) -> Replay:
    """Run each rule through a timetable.

    Parameters
    ----------
    table : Timetable
    rules : sequence of str
        never, every:N, threshold:X, stop-at-rise, clock, best-period, hindsight.

    Raises
    ------
    InputError
        If a rule is unknown, named twice, or its number is out of range.
    """
    started = check_rules(rules)
    best = hindsight(table)
    outcomes = []
    for name, start in started:
        period = None
        if start is not None:
            path = follow(table, start)
        elif name == "hindsight":
            path = best
        else:
            period, path = best_period(table)
        outcomes.append(RuleOutcome(name, path, _regret(path, best), period))
    own = np.diagonal(table.mean)
    return Replay(tuple(outcomes), table, float((own * table.steps).sum()))


def check_rules(rules: Sequence[str]) -> list[tuple[str, Callable[[float], Rule] | None]]:
    """Return each rule with what makes it from the cost of a re-split; None if it knows the run."""
    return [(name, _started(name)) for name in _known(rules)]


def _known(rules: Sequence[str]) -> list[str]:
    """Return the rules, each once."""
    names = [str(rule) for rule in rules]
    if not names:
        raise InputError(f"no rule to replay; wanted some of {SPELLING}")
    if len(set(names)) < len(names):
        raise InputError(f"a rule is named twice: {', '.join(names)}; name each once")
    return names


def _started(name: str) -> Callable[[float], Rule] | None:
    """Return what makes a rule from the cost of a re-split; None for those that know the run."""
    head, _, number = name.partition(":")
    if name in ("best-period", "hindsight"):
        return None
    if name == "never":
        return lambda cost: Never()
    if name == "stop-at-rise":
        return StopAtRise
    if name == "clock":
        return Regret
    if head in ("every", "threshold"):
        return _numbered(name, head, number)
    raise InputError(f"unknown rule {name!r}; known: {SPELLING}")


def _numbered(name: str, head: str, number: str) -> Callable[[float], Rule]:
    """Return what makes a rule with a number."""
    try:
        rule: Every | Threshold
        rule = Every(int(number)) if head == "every" else Threshold(float(number))
    except ValueError as error:
        told = f": {error}" if isinstance(error, InputError) else ""
        wanted = "a whole number of frames" if head == "every" else "a share such as 0.1"
        raise InputError(f"rule {name!r}{told or f': wanted {wanted} after the colon'}") from None
    return lambda cost: rule


def _regret(path: Path, best: Path) -> float:
    """Return how much longer a run takes than the best; rounding noise is none."""
    return max(0.0, path.seconds / best.seconds - 1.0) if best.seconds > 0 else 0.0
