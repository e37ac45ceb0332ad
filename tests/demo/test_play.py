"""The whole play against a real broker: every reading arrives, and receipts empty the outboxes."""

import csv
import datetime as dt
import json
import socket
import threading
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest
from paho.mqtt.client import Client
from paho.mqtt.enums import CallbackAPIVersion

from hub.demo import scenario
from hub.demo.play import history, play, write_log
from hub.errors import BrokerError, UsageError
from hub.quantities import BY_NAME

NOW = dt.datetime(2026, 12, 1, 9, 37, 21, tzinfo=dt.UTC)


class Hub:
    """Stores every value that arrives, and receipts unbroken runs unless told to keep silent."""

    def __init__(self, port: int, resolve: Callable, answers: bool = True) -> None:
        self.values: dict[tuple[str, float, str], list[float]] = {}
        self.sequences: dict[tuple[str, int], list[int]] = {}
        self.trouble: list[Exception] = []
        self._resolve, self.answers = resolve, answers
        ready = threading.Event()
        self.client = Client(CallbackAPIVersion.VERSION2, client_id="hub")
        self.client.on_message = self._take
        self.client.on_subscribe = lambda *_: ready.set()
        self.client.on_connect = lambda c, *_: c.subscribe("field/+/telemetry", 1)
        self.client.connect("127.0.0.1", port)
        self.client.loop_start()
        assert ready.wait(5.0)

    def _take(self, client: Client, _data: object, message: object) -> None:
        try:
            node = message.topic.split("/")[1]
            said = self._resolve(message.payload)
            boot, sequence = (next(int(v) for n, _, _, v in said if n == name) for name in ("boot", "sequence"))
            for name, unit, t, value in said:
                if name in BY_NAME:
                    assert unit == BY_NAME[name].senml_unit
                    self.values.setdefault((node, t, name), []).append(value)
            have = self.sequences.setdefault((node, boot), [])
            have.append(sequence)
            run = 0
            while run + 1 in set(have):
                run += 1
            if run and self.answers:
                client.publish(f"field/{node}/receipt", json.dumps({"boot": boot, "sequence": run}), qos=1)
        except Exception as error:  # noqa: BLE001 - a test must see it, not the network thread
            self.trouble.append(error)

    def close(self) -> None:
        self.client.disconnect()
        self.client.loop_stop()


@pytest.fixture
def hub(broker: int, resolve: Callable) -> Iterator[Hub]:
    other = Hub(broker, resolve)
    yield other
    other.close()


@pytest.mark.broker
def test_every_reading_arrives_and_receipts_empty_the_outboxes(broker: int, hub: Hub) -> None:
    days, progress = 2, []
    credentials = {name: (name, "secret") for name in scenario.NAMES}
    done = play(
        "127.0.0.1",
        broker,
        "field",
        credentials,
        clock=NOW.timestamp,
        history_days=days,
        live=False,
        progress=lambda made, total: progress.append((made, total)),
    )
    assert hub.trouble == []
    assert done.failures == ()
    assert done.unreceipted == 0
    expected = {}
    for name in scenario.NAMES:
        for stretch in history(scenario.build(name, NOW, days), days):
            for quantity, values in stretch.columns.items():
                for t, value in zip(stretch.stamp_s.tolist(), values.tolist(), strict=True):
                    expected[(name, t, quantity)] = value
    assert hub.values.keys() == expected.keys()
    # Once, or again with the very same value.
    assert all(set(values) == {expected[key]} for key, values in hub.values.items())
    assert done.readings == len({(node, t) for node, t, _ in expected})
    assert done.messages == sum(len(s) for s in hub.sequences.values())
    assert all(sorted(set(s)) == list(range(1, max(s) + 1)) for s in hub.sequences.values())
    assert progress[-1] == (done.readings, 6 * days * 1440)


@pytest.mark.broker
def test_live_readings_follow_every_ten_seconds_and_stop_when_told(broker: int, hub: Hub) -> None:
    stop, began = threading.Event(), time.monotonic()

    def clock() -> float:
        return NOW.timestamp() + 60.0 * (time.monotonic() - began)

    arguments = {"clock": clock, "history_days": 1, "stop": stop, "speed": 60.0}
    thread = threading.Thread(
        target=play, args=("127.0.0.1", broker, "field", {"quarry-relay": ("quarry-relay", "x")}), kwargs=arguments
    )
    thread.start()
    until = time.monotonic() + 20.0
    end = NOW.timestamp() // 60 * 60

    def live() -> list[float]:
        return sorted(t for _, t, name in list(hub.values) if name == "pack_voltage" and t > end)

    while len(live()) < 20 and time.monotonic() < until:
        time.sleep(0.05)
    stop.set()
    thread.join(10.0)
    assert not thread.is_alive()
    assert hub.trouble == []
    times = live()
    assert len(times) >= 20
    # The clock of the relay drifts by up to a second a day.
    assert abs(np.diff(times) - 10.0).max() <= 1.0
    assert times[-1] <= clock() + 1.0


@pytest.mark.broker
def test_a_silent_hub_leaves_the_outbox_full(broker: int, hub: Hub) -> None:
    hub.answers = False
    done = play(
        "127.0.0.1",
        broker,
        "field",
        {"fen-logger": ("fen-logger", "x")},
        clock=NOW.timestamp,
        history_days=2,
        live=False,
        settle_s=0.3,
    )
    assert done.unreceipted == done.messages - done.repeats == 48


@pytest.mark.broker
def test_a_broker_that_refuses_is_told_by_name(closed_broker: int) -> None:
    with pytest.raises(BrokerError, match="refused the node “fen-logger”"):
        play("127.0.0.1", closed_broker, "field", {"fen-logger": ("fen-logger", "x")}, clock=NOW.timestamp)


def test_no_broker_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("hub.demo.play.CONNECT_S", 0.3)
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        with pytest.raises(BrokerError, match="no answer"):
            play("127.0.0.1", taken.getsockname()[1], "field", {"fen-logger": ("a", "b")}, clock=NOW.timestamp)


def test_a_log_has_the_readings_of_the_play(tmp_path: Path) -> None:
    path = tmp_path / "card.csv"
    start, end = NOW - dt.timedelta(hours=20), NOW - dt.timedelta(hours=8)
    lines = write_log(path, "weir-gauge", start, end, now=NOW, history_days=1)
    raw = path.read_bytes()
    assert raw.count(b"\r\n") == lines + 1 == 721
    with path.open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert list(rows[0])[:4] == ["time", "pack_voltage_V", "pack_current_A", "pack_temperature_C"]
    (stretch,) = history(scenario.build("weir-gauge", NOW, 1), 1)
    inside = (stretch.time_ms >= start.timestamp() * 1000) & (stretch.time_ms < end.timestamp() * 1000)
    assert [float(r["pack_voltage_V"]) for r in rows] == stretch.columns["pack_voltage"][inside].tolist()
    stamps = [dt.datetime.fromisoformat(r["time"]).timestamp() for r in rows]
    assert stamps == stretch.stamp_s[inside].tolist()


def test_a_log_of_a_time_outside_the_history_has_a_header_only(tmp_path: Path) -> None:
    path = tmp_path / "card.csv"
    late = NOW + dt.timedelta(days=3)
    assert write_log(path, "fen-logger", late, late, now=NOW, history_days=1) == 0
    assert path.read_text().startswith("time,pack_voltage_V")


def test_a_log_of_nobody_is_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="no node"):
        write_log(tmp_path / "card.csv", "nobody", NOW, NOW, now=NOW)
    assert not (tmp_path / "card.csv").exists()
