import json
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub.web.charges import evidence, sessions

LONDON = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000
ROW = {
    "pack": "R-07",
    "start_ms": NOW - 20_000_000,
    "end_ms": NOW,
    "charge_ah": 1.923,
    "charge_wh": 21.04,
    "mean_rate_it": 0.184,
    "peak_temperature_c": 27.31,
    "ended_by": "voltage-drop",
    "full_at_ms": NOW - 3_600_000,
    "confidence": 0.97,
    "overcharge_ah": 0.124,
    "evidence": '{"voltage_drop_mv_per_cell": 6.25}',
}


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


def test_a_session_is_told_with_units():
    (session,) = sessions([ROW], LONDON)
    told = {name: plain(text) for name, text in session.figures}
    assert told == {
        "Charge into the pack": "1.92 Ah",
        "Energy into the pack": "21.0 Wh",
        "Mean rate": "0.18 It",
        "Highest pack temperature": "27.3 °C",
        "Full at": "1 Jun 2026, 12:02 BST",
        "Charge after full": "0.12 Ah",
    }
    assert (
        plain(session.words)
        == "Charge 1, 1 Jun 2026, 12:02 BST. Full, sure (0.97); ended as the voltage dipped from its peak."
    )
    assert session.tick_ms == ROW["full_at_ms"]


def test_a_session_that_goes_on_has_no_end():
    (session,) = sessions([ROW | {"end_ms": None, "full_at_ms": None, "ended_by": None, "confidence": None}], LONDON)
    assert session.tick_ms is None
    assert session.words == "Charge 1. Still charging."
    assert dict(session.figures)["Charge after full"] == "none: it was not full"


def test_unknown_figures_are_said_to_be_so():
    (session,) = sessions([ROW | dict.fromkeys(("charge_ah", "peak_temperature_c", "overcharge_ah"))], LONDON)
    told = dict(session.figures)
    assert told["Charge into the pack"] == told["Highest pack temperature"] == told["Charge after full"] == "not known"


def test_sessions_are_numbered_in_order():
    assert [session.number for session in sessions([ROW, ROW, ROW], LONDON)] == [1, 2, 3]


@pytest.mark.parametrize(
    ("noted", "told"),
    [
        ({"voltage_drop_mv_per_cell": 6.25}, [("voltage drop", "6.25 mV a cell")]),
        (
            {"slope_c_per_min": -0.3, "plateau": True, "timer": False},
            [("slope", "\u22120.3 °C/min"), ("plateau", "yes"), ("timer", "no")],
        ),
        ({"readings": 12, "limit_c": None}, [("readings", "12"), ("limit", "not known")]),
        ({"drop": {"peak_v": 1.46, "after_min": 5}}, [("drop", "peak 1.46 V; after 5 min")]),
        ({"resistance_ohm": 21120.0, "tiny_v": 0.00182}, [("resistance", "21120 Ω"), ("tiny", "0.00182 V")]),
        ({"after_s": 20_700.0}, [("after", "5 h 45 min")]),
        ({"reasons": ["warm", "flat"]}, [("reasons", "warm, flat")]),
        (["warm", 2], [("Noted", "warm, 2")]),
        ({}, []),
        ([], []),
    ],
)
def test_evidence_in_words(noted, told):
    assert [(name, plain(text)) for name, text in evidence(json.dumps(noted), LONDON)] == told


def test_a_rule_s_finding_tells_value_limit_time_and_what_it_speaks_for():
    heating = {"at_ms": NOW, "limit": 0.9, "met": True, "unit": "of charging power", "value": 1.0509, "weight": 3.5}
    level = {"at_ms": None, "limit": 1.41, "met": False, "unit": "V per cell", "value": 1.341, "weight": -2.29}
    timer = {"at_ms": None, "limit": 1800.0, "met": False, "unit": "s", "value": None, "weight": 0.0}
    noted = json.dumps({"heating": heating, "voltage-level": level, "timer": timer})
    assert [(name, plain(text)) for name, text in evidence(noted, LONDON)] == [
        (
            "Charging power that became heat",
            "1.051 of charging power; limit 0.9 of charging power; met at 13:02 BST; speaks for a full pack",
        ),
        ("Highest voltage", "1.341 V a cell; limit 1.41 V a cell; not met; speaks against a full pack"),
        ("Duration", "not known; limit 30 min; not met"),
    ]


def test_evidence_that_is_no_document_is_shown_as_it_is():
    assert list(evidence("the charger said so", LONDON)) == [("Noted", "the charger said so")]
    assert list(evidence("", LONDON)) == []


documents = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats(allow_nan=False, allow_infinity=False) | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
    max_leaves=12,
)


@given(documents)
def test_any_document_can_be_shown(document):
    for name, text in evidence(json.dumps(document), LONDON):
        assert isinstance(name, str)
        assert isinstance(text, str)
