import pytest
from web.builders import DAY_MS, MINUTE_MS, NOW_MS, ridge, rows

from hub.store import intake, receipts


def test_a_node_in_short_and_in_full(shown):
    client = shown.client()
    (short,) = client.get("/api/v1/nodes").json["nodes"]
    assert short == {
        "name": "ridge-east",
        "site": "ridge",
        "interval_s": 60.0,
        "pack": "R-07",
        "first_reading_at": "2026-05-24T12:02:00Z",
        "last_reading_at": "2026-06-01T12:01:00Z",
    }
    full = client.get("/api/v1/nodes/ridge-east").json
    assert full | short == full
    assert full["fittings"] == [{"node": "ridge-east", "pack": "R-07", "start": "2026-04-02T12:02:00Z", "end": None}]
    assert full["latest"]["cell_voltage"]["value"] == pytest.approx(full["latest"]["pack_voltage"]["value"] / 8)
    assert full["latest"]["pack_voltage"]["at"] == short["last_reading_at"]
    assert full["presence"] is None
    assert full["missing_messages"] == []


def test_a_node_nobody_has_heard_has_nothing_and_no_noughts(hub):
    hub.load(ridge(pack=None))
    full = hub.client().get("/api/v1/nodes/ridge-east").json
    assert full["first_reading_at"] is full["last_reading_at"] is full["pack"] is None
    assert full["latest"] == full["unknown_names"] == full["set_aside"] == {}


def test_the_state_of_the_link(hub):
    hub.load(ridge())
    with hub.database.write() as connection:
        receipts.note(connection, hub.ids["ridge-east"], 3, [1, 2, 5])
        intake.note_presence(connection, hub.ids["ridge-east"], "online", NOW_MS - MINUTE_MS)
    hub.set_aside("ridge-east", "unit", "No unit fits.", 2)
    full = hub.client().get("/api/v1/nodes/ridge-east").json
    assert full["missing_messages"] == [{"boot": 3, "first": 3, "last": 4}]
    assert full["presence"] == {"state": "online", "changed_at": "2026-06-01T12:01:00Z"}
    assert full["set_aside"] == {"unit": 2}


def test_a_pack_in_short_and_in_full(shown):
    client = shown.client()
    (short,) = client.get("/api/v1/packs").json["packs"]
    assert short["label"] == "R-07"
    assert short["node"] == "ridge-east"
    full = client.get("/api/v1/packs/R-07").json
    assert full | short == full
    throughput = client.get("/api/v1/throughput").json["rows"][-1]
    assert full["equivalent_full_cycles"] == pytest.approx(throughput["equivalent_full_cycles"])
    charges = client.get("/api/v1/charges").json["rows"]
    assert full["charges"] == len(charges)
    assert full["full_charges"] == sum(row["full_at"] is not None for row in charges)


def test_where_a_pack_is_follows_the_clock(hub):
    hub.load(ridge())
    hub.load(
        rows(fitting=[{"pack": "R-07", "node": "ridge-east", "start_ms": NOW_MS - 60 * DAY_MS, "end_ms": NOW_MS + 1}])
    )
    client = hub.client()
    assert client.get("/api/v1/packs/R-07").json["node"] == "ridge-east"
    hub.clock.now_ms += 2
    assert client.get("/api/v1/packs/R-07").json["node"] is None
    assert client.get("/api/v1/nodes").json["nodes"][0]["pack"] is None
