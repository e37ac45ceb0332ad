import csv
import io

import pytest

from hub.cli.running import DEMONSTRATION_MARK


@pytest.mark.broker
def test_the_history_comes_through_the_broker_into_the_figures(packfold):
    # The data folder of the command is the demonstration's own.
    ran = packfold("demo", "--days", "2", "--history-only")
    assert "/enter/" in ran.err
    assert "History is in the figures" in ran.err
    days = list(csv.DictReader(io.StringIO(packfold("export", "days").out)))
    assert {day["node"] for day in days} == {
        *("fen-lamp", "fen-logger", "quarry-relay", "quarry-wind", "weir-camera", "weir-gauge")
    }
    whole = [day for day in days if day["node"] == "weir-gauge"][1:-1]
    assert all(float(day["coverage"]) > 0.95 for day in whole)
    assert packfold("demo", "--days", "1", "--history-only").code == 0, "an old demonstration is replaced"


def test_a_folder_with_something_else_in_it_is_left_alone(packfold):
    packfold.data.mkdir()
    (packfold.data / "thesis.txt").write_text("years of work")
    assert "not a demonstration" in packfold("demo", code=2).err
    assert (packfold.data / "thesis.txt").read_text() == "years of work"
    assert not (packfold.data / DEMONSTRATION_MARK).exists()


def test_it_serves_this_machine_only(packfold):
    assert "this machine only" in packfold("demo", "--web", "0.0.0.0:8740", code=2).err
