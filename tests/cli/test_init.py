import pytest

from hub.cli import COMMANDS


def test_help_shows_every_command_and_the_first_steps(packfold):
    shown = packfold("--help").out
    assert all(name in shown for name in COMMANDS)
    assert "First steps" in shown
    assert "packfold demo" in shown


@pytest.mark.parametrize("command", [*COMMANDS, "inventory load", "credential add", "user add"])
def test_each_command_explains_itself(packfold, command):
    shown = packfold(*command.split(), "--help").out
    assert "Usage:" in shown
    assert len(shown.split("Options:")[0].split()) > 12, "more than a name"


def test_a_typing_error_is_answered_with_exit_code_2(packfold):
    assert "No such command" in packfold("exprot", code=2).err
    assert "is not one of" in packfold("export", "reading", code=2).err


def test_a_settings_key_that_does_not_exist_is_refused_with_a_suggestion(packfold):
    path = packfold.write("hub.toml", "[broker]\nprot = 1884\n")
    ran = packfold("--settings", path, "user", "list", code=2)
    assert "Did you mean “port”?" in ran.err
    assert "Traceback" not in ran.err


def test_an_unexpected_fault_is_one_sentence_unless_the_trace_is_asked_for(packfold):
    packfold.stocked()
    (packfold.data / "packfold.db").write_bytes(b"not a database at all, whatever its name says" * 100)
    ran = packfold("inventory", "show", code=1)
    assert "Traceback" not in ran.err
    assert ran.err.startswith("packfold: ")
    assert len(ran.err.splitlines()) == 1
