from hub.store import figures
from hub.store.figures import Entry, Written

HOUR = 3_600_000


def window(start_h, end_h, date="2026-06-01", *, day=None, charges=(), findings=(), inputs="digest"):
    """What was computed for a window; hours since the first one."""
    entry = Entry(start_h * HOUR, end_h * HOUR, date, inputs, "{}", None)
    figure = {"coverage": 1.0, "observed_s": 60.0, "bridged_s": 0.0} | (day or {})
    return Written(entry, figure, charges, findings)


def session(start_h, **values):
    return {"start_ms": start_h * HOUR, "pack_id": 1, "evidence": "{}"} | values


def finding(quantity="uptime", reason="frozen"):
    return {"quantity": quantity, "reason": reason, "count": 3, "first_ms": 1, "last_ms": 2}


def starts(rows, key="start_ms"):
    return [row[key] / HOUR for row in rows]


def write(connection, *windows, node_id=1):
    for written in windows:
        figures.write(connection, node_id, written)


def test_what_is_written_is_read_back(scratch):
    entry = Entry(0, 24 * HOUR, "2026-06-01", "digest", '{"open": 1}', 5 * HOUR)
    day = {"pack_id": 2, "coverage": 0.5, "observed_s": 3600.0, "bridged_s": 1.0, "charge_ah": 1.25, "full_at_ms": 7}
    with scratch() as connection:
        write(connection, Written(entry, day, [session(1, charge_ah=1.25)], [finding()]))
        assert figures.entries(connection, 1) == {0: entry}
        (row,) = figures.days(connection, 1)
        assert {name: row[name] for name in day} == day
        assert (row["pack"], row["date"], row["panel_wh"]) == ("P-2", "2026-06-01", None)
        (charge,) = figures.charges(connection, 1)
        assert (charge["start_ms"], charge["charge_ah"], charge["pack"], charge["ended_by"]) == (
            HOUR,
            1.25,
            "P-1",
            None,
        )
        (found,) = figures.findings(connection, 1)
        assert {name: found[name] for name in finding()} == finding()
        assert figures.days(connection, 2) == figures.charges(connection, 2) == figures.findings(connection, 2) == []


def test_a_window_written_again_replaces_all_of_its_figures(scratch):
    with scratch() as connection:
        write(connection, window(0, 24, charges=[session(1), session(5)], findings=[finding(), finding("signal")]))
        write(connection, window(0, 24, charges=[session(2)], inputs="other"))
        assert starts(figures.charges(connection, 1)) == [2]
        assert figures.findings(connection, 1) == []
        assert len(figures.days(connection, 1)) == 1
        assert figures.entries(connection, 1)[0].inputs == "other"


def test_a_day_cut_in_two_by_a_fitting_and_joined_again(scratch):
    with scratch() as connection:
        write(connection, window(0, 24, charges=[session(3)]), window(24, 48, "2026-06-02"))
        write(connection, window(0, 14, charges=[session(3)]), window(14, 24, charges=[session(15)]))
        assert starts(figures.days(connection, 1)) == [0, 14, 24]
        assert starts(figures.charges(connection, 1)) == [3, 15]
        write(connection, window(0, 24, charges=[session(3)]))
        assert starts(figures.days(connection, 1)) == [0, 24]
        assert sorted(figures.entries(connection, 1)) == [0, 24 * HOUR]
        assert starts(figures.charges(connection, 1)) == [3]


def test_a_window_without_readings_has_an_entry_and_no_day(scratch):
    entry = Entry(0, 24 * HOUR, "2026-06-01", "digest", "{}", None)
    with scratch() as connection:
        write(connection, window(0, 24))
        write(connection, Written(entry, None))
        assert figures.days(connection, 1) == []
        assert list(figures.entries(connection, 1)) == [0]


def test_other_nodes_and_windows_are_left_alone(scratch):
    with scratch() as connection:
        write(connection, window(0, 24), window(24, 48, charges=[session(20)]))
        write(connection, window(0, 24, charges=[session(4)]), node_id=2)
        figures.clear(connection, 1, 0, 24 * HOUR)
        assert starts(figures.days(connection, 1)) == [24]
        assert starts(figures.charges(connection, 1)) == [20]
        assert starts(figures.charges(connection, 2)) == [4]


def test_of_an_open_session_the_latest_window_counts(scratch):
    with scratch() as connection:
        write(connection, window(24, 48, charges=[session(20, charge_ah=2.0, ended_by="sun-ended"), session(30)]))
        write(connection, window(0, 24, charges=[session(10), session(20, charge_ah=1.0)]))
        found = figures.charges(connection, 1)
        assert starts(found) == [10, 20, 30]
        assert [row["charge_ah"] for row in found] == [None, 2.0, None]
        figures.clear(connection, 1, 24 * HOUR, 48 * HOUR)
        assert [row["charge_ah"] for row in figures.charges(connection, 1)] == [None, 1.0]


def test_dates_and_instants_that_bound_what_is_read(scratch):
    with scratch() as connection:
        write(
            connection,
            *(window(24 * n, 24 * n + 24, f"2026-06-0{n + 1}", charges=[session(24 * n + 2)]) for n in range(4)),
        )
        assert [d["date"] for d in figures.days(connection, 1, "2026-06-02", "2026-06-03")] == [
            "2026-06-02",
            "2026-06-03",
        ]
        assert starts(figures.charges(connection, 1, 26 * HOUR, 50 * HOUR)) == [26]
        write(connection, window(0, 24, findings=[finding()]), window(24, 48, findings=[finding()]))
        assert starts(figures.findings(connection, 1, HOUR, 25 * HOUR)) == [24]


def test_a_packs_discharge_is_told_over_all_nodes_it_was_in(scratch):
    def day(ah):
        return {"pack_id": 1, "discharge_ah": ah}

    with scratch() as connection:
        write(connection, window(0, 14, day=day(0.25)), window(24, 48, "2026-06-02", day=day(None)))
        write(connection, window(14, 24, day=day(0.5)), window(48, 72, "2026-06-03", day=day(1.0)), node_id=2)
        assert [(d["date"], d["discharge_ah"]) for d in figures.pack_days(connection, 1)] == [
            ("2026-06-01", 0.25),
            ("2026-06-01", 0.5),
            ("2026-06-03", 1.0),
        ]
        assert figures.pack_days(connection, 2) == []
