from hub.store import skies
from hub.store.layout import DAY_MS


def test_a_sky_is_remembered_for_its_window_and_panel(scratch):
    with scratch() as connection:
        skies.remember(connection, 1, 0, "south", b"one")
        assert skies.remembered(connection, 1, 0, "south") == b"one"
        assert skies.remembered(connection, 1, 0, "east") is None
        assert skies.remembered(connection, 1, 1, "south") is None
        assert skies.remembered(connection, 2, 0, "south") is None


def test_a_sky_of_another_panel_takes_the_place_of_the_one_before(scratch):
    with scratch() as connection:
        skies.remember(connection, 1, 0, "south", b"one")
        skies.remember(connection, 1, 0, "east", b"two")
        assert skies.remembered(connection, 1, 0, "south") is None
        assert skies.remembered(connection, 1, 0, "east") == b"two"


def test_what_lies_days_before_is_let_go_of_one_node_at_a_time(scratch):
    with scratch() as connection:
        for node in (1, 2):
            for day in range(4):
                skies.remember(connection, node, day * DAY_MS, "south", b"sky")
        skies.remember(connection, 1, 6 * DAY_MS, "south", b"sky")
        kept = connection.exec_driver_sql("SELECT start_ms FROM clear_sky WHERE node_id = ? ORDER BY 1", (1,))
        assert [start // DAY_MS for start in kept.scalars()] == [2, 3, 6]
        assert skies.remembered(connection, 2, 0, "south") == b"sky"
