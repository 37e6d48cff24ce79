"""Numbers as people read them, the same on the screen and in a report page."""

from __future__ import annotations

__all__ = ["amount", "counted", "duration", "number", "percent", "seconds"]


def number(value: float | None) -> str:
    """Write a number for people: whole ones in full, others to three digits, none as a dash."""
    if value is None:
        return "-"
    if isinstance(value, int):
        return f"{value:,}"
    if value and not 1e-3 <= abs(value) < 1e6:
        return f"{value:.2e}"
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.3g}"


def counted(count: float | None, what: str) -> str:
    """Write a count with its noun: 1 cell, 2,784 cells."""
    return f"{number(count)} {what}{'' if count == 1 else 's'}"


def percent(share: float | None) -> str:
    """Write a share in per cent."""
    if share is None:
        return "-"
    return f"{100 * share:.3g} %" if share < 10 else f"{number(100.0 * share)} %"


def seconds(value: float | None) -> str:
    """Write a time with the unit that suits it."""
    if value is None:
        return "-"
    for unit, size in (("s", 1.0), ("ms", 1e-3), ("us", 1e-6)):
        if value >= size:
            return f"{value / size:.3g} {unit}"
    return f"{value:.3g} s"


def duration(value: float | None) -> str:
    """Write a long time."""
    for unit, size in (("d", 86_400.0), ("h", 3_600.0), ("min", 60.0)):
        if value is not None and value >= 2 * size:
            return f"{value / size:.3g} {unit}"
    return seconds(value)


def amount(value: float | None) -> str:
    """Write an amount of memory with the unit that suits it."""
    if value is None:
        return "-"
    for unit, size in (("GB", 1e9), ("MB", 1e6)):
        if value >= size:
            return f"{value / size:.3g} {unit}"
    return f"{value / 1e3:.0f} kB"
