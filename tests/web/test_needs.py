from dataclasses import replace
from zoneinfo import ZoneInfo

import pytest

from hub.store.inventory import Fitting, Node, Pack, Site
from hub.web import cautions
from hub.web.days import Day
from hub.web.glance import Glance, Latest
from hub.web.needs import ASIDE_REASONS, OFTEN, REASONS, needs

NOW = 1_780_315_320_000
MINUTE, HOUR, DAY = 60_000, 3_600_000, 86_400_000
WELL = Glance(
    node=Node("ridge-east", "ridge", interval_s=60.0),
    site=Site("ridge", 51.2, -1.9),
    zone=ZoneInfo("Europe/London"),
    pack=Pack("R-07", "HR6", 8, 1, 2.4),
    fitting=Fitting("R-07", "ridge-east", NOW - 92 * DAY),
    last_ms=NOW - MINUTE,
    days=tuple(Day(f"2026-05-{25 + i}", 1.0, NOW) for i in range(7)),
)


def latest(**values: float) -> dict[str, Latest]:
    return {name: Latest(NOW - MINUTE, value) for name, value in values.items()}


def told(glance: Glance) -> list[str]:
    return [need.kind for need in needs([glance], NOW)]


def only(glance: Glance):
    (need,) = needs([glance], NOW)
    return need


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


def test_a_node_that_is_well_needs_nobody():
    assert needs([WELL], NOW) == []


def test_a_hot_pack_comes_with_what_to_do_and_cautions():
    values = latest(pack_temperature=56.2, air_temperature=25.0, pack_current=0.5)
    need = only(replace(WELL, latest=values))
    assert plain(need.headline) == "Pack R-07 on ridge-east is 56 °C while charging, 31 °C above the air."
    assert "cover the panel" in need.advice
    assert need.cautions == cautions.HOT
    assert need.urgent


@pytest.mark.parametrize(("hot", "rank"), [(44.9, None), (45.0, 1), (54.9, 1), (55.0, 0), (80.0, 0)])
def test_the_makers_limits_decide_how_urgent_heat_is(hot, rank):
    # End of the charging range 45 °C, usual cut-off 55 °C (Panasonic's charge handbook for these cells).
    found = needs([replace(WELL, latest=latest(pack_temperature=hot))], NOW)
    assert [need.rank for need in found] == ([] if rank is None else [rank])


def test_a_hot_pack_that_stands_is_not_said_to_charge():
    need = only(replace(WELL, latest=latest(pack_temperature=50.0, pack_current=-0.1)))
    assert "charging" not in need.headline


def test_heat_that_has_passed_is_told_as_past():
    peak = Latest(NOW - 3 * HOUR, 47.2)
    need = only(replace(WELL, latest=latest(pack_temperature=31.0), peak_temperature=peak))
    assert plain(need.headline) == (
        "Pack R-07 on ridge-east reached 47 °C in the last 24 hours, within a quarter of an hour of 10:02 BST."
    )
    assert plain(need.advice).startswith("It is 31 °C now.")
    assert needs([replace(WELL, peak_temperature=Latest(NOW - 25 * HOUR, 47.2))], NOW) == []


def test_heat_last_heard_of_hours_ago_is_not_told_as_present():
    old = {"pack_temperature": Latest(NOW - 2 * HOUR, 56.0)}
    glance = replace(WELL, last_ms=NOW - 2 * HOUR, latest=old, peak_temperature=Latest(NOW - 2 * HOUR, 56.0))
    heat = next(need for need in needs([glance], NOW) if need.kind == "overheating")
    assert " reached " in heat.headline
    assert "not known" in heat.advice


@pytest.mark.parametrize(
    ("cold", "current", "is_told"),
    [(-5.0, 0.5, True), (-5.0, 0.1, False), (0.0, 0.5, False), (-0.1, 0.13, True), (-5.0, -0.5, False)],
)
def test_charging_a_frozen_pack_above_a_trickle(cold, current, is_told):
    # A trickle of 0.05 It is 0.12 A for a pack of 2.4 Ah.
    found = told(replace(WELL, latest=latest(pack_temperature=cold, pack_current=current)))
    assert found == (["frost-charging"] if is_told else [])


def test_a_silent_node_says_what_it_last_said():
    values = {"cell_voltage": Latest(NOW - 31 * HOUR, 1.02)}
    need = only(replace(WELL, last_ms=NOW - 31 * HOUR, latest=values))
    assert plain(need.headline) == "ridge-east has been silent for 31 h, since yesterday 06:02 BST."
    assert "may be empty" in need.advice
    assert need.urgent
    full = replace(WELL, last_ms=NOW - 31 * HOUR, latest={"cell_voltage": Latest(NOW - 31 * HOUR, 1.31)})
    assert "look at the link first" in only(full).advice
    assert "said goodbye" in only(replace(full, presence="offline")).advice


def test_a_node_that_was_never_heard_is_not_silent():
    assert needs([replace(WELL, last_ms=None)], NOW) == []


def test_a_week_without_a_full_charge():
    none = tuple(Day(f"2026-05-{25 + i}", 1.0) for i in range(7))
    assert told(replace(WELL, days=none)) == ["not-filling"]
    assert told(replace(WELL, days=none[:6])) == []
    assert told(replace(WELL, days=(*none[:6], Day("2026-05-31", 0.2)))) == []
    assert told(replace(WELL, days=none, today=Day("2026-06-01", 0.5, NOW))) == []


def test_sensor_findings_name_quantity_number_and_reason():
    need = only(replace(WELL, findings={("pack_temperature", "power-on"): 12, ("no_such_thing", "new"): 1}))
    assert "pack temperature: 12 values, the value a thermometer shows" in plain(need.advice)
    assert "no_such_thing: 1 value, new" in plain(need.advice)
    assert not need.urgent


@pytest.mark.parametrize(
    ("reason", "times", "is_told"), [("power-on", 11, False), ("power-on", 12, True), ("frozen", 1, True)]
)
def test_a_thermometer_that_starts_up_now_and_then_is_no_fault(reason, times, is_told):
    found = told(replace(WELL, findings={("pack_temperature", reason): times}))
    assert found == (["sensor-fault"] if is_told else [])


def test_what_was_set_aside_is_counted_by_reason():
    need = only(replace(WELL, set_aside={"future": 3, "malformed": 1, "brand-new": 2}))
    assert plain(need.headline) == "6 things from ridge-east could not be used in the last 7 days."
    assert "2 brand-new, 3 dated in the future and 1 not readable" in plain(need.advice)


def test_readings_without_a_pack_ask_for_a_fitting():
    assert told(replace(WELL, pack=None, fitting=None)) == ["no-fitting"]
    assert told(replace(WELL, pack=None, fitting=None, last_ms=None)) == []


def test_the_most_urgent_comes_first():
    hot = replace(WELL, latest=latest(pack_temperature=60.0), findings={("pack_voltage", "frozen"): 1})
    silent = replace(WELL, node=Node("a-node", "ridge"), last_ms=NOW - DAY)
    assert [need.kind for need in needs([silent, hot], NOW)] == ["overheating", "node-silent", "sensor-fault"]


def test_every_reason_of_screening_and_of_messages_has_words():
    # The reasons that hub/telemetry/screening.py and hub/telemetry/message.py document.
    assert set(REASONS) == set(OFTEN) == {"disconnected", "power-on", "out-of-range", "spike", "frozen", "saturated"}
    assert set(ASIDE_REASONS) >= {
        *("malformed", "unit", "not-finite", "future", "too-old", "out-of-range", "contradiction", "unknown-node"),
        *("too-large", "line"),
    }


def test_needs_speak_plainly():
    everything = replace(
        WELL,
        last_ms=NOW - DAY,
        latest={"pack_temperature": Latest(NOW - MINUTE, 58.0)},
        findings={("pack_voltage", "spike"): 20},
        set_aside={"unit": 1},
    )
    for need in needs([everything], NOW):
        for sentence in (need.headline, need.advice):
            assert sentence.endswith((".", ")."))
            assert "!" not in sentence
