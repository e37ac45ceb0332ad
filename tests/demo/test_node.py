"""Firmware: boots, sequences, stamps, totals, outages."""

import datetime as dt
from dataclasses import replace

import numpy as np
import pytest

from hub.demo.cell import Pack, PackDesign
from hub.demo.charger import Direct, Panel
from hub.demo.clock import YEAR_2000_S, Clock, Wrong
from hub.demo.load import Load
from hub.demo.node import SWAP_MS, Event, Fitout, Node, Stretch
from hub.demo.plant import Plant
from hub.demo.sky import Place, Region

PLACE = Place(43.3, 11.9, 240.0)
START_MS = round(dt.datetime(2026, 5, 1, 4, tzinfo=dt.UTC).timestamp()) * 1000
HOUR_MS = 3_600_000
FITOUT = Fitout(("pack_voltage", "pack_current", "pack_temperature"), clock=Clock(0.0))
TIMES = START_MS + np.arange(1, 481, dtype=np.int64) * 60_000


def node(fitout: Fitout = FITOUT, events: tuple[Event, ...] = (), load: Load | None = None, level: float = 0.6) -> Node:
    plant = Plant(
        Region(5, PLACE),
        PLACE,
        Panel(3.0, 11.0, 0.33, tilt_deg=45.0, facing_deg=180.0),
        Direct(),
        load or Load(0.02),
        Pack(PackDesign(4, 2.0), level, 12.0),
        START_MS,
    )
    return Node("weir-test", plant, fitout, 9, events)


def played(made: Node, readings: int = 60) -> list[Stretch]:
    stretches = []
    for stretch in made.run(TIMES):
        stretches.append(stretch)
        made.post(stretch, readings)
    return stretches


def sent(made: Node) -> list[tuple[int, int, int, int]]:
    """Boot, sequence, first and last instant of every message, in the order of sending."""
    out = []
    while (packet := made.outbox.due(0.0, 10_000, 20.0)) is not None:
        made.outbox.sent(packet, 0.0)
        out.append((packet.boot, packet.sequence, packet.true_ms[0], packet.true_ms[-1]))
    return out


def test_messages_count_from_one_and_hold_sixty_readings() -> None:
    made = node()
    played(made)
    messages = sent(made)
    assert [(b, s) for b, s, *_ in messages] == [(1, k) for k in range(1, 9)]
    assert messages[0][2:] == (TIMES[0], TIMES[59])
    assert messages[-1][3] == TIMES[-1]


def test_the_first_reading_of_a_boot_shows_the_thermometers_power_on_value() -> None:
    (stretch,) = played(node())
    assert stretch.columns["pack_temperature"][0] == 85.0
    assert stretch.columns["pack_temperature"][1:].max() < 40.0
    assert stretch.columns["uptime"][:3].tolist() == [4.0, 64.0, 124.0]


def test_a_restart_begins_a_new_boot() -> None:
    made = node(events=(Event(START_MS + 2 * HOUR_MS + 1000, "restart"),))
    before, after = played(made)
    assert set(before.boot) == {1}
    assert set(after.boot) == {2}
    assert after.time_ms[0] == START_MS + 2 * HOUR_MS + 60_000
    assert after.columns["pack_temperature"][0] == 85.0
    assert after.columns["uptime"][0] == 4.0
    assert [(b, s) for b, s, *_ in sent(made)][:4] == [(1, 1), (1, 2), (2, 1), (2, 2)]


def test_a_swap_leaves_a_gap_and_another_pack() -> None:
    fresh = Pack(PackDesign(4, 2.4), 0.95)
    at = START_MS + 3 * HOUR_MS
    made = node(events=(Event(at, "swap", fresh),))
    before, after = played(made)
    assert made.plant.pack is fresh
    assert after.time_ms[0] == at + SWAP_MS
    assert set(after.boot) == {2}
    assert after.columns["pack_voltage"][0] > before.columns["pack_voltage"][-1]


def test_a_node_without_power_is_silent_and_comes_back_as_a_new_boot() -> None:
    made = node(load=Load(0.25), level=0.12)
    stretches = played(made)
    count = sum(s.time_ms.size for s in stretches)
    assert count < TIMES.size
    assert made.boot > 1
    assert sum(p[3] - p[2] + 60_000 for p in sent(made)) == count * 60_000


def test_the_reading_is_that_of_the_instant_whatever_the_pieces() -> None:
    whole = np.concatenate([s.columns["pack_voltage"] for s in node().run(TIMES)])
    other = node()
    parts = [s.columns["pack_voltage"] for t in np.array_split(TIMES, 13) for s in other.run(t)]
    assert np.array_equal(np.concatenate(parts), whole)


def test_totals_follow_the_nodes_own_readings_and_restart_at_zero() -> None:
    made = node(replace(FITOUT, totals=True), (Event(START_MS + 5 * HOUR_MS, "restart"),))
    before, after = played(made)
    amps = before.columns["pack_current"]
    assert before.columns["charge_in"][-1] == pytest.approx(np.maximum(amps, 0.0).sum() / 60.0, abs=1e-4)
    assert before.columns["charge_out"][-1] == pytest.approx(np.maximum(-amps, 0.0).sum() / 60.0, abs=1e-4)
    assert after.columns["charge_in"][0] == 0.0
    assert (np.diff(after.columns["charge_in"]) >= 0.0).all()


def test_totals_do_not_depend_on_the_pieces() -> None:
    fitout = replace(FITOUT, totals=True)
    whole = np.concatenate([s.columns["charge_out"] for s in node(fitout).run(TIMES)])
    other = node(fitout)
    parts = [s.columns["charge_out"] for t in np.array_split(TIMES, 7) for s in other.run(t)]
    assert np.concatenate(parts) == pytest.approx(whole, abs=2e-5)


def test_a_backlog_follows_the_first_message_after_an_outage() -> None:
    made = node(replace(FITOUT, outages=((START_MS + 2 * HOUR_MS, START_MS + 5 * HOUR_MS),)))
    played(made)
    assert [s for _, s, *_ in sent(made)] == [1, 5, 2, 3, 4, 6, 7, 8]


def test_a_wrong_clock_stamps_wrongly_and_keeps_counting() -> None:
    wrong = Wrong("year-2000", START_MS + 2 * HOUR_MS, START_MS + 4 * HOUR_MS)
    (stretch,) = played(node(replace(FITOUT, clock=Clock(0.0, wrong=(wrong,)))))
    assert stretch.stamp_s[119] == YEAR_2000_S
    assert stretch.stamp_s[239] * 1000 == stretch.time_ms[239]


def test_a_message_never_mixes_readings_with_and_without_a_clock() -> None:
    wrong = Wrong("none", START_MS + 90 * 60_000, START_MS + 200 * 60_000)
    made = node(replace(FITOUT, clock=Clock(0.0, wrong=(wrong,))))
    played(made)
    kinds = []
    while (packet := made.outbox.due(0.0, 10_000, 20.0)) is not None:
        made.outbox.sent(packet, 0.0)
        kinds.append((packet.stamp_s is None, len(packet.true_ms)))
    assert kinds[:4] == [(False, 60), (False, 29), (True, 60), (True, 50)]


def test_a_poor_link_repeats_its_share() -> None:
    made = node(replace(FITOUT, repeats=0.25))
    played(made, readings=1)
    packets = list(made.outbox._waiting)
    share = sum(made.twice(p) for p in packets) / len(packets)
    assert 0.15 < share < 0.35
    assert not any(node().twice(p) for p in packets)
