"""Writes ``docs/reference.md`` from the code. Run it after a change of a setting, command, quantity, table or address.

``python docs/generate.py`` writes the file; ``python docs/generate.py --check`` only says whether it is up to date.
"""  # noqa: INP001 - a script beside the documents, not a package

import dataclasses
import inspect
import re
import sys
import tempfile
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Annotated, Any, get_args, get_origin, get_type_hints

import click
import msgspec

from hub.battery.spec import NodeSpec
from hub.cli import COMMANDS, cli
from hub.quantities import CATALOGUE, MESSAGE_FIELDS
from hub.settings import Settings
from hub.store import inventory, inventory_file
from hub.store.engine import Database
from hub.store.export import TABLES
from hub.telemetry.logmapping import ColumnMapping, LogMapping, TimeMapping
from hub.telemetry.topics import KINDS, topic
from hub.telemetry.units import SENML
from hub.web.factory import create_app
from hub.web.openapi import document

TARGET = Path(__file__).with_name("reference.md")

QUANTITY_NOTES = {
    "pack_voltage": "needed, with the next two, for the figures of a pack",
    "pack_current": "positive into the pack",
    "air_temperature": "beside the pack, in its box",
    "panel_voltage": "with panel_current: harvest",
    "charge_target": "what a regulating charger aims at",
    "charge_in": "kept by the node, may start again at zero; reaches over gaps",
    "charge_out": "kept by the node, may start again at zero; reaches over gaps",
    "uptime": "shows restarts",
}

TOPICS = {
    "telemetry": "node to hub, QoS 1, not retained: a SenML pack in JSON or CBOR, one or many readings in any order",
    "presence": "node to hub, QoS 1, retained, and the will of the connection: `online` or `offline`",
    "receipt": 'hub to node, QoS 1: `{"boot": 17, "sequence": 1234}`, everything of that boot up to there is stored',
}

FIELDS = {
    "boot": "restarts of the node so far",
    "sequence": "number of the message within the boot, from 1",
    "oldest": "lowest number of the boot that the node still holds; below it nothing is waited for",
}

COLUMNS = {
    "time": "instant of the reading, UTC",
    "node": "node's name",
    "pack": "pack's label; empty where none was fitted",
    "set_aside": "values that screening kept out, each with its reason",
    "date": "local date of the site",
    "coverage": "share of the window between readings no further apart than the gap limit",
    "panel_wh": "harvest: energy taken from the panel",
    "charge_ah": "charge into the pack",
    "discharge_ah": "charge out of the pack",
    "charge_wh": "energy into the pack",
    "discharge_wh": "energy out of the pack",
    "load_wh": "energy into the load, measured or from the assumed load",
    "clear_sky_wh": "what the panel would have given under a clear sky",
    "harvest_ratio": "harvest over clear-sky energy, while the panel set the limit",
    "pack_temperature_max_c": "highest pack temperature",
    "cell_voltage_min_v": "lowest pack voltage over cells in series",
    "cell_voltage_max_v": "highest pack voltage over cells in series",
    "full_at": "when the pack became full; empty where it did not",
    "observed_s": "time between readings no further apart than the gap limit",
    "charge_uncertainty_ah": "standard uncertainty (k = 1) of charge_ah",
    "discharge_uncertainty_ah": "standard uncertainty (k = 1) of discharge_ah",
    "start": "first instant of the row",
    "end": "last instant of the row",
    "bridged_s": "time that running totals of the node covered",
    "offset_removed_a": "offset of the current sensor that was taken off",
    "mean_rate_it": "mean charging rate",
    "peak_temperature_c": "highest pack temperature of the session",
    "ended_by": "how the session ended, see below",
    "confidence": "0.5 to 1: how sure it is that the pack filled, or that it did not",
    "overcharge_ah": "charge put in after full",
    "equivalent_full_cycles": "discharged charge so far over rated capacity",
}

ENDINGS = {
    "voltage-drop": "the voltage fell from its peak at a sustained rate",
    "voltage-plateau": "the voltage rose through its knee and then no more",
    "temperature-slope": "the pack began to warm against the air",
    "temperature-limit": "the charger stopped at a temperature",
    "charger-cut": "the charger let go while sun remained",
    "timer": "the charger stopped after its usual time",
    "sun-ended": "the sun went before the pack was full",
    "unknown": "it broke off and nothing shows why, or readings are missing there",
}

REASONS = {
    "malformed": "the message, or one record of it, cannot be read",
    "unit": "a unit that does not measure the quantity",
    "not-finite": "a value that is no finite number",
    "out-of-range": "a value that a working sensor of the kind cannot report",
    "future": "dated more than 5 min ahead of the hub's clock",
    "too-old": "dated before 2020: the node's clock has fallen back",
    "contradiction": "the same instant was stored with another value; the first stays",
    "unknown-node": "no node of that name is in the inventory",
    "too-large": "more bytes or records than the limit",
    "line": "a line of a log that cannot be read; its number is kept",
}

SCREENED = {
    "disconnected": "the code of a thermometer that is not there (-127 °C)",
    "power-on": "85.0 °C from a one-wire digital thermometer that has not measured yet",
    "out-of-range": "outside what a working sensor can report",
    "spike": "one value far from both its neighbours",
    "frozen": "the same value for long while its companions moved",
    "saturated": "a current at the end of the sensor's range: used, and known to be at least that",
}


INVENTORY = {
    "site": {
        "name": "what the site is called",
        "latitude": "degrees, north positive",
        "longitude": "degrees, east positive",
        "altitude_m": "above the sea, for the clear sky",
        "timezone": "where its days begin and end, such as `Europe/London`",
        "horizon_notes": "what shades it; kept for people, not used in figures",
    },
    "node": {
        "name": "as in its topics",
        "site": "where it stands",
        "interval_s": "usual time between two readings; the gap limit follows from it",
        "current_sensing": "`net`: the sensor sees all current of the pack; `charge-only`: it does not see the load",
        "standing_load_a": "load of a node that neither sees nor measures it; 0: not known",
        "panel_power_w": "rated power of the panel; with the next two: clear-sky energy",
        "panel_tilt_deg": "from horizontal",
        "panel_azimuth_deg": "clockwise from north, 180 is south",
        "panel_temperature_coefficient": "change of the panel's power a kelvin; empty: -0.004",
        "current_gain_error": "of the current sensors, as a share",
        "current_offset_a": "of the current sensors",
        "voltage_gain_error": "of the voltage, as a share",
        "temperature_error_c": "of the thermometers",
        "current_full_scale_a": "end of the current sensors' range; from there a current is “at least”",
        "integration": "`trapezoid` for readings of the moment, `hold` for logs whose rows close a step",
    },
    "pack": {
        "label": "as it is written on the pack",
        "cells_in_series": "in one string",
        "rated_capacity_ah": "of the whole pack",
        "designation": "of its cells, as IEC 61951-2 writes it",
        "cells_in_parallel": "strings side by side",
        "commissioned": "when it came into use",
    },
    "fitting": {
        "pack": "its label",
        "node": "its name",
        "start": "from when the pack is in the node",
        "end": "until when; empty: still",
    },
    "calibration": {
        "node": "its name",
        "quantity": "one of the quantities above",
        "start": "from when it holds",
        "gain": "the reading times this",
        "offset": "plus this, in the quantity's unit",
        "note": "how it was found",
    },
}

MAPPING = {
    "time": "where the time of a row comes from",
    "columns": "the columns to take; all others are left out",
    "header": "whether the first line of the data names the columns",
    "delimiter": "between two cells",
    "decimal": "the decimal mark",
    "skip_until": "what the first line of the data starts with",
    "skip_until_last": "whether the last such line counts",
    "column": "number from 1, name, or a list of both",
    "format": "`rfc3339`, `unix`, `unix-ms` or a pattern of `strptime`",
    "timezone": "of times without an offset, such as `Europe/London`",
    "utc_offset": "of times without an offset, such as `+01:00`",
    "rule": "tells the two passes of a repeated hour apart by the order of rows",
    "start": "of a log without times, RFC 3339",
    "step_s": "between two rows of a log without times",
    "quantity": "one of the quantities above",
    "number": "of the column, from 1",
    "name": "of the column in the header",
    "unit": "in which the log has it; empty: the quantity's own",
    "scale": "the cell times this",
    "offset": "plus this",
}


def reference() -> str:
    """The whole document."""
    parts = (
        ["# Reference", "", "Written by `docs/generate.py` from the code; a test holds it against the code.", ""],
        _settings(),
        _commands(),
        _topics(),
        _inventory(),
        _mapping(),
        _tables(),
        _reasons(),
        _addresses(),
    )
    return "\n".join(line for part in parts for line in part).rstrip() + "\n"


def _table(head: Iterable[str], rows: Iterable[Iterable[str]]) -> Iterator[str]:
    head = list(head)
    yield f"| {' | '.join(head)} |"
    yield f"|{' --- |' * len(head)}"
    for row in rows:
        yield f"| {' | '.join(cell.replace('|', chr(92) + '|') for cell in row)} |"
    yield ""


def _attributes(struct: type) -> dict[str, str]:
    """What the docstring says of each attribute."""
    text = inspect.getdoc(struct) or ""
    _, _, section = text.partition("Attributes\n----------\n")
    said: dict[str, str] = {}
    names: list[str] = []
    for line in section.splitlines():
        if line and not line.startswith(" "):
            names = [name.strip() for name in line.split(",")]
        elif line.strip():
            for name in names:
                said[name] = f"{said.get(name, '')} {line.strip()}".strip().replace("``", "`")
    return said


def _kind(hint: Any) -> str:  # noqa: ANN401 - any annotation
    """A type in words, with its range."""
    if get_origin(hint) is Annotated:
        base, *notes = get_args(hint)
        bounds = [
            f"{sign} {value:,}".replace(",", "\u202f")
            for note in notes
            for sign, value in (("≥", note.ge), (">", note.gt), ("≤", note.le), ("<", note.lt))
            if value is not None
        ]
        described = [note.description for note in notes if note.description]
        return ", ".join([_kind(base), *described, *bounds])
    choices = [part for part in get_args(hint) if part is not msgspec.UnsetType and part is not type(None)]
    if choices and all(isinstance(choice, str) for choice in choices):
        return " or ".join(f"`{choice}`" for choice in choices)
    if choices:
        parts = (choices[0],) if get_origin(hint) is list else choices
        words = " or ".join(_kind(part) for part in parts)
        return f"list of {words}" if get_origin(hint) is list else words
    plain = {"bool": "true or false", "int": "whole number", "float": "number", "str": "text"}
    return plain.get(hint.__name__, "instant with its zone" if hint.__name__ == "datetime" else hint.__name__)


def _value(value: object) -> str:
    if value in {"", None}:
        return "empty"
    return f"`{str(value).lower() if isinstance(value, bool) else value}`"


def _settings() -> Iterator[str]:
    yield "## Settings"
    yield ""
    yield "A TOML file named with `--settings`. Every key has a default, so that no file is needed; each can come from"
    yield "the environment as `PACKFOLD_SECTION_KEY`, such as `PACKFOLD_WEB_LISTEN`. An unknown key stops the hub."
    yield ""
    defaults = Settings()
    for section, struct in get_type_hints(Settings).items():
        yield f"### [{section}]"
        yield ""
        said = _attributes(struct)
        hints = get_type_hints(struct, include_extras=True)
        yield from _table(
            ("key", "type", "default", "meaning"),
            (
                (f"`{key}`", _kind(hints[key]), _value(getattr(getattr(defaults, section), key)), said[key])
                for key in struct.__struct_fields__
            ),
        )


def _commands() -> Iterator[str]:
    yield "## Commands"
    yield ""
    yield "Global options stand before the command. Exit codes: 0 done, 1 the work failed, 2 wrong use. Reports go to"
    yield "standard output, remarks and progress to standard error."
    yield ""
    context = click.Context(cli, info_name="packfold")
    yield from _options(cli, context)
    for name in COMMANDS:
        command = cli.get_command(context, name)
        assert command is not None
        yield from _command(f"packfold {name}", command, context)


def _command(title: str, command: click.Command, parent: click.Context) -> Iterator[str]:
    context = click.Context(command, info_name=title, parent=None)
    arguments = " ".join(p.make_metavar(context) for p in command.params if isinstance(p, click.Argument))
    yield f"### {title}{f' {arguments}' if arguments else ''}"
    yield ""
    text = inspect.cleandoc(command.help or "")
    # A paragraph that must not be wrapped begins with a backspace in click's help: here those are pieces of TOML.
    words, _, piece = text.replace("\\b\n", "\b\n").partition("\n\n\b\n")
    yield from (words, "")
    if piece:
        yield from ("```toml", piece.replace("\n\n\b\n", "\n\n"), "```", "")
    if isinstance(command, click.Group):
        for name in command.list_commands(context):
            inner = command.get_command(context, name)
            assert inner is not None
            yield from _command(f"{title} {name}", inner, parent)
    else:
        yield from _options(command, context)


def _options(command: click.Command, context: click.Context) -> Iterator[str]:
    rows = []
    for option in command.params:
        if not isinstance(option, click.Option) or option.name == "version":
            continue
        record = option.get_help_record(context)
        assert record is not None
        rows.append((f"`{', '.join(option.opts)}`", _choices(option), record[1]))
    if rows:
        yield from _table(("option", "takes", "meaning"), rows)


def _choices(option: click.Option) -> str:
    if option.is_flag:
        return "nothing"
    if isinstance(option.type, click.Choice):
        return " or ".join(f"`{choice}`" for choice in option.type.choices)
    if option.metavar:
        return option.metavar
    return "path" if isinstance(option.type, click.Path) else option.type.name.replace(" range", "")


def _topics() -> Iterator[str]:
    yield "## Topics"
    yield ""
    yield "Below the root `field` (`broker.root`). A node's name has 1 to 64 characters out of a-z, 0-9 and -."
    yield ""
    yield from _table(("topic", "carries"), ((f"`{topic('field', '<node>', kind)}`", TOPICS[kind]) for kind in KINDS))
    yield "## Quantities"
    yield ""
    yield "Names of SenML records, of the columns of logs and of the table `readings`. Other units of the SenML"
    yield "registry for the same quantity, and SI prefixes in logs, are converted."
    yield ""
    yield from _table(
        ("name", "unit", "SenML unit", "also read", "log column", "kept to", "range", "note"),
        (
            (
                f"`{q.name}`",
                q.unit,
                f"`{q.senml_unit}`" if q.senml_unit else "",
                ", ".join(f"`{unit}`" for unit in SENML[q.unit] if unit != q.senml_unit),
                f"`{q.column}`",
                f"{1 / q.scale:.{q.decimals}f}",
                f"{q.low:g} to {q.high:g}",
                QUANTITY_NOTES.get(q.name, ""),
            )
            for q in CATALOGUE
        ),
    )
    yield "Three plain records of a message are no measurements:"
    yield ""
    yield from _table(("name", "meaning"), ((f"`{name}`", FIELDS[name]) for name in MESSAGE_FIELDS))


def _inventory() -> Iterator[str]:
    yield "## Inventory file"
    yield ""
    yield "TOML, loaded with `packfold inventory load`. What a file leaves out stays as it is."
    yield ""
    kinds: tuple[tuple[type, Any], ...] = (
        (inventory_file.SiteRow, inventory.Site),
        (inventory_file.NodeRow, inventory.Node),
        (inventory_file.PackRow, inventory.Pack),
        (inventory_file.FittingRow, inventory.Fitting),
        (inventory_file.CalibrationRow, inventory.Calibration),
    )
    common = {f.name: f.default for f in dataclasses.fields(NodeSpec)}
    for row, kept in kinds:
        title = (inspect.getdoc(row) or "").strip(".`")
        yield f"### {title}"
        yield ""
        meanings = INVENTORY[title.strip("[]")]
        hints = get_type_hints(row, include_extras=True)
        known = {f.name: f.default for f in dataclasses.fields(kept)}
        rows = []
        for spec in msgspec.structs.fields(row):
            default = known.get(spec.name)
            if default is None and row is inventory_file.NodeRow:
                default = common.get(spec.name)
            stated = "required" if spec.required else _value(default)
            rows.append((f"`{spec.name}`", _kind(hints[spec.name]), stated, meanings[spec.name]))
        yield from _table(("key", "type", "default", "meaning"), rows)
    yield "From its `start` to the next calibration of the same quantity, a value is the reading times `gain` plus"
    yield "`offset`. Errors of a node's sensors are standard uncertainties (k = 1)."
    yield ""


def _mapping() -> Iterator[str]:
    yield "## Log mapping"
    yield ""
    yield "TOML, given with `packfold import --map`, for a log with columns of its own; remembered for the node."
    yield ""
    for title, struct in (("Top level", LogMapping), ("`time`", TimeMapping), ("each of `columns`", ColumnMapping)):
        yield f"### {title}"
        yield ""
        yield re.sub(r"``", "`", inspect.getdoc(struct) or "")
        yield ""
        hints = get_type_hints(struct)
        rows = []
        for spec in msgspec.structs.fields(struct):
            inner = {"time": "table, see below", "columns": "list of tables, see below"}
            kind = inner[spec.name] if struct is LogMapping and spec.name in inner else _kind(hints[spec.name])
            stated = "required" if spec.required else _value(spec.default)
            rows.append((f"`{spec.name}`", kind, stated, MAPPING[spec.name]))
        yield from _table(("key", "type", "default", "meaning"), rows)


def _tables() -> Iterator[str]:
    yield "## Export tables"
    yield ""
    yield "`packfold export TABLE`, the page “Take along” and the interface give the same rows. Instants are RFC 3339"
    yield "in UTC, empty cells are figures that cannot be known. Columns are a promise: new ones come at the end."
    yield ""
    schemas = document("http://127.0.0.1:8740")["components"]["schemas"]
    meanings = {**{q.name: q.label.lower() for q in CATALOGUE}, **COLUMNS}
    for table in TABLES.values():
        yield f"### {table.name}"
        yield ""
        yield table.description
        yield ""
        described = schemas[f"{table.name}-row"]["properties"]
        yield from _table(
            ("column", "unit", "meaning"),
            ((f"`{column}`", _unit(column, described[column]), meanings[column]) for column in table.columns),
        )
    yield "`ended_by` is one of:"
    yield ""
    yield from _table(("word", "meaning"), ((f"`{word}`", meaning) for word, meaning in ENDINGS.items()))


def _unit(column: str, described: dict[str, Any]) -> str:
    said: str = described.get("description", "")
    return said.removeprefix("in ") or ("A" if column.endswith("_a") else "")


def _reasons() -> Iterator[str]:
    yield "## Set-aside reasons"
    yield ""
    yield "What cannot be used is kept with its reason, never dropped unseen."
    yield ""
    yield from _table(("reason", "meaning"), ((f"`{reason}`", said) for reason, said in REASONS.items()))
    yield "Values that arrived well and that a sensor cannot have meant are screened when figures are made:"
    yield ""
    yield from _table(("reason", "meaning"), ((f"`{reason}`", said) for reason, said in SCREENED.items()))


def _addresses() -> Iterator[str]:
    yield "## HTTP addresses"
    yield ""
    yield "All but the login, the style and `/healthz` need a login, or a token as `Authorization: Bearer …` (made on"
    yield "the page “Take along”). Errors of the interface are RFC 9457 problem details; OpenAPI 3.1 describes it."
    yield ""
    with tempfile.TemporaryDirectory() as folder:
        database = Database(Path(folder))
        app = create_app(database, Settings(), clock=lambda: 0)
        rows = []
        for rule in app.url_map.iter_rules():
            view = app.view_functions[rule.endpoint]
            first = (inspect.getdoc(view) or "").split("\n\n")[0].replace("\n", " ").replace("``", "`")
            method = next(name for name in ("POST", "GET") if name in (rule.methods or ()))
            rows.append((re.sub(r"<(?:[^:<>]*:)?(\w+)>", r"<\1>", rule.rule), method, first))
        database.close()
    yield from _table(("address", "method", "gives"), ((f"`{a}`", m, said) for a, m, said in sorted(rows)))
    parameters = document("http://127.0.0.1:8740")["components"]["parameters"]
    yield "Parameters of the tables:"
    yield ""
    yield from _table(("parameter", "meaning"), ((f"`{p['name']}`", p["description"]) for p in parameters.values()))


def main() -> int:
    """Write the file, or with ``--check`` say whether it is up to date."""
    text = reference()
    if "--check" in sys.argv[1:]:
        if TARGET.exists() and TARGET.read_text(encoding="utf-8") == text:
            return 0
        sys.stderr.write("docs/reference.md is not up to date. Run: python docs/generate.py\n")
        return 1
    TARGET.write_text(text, encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main())
