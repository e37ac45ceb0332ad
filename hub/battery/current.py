"""The current into the pack, from what a node's sensors see of it."""

from dataclasses import dataclass, replace

import numpy as np

from hub.battery.spec import NodeSpec
from hub.series import Floats, Mask, Series

# A long rest: an hour of readings in which the true current is known.
REST_S = 3600.0
SIGNIFICANT = 3.0
# More than this many times the stated offset is no offset: the load is not what it is taken for.
PLAUSIBLE = 6.0
# What stays uncertain after an offset has been found: it drifts with temperature.
RESIDUAL = 0.25
# A panel below this share of the pack's voltage cannot charge it.
DARK = 0.5


@dataclass(frozen=True, slots=True)
class PackCurrent:
    """Readings whose ``pack_current`` is the net current of the pack.

    Attributes
    ----------
    series
        Readings with that column.
    node
        The node, with what is left of the offset's uncertainty.
    load_known
        Whether the load is in the net current; otherwise only charging is known.
    offset_a
        Sensor offset that was taken off the readings; ``None`` where none was found.
    """

    series: Series
    node: NodeSpec
    load_known: bool
    offset_a: float | None


def pack_current(series: Series, node: NodeSpec, offset_a: float | None) -> PackCurrent:
    """Take off the offset, and the load where the sensor does not see it."""
    measured = series.get("pack_current")
    net = measured - (offset_a or 0.0)
    load_known = node.current_sensing == "net"
    if not load_known:
        load = series.get("load_current")
        if np.isfinite(load).any():
            net = net - load
            load_known = True
        elif node.standing_load_a > 0.0:
            net = net - node.standing_load_a
            load_known = True
        else:
            net = np.maximum(net, 0.0)
    if offset_a is not None:
        node = replace(node, current_offset_a=RESIDUAL * node.current_offset_a)
    return PackCurrent(replace(series, columns={**series.columns, "pack_current": net}), node, load_known, offset_a)


def rest_offset_a(series: Series, node: NodeSpec) -> float | None:
    """Offset of the current sensor from rests: charger off, load known. ``None`` without enough rest.

    A found offset that is not significant is 0.0: known to be small, and nothing is taken off.
    """
    current = series.get("pack_current")
    expected = np.zeros(len(series)) if node.current_sensing == "charge-only" else -series.get("load_current")
    deviation = current - expected
    rest = _charger_off(series) & np.isfinite(deviation)
    found = deviation[rest]
    if found.size * node.interval_s < REST_S:
        return None
    middle = float(np.median(found))
    spread = 1.4826 * float(np.median(np.abs(found - middle))) / np.sqrt(found.size)
    if abs(middle) > PLAUSIBLE * node.current_offset_a:
        return None
    return middle if abs(middle) > SIGNIFICANT * max(spread, _resolution(found)) else 0.0


def _charger_off(series: Series) -> Mask:
    dark = series.get("panel_voltage") < DARK * series.get("pack_voltage")
    off: Mask = dark | (series.get("charger_duty") <= 0.0)
    return off


def _resolution(values: Floats) -> float:
    """Standard uncertainty of a median on a grid: the smallest step between values, evenly spread."""
    steps = np.diff(np.unique(np.round(values, 7)))
    return float(steps.min()) / np.sqrt(12.0) if steps.size else 0.0
