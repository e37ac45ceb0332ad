"""Gathering what is known of a node from the store."""

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from zoneinfo import ZoneInfo

import numpy as np

from hub.series import Floats, Series
from hub.store import figures, measured, readings
from hub.store.engine import Database
from hub.store.inventory import Calibration, Fitting, Inventory, Node, Pack
from hub.web.days import Row, by_date, date_back, last_days, local_date, start_of
from hub.web.glance import End, Glance, Latest
from hub.web.reduction import Binned
from hub.web.traces import Traces
from hub.web.words import DAY_MS, HOUR_MS

SPAN_MS = 7 * DAY_MS
DAYS_BACK = 7
# A last full charge is looked for so far back where the last days have none.
LOOK_BACK_MS = 60 * DAY_MS


@dataclass(frozen=True, slots=True)
class Subject:
    """A node with everything of the inventory that bears on its readings."""

    node: Node
    node_id: int
    zone: ZoneInfo
    fittings: tuple[Fitting, ...]
    calibrations: tuple[Calibration, ...]
    packs: Mapping[str, Pack]

    def fitting_at(self, time_ms: int) -> Fitting | None:
        """The fitting of an instant."""
        for fitting in self.fittings:
            if fitting.start_ms <= time_ms and (fitting.end_ms is None or fitting.end_ms > time_ms):
                return fitting
        return None

    def pack_at(self, time_ms: int) -> Pack | None:
        """The pack in the node at an instant."""
        fitting = self.fitting_at(time_ms)
        return self.packs[fitting.pack] if fitting is not None else None

    def cells_at(self, times_ms: Floats) -> Floats:
        """Cells in series at instants, NaN while no pack was fitted."""
        cells = np.full(times_ms.size, np.nan)
        for fitting in self.fittings:
            inside = times_ms >= fitting.start_ms
            if fitting.end_ms is not None:
                inside &= times_ms < fitting.end_ms
            cells[inside] = self.packs[fitting.pack].cells_in_series
        return cells


def subject(known: Inventory, node: Node, node_id: int) -> Subject:
    """A node with what bears on it."""
    return Subject(
        node,
        node_id,
        ZoneInfo(known.site_of(node).timezone),
        known.fitted(node.name),
        tuple(c for c in known.calibrations if c.node == node.name),
        {pack.label: pack for pack in known.packs},
    )


def traces_of(database: Database, traces: Traces, who: Subject, start_ms: int, end_ms: int) -> dict[str, Binned]:
    """A node's traces in columns of 15 min, ``cell_voltage`` among them."""
    with database.read() as connection:
        found = traces.get(
            who.node_id,
            start_ms,
            end_ms,
            revision=partial(readings.newest_revision, connection, who.node_id),
            read=lambda start, end: (
                measured.read(
                    connection, who.node_id, start, end, who.calibrations, who.node.current_full_scale_a
                ).series
            ),
            conditions=(who.calibrations, who.node.current_full_scale_a),
        )
    return found | {"cell_voltage": per_cell(found["pack_voltage"], who)}


def per_cell(voltage: Binned, who: Subject) -> Binned:
    """Voltage of a cell; nothing while no pack was fitted."""
    middles = voltage.start_ms + (np.arange(len(voltage), dtype=np.float64) + 0.5) * voltage.step_ms
    return voltage.scaled(who.cells_at(middles))


def glance_of(
    database: Database,
    traces: Traces,
    known: Inventory,
    who: Subject,
    *,
    now_ms: int,
    end_ms: int,
    presence: str | None,
    set_aside: Mapping[str, int],
) -> Glance:
    """Everything known of a node at a glance; ``end_ms`` is where its strip ends."""
    since = date_back(now_ms, who.zone, DAYS_BACK)
    since_ms = start_of(since, who.zone)
    drawn = traces_of(database, traces, who, end_ms - SPAN_MS, end_ms)
    with database.read() as connection:
        bounds = readings.bounds(connection, who.node_id)
        newest = Series(np.empty(0, np.int64))
        if bounds is not None:
            newest = measured.read(
                connection,
                who.node_id,
                bounds[1] - HOUR_MS,
                bounds[1] + 1,
                who.calibrations,
                who.node.current_full_scale_a,
            ).series
        days = by_date(figures.days(connection, who.node_id, since.isoformat()))
        charges = figures.charges(connection, who.node_id, since_ms - DAY_MS)
        findings = figures.findings(connection, who.node_id, since_ms)
        pack = who.pack_at(now_ms)
        full = _last_full(charges, pack)
        if full is None and pack is not None:
            full = _last_full(figures.charges(connection, who.node_id, now_ms - LOOK_BACK_MS), pack)
    today = local_date(now_ms, who.zone)
    first = local_date(bounds[0], who.zone).isoformat() if bounds else today.isoformat()
    counted: Counter[tuple[str, str]] = Counter()
    for row in findings:
        counted[row["quantity"], row["reason"]] += row["count"]
    return Glance(
        node=who.node,
        site=known.site_of(who.node),
        zone=who.zone,
        pack=pack,
        fitting=who.fitting_at(now_ms),
        last_ms=bounds[1] if bounds else None,
        latest=latest_of(newest, pack),
        peak_temperature=_peak(drawn["pack_temperature"], now_ms),
        presence=presence,
        # The first day is never whole.
        days=tuple(day for day in last_days(days, today, DAYS_BACK) if day.date > first),
        today=days.get(today.isoformat()),
        last_full_ms=full,
        ends=ends_of(charges),
        findings=counted,
        set_aside=set_aside,
        traces={name: drawn[name] for name in ("cell_voltage", "pack_temperature")},
    )


def latest_of(series: Series, pack: Pack | None) -> dict[str, Latest]:
    """The newest value of each quantity, and of the cell voltage where the pack is known."""
    found: dict[str, Latest] = {}
    for name, values in series.columns.items():
        at = np.flatnonzero(np.isfinite(values))
        if at.size:
            found[name] = Latest(int(series.time_ms[at[-1]]), float(values[at[-1]]))
    if pack is not None and "pack_voltage" in found:
        voltage = found["pack_voltage"]
        found["cell_voltage"] = Latest(voltage.time_ms, voltage.value / pack.cells_in_series)
    return found


def ends_of(charges: Iterable[Row]) -> tuple[End, ...]:
    """Ends of charge sessions: at the instant the pack was full where it was, at the session's end where not."""
    return tuple(
        End(
            row["full_at_ms"] if row["full_at_ms"] is not None else row["end_ms"],
            row["full_at_ms"] is not None,
            row["confidence"],
            row["ended_by"],
        )
        for row in charges
        if row["full_at_ms"] is not None or row["end_ms"] is not None
    )


def _last_full(charges: Sequence[Row], pack: Pack | None) -> int | None:
    if pack is None:
        return None
    full = [row["full_at_ms"] for row in charges if row["full_at_ms"] is not None and row["pack"] == pack.label]
    return max(full, default=None)


def _peak(temperature: Binned, now_ms: int) -> Latest | None:
    """The highest temperature of the last 24 h, at the middle of its column."""
    first = max(0, (now_ms - DAY_MS - temperature.start_ms) // temperature.step_ms)
    high = temperature.high[first:]
    if not np.isfinite(high).any():
        return None
    at = int(np.nanargmax(high))
    middle = temperature.start_ms + round((first + at + 0.5) * temperature.step_ms)
    return Latest(min(middle, now_ms), float(high[at]))
