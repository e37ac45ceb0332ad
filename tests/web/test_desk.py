import pytest

from hub.web.desk import Desk, desk


def test_the_desk_is_that_of_the_app_which_answers(hub):
    app = hub.app()
    with app.app_context():
        assert isinstance(desk(), Desk)
        assert desk().database is hub.database
        assert desk().status() == {}


def test_two_apps_have_two_desks(hub):
    one, other = hub.app(), hub.app()
    with one.app_context():
        first = desk()
    with other.app_context():
        assert desk() is not first
        assert desk().throttle is not first.throttle


def test_without_an_app_there_is_no_desk():
    with pytest.raises(RuntimeError):
        desk()
