"""A database with something to tell: readings with faults, and figures for them."""

from hub.store import figures, readings
from hub.store import inventory as store_inventory
from hub.store.append import append
from hub.store.arrivals import Arrival
from hub.store.figures import Entry, Written
from hub.store.layout import DAY_MS

# 2026-06-01T00:00:00Z, and a minute.
JUNE = 1_780_272_000_000
MINUTE = 60_000


def filled(connection):
    """Three days of readings of two nodes with a code, a spike and a gap; figures for them; one day sealed."""
    ids = store_inventory.node_ids(connection)
    for node, number in ids.items():
        if node == "weir-gauge":
            continue
        log = {}
        for n in range(0, 3 * 1440, 60):
            log[JUNE + n * MINUTE] = {"pack_temperature": 20.0 + n / 4000, "pack_current": 0.125, "pack_voltage": 10.5}
        log[JUNE + 1] = {"pack_current": 0.125}
        log[JUNE + 600 * MINUTE] = {"pack_temperature": -127.0, "pack_current": 0.25}
        for n in range(1, 9):
            log[JUNE + (1430 + n) * MINUTE] = {"pack_temperature": 60.0 if n == 5 else 21.0}
        append(connection, [Arrival(number, JUNE, log)])
        readings.seal(connection, number, JUNE + DAY_MS)
        for day in range(3):
            at = JUNE + day * DAY_MS
            entry = Entry(at, at + DAY_MS, f"2026-06-0{day + 1}", "d", "{}", None)
            figure = {"coverage": 1.0, "observed_s": 86400.0, "bridged_s": 0.0, "pack_id": 1, "discharge_ah": 0.6}
            charge = {"start_ms": at + 1, "evidence": "{}", "pack_id": 1, "charge_ah": 1.0 / 3.0, "full_at_ms": at + 5}
            figures.write(connection, number, Written(entry, figure, [charge]))
