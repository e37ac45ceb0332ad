from hub.mqtt.access import Access


def test_the_password_is_not_shown():
    assert "geheim" not in repr(Access("127.0.0.1", 1883, "hub", "hub", "geheim"))


def test_the_place_reads_like_a_place():
    assert Access("broker.example", 8883, "hub").place == "broker.example, port 8883"
