"""Bringing figures up to date.

Figures are a fold over a node's windows: each is computed from its readings, the inventory that applies to it, and what
the window before hands on. The ledger keeps a digest of all of that for every window; a window whose digest is still
the same is not computed again, and neither is any after it unless what it hands on has changed. So the result does
not depend on the order in which readings came or on how the work was split, and a second run changes nothing.
"""

import bisect
import hashlib
import json
import time
from collections.abc import Callable, Sequence
from dataclasses import asdict, dataclass
from typing import Any

from sqlalchemy import Connection

from hub.battery.day import METHOD_VERSION, Carried, DayResult, analyse
from hub.battery.spec import NodeSpec, PackSpec, Window
from hub.jobs.windows import DayWindow, windows
from hub.solar.clearsky import Panel, clear_sky_wh
from hub.solar.harvest import harvest
from hub.store import figures, inventory, measured, readings
from hub.store.engine import Database
from hub.store.inventory import Calibration, Inventory, Node

# How far before and after a window its figures look; longer before where a charge session was still open.
BEFORE_MS = 3_600_000
AFTER_MS = 15 * 60_000
# A transaction holds the write lock no longer than this, so that receiving never waits long.
LOCK_S = 1.0
# A day is sealed once the node has sent readings this long after its end.
SEAL_AFTER_MS = 24 * 3_600_000


@dataclass(slots=True)
class Done:
    """What a run did: windows computed anew, windows that were up to date, days sealed."""

    computed: int = 0
    unchanged: int = 0
    sealed: int = 0
