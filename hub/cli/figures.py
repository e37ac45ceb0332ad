"""``packfold analyse`` and ``packfold export``."""

import sys
from dataclasses import asdict
from pathlib import Path
from typing import IO, cast

import click

from hub.cli.common import Context, format_option, progress, report, say
from hub.errors import UsageError
from hub.jobs.analysis import Done, bring_up_to_date
from hub.store import export as store_export
from hub.store.export_rows import instant


@click.command()
@click.option("--node", help="Only this node; all without it.")
@click.option("--from", "since", metavar="DATE", help="Compute anew from this local date on, even if up to date.")
@format_option
@click.pass_obj
def analyse(context: Context, node: str | None, since: str | None, form: str) -> None:
    """Bring all figures up to date now: the same code as the schedule. A second run changes nothing."""
    instant(since)
    with context.database() as database, progress("Days", None) as told:
        done = bring_up_to_date(database, node=node, since=since, progress=lambda d: told(d.computed + d.unchanged))
    report(form, asdict(done), [sentence(done)])


def sentence(done: Done) -> str:
    """What a run did, in words."""
    if not done.computed:
        return f"Everything was up to date: {done.unchanged} days."
    return f"{done.computed} days computed, {done.unchanged} were up to date."


@click.command()
@click.argument("table", type=click.Choice(list(store_export.TABLES)))
@click.option("--node", help="Only this node.")
@click.option("--pack", help="Only this pack.")
@click.option("--from", "start", metavar="D", help="From this date or RFC 3339 instant.")
@click.option("--to", "end", metavar="D", help="To this date (inclusive) or instant.")
@click.option("--format", "form", type=click.Choice(store_export.FORMATS), default="csv", show_default=True)
@click.option("--out", type=click.Path(path_type=Path, dir_okay=False), help="File to write; standard output without.")
@click.pass_obj
def export(
    context: Context,
    table: str,
    node: str | None,
    pack: str | None,
    start: str | None,
    end: str | None,
    form: store_export.Format,
    out: Path | None,
) -> None:
    """Write a TABLE as CSV, JSON or Parquet.

    Dates are local days for tables of days and UTC days for tables of instants.
    """
    selection = store_export.Selection(node, pack, start, end)
    if form == "parquet" and out is None and sys.stdout.isatty():
        raise UsageError("Parquet is not text. Name a file with --out.")
    with context.database() as database, database.read() as connection, progress("Rows", None) as told:
        if out is None:
            number = store_export.write(connection, table, selection, form, sys.stdout.buffer, told)
            sys.stdout.buffer.flush()
        else:
            unfinished = out.with_name(f"{out.name}.part")
            with unfinished.open("wb") as stream:
                number = store_export.write(connection, table, selection, form, cast("IO[bytes]", stream), told)
            unfinished.replace(out)
    say(f"{number} rows of {table}{f' in {out}' if out else ''}.")
