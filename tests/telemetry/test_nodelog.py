"""Check values: the measured charge log of ``nimh-charge-1a`` (origin and figures in the folder's README)."""

import io
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st
from strategies import RECEIVED_MS, damaged, node_logs

from hub.errors import PayloadError, UsageError
from hub.telemetry.logmapping import mapping_from
from hub.telemetry.message import FUTURE_LIMIT_MS
from hub.telemetry.nodelog import Chunk, read_log

T = 1_780_000_000
MS = T * 1000


def read(data, **options):
    """All chunks of a log as one, with the account of every chunk checked."""
    whole = Chunk()
    seen = []
    for chunk in read_log(data.encode() if isinstance(data, str) else data, received_ms=RECEIVED_MS, **options):
        assert chunk.lines == chunk.taken + chunk.headers + chunk.blank + len(chunk.set_aside)
        seen += [remark.line for remark in chunk.set_aside]
        whole.lines += chunk.lines
        whole.taken += chunk.taken
        whole.headers += chunk.headers
        whole.blank += chunk.blank
        whole.set_aside += chunk.set_aside
        whole.message.remarks += chunk.message.remarks
        for name, count in chunk.message.unknown.items():
            whole.message.unknown[name] = whole.message.unknown.get(name, 0) + count
        for time_ms, values in chunk.message.readings.items():
            whole.message.readings.setdefault(time_ms, {}).update(values)
    assert len(seen) == len(set(seen))
    return whole


def aside(log):
    return [(remark.line, remark.reason) for remark in log.set_aside]


def test_a_log_in_the_form_of_the_node_interface():
    log = read(
        "time,pack_voltage_V,pack_current_mA,pack_temperature_Cel\r\n2026-05-28T20:26:40Z,10.41,482,23.6\r\n1780000010,10.42,-481,\r\n"
    )
    assert (log.lines, log.taken, log.headers, log.blank, log.set_aside) == (3, 2, 1, 0, [])
    assert log.message.readings == {
        MS: {"pack_voltage": 10.41, "pack_current": 0.482, "pack_temperature": 23.6},
        MS + 10_000: {"pack_voltage": 10.42, "pack_current": -0.481},
    }


def test_what_a_card_does_to_a_log_is_survived_and_reported_by_line_number():
    lines = [
        b"\xef\xbb\xbftime,pack_voltage_V,pack_temperature_C",  # 1
        b"1780000000,10.0,20.0",
        b"",  # 3 blank
        b"time,pack_voltage_V,pack_temperature_C",  # 4 the header again, after a restart
        b"\0" * 512 + b"1780000001,10.1,20.1",  # 5 a block of NULs before a whole line
        b"1780000002,10.2,2\0\0\0",  # 6 cut
        b"\0" * 512,  # 7
        b"1780000003,10.3",  # 8 torn
        b"1780000004,10.41780000005,10.5,20.5",  # 9 torn and run into the next
        b"946684800,10.6,20.6",  # 10 the clock fell back
        b"1990000000,10.7,20.7",  # 11 and ran ahead
        b"2026-05-28T20:26:48,10.8,20.8",  # 12 no offset
        b"1780000009,ERR,20.9",  # 13 one value is no number
        b"1780000010,ERR,ERR",  # 14 none is
        b"1780000011,,",  # 15
        b'"1780000012","11.2","21.2"',
        b'"1780000013,11.3,21.3',  # 17
        b"\xff\xfe\x80garbage",  # 18
        b"1780000019,nan,21.9",  # 19
        b"1780000020,12.0,22",  # 20 no line end, and fewer decimals than above
    ]
    log = read(b"\n".join(lines))
    assert (log.lines, log.taken, log.headers, log.blank) == (20, 5, 2, 1)
    assert aside(log) == [
        (6, "line"),
        (7, "line"),
        (8, "line"),
        (9, "line"),
        (10, "too-old"),
        (11, "future"),
        (12, "line"),
        (14, "malformed"),
        (15, "line"),
        (17, "line"),
        (18, "line"),
        (20, "line"),
    ]
    assert log.message.readings == {
        MS: {"pack_voltage": 10.0, "pack_temperature": 20.0},
        MS + 1000: {"pack_voltage": 10.1, "pack_temperature": 20.1},
        MS + 9000: {"pack_temperature": 20.9},
        MS + 12_000: {"pack_voltage": 11.2, "pack_temperature": 21.2},
        MS + 19_000: {"pack_temperature": 21.9},
    }
    assert [(r.line, r.reason, r.quantity) for r in log.message.remarks] == [
        (13, "malformed", "pack_voltage"),
        (19, "not-finite", "pack_voltage"),
    ]
    clock = [r for r in log.set_aside if r.reason in ("too-old", "future")]
    assert [(r.time_ms, r.values) for r in clock] == [
        (946_684_800_000, {"pack_voltage": 10.6, "pack_temperature": 20.6}),
        (1_990_000_000_000, {"pack_voltage": 10.7, "pack_temperature": 20.7}),
    ]
    assert all(r.detail.endswith(".") for r in log.set_aside + log.message.remarks)


def test_a_whole_last_line_needs_no_line_end():
    assert read("time,pack_voltage_V\n1780000000,10.41\n1780000010,10.42").taken == 2
    assert read("time,pack_voltage_V\n1780000000,10.41").taken == 1


def test_a_header_may_change_its_columns_its_delimiter_and_its_decimal_sign():
    log = read(
        "time,pack_voltage_V\n1780000000,10.0\ntime;pack_current_mA;pack_voltage_V\n1780000001,0;482,5;10,1\ntime\tuptime_ms\n1780000002\t1500\n"
    )
    assert log.message.readings == {
        MS: {"pack_voltage": 10.0},
        MS + 1000: {"pack_current": 0.4825, "pack_voltage": 10.1},
        MS + 2000: {"uptime": 1.5},
    }


def test_rows_of_another_form_are_not_guessed():
    log = read("time,pack_voltage_V\n1780000000,10.0\n28/05/2026 20:26:41,10.1\n1780000002;10,2\n")
    assert log.taken == 1
    assert aside(log) == [(3, "line"), (4, "line")]


def test_unknown_columns_are_counted_and_a_wrong_unit_explained():
    log = read("time,node,pack_voltage_V,pack_current_V\n1780000000,a,10.0,1\n")
    assert log.message.readings == {MS: {"pack_voltage": 10.0}}
    assert log.message.unknown == {"node": 1, "pack_current_V": 1}
    assert [(r.reason, r.line) for r in log.message.remarks] == [("unit", 1)]


def test_repeats_are_taken_and_contradictions_set_aside():
    log = read(
        "time,pack_voltage_V,pack_current_A\n" + "1780000000,10.0,1\n" * 3 + "1780000000,10.1,2\n1780000000,10.0,2\n"
    )
    assert log.taken == 4
    assert aside(log) == [(5, "contradiction")]
    assert [(r.line, r.quantity) for r in log.message.remarks] == [(6, "pack_current")]


def test_a_new_boot_begins_a_new_chunk():
    data = b"time,boot,pack_voltage_V\n1780000000,4,10\n1780000001,4,10\n1780000002,5,10\n1780000003,,10\n1780000004,x,10\n"
    chunks = list(read_log(data, received_ms=RECEIVED_MS))
    assert [(c.message.boot, c.taken, c.lines) for c in chunks] == [(4, 2, 3), (5, 1, 1), (None, 2, 2)]


def test_a_file_is_handed_on_in_chunks():
    rows = b"".join(b"%d,10.4\n" % (T - 20_000 + i) for i in range(12_000))
    chunks = list(read_log(io.BytesIO(b"time,pack_voltage_V\n" + rows), received_ms=RECEIVED_MS))
    assert [len(c.message.readings) for c in chunks] == [5000, 5000, 2000]
    assert [c.lines for c in chunks] == [5001, 5000, 2000]
    garbage = list(read_log(b"time,pack_voltage_V\n" + b"x\n" * 12_000, received_ms=RECEIVED_MS))
    assert [len(c.set_aside) for c in garbage] == [5000, 5000, 2000]


def test_a_foreign_log_is_refused_with_its_header_its_columns_and_an_example():
    with pytest.raises(PayloadError) as problem:
        read("stamp;U;pack_current_A\n1;2;3\n")
    assert str(problem.value) == (
        "The log begins with “stamp;U;pack_current_A”, which is not the header of a node log (unknown: “stamp”, “U”); "
        'write a mapping, for example time = {column = "when", format = "%d.%m.%Y %H:%M:%S", timezone = '
        '"Europe/Berlin"} and columns = [{name = "U", quantity = "pack_voltage", unit = "mV"}].'
    )
    for data in ("time,wind\n1,2\n", "1780000000,10.4\n", "x\n" * 1000, b"\0\n" * 1000, "pack_voltage_V\n10\n"):
        with pytest.raises(PayloadError, match="write a mapping"):
            read(data)


def test_endless_lines_and_lines_without_a_time_are_set_aside():
    log = read("time,pack_voltage_V\n" + "9" * 100_000 + "\n,10\n1780000000,10\n")
    assert log.taken == 1
    assert aside(log) == [(2, "line"), (3, "line")]


def test_empty_files_have_no_readings():
    assert list(read_log(b"", received_ms=RECEIVED_MS)) == []
    assert read("\n\n").blank == 2
    assert read("time,pack_voltage_V\n").headers == 1


def test_utf_16_is_said_to_be_so():
    with pytest.raises(PayloadError, match="UTF-16"):
        read("time,pack_voltage_V\n".encode("utf-16"))


def mapping(**table):
    return mapping_from(
        {"time": {"column": 1, "format": "unix"}, "columns": [{"number": 2, "quantity": "pack_voltage"}], **table}
    )


def test_a_foreign_log_with_header_delimiter_decimals_and_local_time():
    table = {
        "delimiter": ";",
        "decimal": ",",
        "time": {"column": ["Datum", "Zeit"], "format": "%d.%m.%Y %H:%M", "timezone": "Europe/Berlin"},
        "columns": [
            {"name": "U", "quantity": "pack_voltage", "unit": "mV"},
            {"name": "I", "quantity": "pack_current", "scale": -0.001, "offset": 0.002},
        ],
    }
    log = read(
        "Datum;Zeit;I;U\n01.06.2025;12:00;482,0;10410\nDatum;Zeit;I;U\n01.06.2025;12:05;1;2;3\n",
        mapping=mapping_from(table),
    )
    assert (log.taken, log.headers, aside(log)) == (1, 2, [(4, "line")])
    at = round(datetime(2025, 6, 1, 10, tzinfo=UTC).timestamp() * 1000)
    assert log.message.readings == {at: {"pack_voltage": 10.41, "pack_current": pytest.approx(-0.48)}}


def test_a_mapping_that_does_not_fit_the_header_says_which_column():
    named = mapping(columns=[{"name": "U_batt", "quantity": "pack_voltage"}])
    with pytest.raises(
        PayloadError, match="reads the column “U_batt”, which the header does not have; the nearest name is U_bat"
    ):
        read("t,U_bat\n1,2\n", mapping=named)
    with pytest.raises(PayloadError, match="uses column 2 and the header “t” has 1"):
        read("t\n1\n", mapping=mapping())


def test_a_log_without_times_counts_its_rows_from_the_start():
    table = {
        "header": False,
        "time": {"start": "2026-01-01T00:00:00Z", "step_s": 1.3125},
        "columns": [{"number": 1, "quantity": "pack_voltage"}],
    }
    log = read("1\n2\nx\n4\n", mapping=mapping_from(table))
    start = round(datetime(2026, 1, 1, tzinfo=UTC).timestamp() * 1000)
    # A damaged row keeps its place, so that those after it do not shift; 1312.5 ms is rounded row by row.
    assert log.message.readings == {
        start: {"pack_voltage": 1},
        start + 1312: {"pack_voltage": 2},
        start + 3938: {"pack_voltage": 4},
    }


@pytest.mark.parametrize(("last", "skipped", "taken"), [(False, 1, 2), (True, 3, 1)])
def test_the_data_may_begin_at_the_first_or_the_last_of_several_marks(last, skipped, taken):
    data = b"banner\n5,10\n1780000000,1\n5,10\n1780000002,2\n"
    chosen = mapping(header=False, skip_until="5,", skip_until_last=last)
    for source in (data, io.BytesIO(data)):
        log = read(source, mapping=chosen)
        assert log.taken == taken
        assert len([r for r in log.set_aside if "before the one" in r.detail]) == skipped
    with pytest.raises(PayloadError, match="No line begins with “zzz”"):
        read(data, mapping=mapping(header=False, skip_until="zzz"))


def test_a_pipe_cannot_be_read_twice():
    class Pipe(io.BytesIO):
        def seekable(self):
            return False

    with pytest.raises(UsageError, match="rather than a pipe"):
        read(Pipe(b"5,1\n"), mapping=mapping(header=False, skip_until="5,"))


@pytest.mark.parametrize(
    ("zone", "day", "rows"),
    [
        ("Europe/Berlin", (2025, 10, 26), 300),
        ("Europe/Berlin", (2025, 3, 30), 276),
        ("Australia/Sydney", (2025, 4, 6), 300),
    ],
)
def test_both_clock_change_nights_keep_every_row(zone, day, rows):
    start = datetime(*day, tzinfo=ZoneInfo(zone)).astimezone(UTC)
    instants = [start + timedelta(minutes=5 * i) for i in range(rows)]
    assert (instants[-1] + timedelta(minutes=5)).astimezone(ZoneInfo(zone)).hour == 0
    text = "t,U\n" + "".join(f"{at.astimezone(ZoneInfo(zone)):%Y-%m-%d %H:%M},{i}\n" for i, at in enumerate(instants))
    local = {"column": "t", "format": "%Y-%m-%d %H:%M", "timezone": zone, "rule": "order"}
    log = read(text, mapping=mapping(time=local, columns=[{"name": "U", "quantity": "pack_voltage"}]))
    assert log.set_aside == []
    assert log.message.readings == {round(at.timestamp() * 1000): {"pack_voltage": i} for i, at in enumerate(instants)}


def test_the_measured_charge_log(measured):
    """Origin: the charge log named in the folder's README; 767 rows, mean 0.982 A, peak 1.73385 V at 15.1 min."""
    table = {
        "header": False,
        "skip_until": "1.33770632e0",
        "skip_until_last": True,
        "time": {"start": "2024-01-01T00:00:00Z", "step_s": 1.3125},
        "columns": [
            {"number": 1, "quantity": "pack_voltage", "unit": "V"},
            {"number": 3, "quantity": "pack_current", "unit": "A"},
        ],
    }
    log = read((measured / "nimh-charge-1a" / "charge_log.csv").read_bytes(), mapping=mapping_from(table))
    assert (log.lines, log.taken) == (805, 767)
    times = list(log.message.readings)
    current = [values["pack_current"] for values in log.message.readings.values()]
    voltage = [values["pack_voltage"] for values in log.message.readings.values()]
    assert sum(current) / len(current) == pytest.approx(0.982, abs=0.0005)
    assert (times[-1] - times[0]) / 60_000 == pytest.approx(16.8, abs=0.05)
    peak = voltage.index(max(voltage))
    assert max(voltage) == pytest.approx(1.73385, abs=5e-6)
    assert (times[peak] - times[0]) / 60_000 == pytest.approx(15.1, abs=0.05)


def test_a_foreign_measured_log_without_a_mapping_is_refused(measured):
    with pytest.raises(PayloadError, match="write a mapping"):
        read((measured / "nimh-charge-1a" / "charge_log.csv").read_bytes())


FOREIGN = mapping(header=False)


@given(st.one_of(damaged(node_logs()), st.binary(max_size=300)), st.sampled_from([None, FOREIGN]), st.integers(1, 4))
def test_every_line_of_any_file_is_accounted_for(data, how, chunk_readings):
    try:
        log = read(data, mapping=how, chunk_readings=chunk_readings)
    except PayloadError as problem:
        found = str(problem)
    else:
        found = "."
        separator = b"\r" if b"\n" not in data and b"\r" in data else b"\n"
        assert log.lines == data.count(separator) + (not data.endswith(separator) and data != b"")
        for time_ms, values in log.message.readings.items():
            assert values
            assert 1_577_836_800_000 <= time_ms <= RECEIVED_MS + FUTURE_LIMIT_MS
            assert all(abs(value) <= 1e12 for value in values.values())
        assert all(r.detail.endswith(".") and r.line for r in log.set_aside)
    assert found.endswith(".")


@given(node_logs(), st.integers(1, 3))
def test_chunks_of_any_size_hold_the_same_readings(data, size):
    whole, pieces = read(data), read(data, chunk_readings=size)
    assert whole.lines == pieces.lines
    assert set(whole.message.readings) == set(pieces.message.readings)
