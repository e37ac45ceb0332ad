import os
import signal

from hub.cli.running import DEMONSTRATION_MARK, stop_signal


def test_a_part_that_does_not_exist_is_named(packfold):
    assert "The parts are collect, analyse, web" in packfold("run", "--only", "collect,wbe", code=2).err


def test_a_signal_sets_the_event_and_the_handlers_come_back():
    before = signal.getsignal(signal.SIGTERM)
    with stop_signal() as stop:
        assert not stop.is_set()
        os.kill(os.getpid(), signal.SIGTERM)
        assert stop.wait(5)
    assert signal.getsignal(signal.SIGTERM) is before


def test_a_real_hub_does_not_move_into_a_folder_that_the_demonstration_empties(packfold):
    packfold.data.mkdir()
    (packfold.data / DEMONSTRATION_MARK).touch()
    assert "Choose another with --data" in packfold("run", code=2).err
