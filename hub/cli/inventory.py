"""``packfold inventory``."""

from dataclasses import asdict
from pathlib import Path

import click

from hub.cli.common import Context, format_option, now_ms, report
from hub.jobs.enrolment import take_in
from hub.store import inventory as store_inventory
from hub.store import inventory_change, inventory_file


@click.group()
def inventory() -> None:
    """Sites, nodes, packs and fittings: load them from a file, or show them."""


@inventory.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--dry-run", is_flag=True, help="Only show what would change.")
@format_option
@click.pass_obj
def load(context: Context, file: Path, dry_run: bool, form: str) -> None:
    """Load an inventory FILE (TOML). Loading it again changes nothing.

    What the file leaves out stays as it is. A fitting that is still open ends where the next one of the same pack or
    node begins. The changes are shown before they are made. What a new node sent before it was known is taken in.

    \b
    [[site]]
    name = "ridge"
    latitude = 51.2
    longitude = -1.9
    altitude_m = 210
    timezone = "Europe/London"

    \b
    [[node]]
    name = "ridge-east"
    site = "ridge"
    interval_s = 10
    panel_power_w = 10
    panel_tilt_deg = 35
    panel_azimuth_deg = 180

    \b
    [[pack]]
    label = "R-07"
    designation = "HR6"
    cells_in_series = 8
    rated_capacity_ah = 2.4

    \b
    [[fitting]]
    pack = "R-07"
    node = "ridge-east"
    start = 2026-03-01T09:00:00Z
    """  # noqa: D301 - click's mark
    rows = inventory_file.read_file(file)
    with context.database() as database:
        with database.read() as connection:
            known = store_inventory.load(connection)
        planned = inventory_change.differences(known, inventory_change.merged(known, rows))
        if form == "text":
            for change in planned:
                click.echo(change.sentence)
        if not dry_run and planned:
            with database.write() as connection:
                inventory_change.apply(connection, rows, who="command line", now_ms=now_ms())
        taken = {} if dry_run else take_in(database)
        if form == "text":
            for name, number in taken.items():
                click.echo(f"taken in, from before {name} was known: {number} reading{'s' if number != 1 else ''}")
    last = "nothing to change" if not planned else "nothing was changed (dry run)" if dry_run else "done"
    report(form, {"dry_run": dry_run, "changes": [asdict(c) for c in planned], "taken_in": taken}, [last])


@inventory.command()
@format_option
@click.pass_obj
def show(context: Context, form: str) -> None:
    """Show what is known, as a file that “load” understands."""
    with context.database() as database, database.read() as connection:
        known = store_inventory.load(connection)
    if not known.sites and form == "text":
        click.echo("# Nothing is known yet. See “packfold inventory load --help” for a file to start from.")
    report(form, asdict(known), [inventory_file.write(known)] if known.sites else [])
