import dataclasses
from zoneinfo import ZoneInfo

import pytest
from web.builders import NOW_MS, ZONE

from hub.store.inventory import Node, Site
from hub.web.glance import Glance
from hub.web.needs import needs
from hub.web.overview import state


def test_a_node_of_which_nothing_is_known_can_be_looked_at():
    glance = Glance(Node("spare", "ridge"), Site("ridge", 51.0, -1.0), ZoneInfo(ZONE))
    assert needs([glance], NOW_MS) == []
    assert state(glance, NOW_MS)[-1] == "Never heard yet."


def test_a_glance_does_not_change():
    glance = Glance(Node("spare", "ridge"), Site("ridge", 51.0, -1.0), ZoneInfo(ZONE))
    with pytest.raises(dataclasses.FrozenInstanceError):
        glance.last_ms = 1
