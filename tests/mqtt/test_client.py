import ssl

import paho.mqtt.client as paho
import pytest

from hub.errors import BrokerError
from hub.mqtt.access import Access
from hub.mqtt.client import new_client, refusal, unreachable

HERE = Access("broker.example", 8883, "hub", "keeper", "secret", tls=True)


def test_a_client_has_the_login_and_the_version_that_was_meant():
    client = new_client(paho.Client, Access("127.0.0.1", 1883, "hub", "keeper", "secret"), clean=False)
    assert client.protocol == paho.MQTTv311
    assert (client.username, client.password) == ("keeper", "secret")


def test_without_a_name_there_is_no_login():
    assert new_client(paho.Client, Access("127.0.0.1", 1883, "hub"), clean=True).username is None


def test_a_file_of_authorities_that_is_none_is_a_sentence(tmp_path):
    wrong = tmp_path / "ca.pem"
    for text in (None, "not a certificate"):
        if text is not None:
            wrong.write_text(text)
        with pytest.raises(BrokerError, match=r"broker\.ca_file .*ca\.pem cannot be used: .* Give a PEM file"):
            new_client(paho.Client, Access("h", 1, "hub", tls=True, ca_file=str(wrong)), clean=True)


@pytest.mark.parametrize(
    ("error", "said"),
    [
        (
            ConnectionRefusedError(111, "Connection refused"),
            "cannot be reached: Connection refused. Check that it runs",
        ),
        (TimeoutError("timed out"), "cannot be reached: timed out"),
        (OSError(), "cannot be reached: OSError"),
        (ssl.SSLError(1, "wrong version number"), "does not speak TLS there"),
        (ssl.SSLCertVerificationError(1, "nope"), "is not trusted"),
    ],
)
def test_what_stands_in_the_way_is_a_sentence_with_the_place(error, said):
    if isinstance(error, ssl.SSLCertVerificationError):
        error.verify_message = "self-signed certificate"
    sentence = unreachable(HERE, error)
    assert said in sentence
    assert "broker.example, port 8883" in sentence
    assert sentence.endswith(".")


def test_a_refusal_names_what_to_check():
    assert "broker.password_file" in refusal(HERE, "Not authorized")
