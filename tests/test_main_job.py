"""The main job on measured input: from a log and a day of sunshine to figures on a page and in an export."""

import csv
import datetime as dt
import io
import re

import pytest
from cli.conftest import Packfold

from hub.settings import Settings
from hub.store import people
from hub.store.engine import Database
from hub.web.factory import create_app

NOW_MS = round(dt.datetime(2026, 11, 20, 12, 0, tzinfo=dt.UTC).timestamp() * 1000)

BENCH = """
[[site]]
name = "bench"
latitude = 51.2
longitude = -1.9
timezone = "UTC"
[[node]]
name = "bench-1"
site = "bench"
interval_s = 1.3125
[[pack]]
label = "AA-1"
designation = "HR6"
cells_in_series = 1
rated_capacity_ah = 2.0
[[fitting]]
pack = "AA-1"
node = "bench-1"
start = 2026-01-01T00:00:00Z
"""
# The log has no times: about 1.3125 s a row; its columns are volts, tracked maximum, amperes, duty, correction. What
# lies before the last line that starts so belongs to an earlier state.
CHARGE_LOG = """
header = false
skip_until = "1.33770632e0"
skip_until_last = true
[time]
start = "2026-11-20T10:00:00Z"
step_s = 1.3125
[[columns]]
number = 1
quantity = "pack_voltage"
unit = "V"
[[columns]]
number = 3
quantity = "pack_current"
unit = "A"
"""
PANEL = """
[[site]]
name = "plain"
latitude = 39.91
longitude = -105.23
altitude_m = 1850
timezone = "Etc/GMT+7"
[[node]]
name = "plain-1"
site = "plain"
interval_s = 60
panel_power_w = 10
panel_tilt_deg = 0
panel_azimuth_deg = 180
[[pack]]
label = "P-1"
designation = "HR6"
cells_in_series = 8
rated_capacity_ah = 2.4
[[fitting]]
pack = "P-1"
node = "plain-1"
start = 2026-01-01T00:00:00Z
"""


@pytest.fixture
def packfold(tmp_path):
    return Packfold(tmp_path)


def table(packfold, name):
    return list(csv.DictReader(io.StringIO(packfold("export", name).out)))


def page(packfold, path):
    """A page as a keeper sees it, without its markup."""
    database = Database(packfold.data)
    with database.write() as connection:
        people.put_account(connection, "sam", "no password fits this", "keeper", NOW_MS)
        link = people.grant(connection, people.account(connection, "sam").id, "link", NOW_MS)
    client = create_app(database, Settings(), clock=lambda: NOW_MS).test_client()
    assert client.get(f"/enter/{link}", base_url="http://127.0.0.1:8740").status_code in {302, 303}
    answer = client.get(path, base_url="http://127.0.0.1:8740")
    assert answer.status_code == 200
    database.close()
    return " ".join(re.sub(r"<[^>]+>", " ", answer.get_data(as_text=True)).split())


def test_a_measured_charge_log_shows_its_session_and_its_end_of_charge(packfold, measured):
    """One NiMH cell charged at about 1 A to its voltage drop (Nobutarou/NiMH_Charger_DIY, MIT; see the data's README).

    Its README's own figures: 767 rows, 275 mAh at the nominal row period, peak 1.73385 V at 15.1 min.
    """
    packfold("inventory", "load", packfold.write("inventory.toml", BENCH))
    mapping = packfold.write("map.toml", CHARGE_LOG)
    log = measured / "nimh-charge-1a" / "charge_log.csv"
    (report,) = packfold("import", log, "--node", "bench-1", "--map", mapping, "--format", "json").document
    assert report["taken"] == 767
    assert report["lines"] == report["taken"] + report["headers"] + report["blank"] + len(report["set_aside"])
    packfold("analyse")
    (charge,) = table(packfold, "charges")
    assert float(charge["charge_ah"]) == pytest.approx(0.275, rel=0.005)
    full = dt.datetime.fromisoformat(charge["full_at"])
    begun = dt.datetime(2026, 11, 20, 10, 0, tzinfo=dt.UTC)
    assert (full - begun).total_seconds() / 60 == pytest.approx(15.1, abs=1.5)
    (day,) = table(packfold, "days")
    assert day["full_at"] == charge["full_at"]
    assert float(day["charge_ah"]) == pytest.approx(0.275, rel=0.005)
    assert float(day["cell_voltage_max_v"]) == pytest.approx(1.73385, abs=0.002)
    shown = page(packfold, "/nodes/bench-1")
    assert f"{full:%H:%M}" in shown
    assert "full" in shown


def test_a_measured_day_of_sunshine_comes_out_as_its_own_irradiation(packfold, measured):
    """Irradiance of NREL's MIDC, 2018-10-14 (pvlib-python tests/data, BSD-3): its own counter says 3.0903 kWh/m².

    A flat panel of 10 W gives irradiance times 10 mW, so its day is 30.903 Wh. The date is moved into the years in
    which nodes exist.
    """
    rows = (measured / "irradiance-1min" / "midc_20181014.txt").read_text().splitlines()[1:]
    lines = ["time,panel_voltage_V,panel_current_A,pack_voltage_V,pack_current_A"]
    for row in rows:
        _date, clock, irradiance, *_rest = row.split(",")
        power_w = max(float(irradiance), 0.0) * 10.0 / 1000.0
        current_a = 0.8 * power_w / 10.4
        # The pack's voltage follows its current through 0.3 ohm, or it would rightly be taken for a stuck sensor.
        pack_v = 10.4 + 0.3 * current_a
        lines.append(f"2026-10-14T{clock}:00-07:00,18.0,{power_w / 18.0:.6f},{pack_v:.4f},{current_a:.6f}")
    packfold("inventory", "load", packfold.write("inventory.toml", PANEL))
    packfold("import", packfold.write("card.csv", "\n".join(lines) + "\n"), "--node", "plain-1")
    packfold("analyse")
    (day,) = table(packfold, "days")
    assert day["date"] == "2026-10-14"
    assert float(day["panel_wh"]) == pytest.approx(30.903, rel=2e-4)
    assert float(day["charge_ah"]) == pytest.approx(0.8 * 30.903 / 10.4, rel=5e-4)
    assert 0 < float(day["harvest_ratio"]) < 1.1
    shown = page(packfold, "/nodes/plain-1?range=all")
    assert "30.9" in shown
