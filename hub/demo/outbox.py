"""What a node keeps until the hub says that it has it: messages, their bytes, and the order of sending."""

import json
from collections import OrderedDict, deque
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import cbor2
import msgspec

from hub.quantities import BY_NAME

_EXTRA_UNITS = {"boot": "count", "sequence": "count", "oldest": "count"}
# CBOR labels of SenML (RFC 8428, table 4).
_BASE_NAME, _BASE_TIME, _BASE_UNIT, _NAME, _UNIT, _VALUE, _TIME = -2, -3, -4, 0, 1, 2, 6


@dataclass(slots=True)
class Packet:
    """Readings that travel together.

    Attributes
    ----------
    boot, sequence
        Restarts so far, and the message's number within the boot, counted from 1.
    true_ms
        When the readings were really taken.
    stamp_s
        What the node's clock said, seconds since 1970; ``None`` where it has no clock.
    columns
        Quantity to values, one a reading.
    """

    boot: int
    sequence: int
    true_ms: list[int]
    stamp_s: list[int] | None
    columns: Mapping[str, list[float]]

    def encode(self, form: str, urn: str, sent_ms: int, oldest: int | None = None) -> bytes:
        """As a SenML pack (RFC 8428).

        Parameters
        ----------
        form
            ``json``: reading by reading; ``cbor``: quantity by quantity, shorter.
        urn
            Base name of the device, ending in ``:``.
        sent_ms
            The moment of sending: a node without a clock says how long ago each reading was.
        oldest
            Lowest sequence of this boot that the node still has, when older ones had to go.
        """
        if self.stamp_s is None:
            base, offsets = None, [round((t - sent_ms) / 1000.0, 3) for t in self.true_ms]
        else:
            base, offsets = self.stamp_s[0], [float(t - self.stamp_s[0]) for t in self.stamp_s]
        times: list[float] = [int(t) if t == int(t) else t for t in offsets]
        plain = {"boot": self.boot, "sequence": self.sequence}
        if oldest is not None:
            plain["oldest"] = oldest
        if form == "cbor":
            return cbor2.dumps(self._by_quantity(urn, base, times, plain))
        return msgspec.json.encode(self._by_reading(urn, base, times, plain))

    def _by_reading(
        self, urn: str, base: int | None, times: list[float], plain: dict[str, int]
    ) -> list[dict[str, Any]]:
        kinds = [(name, _unit(name), values) for name, values in self.columns.items()]
        first: dict[str, Any] = {"bn": urn} if base is None else {"bn": urn, "bt": base}
        records = [{"n": n, "u": _unit(n), "t": times[0], "v": v} for n, v in plain.items()]
        for k, t in enumerate(times):
            records += [{"n": n, "u": u, "t": t, "v": values[k]} for n, u, values in kinds]
        records[0] = first | records[0]
        return records

    def _by_quantity(
        self, urn: str, base: int | None, times: list[float], plain: dict[str, int]
    ) -> list[dict[int, Any]]:
        records: list[dict[int, Any]] = []
        for name, values in self.columns.items():
            records.append({_BASE_NAME: urn + name, _BASE_UNIT: _unit(name), _TIME: times[0], _VALUE: values[0]})
            records += [{_TIME: t, _VALUE: v} for t, v in zip(times[1:], values[1:], strict=True)]
        records += [{_BASE_NAME: urn + n, _BASE_UNIT: _unit(n), _TIME: times[0], _VALUE: v} for n, v in plain.items()]
        if base is not None:
            records[0][_BASE_TIME] = base
        return records


def _unit(name: str) -> str:
    return _EXTRA_UNITS.get(name) or BY_NAME[name].senml_unit or "/"


@dataclass(slots=True)
class Outbox:
    """Messages not yet receipted, oldest first.

    ``limit`` is the node's storage in messages: beyond it the oldest go, and the node says so with ``oldest``.
    """

    limit: int = 5000
    dropped: int = 0
    _waiting: deque[Packet] = field(default_factory=deque)
    _sent: OrderedDict[tuple[int, int], tuple[Packet, float]] = field(default_factory=OrderedDict)
    _lost: dict[int, int] = field(default_factory=dict)

    def __len__(self) -> int:
        return len(self._waiting) + len(self._sent)

    @property
    def waiting(self) -> int:
        """Messages never sent."""
        return len(self._waiting)

    @property
    def unreceipted(self) -> int:
        """Messages sent and not yet receipted."""
        return len(self._sent)

    def add(self, packet: Packet) -> None:
        """Keep a new message."""
        self._waiting.append(packet)
        while len(self) > self.limit:
            held = [p for p, _ in self._sent.values()]
            oldest = min([*held, *self._waiting], key=lambda p: (p.boot, p.sequence))
            if self._sent.pop((oldest.boot, oldest.sequence), None) is None:
                self._waiting.remove(oldest)
            self._lost[oldest.boot] = max(self._lost.get(oldest.boot, 0), oldest.sequence)
            self.dropped += 1

    def oldest(self, boot: int) -> int | None:
        """The lowest sequence of a boot still held, once older ones were dropped; else ``None``."""
        return self._lost[boot] + 1 if boot in self._lost else None

    def due(self, now_s: float, window: int, again_s: float) -> Packet | None:
        """The next message to send, or ``None``.

        One that was sent ``again_s`` ago without a receipt goes again, at most so often; a new one goes while fewer
        than ``window`` wait for their receipt.
        """
        if self._sent:
            packet, at = next(iter(self._sent.values()))
            if now_s - at >= again_s:
                return packet
        if self._waiting and len(self._sent) < window:
            return self._waiting[0]
        return None

    def is_sent(self, packet: Packet) -> bool:
        """Whether a message went out before and has no receipt yet."""
        return (packet.boot, packet.sequence) in self._sent

    def sent(self, packet: Packet, now_s: float) -> None:
        """Note that a message from ``due`` went out."""
        key = (packet.boot, packet.sequence)
        if self._waiting and self._waiting[0] is packet:
            self._waiting.popleft()
        self._sent.pop(key, None)
        self._sent[key] = (packet, now_s)

    def receipt(self, payload: bytes) -> int:
        """Let go of everything a receipt covers; how many messages that was. A receipt nobody can read covers none."""
        try:
            said = json.loads(payload)
            boot, sequence = int(said["boot"]), int(said["sequence"])
        except (ValueError, TypeError, KeyError, OverflowError):
            return 0
        covered = [key for key in self._sent if key[0] == boot and key[1] <= sequence]
        for key in covered:
            del self._sent[key]
        return len(covered)
