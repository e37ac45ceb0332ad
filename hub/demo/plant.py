"""One site as physics: sky, panel, charger, load, box and pack, advanced from instant to instant."""

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from hub.demo.cell import Pack
from hub.demo.charger import DARK_W, Charger, Panel
from hub.demo.load import Load
from hub.demo.sky import Place, Region

Floats = npt.NDArray[np.float64]
Times = npt.NDArray[np.int64]

# A node lets go of its load below the first and comes back at the second, volts per cell.
SHED_V: Final = 1.0
RETURN_V: Final = 1.26
# The first columns of a step, in its order.
_SEEN: Final = (
    "pack_voltage",
    "pack_current",
    "pack_temperature",
    "panel_voltage",
    "panel_current",
    "load_current",
    "charger_duty",
    "charge_target",
)


@dataclass(frozen=True, slots=True)
class Course:
    """What was true at instants, each of shape (n,).

    ``columns`` has the quantities a sensor can see, under their names; duty and target are NaN for a charger without.
    ``powered`` says whether the node was running. The rest no sensor sees: mean ``level`` and ``capacity_ah`` of the
    cells, share of the charging current stored (``acceptance``), and running totals of the charge through the
    terminals and into oxygen.
    """

    time_ms: Times
    columns: dict[str, Floats]
    powered: npt.NDArray[np.bool_]
    level: Floats
    capacity_ah: Floats
    acceptance: Floats
    in_ah: Floats
    out_ah: Floats
    overcharge_ah: Floats


class Plant:
    """A site's hardware.

    Parameters
    ----------
    box_rise_k
        How much warmer than the weather the air beside the pack is in full sun (1000 W/m²).
    start_ms
        The instant the given pack is in the state it is in.
    """

    def __init__(
        self,
        region: Region,
        place: Place,
        panel: Panel,
        charger: Charger,
        load: Load,
        pack: Pack,
        start_ms: int,
        box_rise_k: float = 4.0,
    ) -> None:
        self.region, self.place, self.panel = region, place, panel
        self.charger, self.load, self.pack = charger, load, pack
        self.box_rise_k = box_rise_k
        self.time_ms = start_ms
        self.powered = True

    def swap(self, pack: Pack) -> Pack:
        """Put another pack in, at the temperature of the old; the pack that came out."""
        out, self.pack = self.pack, pack
        pack.temperature_c = out.temperature_c
        return out

    def run(self, time_ms: Times) -> Course:
        """Advance to each instant in turn; they must increase and lie after ``self.time_ms``.

        Currents are the means of the step that ends at the instant, which is what a node that averages its shunt
        monitor between readings reports; voltages and temperatures are those at its end.
        """
        edges = np.concatenate(([self.time_ms], time_ms)) / 1000.0
        light = self.region.light(edges[1:], self.place)
        plane = light.on_panel(self.panel.tilt_deg, self.panel.facing_deg, self.panel.horizon_deg).tolist()
        load = self.load.mean_a(edges[:-1], edges[1:], light.elevation_deg, self.place.longitude)
        box = light.air_c + self.box_rise_k * light.horizontal_w / 1000.0
        rows = [
            self._step(*given)
            for given in zip(
                plane, light.air_c.tolist(), box.tolist(), load.tolist(), np.diff(edges).tolist(), strict=True
            )
        ]
        self.time_ms = int(time_ms[-1]) if time_ms.size else self.time_ms
        columns = np.array(rows, np.float64).reshape(-1, 15).T
        seen = {name: columns[k] for k, name in enumerate(_SEEN)} | {"air_temperature": box}
        return Course(time_ms, seen, columns[8] > 0.0, *columns[9:])

    def _step(self, plane_w: float, air_c: float, box_c: float, load_a: float, dt_s: float) -> tuple[float, ...]:
        pack = self.pack
        load_a = load_a if self.powered else 0.0
        given = self.charger.deliver(self.panel.lit(plane_w, air_c), *pack.source(), load_a, dt_s)
        current = given.charge_a - load_a
        volts = pack.step(current, box_c, dt_s)
        self.charger.watch(volts, pack.temperature_c, current, plane_w < DARK_W, dt_s)
        per_cell = volts / pack.design.cells
        self.powered = per_cell > SHED_V if self.powered else per_cell >= RETURN_V
        return (
            volts,
            current,
            pack.temperature_c,
            given.panel_v,
            given.panel_a,
            load_a,
            np.nan if given.duty is None else given.duty,
            np.nan if given.target_a is None else given.target_a,
            float(self.powered),
            pack.level,
            sum(pack.capacity_ah) / pack.design.cells,
            pack.acceptance,
            pack.in_ah,
            pack.out_ah,
            pack.overcharge_ah,
        )
