"""The simulated nodes as a program of their own, so that they reach the hub through the broker alone.

Reads one ``Order`` as JSON from standard input; says how far it is as one JSON object a line: ``{"readings", "of"}``
while the history is made, ``{"history": "sent"}`` when it is out, ``{"error"}`` if it cannot go on.
"""

import datetime as dt
import json
import signal
import sys
import threading

import msgspec

from hub.demo.play import play
from hub.errors import PackfoldError

SETTLE_S = 100.0


class Order(msgspec.Struct, frozen=True):
    """What to play: where the broker is, the nodes' logins, the days of history, and the instant at which it ends."""

    port: int
    root: str
    logins: dict[str, tuple[str, str]]
    days: int
    now_ms: int
    live: bool = True
    host: str = "127.0.0.1"


def moment(now_ms: int) -> dt.datetime:
    """An instant in UTC milliseconds as the scenario wants it."""
    return dt.datetime.fromtimestamp(now_ms / 1000.0, dt.UTC)


def main() -> int:
    """Play until the end or until a signal; the exit code."""
    order = msgspec.json.decode(sys.stdin.read(), type=Order)
    stop = threading.Event()
    for name in (signal.SIGINT, signal.SIGTERM):
        signal.signal(name, lambda *_: stop.set())
    try:
        play(
            order.host,
            order.port,
            order.root,
            order.logins,
            now=moment(order.now_ms),
            history_days=order.days,
            live=order.live,
            stop=stop,
            progress=lambda readings, of: _tell({"readings": readings, "of": of}),
            told_history=lambda: _tell({"history": "sent"}),
            settle_s=SETTLE_S,
        )
    except PackfoldError as error:
        _tell({"error": str(error)})
        return error.exit_code
    return 0


def _tell(what: dict[str, object]) -> None:
    sys.stdout.write(json.dumps(what) + "\n")
    sys.stdout.flush()


if __name__ == "__main__":
    sys.exit(main())
