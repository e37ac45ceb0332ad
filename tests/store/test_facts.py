from hub.store import facts


def test_a_fact_is_what_was_noted_last(scratch):
    with scratch() as connection:
        assert facts.get(connection, "mood") is None
        facts.put(connection, "mood", "fair")
        facts.put(connection, "mood", "fine")
        facts.put(connection, "other", "")
        assert facts.get(connection, "mood") == "fine"
        assert facts.get(connection, "other") == ""


def test_a_revision_is_larger_than_all_before_and_ten_follows_nine(scratch):
    with scratch() as connection:
        before = facts.revision(connection)
        found = [facts.next_revision(connection) for _ in range(12)]
        assert found == list(range(before + 1, before + 13))
        assert facts.revision(connection) == found[-1]


def test_the_first_revision_of_a_new_database_is_one(database):
    with database.write() as connection:
        assert facts.revision(connection) == 0
        assert facts.next_revision(connection) == 1
