"""``packfold import``."""

from pathlib import Path

import click

from hub.cli.common import Context, format_option, now_ms, progress, report
from hub.errors import UsageError
from hub.jobs import importing
from hub.store import imports, inventory
from hub.store.engine import Database
from hub.store.inventory_file import instant_text
from hub.telemetry.logmapping import EXAMPLE

# So many lines set aside are printed; all of them are kept and shown on the pages.
SHOWN = 20


@click.command("import", epilog=f"A mapping for a log with its own columns: {EXAMPLE}")
@click.argument("files", nargs=-1, type=click.Path(path_type=Path), metavar="FILE...")
@click.option("--node", help="The node that wrote the logs.")
@click.option(
    "--map",
    "mapping",
    type=click.Path(path_type=Path),
    help="Mapping (TOML) for a log with columns of its own; remembered for the node.",
)
@click.option("--dry-run", is_flag=True, help="Only show how the lines would be read.")
@click.option("--list", "listed", is_flag=True, help="Show earlier imports.")
@click.option("--undo", "undone", type=int, metavar="ID", help="Take an import back.")
@format_option
@click.pass_obj
def import_(
    context: Context,
    files: tuple[Path, ...],
    node: str | None,
    mapping: Path | None,
    dry_run: bool,
    listed: bool,
    undone: int | None,
    form: str,
) -> None:
    """Import node logs (SD card) of one node.

    Each line is taken, known already, or set aside with its number and the reason. Importing the same file twice adds
    nothing, and an import can be taken back with --undo.
    """
    with context.database() as database:
        if undone is not None:
            removed = importing.undo(database, undone, now_ms())
            report(form, {"import_id": undone, "removed": removed}, [f"{removed} readings were taken back."])
            return
        if listed:
            _list(database, form)
            return
        if not files or node is None:
            raise UsageError("Name the files and their node: packfold import card.csv --node ridge-east")
        chosen = importing.load_mapping(mapping) if mapping else None
        done = []
        for path in files:
            size = path.stat().st_size if path.exists() else None
            with progress(path.name, size) as told:
                done.append(
                    importing.import_log(
                        database, node, path, mapping=chosen, now_ms=now_ms(), dry_run=dry_run, progress=told
                    )
                )
    report(form, [_document(r) for r in done], [line for r in done for line in _lines(r, dry_run)])


def _list(database: Database, form: str) -> None:
    with database.read() as connection:
        known = imports.listing(connection)
        names = {node_id: name for name, node_id in inventory.node_ids(connection).items()}
    documents = [
        {
            "import_id": i.id,
            "node": names[i.node_id],
            "file": i.file,
            "imported_at": instant_text(i.imported_ms),
            "undone_at": None if i.undone_ms is None else instant_text(i.undone_ms),
            "lines": i.lines,
            "taken": i.taken,
            "repeated": i.repeated,
            "set_aside": i.set_aside,
        }
        for i in known
    ]
    lines = [
        f"{d['import_id']:>4}  {d['imported_at']}  {d['node']}  {d['file']}: {d['taken']} taken, "
        f"{d['repeated']} repeated, {d['set_aside']} set aside{', taken back' if d['undone_at'] else ''}"
        for d in documents
    ]
    report(form, documents, lines or ["Nothing was imported yet."])


def _document(done: importing.Report) -> dict[str, object]:
    return {
        "file": done.file,
        "import_id": done.import_id,
        "lines": done.lines,
        "taken": done.taken,
        "repeated": done.repeated,
        "headers": done.headers,
        "blank": done.blank,
        "set_aside": [{"line": r.line, "reason": r.reason, "detail": r.detail} for r in done.set_aside],
        "values_set_aside": [
            {"line": r.line, "quantity": r.quantity, "reason": r.reason, "detail": r.detail} for r in done.remarks
        ],
        "unknown_columns": done.unknown,
        "first": None if done.first_ms is None else instant_text(done.first_ms),
        "last": None if done.last_ms is None else instant_text(done.last_ms),
    }


def _lines(done: importing.Report, dry_run: bool) -> list[str]:
    taken = f"{done.taken} would be taken" if dry_run else f"{done.taken} taken, {done.repeated} were known already"
    rest = f"{done.headers} headers, {done.blank} empty, {len(done.set_aside)} set aside"
    lines = [f"{done.file}: {done.lines} lines. {taken}, {rest}."]
    if done.span is not None:
        lines.append(f"  from {instant_text(done.span[0])} to {instant_text(done.span[1])}")
    lines += [f"  line {r.line}: {r.detail}" for r in done.set_aside[:SHOWN]]
    if len(done.set_aside) > SHOWN:
        lines.append(f"  … and {len(done.set_aside) - SHOWN} more; --format json shows all.")
    lines += [f"  line {r.line or '?'}, one value: {r.detail}" for r in done.remarks[:SHOWN]]
    if len(done.remarks) > SHOWN:
        lines.append(f"  … and {len(done.remarks) - SHOWN} more values; --format json shows all.")
    if done.unknown:
        lines.append(f"  columns not used: {', '.join(done.unknown)}")
    if done.import_id is not None:
        lines.append(f"  to take it back: packfold import --undo {done.import_id}")
    return lines
