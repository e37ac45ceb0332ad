"""``packfold run`` and ``packfold demo``."""

import signal
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import click

from hub.app import PARTS, Hub
from hub.cli.common import Context, now_ms, say
from hub.errors import UsageError

# In a folder of the demonstration: it may be emptied, and a real hub must not live there.
DEMONSTRATION_MARK = "this-is-a-demonstration"


@click.command()
@click.option(
    "--only",
    metavar="PARTS",
    help=f"Only these parts, separated by commas: {', '.join(PARTS)}. The rest runs in another process.",
)
@click.pass_obj
def run(context: Context, only: str | None) -> None:
    """Receive, compute and show: everything in one process.

    Starts a broker unless the settings name one (broker.embedded = false). Ends cleanly on Ctrl-C or SIGTERM: what was
    received is stored first.
    """
    parts = PARTS if only is None else tuple(part.strip() for part in only.split(","))
    for part in parts:
        if part not in PARTS:
            raise UsageError(f"There is no part “{part}”. The parts are {', '.join(PARTS)}.")
    if (context.data / DEMONSTRATION_MARK).exists():
        raise UsageError(
            f"The folder {context.data} belongs to the demonstration, which empties it at its next start. "
            "Choose another with --data."
        )
    say(f"Data: {context.data}")
    hub = Hub(context.settings, context.data, settings_path=context.settings_path, parts=parts, say=say, now_ms=now_ms)
    with stop_signal() as stop:
        hub.run_until(stop)


@contextmanager
def stop_signal() -> Iterator[threading.Event]:
    """An event that Ctrl-C and SIGTERM set."""
    stop = threading.Event()
    before = {name: signal.signal(name, lambda *_: stop.set()) for name in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield stop
    finally:
        for name, handler in before.items():
            signal.signal(name, handler)


@click.command()
@click.option("--days", type=click.IntRange(1, 120), default=28, show_default=True, help="Days of history.")
@click.option("--data", type=click.Path(path_type=Path, file_okay=False), help="Folder for the demonstration's data.")
@click.option("--web", "listen", metavar="ADDRESS:PORT", help="Where the pages are served; loopback only.")
@click.option("--broker-port", type=click.IntRange(0, 65535), help="Port of the demonstration's broker.")
@click.option("--history-only", is_flag=True, help="Play the history, bring the figures up to date, and end.")
@click.pass_obj
def demo(
    context: Context, days: int, data: Path | None, listen: str | None, broker_port: int | None, history_only: bool
) -> None:
    """Look around without hardware: a simulated scenario, some weeks of history at once, then live.

    Everything is invented: places, packs and weather. The nodes are simulated cell by cell, with clouds, sensor errors,
    outages and wrong clocks, and speak to the hub through MQTT as real ones do. It serves this machine only and
    keeps its data apart from a real hub's.
    """
    from hub.cli.demonstration import demonstrate

    demonstrate(context, days, data, listen, broker_port, history_only=history_only)
