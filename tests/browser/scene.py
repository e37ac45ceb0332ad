"""A book with something of everything: what is well, what needs a person, gaps, no pack, nothing heard."""

from pathlib import Path

from web.builders import DAY_MS, MINUTE_MS, NOW_MS, ZONE, Hub, Weather, a_hub, rows

from hub.settings import Web
from hub.store import figures

HOUR_MS = 60 * MINUTE_MS


def scene(folder: Path) -> Hub:
    """The store, filled."""
    hub = a_hub(folder, Web(listen="127.0.0.1:0"))
    sites = (("ridge", 51.2), ("reservoir", 53.1), ("long-meadow", 52.4))
    nodes = (
        ("ridge-east", "ridge", "R-07"),
        ("ridge-mast", "ridge", "R-03"),
        ("reservoir-gauge", "reservoir", "W-11"),
        ("meadow-gate", "long-meadow", "M-02"),
        ("meadow-recorder", "long-meadow", None),
        ("meadow-spare", "long-meadow", None),
    )
    hub.load(
        rows(
            site=[
                {"name": name, "latitude": latitude, "longitude": -1.9, "timezone": ZONE} for name, latitude in sites
            ],
            node=[
                {
                    "name": name,
                    "site": site,
                    "interval_s": 60.0,
                    "panel_power_w": 10.0,
                    "panel_tilt_deg": 35.0,
                    "panel_azimuth_deg": 180.0,
                }
                for name, site, _ in nodes
            ],
            pack=[
                {"label": label, "designation": "HR6", "cells_in_series": 8, "rated_capacity_ah": 2.4}
                for _, _, label in nodes
                if label
            ],
            fitting=[
                {"pack": label, "node": name, "start_ms": NOW_MS - 92 * DAY_MS} for name, _, label in nodes if label
            ],
        )
    )
    mixed = [Weather(clouds=c, sun=s) for c, s in ((0.1, 1), (0.3, 0.9), (0.2, 0.95), (0.5, 0.6), (0.1, 1), (0.3, 0.8))]
    hub.simulate("ridge-east", 30, pack="R-07", weathers=mixed, seed=3)
    hub.simulate("ridge-mast", 9, pack="R-03", weathers=mixed[::-1], seed=4, gaps=[(5.3, 4.9), (2.1, 1.9)])
    dull = [Weather(sun=0.16, clouds=0.4, night_c=4, noon_c=11)]
    hub.simulate("reservoir-gauge", 12, pack="W-11", weathers=dull, seed=5)
    hub.simulate("meadow-gate", 9, pack="M-02", weathers=mixed, seed=6, until_ms=NOW_MS - 31 * HOUR_MS)
    hub.simulate("meadow-recorder", 4, cells=None, pack=None, weathers=mixed, seed=7)
    hot = {"pack_voltage": 11.62, "pack_current": 0.51, "pack_temperature": 56.2, "air_temperature": 24.9}
    hub.append("ridge-mast", {NOW_MS - 20_000 + i: hot for i in range(3)})
    hub.set_aside("ridge-mast", "future", "A reading is dated 2026-06-02T03:00:00Z, which has not come yet.", 3)
    hub.set_aside("ridge-mast", "malformed", "The message is not JSON: it ends in the middle of a record.")
    hub.set_aside("barn-door", "unknown-node", "There is no node barn-door in the inventory.", 2)
    _findings(hub, "reservoir-gauge")
    hub.account()
    return hub


def _findings(hub: Hub, node: str) -> None:
    """Twelve values of one day that a thermometer cannot have meant."""
    with hub.database.write() as connection:
        entry = list(figures.entries(connection, hub.ids[node]).values())[-3]
        day = dict(figures.days(connection, hub.ids[node], entry.date, entry.date)[0])
        for key in ("node_id", "start_ms", "end_ms", "date", "pack"):
            del day[key]
        finding = {
            "quantity": "pack_temperature",
            "reason": "power-on",
            "count": 12,
            "first_ms": entry.start_ms + 6 * HOUR_MS,
            "last_ms": entry.start_ms + 9 * HOUR_MS,
        }
        figures.write(connection, hub.ids[node], figures.Written(entry, day, [], [finding]))
