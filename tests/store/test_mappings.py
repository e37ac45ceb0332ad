from hub.store import mappings


def test_a_node_has_the_mapping_that_was_remembered_last(scratch):
    with scratch() as connection:
        assert mappings.remembered(connection, 1) is None
        mappings.remember(connection, 1, '{"time": 0}')
        mappings.remember(connection, 1, '{"time": 1}')
        assert mappings.remembered(connection, 1) == '{"time": 1}'
        assert mappings.remembered(connection, 2) is None
