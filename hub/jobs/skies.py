"""Clear skies remembered: today's is asked for every few minutes, and the library behind it takes seconds to load."""

import hashlib
import json
from dataclasses import asdict, replace

import numpy as np

from hub.jobs.compute import Subject
from hub.solar.clearsky import STEP_MS, ClearSky, Panel, clear_sky
from hub.store import skies
from hub.store.engine import Database


class Skies:
    """Clear-sky power of one node's panel, computed once a window."""

    def __init__(self, database: Database, node_id: int) -> None:
        self._database = database
        self._node_id = node_id

    def over(self, subject: Subject) -> ClearSky | None:
        """Clear-sky power up to what has happened of the window; ``None`` where the panel is not described.

        It is computed for the whole window and cut, so that the part of a day that has happened is a part of the day.
        """
        panel, window = subject.panel, subject.window
        if panel is None:
            return None
        digest = _digest(panel, window.end_ms)
        with self._database.read() as connection:
            kept = skies.remembered(connection, self._node_id, window.start_ms, digest)
        if kept is None:
            whole = clear_sky(panel, window.start_ms, window.end_ms)
            with self._database.write() as connection:
                skies.remember(connection, self._node_id, window.start_ms, digest, _to_bytes(whole))
        else:
            whole = _from_bytes(kept, panel.power_w)
        return _until(whole, subject.until_ms)


def _digest(panel: Panel, end_ms: int) -> str:
    return hashlib.sha256(json.dumps([asdict(panel), end_ms], sort_keys=True).encode()).hexdigest()[:16]


def _to_bytes(sky: ClearSky) -> bytes:
    return np.stack([sky.time_ms.astype("<f8"), sky.power_w, sky.seconds]).astype("<f8").tobytes()


def _from_bytes(kept: bytes, rated_power_w: float) -> ClearSky:
    time_ms, power_w, seconds = np.frombuffer(kept, "<f8").reshape(3, -1)
    return ClearSky(time_ms.astype(np.int64), power_w, seconds, rated_power_w)


def _until(sky: ClearSky, until_ms: int) -> ClearSky:
    passed = np.clip((until_ms - (sky.time_ms - STEP_MS // 2)) / 1000.0, 0.0, None)
    return replace(sky, seconds=np.minimum(sky.seconds, passed))
