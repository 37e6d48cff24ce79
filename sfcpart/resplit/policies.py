"""Rules that say after each step whether to re-split before the next.

Every rule sees only what a running solver sees: how long the slowest rank and the mean rank took,
and what the last re-split cost. The *loss* of a step is slowest minus mean.

`StopAtRise` is the rule of D. M. Nicol and J. H. Saltz, Dynamic remapping of parallel computations
with varying resource demands, IEEE Trans. Comput. 37:1073 (1988): re-split at the first step n
since the last re-split at which W(n) = (C + sum of the losses)/n rises. For a loss that grows by m
a step that is the first n with n(n-1) > 2C/m; the best fixed period is sqrt(2C/m).

`Regret`, our own, is the rule behind `RebalanceClock`. It re-splits when one of two sums reaches
the cost C of a re-split:

- what would have been saved had each step since the last re-split been repeated in place of one at
  the level of the next: `sum (forecast - loss[j])`. That is W(n) about to rise, seen a step ahead;
- what was lost beyond a fresh split, `sum (loss[j] - fresh)`, which also ends a loss that has
  jumped and stays (W never rises then). It costs at most twice the best, as renting before buying
  does; where the last re-split did not earn its cost, the sum must reach twice as much, and so on.

A re-split is taken to become dearer or cheaper as the work of the mean rank does: both follow the
number of cells. Both sums only count steps that are left, if the length of the run is known. A
single late step (the system was busy) must be confirmed by the next.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

from sfcpart.errors import InputError

__all__ = ["Every", "Forecast", "Never", "Regret", "Rule", "StopAtRise", "Threshold"]

_MOST_PATIENCE = 64.0
_SPIKE = 4.0  # times the usual change from step to step: more must be seen twice
_GROWTH = 4.0  # how much dearer or cheaper than the last one a re-split is taken to be at most
_GRAVE = 4.0  # times the cost of a re-split: a step that lost so much more need not be seen twice
_FADE, _MOST_CONFIRMED = 0.95, 3  # each time it is seen again, trust fades half as fast
_LEVEL, _TREND, _CHANGE = 0.5, 0.3, 0.2  # how much the newest step counts


class Rule(Protocol):
    """A rule under way: fed step by step, and told of every re-split."""

    def after_step(self, slowest: float, mean: float) -> bool:
        """Return whether to re-split before the next step."""

    def after_resplit(self, cost: float) -> None:
        """Begin anew; `cost` is in seconds."""


@dataclass
class Never:
    """Keep the first split.

    Examples
    --------
    >>> Never().after_step(2.0, 1.0)
    False
    """

    def after_step(self, slowest: float, mean: float) -> bool:
        """Return False."""
        return False

    def after_resplit(self, cost: float) -> None:
        """Do nothing."""


@dataclass
class Every:
    """Re-split every so many steps.

    Examples
    --------
    >>> rule = Every(2)
    >>> rule.after_step(2.0, 1.0), rule.after_step(2.0, 1.0)
    (False, True)
    """

    period: int
    _since: int = 0

    def __post_init__(self) -> None:
        if self.period < 1:
            raise InputError(f"a period of {self.period} steps; wanted 1 or more")

    def after_step(self, slowest: float, mean: float) -> bool:
        """Count."""
        self._since += 1
        return self._since >= self.period

    def after_resplit(self, cost: float) -> None:
        """Count anew."""
        self._since = 0


@dataclass
class Threshold:
    """Re-split when the imbalance (slowest over mean, minus 1) is above a bound.

    Examples
    --------
    >>> Threshold(0.1).after_step(1.2, 1.0)
    True
    """

    most: float

    def __post_init__(self) -> None:
        if not self.most >= 0:
            raise InputError(f"a threshold of {self.most}; wanted a share of at least 0")

    def after_step(self, slowest: float, mean: float) -> bool:
        """Compare."""
        return slowest > (1.0 + self.most) * mean

    def after_resplit(self, cost: float) -> None:
        """Do nothing."""


@dataclass
class StopAtRise:
    """Re-split when the mean cost of a step since the last re-split rises.

    Examples
    --------
    >>> rule = StopAtRise(cost=10.0)
    >>> [rule.after_step(0.2 * n, 0.0) for n in range(1, 12)].index(True) + 1
    11
    """

    cost: float
    _since: int = 0
    _lost: float = 0.0
    _before: float = float("inf")

    def after_step(self, slowest: float, mean: float) -> bool:
        """Compare the mean with that of a step before."""
        self._since += 1
        self._lost += slowest - mean
        before, self._before = self._before, (self.cost + self._lost) / self._since
        return self._before > before

    def after_resplit(self, cost: float) -> None:
        """Take the cost for the next."""
        self.cost, self._since, self._lost, self._before = cost, 0, 0.0, float("inf")


@dataclass
class Forecast:
    """Level and trend of a loss, smoothed twice (C. C. Holt, 1957, from memory); late steps cut.

    A straight line is followed exactly from its second step on. For the first step after a
    re-split the trend is the usual rise from the first to the second step after those before.
    """

    level: float = 0.0
    trend: float = 0.0
    change: float = 0.0
    count: int = 0
    first_rises: tuple[float, ...] = ()
    trust: float = 1.0
    n_confirmed: int = 0
    _raw: tuple[float, float] = (0.0, 0.0)
    _cut: tuple[float, ...] = (0.0, 0.0, 0.0)
    _usual: float = 0.0
    _late: float = 0.0

    @property
    def next(self) -> float:
        """Return the loss expected of the next step; no rise is expected where none was seen."""
        if self.count < 3:
            return self.level + self.trend
        rise = max(0.0, (self._cut[2] - self._cut[0]) / 2)
        return min(self.level, max(self._cut[1:])) + min(self.trend, rise)

    def add(self, loss: float, *, grave: float) -> float:
        """Take a step in; return its loss, cut back if it is a late step by itself.

        A jump by more than `grave` is believed at once; one that lasts is when it does, and what
        was cut is then returned too.
        """
        cut, late = loss, self._late if loss > self._usual else 0.0
        self._late = 0.0
        if self.count >= 2:
            self._usual = max(self._raw) + _SPIKE * self.change
            cut = loss if loss > max(self._raw) + grave else min(loss, self._usual)
            self._late = loss - cut
            expected = self.level + self.trend
            self.level = expected + _LEVEL * (cut - expected)
            self.trend += _LEVEL * _TREND * (cut - expected)
        elif self.count == 1:
            self.first_rises = (*self.first_rises[-2:], cut - self.level)
            self.level, self.trend = cut, cut - self.level
        else:
            self.level, self.trend = cut, max(0.0, self._first_rise())
        if self.count:
            share = _CHANGE if self.change else 1.0
            self.change += share * (abs(cut - self._raw[1]) - self.change)
        self._raw = (self._raw[1] if self.count else loss, loss)
        self._cut, self.count = (*self._cut[1:], cut), self.count + 1
        return cut + late

    def anew(self) -> Forecast:
        """Begin after a re-split; trust in first rises fades while none is seen."""
        trust, confirmed = 1.0, self.n_confirmed
        if self.count < 2:
            trust = self.trust * _FADE ** (0.5**confirmed)
        elif self.first_rises[-1] >= self._first_rise() / 2:
            confirmed = min(confirmed + 1, _MOST_CONFIRMED)
        else:
            confirmed = 0
        return Forecast(
            change=self.change,
            first_rises=self.first_rises,
            trust=trust,
            n_confirmed=confirmed,
        )

    def _first_rise(self) -> float:
        """Return the median of the last three rises to a second step (the lower of two)."""
        if len(self.first_rises) < 2:
            return 0.0
        return self.trust * sorted(self.first_rises)[(len(self.first_rises) - 1) // 2]


@dataclass
class Regret:
    """Re-split when what it would have saved reaches what it costs (see the module).

    Attributes
    ----------
    cost : float
        Seconds of the next re-split, as far as known: half that of the last, half those before,
        and changed as the step of the mean rank has changed since (a quarter to four times).
    steps_left : int or None
        None where the end of the run is not known.
    saved, lost : float
        The two sums of the module, in seconds.

    Examples
    --------
    >>> rule = Regret(cost=10.0)
    >>> [rule.after_step(0.2 * n, 0.0) for n in range(1, 12)].index(True) + 1
    10
    """

    cost: float
    steps_left: int | None = None
    saved: float = 0.0
    lost: float = 0.0
    _sums: list[float] = field(default_factory=lambda: [0.0])
    _recent: tuple[float, ...] = ()
    _fresh: float = float("inf")
    _forecast: Forecast = field(default_factory=Forecast)
    _before: float | None = None
    _patience: float = 1.0
    _n_resplits: int = 0
    _last_cost: float = 0.0
    _last_mean: float = 0.0
    _mean: float = 0.0

    def __post_init__(self) -> None:
        self._last_cost = self.cost

    def after_step(self, slowest: float, mean: float) -> bool:
        """Add the step to both sums and compare."""
        self._mean, self._last_mean = mean, self._last_mean or mean
        if mean > 0:
            self.cost = self._last_cost * min(_GROWTH, max(1 / _GROWTH, mean / self._last_mean))
        loss = self._forecast.add(slowest - mean, grave=_GRAVE * self.cost)
        self._sums.append(self._sums[-1] + loss)
        self._recent = (*self._recent[-2:], loss)
        self._fresh = min(self._fresh, sum(self._recent) / len(self._recent))
        n, level, left = len(self._sums) - 1, self._forecast.next, float("inf")
        if self.steps_left is not None:
            self.steps_left -= 1
            left = max(0, self.steps_left)
        counted = int(min(n, left))
        self.saved = level * counted - self._sums[counted]
        self.lost = self._sums[-1] - n * self._fresh
        still = (level - self._fresh) * left if level > self._fresh else 0.0
        return left > 0 and (
            self.saved >= self.cost
            or (self.lost >= self._patience * self.cost and still >= self.cost)
        )

    def after_resplit(self, cost: float) -> None:
        """Judge the last re-split by what it earned, and begin anew."""
        n = len(self._sums) - 1
        if self._before is not None:
            earned = self._before * n - self._sums[-1] >= self.cost
            self._patience = 1.0 if earned else min(2.0 * self._patience, _MOST_PATIENCE)
        self._before = self._forecast.next
        self.cost = (self.cost + cost) / 2 if self._n_resplits else cost
        self._n_resplits += 1
        self._last_cost, self._last_mean = self.cost, self._mean
        self._sums, self._recent, self._fresh = [0.0], (), float("inf")
        self._forecast, self.saved, self.lost = self._forecast.anew(), 0.0, 0.0
