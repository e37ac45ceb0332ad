"""Throughput: equivalent full cycles, which are charge taken out over rated capacity.

Charge put in does not count: the charge factor of these cells would inflate the number by a third. The 48 cycles of the
endurance test of IEC 61951-2 take out 28 times the rated capacity, so they are 28 equivalent full cycles.
"""

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Throughput:
    """One local date of a pack: what was taken out, and equivalent full cycles up to its end."""

    date: str
    discharge_ah: float
    equivalent_full_cycles: float


def equivalent_full_cycles(discharge_ah: float, rated_capacity_ah: float) -> float:
    """Equivalent full cycles of a discharged charge."""
    return discharge_ah / rated_capacity_ah


def throughput(days: Iterable[tuple[str, float | None]], rated_capacity_ah: float) -> list[Throughput]:
    """Throughput by date, cumulative from the first day given.

    Parameters
    ----------
    days
        Local date and discharged charge in Ah of each window of the pack, in order of time; a date may come more than
        once, from several nodes. Windows whose discharge is not known add nothing and make no row by themselves.
    rated_capacity_ah
        Of the pack.
    """
    by_date: dict[str, float] = {}
    for date, discharge_ah in days:
        if discharge_ah is not None:
            by_date[date] = by_date.get(date, 0.0) + discharge_ah
    rows = []
    total = 0.0
    for date in sorted(by_date):
        total += by_date[date]
        rows.append(Throughput(date, by_date[date], equivalent_full_cycles(total, rated_capacity_ah)))
    return rows
