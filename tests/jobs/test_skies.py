import numpy as np
import pytest
from jobs.conftest import load
from jobs.test_analysis import BARE, NODE

from hub.jobs import skies
from hub.jobs.compute import subject_of
from hub.jobs.windows import windows
from hub.store import inventory

PANEL = BARE.replace(
    "interval_s = 300", "interval_s = 300\npanel_power_w = 20\npanel_tilt_deg = 40\npanel_azimuth_deg = 180"
)


@pytest.fixture
def sky(new_database):
    database = new_database(PANEL)
    with database.read() as connection:
        known, node_id = inventory.load(connection), inventory.node_id(connection, NODE)
    # 2026-06-10T10:00Z
    window = next(windows([1_781_085_600 // 3600], "Europe/Rome", known.fitted(NODE)))
    return database, known, node_id, window


def subject(known, window, newest_ms):
    return subject_of(known, known.node(NODE), window, newest_ms)


def test_a_remembered_sky_is_the_computed_one(sky, monkeypatch):
    database, known, node_id, window = sky
    whole = subject(known, window, window.end_ms)
    first = skies.Skies(database, node_id).over(whole)
    monkeypatch.setattr(skies, "clear_sky", lambda *_: pytest.fail("it was computed again"))
    again = skies.Skies(database, node_id).over(whole)
    assert np.array_equal(first.time_ms, again.time_ms)
    assert first.energy_wh == again.energy_wh
    # A 20 W panel near midsummer at 43 degrees north: between 5 and 9 hours of rated power on a clear day.
    assert 5 * 20 < first.energy_wh < 9 * 20


def test_the_part_of_a_day_that_has_happened_is_a_part_of_the_day(sky):
    database, known, node_id, window = sky
    source = skies.Skies(database, node_id)
    whole = source.over(subject(known, window, window.end_ms)).energy_wh
    noon = window.start_ms + 13 * 3_600_000
    parts = [source.over(subject(known, window, at)).energy_wh for at in (window.start_ms, noon, window.end_ms)]
    assert parts[0] == 0.0
    assert parts[1] == pytest.approx(whole / 2, rel=0.1)
    assert parts[2] == whole


def test_another_panel_is_another_sky(sky):
    database, known, node_id, window = sky
    small = skies.Skies(database, node_id).over(subject(known, window, window.end_ms)).energy_wh
    load(database, PANEL.replace("panel_power_w = 20", "panel_power_w = 40"))
    with database.read() as connection:
        changed = inventory.load(connection)
    large = skies.Skies(database, node_id).over(subject(changed, window, window.end_ms)).energy_wh
    assert large == pytest.approx(2 * small, rel=1e-9)


def test_a_panel_that_is_not_described_has_no_sky(new_database):
    database = new_database(BARE)
    with database.read() as connection:
        known, node_id = inventory.load(connection), inventory.node_id(connection, NODE)
    window = next(windows([1_781_085_600 // 3600], "Europe/Rome", known.fitted(NODE)))
    assert skies.Skies(database, node_id).over(subject(known, window, window.end_ms)) is None
