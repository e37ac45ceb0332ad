import csv
import io
import json

import pyarrow.parquet as pq

LOG = "time,pack_voltage_V,pack_current_A,pack_temperature_C\n" + "".join(
    f"2026-06-10T{h:02}:{m:02}:00Z,{8 * 1.3 + h / 100:.3f},{0.2 if 8 <= h < 18 else -0.05},{20 + h / 10:.1f}\n"
    for h in range(24)
    for m in range(60)
)


def filled(packfold):
    packfold.stocked()
    packfold("import", packfold.write("card.csv", LOG), "--node", "ridge-east")
    return packfold


def test_analysing_twice_changes_nothing(packfold):
    filled(packfold)
    assert packfold("analyse", "--format", "json").document["computed"] == 2
    assert packfold("analyse").out.startswith("Everything was up to date")
    assert packfold("analyse", "--from", "2026-06-01", "--format", "json").document["computed"] == 2
    assert "not a date" in packfold("analyse", "--from", "yesterday", code=2).err


def test_a_day_reckoned_by_hand(packfold):
    filled(packfold)("analyse")
    day = next(csv.DictReader(io.StringIO(packfold("export", "days").out)))
    # 09:00 to 18:59 BST is the charge of 0.2 A for 10 h, less half a minute at each edge between readings.
    assert abs(float(day["charge_ah"]) - 2.0) < 0.005
    assert day["pack"] == "R-07"
    assert day["date"] == "2026-06-10"


def test_csv_json_and_parquet_say_the_same(packfold):
    filled(packfold)("analyse")
    for table in ("readings", "days", "charges", "throughput"):
        ran = packfold("export", table)
        rows = list(csv.DictReader(io.StringIO(ran.out)))
        assert f"{len(rows)} rows of {table}" in ran.err
        documents = json.loads(packfold("export", table, "--format", "json").out)
        packfold("export", table, "--format", "parquet", "--out", "table.parquet")
        columns = pq.read_table(packfold.folder / "table.parquet").to_pylist()
        assert len(rows) == len(documents) == len(columns) > 0
        for row, document, column in zip(rows[:50], documents, columns, strict=False):
            assert list(row) == list(document) == list(column)
            for name, text in row.items():
                assert text == ("" if document[name] is None else str(document[name]))
                if isinstance(document[name], float):
                    assert column[name] == document[name]


def test_selections_and_their_mistakes(packfold):
    filled(packfold)("analyse")
    assert packfold("export", "readings", "--from", "2026-06-10T23:58:00Z").out.count("\n") == 3
    assert packfold("export", "days", "--to", "2026-06-09").out.count("\n") == 1
    assert "no node “nowhere”" in packfold("export", "days", "--node", "nowhere", code=2).err
    assert "no pack “X”" in packfold("export", "days", "--pack", "X", code=2).err
    assert "not a date" in packfold("export", "days", "--from", "10/06/2026", code=2).err
