import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from jobs.conftest import exports
from jobs.test_analysis import BARE, NODE

from hub.errors import InventoryError, PackfoldError, PayloadError, UsageError
from hub.jobs import importing
from hub.store import aside, inventory
from hub.telemetry.logmapping import mapping_from

NOW_MS = 1_781_500_000_000
LOG = "time,pack_voltage_V,pack_current_mA\n" + "".join(
    f"2026-06-10T10:{m:02}:00Z,{8 + m / 100:.2f},{100 + m}\n" for m in range(30)
)
FOREIGN = "2026-06-10T10:00:00Z;8,1;0,2\n2026-06-10T10:01:00Z;8,2;0,2\n"
MAPPING = mapping_from(
    {
        "header": False,
        "delimiter": ";",
        "decimal": ",",
        "time": {"column": 1, "format": "rfc3339"},
        "columns": [
            {"number": 2, "quantity": "pack_voltage", "unit": "V"},
            {"number": 3, "quantity": "pack_current", "unit": "A"},
        ],
    }
)


def write(tmp_path, content, name="card.csv"):
    path = tmp_path / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return path


def bring(database, path, **more):
    return importing.import_log(database, NODE, path, **{"mapping": None, "now_ms": NOW_MS, **more})


def test_every_line_is_taken_repeated_set_aside_header_or_blank(tmp_path, new_database):
    database = new_database(BARE)
    content = LOG + LOG.splitlines()[5] + "\nrubbish\n\n" + LOG.splitlines()[0] + "\n2026-06-10T10:40:00Z,8.1"
    report = bring(database, write(tmp_path, content))
    assert (report.taken, report.repeated, report.headers, report.blank) == (30, 1, 2, 1)
    assert [r.line for r in report.set_aside] == [33, 36]
    assert report.lines == 36
    with database.read() as connection:
        kept = aside.newest(connection, inventory.node_id(connection, NODE))
    assert sorted(k.line for k in kept) == [33, 36]


def test_importing_again_adds_nothing_and_undo_restores_the_export(tmp_path, new_database):
    database = new_database(BARE)
    before = exports(database)
    path = write(tmp_path, LOG)
    first = bring(database, path)
    after = exports(database)
    second = bring(database, path)
    assert (second.taken, second.repeated) == (0, 30)
    assert exports(database) == after
    assert importing.undo(database, second.import_id, NOW_MS) == 0
    assert exports(database) == after
    assert importing.undo(database, first.import_id, NOW_MS) == 30
    assert exports(database) == before
    with pytest.raises(UsageError, match="already"):
        importing.undo(database, first.import_id, NOW_MS)


def test_lines_set_aside_are_not_kept_twice_for_the_same_file(tmp_path, new_database):
    database = new_database(BARE)
    path = write(tmp_path, LOG + "rubbish\n")
    bring(database, path)
    bring(database, path)
    with database.read() as connection:
        assert len(aside.newest(connection, inventory.node_id(connection, NODE))) == 1


def test_a_dry_run_stores_nothing(tmp_path, new_database):
    database = new_database(BARE)
    before = exports(database)
    report = bring(database, write(tmp_path, LOG), dry_run=True)
    assert (report.taken, report.import_id) == (30, None)
    assert exports(database) == before


def test_a_mapping_is_remembered_and_the_hubs_own_form_still_read(tmp_path, new_database):
    database = new_database(BARE)
    foreign = write(tmp_path, FOREIGN, "foreign.csv")
    with pytest.raises(PayloadError, match="mapping"):
        bring(database, foreign)
    assert bring(database, foreign, mapping=MAPPING).taken == 2
    more = write(tmp_path, FOREIGN.replace("10:0", "11:0"), "more.csv")
    assert bring(database, more).taken == 2
    assert bring(database, write(tmp_path, LOG)).taken > 0


def test_a_file_that_is_no_log_leaves_no_trace(tmp_path, new_database):
    database = new_database(BARE)
    with pytest.raises(PackfoldError):
        bring(database, write(tmp_path, b"\x00\x01\x02" * 1000))
    with pytest.raises(UsageError, match="cannot be read"):
        bring(database, tmp_path / "nowhere.csv")
    with pytest.raises(InventoryError, match="no node"):
        importing.import_log(database, "elsewhere", write(tmp_path, LOG), mapping=None, now_ms=NOW_MS)
    from hub.store import imports

    with database.read() as connection:
        assert not imports.listing(connection)


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.binary(max_size=400), st.integers(0, len(LOG)))
def test_damage_never_loses_a_line(tmp_path, new_database, noise, where):
    database = new_database(BARE)
    path = write(tmp_path, LOG[:where].encode() + noise + LOG[where:].encode())
    try:
        report = bring(database, path)
    except PackfoldError:
        return
    told = report.taken + report.repeated + report.headers + report.blank + len(report.set_aside)
    assert told == report.lines


def test_a_mapping_file_with_a_typing_error_is_explained(tmp_path):
    with pytest.raises(UsageError, match="cannot be read"):
        importing.load_mapping(tmp_path / "none.toml")
    with pytest.raises(UsageError, match="not TOML"):
        importing.load_mapping(write(tmp_path, "x = [", "bad.toml"))
