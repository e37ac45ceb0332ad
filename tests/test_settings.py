import dataclasses
from typing import get_type_hints

import msgspec
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hub import settings
from hub.errors import SettingsError
from hub.settings import Settings, load


@pytest.fixture
def file(tmp_path):
    """Writes a settings file."""

    def written(text):
        path = tmp_path / "hub.toml"
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return written


def refused(path, environment=None):
    with pytest.raises(SettingsError) as caught:
        load(path, environment or {})
    sentence = str(caught.value)
    assert "\n" not in sentence
    assert "`" not in sentence
    assert "$" not in sentence
    return sentence


def test_no_file_is_needed():
    found = load(None, {})
    assert found == Settings()
    assert (found.broker.port, found.broker.listen, found.web.listen) == (1883, "127.0.0.1", "127.0.0.1:8740")


def test_every_key_can_be_stated_in_the_file_and_in_the_environment(file):
    defaults = msgspec.to_builtins(Settings())
    text = "".join(
        f"[{section}]\n" + "".join(f"{key} = {msgspec.json.encode(value).decode()}\n" for key, value in keys.items())
        for section, keys in defaults.items()
    )
    assert load(file(text), {}) == Settings()
    environment = {
        f"PACKFOLD_{section}_{key}".upper(): str(value)
        for section, keys in defaults.items()
        for key, value in keys.items()
    }
    assert load(None, environment) == Settings()


def test_settings_cannot_be_changed_afterwards():
    with pytest.raises((AttributeError, dataclasses.FrozenInstanceError)):
        load(None, {}).broker.port = 5


def test_the_environment_goes_on_top_of_the_file(file):
    path = file("[broker]\nport = 1900\nroot = 'yard'\n")
    found = load(path, {"PACKFOLD_BROKER_PORT": "1901", "OTHER": "x", "PACKFOLD_DATA": "x", "PACKFOLD_SETTINGS": "y"})
    assert (found.broker.port, found.broker.root) == (1901, "yard")


@pytest.mark.parametrize(("text", "value"), [("true", True), ("Yes", True), ("1", True), ("no", False), ("0", False)])
def test_truth_in_the_environment(text, value):
    assert load(None, {"PACKFOLD_BROKER_EMBEDDED": text}).broker.embedded is value


@pytest.mark.parametrize(
    ("environment", "sentence"),
    [
        ({"PACKFOLD_BROKER_PROT": "1"}, "PACKFOLD_BROKER_PROT names no key of [broker]. Did you mean “port”?"),
        ({"PACKFOLD_BORKER_PORT": "1"}, "PACKFOLD_BORKER_PORT names no section. Did you mean “broker”?"),
        ({"PACKFOLD_X": "1"}, "PACKFOLD_X names no section. Known here: database, broker, web, "),
        ({"PACKFOLD_BROKER": "1"}, "PACKFOLD_BROKER names no key of [broker]."),
        ({"PACKFOLD_BROKER_PORT": "many"}, "PACKFOLD_BROKER_PORT must be a number, not “many”."),
        ({"PACKFOLD_BROKER_PORT": "1.5"}, "PACKFOLD_BROKER_PORT must be a number, not “1.5”."),
        ({"PACKFOLD_BROKER_TLS": "perhaps"}, "PACKFOLD_BROKER_TLS must be true or false, not “perhaps”."),
        ({"PACKFOLD_BROKER_PORT": "70000"}, "broker.port must be a whole number from 0 to 65535, not 70000."),
        ({"PACKFOLD_ANALYSIS_EVERY_S": "inf"}, "analysis.every_s must be a number above 0, not inf."),
    ],
)
def test_a_variable_that_cannot_be_used_is_named(environment, sentence):
    assert sentence in refused(None, environment)


def test_a_variable_for_a_section_that_the_file_has_as_a_value(file):
    assert "[broker] must be a table of keys." in refused(file("broker = 5"), {"PACKFOLD_BROKER_PORT": "1"})


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        ("[borker]\nport = 1", "unknown key “borker”. Did you mean “broker”?"),
        ("[broker]\nprot = 1", "unknown key “prot” in [broker]. Did you mean “port”?"),
        ("[web]\nbase = 1", "unknown key “base” in [web]. Did you mean “base_url”?"),
        ("[web]\nzzzzzzzz = 1", "unknown key “zzzzzzzz” in [web]. Known here: listen, base_url,"),
        ("broker = 5", "broker must be a table of keys, not 5."),
        ("[broker]\nport = 'x'", "broker.port must be a whole number from 0 to 65535, not “x”."),
        ("[broker]\nport = true", "broker.port must be a whole number from 0 to 65535, not true."),
        ("[broker]\nkind = 'other'", "broker.kind must be “auto”, “mosquitto” or “trial”, not “other”."),
        ("[broker]\nroot = '#'", "broker.root must be topic levels of letters, digits, - and _ with / between them"),
        ('[broker]\nroot = "field\\n"', "broker.root must be topic levels"),
        ("[broker]\nroot = '/field'", "broker.root must be topic levels"),
        ("[broker]\nmessage_limit_bytes = 5", "broker.message_limit_bytes must be a whole number from 1024 to 16777216, not 5."),
        ("[web]\nlisten = '8740'", "web.listen must be an address and a port, such as 127.0.0.1:8740, not “8740”."),
        ("[web]\nlisten = '127.0.0.1:99999'", "web.listen has a port above 65535."),
        ("[web]\nsession_days = 0", "web.session_days must be a number above 0 and at most 365, not 0."),
        ("[analysis]\nevery_s = nan", "analysis.every_s must be a number above 0, not nan."),
        ("[analysis]\nevery_s = inf", "analysis.every_s must be a number above 0, not inf."),
        ("[database]\nurl = 5", "database.url must be text in quotation marks, not 5."),
        ("[broker]\nkind = 'trial'\nlisten = '0.0.0.0'", "the trial broker serves this machine only. Set broker.listen to 127.0.0.1"),
        ("[broker]\nusername = 'hub'\nembedded = false", "broker.username needs broker.password_file beside it."),
        ("[broker]\ntls = true", "broker.tls concerns an outside broker"),
    ],
)  # fmt: skip
def test_what_cannot_be_used_is_told_with_the_key_and_what_it_may_be(file, text, sentence):
    path = file(text)
    assert refused(path).startswith(f"{path}: {sentence}")


@pytest.mark.parametrize("listen", ["127.0.0.1", "::1", "localhost"])
def test_the_trial_broker_may_serve_this_machine(file, listen):
    assert load(file(f"[broker]\nkind = 'trial'\nlisten = '{listen}'"), {}).broker.kind == "trial"


def test_a_file_that_cannot_be_read(file, tmp_path):
    assert "There is no settings file" in refused(tmp_path / "none.toml")
    assert "cannot be read: Is a directory. Check its permissions." in refused(tmp_path)
    for text in ("[broker", b"x = '\xe9'", "x = " + "[" * 5000, "x = 1" + "0" * 5000):
        assert refused(file(text)).endswith("Correct that line and try again.")


sections = st.sampled_from([*get_type_hints(Settings), "x"])
keys = st.sampled_from(
    sorted({key for kind in get_type_hints(Settings).values() for key in get_type_hints(kind)} | {"x"})
)
anything = st.sampled_from(
    ["1", "-1", "1e999", "nan", "true", "'text'", "''", "[]", "{}", "2026-03-01", "99999999999999999999"]
)


@given(st.lists(st.tuples(sections, keys, anything), max_size=4))
def test_any_file_is_settings_or_a_sentence(tmp_path_factory, stated):
    path = tmp_path_factory.getbasetemp() / "any.toml"
    path.write_text("\n".join(f"{section}.{key} = {value}" for section, key, value in stated), encoding="utf-8")
    try:
        found = load(path, {})
    except SettingsError as error:
        found = str(error)
    assert isinstance(found, Settings) or found.startswith((str(path), f"The settings file {path}"))


@pytest.mark.parametrize(
    ("listen", "base_url", "address", "url"),
    [
        ("127.0.0.1:8740", "", ("127.0.0.1", 8740), "http://127.0.0.1:8740"),
        ("0.0.0.0:80", "", ("0.0.0.0", 80), "http://127.0.0.1:80"),
        ("[::1]:8740", "", ("::1", 8740), "http://[::1]:8740"),
        ("[::]:8740", "", ("::", 8740), "http://127.0.0.1:8740"),
        ("0.0.0.0:80", "https://packs.example.org/", ("0.0.0.0", 80), "https://packs.example.org"),
    ],
)
def test_where_the_pages_are(listen, base_url, address, url):
    found = settings.Web(listen=listen, base_url=base_url)
    assert (found.address, found.url) == (address, url)
