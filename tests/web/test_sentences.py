from zoneinfo import ZoneInfo

import pytest

from hub.store.inventory import Fitting, Node, Pack
from hub.web import sentences
from hub.web.days import Day

ZONE = ZoneInfo("Europe/London")
NOW = 1_780_315_320_000  # 2026-06-01T12:02:00Z, 13:02 BST
MINUTE, HOUR, DAY = 60_000, 3_600_000, 86_400_000
NODE = Node("ridge-east", "ridge", interval_s=60.0)
PACK = Pack("R-07", "HR6", 8, 1, 2.4)
FITTING = Fitting("R-07", "ridge-east", NOW - 92 * DAY)


def plain(text: str) -> str:
    return text.replace("\u00a0", " ")


def days(full: str) -> list[Day]:
    """``f`` full, ``n`` not full, ``?`` seen too little, ``-`` no figures."""
    kinds = {"f": (1.0, NOW), "n": (1.0, None), "?": (0.3, None), "-": (None, None), "F": (0.5, NOW)}
    return [Day(f"2026-05-{25 + i}", *kinds[letter]) for i, letter in enumerate(full)]


TODAY_FULL = Day("2026-06-01", 0.5, NOW - 2 * HOUR)


@pytest.mark.parametrize(
    ("before", "today", "text"),
    [
        ("ffffnff", None, "Filled on 6 of the last 7 days."),
        ("fffffff", None, "Filled on each of the last 7 days."),
        ("nnnnnnn", None, "Filled on none of the last 7 days."),
        ("ffff?ff", None, "Filled on 6 of the last 7 days; 1 day not known, too few readings."),
        ("ff-f?fn", None, "Filled on 4 of the last 7 days; 2 days not known, too few readings."),
        ("fffFfff", None, "Filled on each of the last 7 days."),
        ("???", None, "Whether it filled in the last 3 days is not known: too few readings."),
        ("?", None, "Whether it filled yesterday is not known: too few readings."),
        ("---", None, "Whether it filled is not known: no figures have been computed for these days yet."),
        ("f", None, "Filled yesterday."),
        ("n", None, "Did not fill yesterday."),
        ("", None, "Whether it fills is not known yet: its first whole day is not over."),
        ("", Day("2026-06-01", 0.4), "Not full yet on its first day."),
        ("", TODAY_FULL, "Full today at 11:02 BST."),
        ("ffffnff", TODAY_FULL, "Filled on 6 of the last 7 days; full today at 11:02 BST."),
        (
            "???",
            TODAY_FULL,
            "Whether it filled in the last 3 days is not known: too few readings; full today at 11:02 BST.",
        ),
    ],
)
def test_filled(before, today, text):
    assert plain(sentences.filled(days(before), today, ZONE)) == text


@pytest.mark.parametrize(
    ("before", "today", "never"),
    [("nnnnnnn", None, True), ("nnnn?nn", None, False), ("nnnnfnn", None, False), ("", None, False)],
)
def test_never_filled_is_only_said_of_days_that_were_seen(before, today, never):
    assert sentences.never_filled(days(before), today) is never


def test_a_full_charge_today_ends_a_week_without():
    assert not sentences.never_filled(days("nnnnnnn"), TODAY_FULL)


@pytest.mark.parametrize(
    ("ago", "text"),
    [
        (None, "Never heard yet."),
        (20_000, "Last heard 20 s ago."),
        (17 * MINUTE, "Last heard 17 min ago."),
        (18 * MINUTE, "Silent for 18 min: last heard 12:44 BST."),
        (31 * HOUR, "Silent for 31 h: last heard yesterday 06:02 BST."),
        (40 * DAY, "Silent for 40 days: last heard 22 Apr 2026, 13:02 BST."),
        (-MINUTE, "Last heard 0 s ago."),
    ],
)
def test_heard(ago, text):
    assert plain(sentences.heard(NODE, None if ago is None else NOW - ago, NOW, ZONE)) == text


def test_a_slow_node_has_longer_patience():
    hourly = Node("gauge", "reservoir", interval_s=3600.0)
    assert not sentences.is_silent(hourly, NOW - 2 * HOUR, NOW)
    assert sentences.is_silent(hourly, NOW - 3 * HOUR, NOW)
    assert not sentences.is_silent(hourly, None, NOW)


def test_fitted():
    assert plain(sentences.fitted(PACK, FITTING, ZONE)) == "Pack R-07, 8 cells of 2.4 Ah rated, since 1 Mar 2026."
    assert "not known" in sentences.fitted(None, None, ZONE)
    assert plain(sentences.cells(Pack("P", "", 4, 2))) == "4 cells in series, 2 in parallel"
    assert plain(sentences.cells(Pack("P", "", 1))) == "1 cell"


def test_level_is_only_sure_at_a_full_charge():
    assert sentences.level(None, NOW, has_pack=False) == ""
    assert "not known" in sentences.level(None, NOW, has_pack=True)
    assert sentences.level(NOW - 10 * MINUTE, NOW, has_pack=True) == "It is full."
    assert plain(sentences.level(NOW - 5 * HOUR, NOW, has_pack=True)).startswith("Last full 5 h ago; its level since")


@pytest.mark.parametrize(
    ("ended_by", "end", "full", "text"),
    [
        (None, None, None, "Still charging"),
        (None, None, 5, "Full, likely (0.70); charging goes on"),
        ("voltage-drop", 9, 5, "Full, likely (0.70); ended as the voltage dipped from its peak"),
        ("sun-ended", 9, None, "Not full, likely (0.70); ended when the sun went"),
        ("sun-ended", 9, 5, "Full, likely (0.70); ended when the sun went"),
        ("timer", 9, None, "Not full, likely (0.70); ended by the charger's timer"),
        (None, 9, None, "Not full, likely (0.70); how it ended is not known"),
        ("something new", 9, None, "Not full, likely (0.70); how it ended is not known"),
    ],
)
def test_ending(ended_by, end, full, text):
    assert sentences.ending(ended_by, end, full, 0.7) == text


def test_every_ending_of_the_export_has_words():
    # The values that the export's column ended_by promises.
    promised = (
        *("voltage-drop", "voltage-plateau", "temperature-slope", "temperature-limit", "charger-cut", "timer"),
        *("sun-ended", "unknown"),
    )
    assert set(sentences.ENDED_BY) == set(promised)


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (None, "how sure is not known"),
        (1.0, "sure (1.00)"),
        (0.8, "quite sure (0.80)"),
        (0.65, "likely (0.65)"),
        (0.5, "doubtful (0.50)"),
        (0.0, "doubtful (0.00)"),
    ],
)
def test_confidence(value, text):
    assert sentences.confidence(value) == text


def test_a_current_has_its_direction_in_words():
    assert plain(sentences.flow(0.512)) == "0.51 A into the pack"
    assert plain(sentences.flow(-0.09)) == "0.09 A out of the pack"


def test_today_so_far():
    day = {
        "coverage": 0.54,
        "charge_ah": 0.68,
        "charge_uncertainty_ah": 0.01,
        "discharge_ah": 0.4,
        "discharge_uncertainty_ah": None,
        "panel_wh": 15.4,
        "clear_sky_wh": 46.0,
    }
    assert plain(sentences.today_so_far(day)) == (
        "Today so far: 0.68 ± 0.01 Ah into the pack, 0.40 Ah out of it and 15.4 Wh from the panel, where a clear sky "
        "would have offered 46 Wh. Readings cover 54 % of the day so far."
    )
    nothing = day | {"charge_ah": None, "discharge_ah": None, "panel_wh": None}
    assert plain(sentences.today_so_far(nothing)).startswith("Today so far: no figure is known.")
    assert sentences.today_so_far(None) == ""
