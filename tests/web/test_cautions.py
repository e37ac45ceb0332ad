from hub.web import cautions


def test_every_list_of_cautions_defers_to_local_codes_and_licensed_practice():
    for told in (cautions.HOT, cautions.FROST, cautions.VISIT):
        assert told[-1] == cautions.LOCAL_RULES
    assert "Local codes and licensed practice come first" in cautions.LOCAL_RULES


def test_a_hot_pack_s_dangers_and_what_not_to_do_are_told():
    told = " ".join(cautions.HOT)
    for word in ("hydrogen", "burn", "Do not approach", "cover the panel", "caustic", "doctor"):
        assert word in told


def test_cautions_do_not_shout():
    for told in (*cautions.HOT, *cautions.FROST, *cautions.VISIT):
        assert "!" not in told
        assert told == told.strip()
        assert not any(word.isupper() and len(word) > 1 and word != "°C" for word in told.split() if word.isalpha())
