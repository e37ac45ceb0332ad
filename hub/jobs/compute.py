"""One window's figures, from readings and inventory to the rows of the figure tables. No database, no clock."""

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, fields
from typing import Any

from hub.battery.charges import ChargeSession
from hub.battery.day import Carried, DayResult, analyse
from hub.battery.spec import NodeSpec, PackSpec, Window
from hub.jobs.windows import DayWindow
from hub.solar.clearsky import ClearSky, Panel
from hub.solar.harvest import harvest, harvest_ratio, idle_stretches
from hub.store.inventory import Calibration, Inventory, Node, Pack, Site
from hub.telemetry.screening import Screened


@dataclass(frozen=True, slots=True)
class Subject:
    """A window with everything about its hardware that its figures depend on.

    Attributes
    ----------
    window
        The stretch of time and the pack's label.
    until_ms
        How far of the window has happened: its end, or the node's newest reading where that lies inside. What has not
        happened yet is neither covered nor missing.
    node, pack
        As the battery figures need them.
    panel
        The panel and where it stands; ``None`` where its power or direction is not stated.
    calibrations
        Those that apply before the window ends.
    full_scale_current_a
        End of the current sensor's range, where it is stated.
    """

    window: DayWindow
    until_ms: int
    node: NodeSpec
    pack: PackSpec | None
    pack_leaves: bool
    panel: Panel | None
    calibrations: tuple[Calibration, ...]
    full_scale_current_a: float | None


def subject_of(known: Inventory, node: Node, window: DayWindow, newest_ms: int) -> Subject:
    """What the inventory says about a window; ``newest_ms`` is the node's newest reading."""
    pack = None if window.pack is None else known.pack(window.pack)
    leaves = any(f.pack == window.pack and f.end_ms == window.end_ms for f in known.fitted(node.name))
    return Subject(
        window,
        min(window.end_ms, newest_ms + 1),
        _node_spec(node),
        _pack_spec(pack),
        leaves,
        _panel(known.site_of(node), node),
        tuple(c for c in known.calibrations if c.node == node.name and c.start_ms < window.end_ms),
        node.current_full_scale_a,
    )


def _pack_spec(pack: Pack | None) -> PackSpec | None:
    if pack is None:
        return None
    return PackSpec(pack.label, pack.cells_in_series, pack.cells_in_parallel, pack.rated_capacity_ah)


def _node_spec(node: Node) -> NodeSpec:
    """Sensing of a node; what the inventory does not state keeps the default for common parts."""
    stated = {f.name: value for f in fields(NodeSpec) if (value := getattr(node, f.name)) is not None}
    return NodeSpec(**stated)


def _panel(site: Site, node: Node) -> Panel | None:
    if node.panel_power_w is None or node.panel_tilt_deg is None or node.panel_azimuth_deg is None:
        return None
    stated = (
        {}
        if node.panel_temperature_coefficient is None
        else {"temperature_coefficient": node.panel_temperature_coefficient}
    )
    return Panel(
        latitude=site.latitude,
        longitude=site.longitude,
        altitude_m=site.altitude_m,
        power_w=node.panel_power_w,
        tilt_deg=node.panel_tilt_deg,
        azimuth_deg=node.panel_azimuth_deg,
        **stated,
    )


@dataclass(frozen=True, slots=True)
class Result:
    """Rows of the figure tables without their keys, and what the next window needs.

    ``day`` is ``None`` where the window has no reading.
    """

    day: Mapping[str, Any] | None
    charges: Sequence[Mapping[str, Any]]
    findings: Sequence[Mapping[str, Any]]
    carried: Carried
    newest_ms: int | None


def compute(found: Screened, subject: Subject, carried: Carried, sky: ClearSky | None) -> Result:
    """Figures of one window.

    Parameters
    ----------
    found
        Calibrated and screened readings of the window and around it.
    subject
        The window and its hardware.
    carried
        What the window before handed on.
    sky
        Clear-sky power of the panel up to ``subject.until_ms``; ``None`` where the panel is not described.
    """
    start, end = subject.window.start_ms, subject.until_ms
    inside = found.series.between(start, end)
    if not len(inside):
        return Result(None, [], [], carried, None)
    window = Window(start, end, subject.pack_leaves)
    result = analyse(found.series, window, subject.node, subject.pack, carried)
    return Result(
        {**asdict(result.figures), **_harvest(found, subject, sky, result)},
        [_charge_row(session) for session in result.sessions],
        _finding_rows(found, start, end),
        result.carried,
        int(inside.time_ms[-1]),
    )


def _charge_row(session: ChargeSession) -> dict[str, Any]:
    row = asdict(session)
    row["evidence"] = json.dumps(session.evidence, sort_keys=True)
    return row


def _finding_rows(found: Screened, start_ms: int, end_ms: int) -> list[dict[str, Any]]:
    rows = []
    for finding in found.findings:
        times = finding.time_ms[(finding.time_ms >= start_ms) & (finding.time_ms < end_ms)]
        if times.size:
            rows.append(
                {
                    "quantity": finding.quantity,
                    "reason": finding.reason,
                    "count": int(times.size),
                    "first_ms": int(times[0]),
                    "last_ms": int(times[-1]),
                }
            )
    return rows


def _harvest(found: Screened, subject: Subject, sky: ClearSky | None, result: DayResult) -> dict[str, float | None]:
    window = Window(subject.window.start_ms, subject.until_ms)
    taken = harvest(found.series, window, subject.node)
    if sky is None:
        return {"panel_wh": taken.panel_wh, "clear_sky_wh": None, "harvest_ratio": None}
    idle = idle_stretches(result.sessions, window)
    return {
        "panel_wh": taken.panel_wh,
        "clear_sky_wh": sky.energy_wh,
        "harvest_ratio": harvest_ratio(found.series, window, subject.node, sky, idle),
    }
