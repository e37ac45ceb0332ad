"""The tables. Instants are integer milliseconds UTC; local days are ISO dates; readings are fixed-point integers."""

from sqlalchemy import (
    CheckConstraint,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    Table,
    Text,
    UniqueConstraint,
)
from sqlalchemy.types import BigInteger

from hub.quantities import CATALOGUE

metadata = MetaData(
    naming_convention={
        "ix": "ix_%(column_0_label)s",
        "uq": "uq_%(table_name)s_%(column_0_N_name)s",
        "ck": "ck_%(table_name)s_%(constraint_name)s",
        "fk": "fk_%(table_name)s_%(column_0_name)s_%(referred_table_name)s",
        "pk": "pk_%(table_name)s",
    }
)

# SQLite gives automatic keys only to INTEGER; PostgreSQL wants BIGINT for instants.
Millis = BigInteger().with_variant(Integer(), "sqlite")


def _node(*, primary: bool = False, nullable: bool = False) -> Column[int]:
    return Column("node_id", Integer, ForeignKey("node.id"), primary_key=primary, nullable=nullable)


site = Table(
    "site",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("name", Text, nullable=False, unique=True),
    Column("latitude", Float, nullable=False),
    Column("longitude", Float, nullable=False),
    Column("altitude_m", Float, nullable=False),
    Column("timezone", Text, nullable=False),
    Column("horizon_notes", Text, nullable=False, server_default=""),
)

node = Table(
    "node",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("name", Text, nullable=False, unique=True),
    Column("site_id", Integer, ForeignKey("site.id"), nullable=False),
    Column("interval_s", Float, nullable=False),
    Column("current_sensing", Text, nullable=False),
    Column("standing_load_a", Float, nullable=False),
    Column("panel_power_w", Float),
    Column("panel_tilt_deg", Float),
    Column("panel_azimuth_deg", Float),
    Column("panel_temperature_coefficient", Float),
    Column("current_gain_error", Float),
    Column("current_offset_a", Float),
    Column("voltage_gain_error", Float),
    Column("temperature_error_c", Float),
    Column("current_full_scale_a", Float),
    Column("integration", Text, nullable=False, server_default="trapezoid"),
    CheckConstraint("integration IN ('trapezoid', 'hold')", name="integration"),
    CheckConstraint("current_sensing IN ('net', 'charge-only')", name="current_sensing"),
)

pack = Table(
    "pack",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("label", Text, nullable=False, unique=True),
    Column("designation", Text, nullable=False),
    Column("cells_in_series", Integer, nullable=False),
    Column("cells_in_parallel", Integer, nullable=False),
    Column("rated_capacity_ah", Float, nullable=False),
    Column("commissioned", Text),
)

fitting = Table(
    "fitting",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("pack_id", Integer, ForeignKey("pack.id"), nullable=False),
    _node(),
    Column("start_ms", Millis, nullable=False),
    Column("end_ms", Millis),
    UniqueConstraint("node_id", "start_ms"),
    UniqueConstraint("pack_id", "start_ms"),
)

calibration = Table(
    "calibration",
    metadata,
    Column("id", Integer, primary_key=True),
    _node(),
    Column("quantity", Text, nullable=False),
    Column("start_ms", Millis, nullable=False),
    Column("gain", Float, nullable=False),
    Column("offset", Float, nullable=False),
    Column("note", Text, nullable=False, server_default=""),
    UniqueConstraint("node_id", "quantity", "start_ms"),
)

# What came with a reading and is kept beside its values: evidence about clocks and about who brought it.
EVIDENCE = ("received_ms", "device_ms", "boot", "sequence", "import_id")

reading = Table(
    "reading",
    metadata,
    _node(primary=True),
    Column("time_ms", Millis, primary_key=True),
    Column("received_ms", Millis, nullable=False),
    Column("device_ms", Millis),
    Column("boot", Integer),
    Column("sequence", Millis),
    Column("import_id", Integer),
    *(Column(q.name, Millis) for q in CATALOGUE),
    sqlite_with_rowid=False,
)

reading_block = Table(
    "reading_block",
    metadata,
    _node(primary=True),
    Column("utc_day", Integer, primary_key=True),
    Column("count", Integer, nullable=False),
    Column("data", LargeBinary, nullable=False),
    sqlite_with_rowid=False,
)

reading_mark = Table(
    "reading_mark",
    metadata,
    _node(primary=True),
    Column("utc_hour", Integer, primary_key=True),
    Column("revision", Integer, nullable=False),
    sqlite_with_rowid=False,
)

set_aside = Table(
    "set_aside",
    metadata,
    Column("id", Integer, primary_key=True),
    _node(nullable=True),
    Column("node_name", Text),
    Column("received_ms", Millis, nullable=False),
    Column("source", Text, nullable=False),
    Column("origin", Text, nullable=False),
    Column("line", Integer),
    Column("import_id", Integer),
    Column("reason", Text, nullable=False),
    Column("detail", Text, nullable=False),
    Column("time_ms", Millis),
    Column("quantity", Text),
    Column("value", Float),
    Column("values", Text),
    Column("payload", LargeBinary),
    Index("ix_set_aside_node_id", "node_id"),
    Index("ix_set_aside_node_id_reason_time_ms", "node_id", "reason", "time_ms"),
)

# How often something was set aside, also where too many rows of the same kind were there to keep another one. Node 0
# stands for names that belong to no known node.
aside_total = Table(
    "aside_total",
    metadata,
    Column("node_id", Integer, primary_key=True),
    Column("source", Text, primary_key=True),
    Column("reason", Text, primary_key=True),
    Column("count", Integer, nullable=False),
    sqlite_with_rowid=False,
)

unknown_name = Table(
    "unknown_name",
    metadata,
    _node(primary=True),
    Column("name", Text, primary_key=True),
    Column("count", Integer, nullable=False),
    Column("last_ms", Millis, nullable=False),
)

received_run = Table(
    "received_run",
    metadata,
    _node(primary=True),
    Column("boot", Integer, primary_key=True),
    Column("first", Millis, primary_key=True),
    Column("last", Millis, nullable=False),
)

presence = Table(
    "presence",
    metadata,
    _node(primary=True),
    Column("state", Text, nullable=False),
    Column("changed_ms", Millis, nullable=False),
)

log_import = Table(
    "log_import",
    metadata,
    Column("id", Integer, primary_key=True),
    _node(),
    Column("file", Text, nullable=False),
    Column("sha256", Text, nullable=False),
    Column("imported_ms", Millis, nullable=False),
    Column("undone_ms", Millis),
    Column("first_ms", Millis),
    Column("last_ms", Millis),
    Column("lines", Integer, nullable=False),
    Column("taken", Integer, nullable=False),
    Column("repeated", Integer, nullable=False),
    Column("set_aside", Integer, nullable=False),
)

# Values that only an import vouches for, in readings that somebody else brought or the node confirmed since: so that
# the import can be taken back to the value. In a reading whose ``import_id`` is set, that import vouches for the rest.
import_fill = Table(
    "import_fill",
    metadata,
    _node(primary=True),
    Column("time_ms", Millis, primary_key=True),
    Column("quantity", Text, primary_key=True),
    Column("import_id", Integer, ForeignKey("log_import.id"), nullable=False),
    Index("ix_import_fill_import_id", "import_id"),
    sqlite_with_rowid=False,
)

log_mapping = Table(
    "log_mapping",
    metadata,
    _node(primary=True),
    Column("mapping", Text, nullable=False),
)

# What is computed: one row a node and window, with a digest of everything the figures depend on.
ledger = Table(
    "ledger",
    metadata,
    _node(primary=True),
    Column("start_ms", Millis, primary_key=True),
    Column("end_ms", Millis, nullable=False),
    Column("date", Text, nullable=False),
    Column("inputs", Text, nullable=False),
    Column("carried", Text, nullable=False),
    Column("newest_ms", Millis),
)

day_figure = Table(
    "day_figure",
    metadata,
    _node(primary=True),
    Column("start_ms", Millis, primary_key=True),
    Column("end_ms", Millis, nullable=False),
    Column("date", Text, nullable=False),
    Column("pack_id", Integer, ForeignKey("pack.id")),
    Column("coverage", Float, nullable=False),
    Column("observed_s", Float, nullable=False),
    Column("bridged_s", Float, nullable=False),
    Column("panel_wh", Float),
    Column("charge_ah", Float),
    Column("discharge_ah", Float),
    Column("charge_uncertainty_ah", Float),
    Column("discharge_uncertainty_ah", Float),
    Column("offset_removed_a", Float),
    Column("charge_wh", Float),
    Column("discharge_wh", Float),
    Column("load_wh", Float),
    Column("clear_sky_wh", Float),
    Column("harvest_ratio", Float),
    Column("pack_temperature_max_c", Float),
    Column("cell_voltage_min_v", Float),
    Column("cell_voltage_max_v", Float),
    Column("full_at_ms", Millis),
    Index("ix_day_figure_pack_id_date", "pack_id", "date"),
    Index("ix_day_figure_node_id_date", "node_id", "date"),
)

# A session that is still open at the end of a window is written again by the next one, which knows more: the row of
# the latest window counts.
charge_figure = Table(
    "charge_figure",
    metadata,
    _node(primary=True),
    Column("start_ms", Millis, primary_key=True),
    Column("window_ms", Millis, primary_key=True),
    Column("pack_id", Integer, ForeignKey("pack.id")),
    Column("end_ms", Millis),
    Column("charge_ah", Float),
    Column("charge_wh", Float),
    Column("mean_rate_it", Float),
    Column("peak_temperature_c", Float),
    Column("ended_by", Text),
    Column("full_at_ms", Millis),
    Column("confidence", Float),
    Column("overcharge_ah", Float),
    Column("evidence", Text, nullable=False),
)

clear_sky = Table(
    "clear_sky",
    metadata,
    _node(primary=True),
    Column("start_ms", Millis, primary_key=True),
    Column("digest", Text, nullable=False),
    Column("data", LargeBinary, nullable=False),
)

finding_figure = Table(
    "finding_figure",
    metadata,
    _node(primary=True),
    Column("start_ms", Millis, primary_key=True),
    Column("quantity", Text, primary_key=True),
    Column("reason", Text, primary_key=True),
    Column("count", Integer, nullable=False),
    Column("first_ms", Millis, nullable=False),
    Column("last_ms", Millis, nullable=False),
)

credential = Table(
    "credential",
    metadata,
    _node(primary=True),
    Column("secret_hash", Text, nullable=False),
    Column("created_ms", Millis, nullable=False),
)

account = Table(
    "account",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("name", Text, nullable=False, unique=True),
    Column("password_hash", Text, nullable=False),
    Column("role", Text, nullable=False),
    Column("created_ms", Millis, nullable=False),
    CheckConstraint("role IN ('keeper', 'viewer')", name="role"),
)

# Logins, interface tokens and one-use sign-in links: only a digest of the secret is kept.
pass_ = Table(
    "pass",
    metadata,
    Column("digest", Text, primary_key=True),
    Column("account_id", Integer, ForeignKey("account.id"), nullable=False),
    Column("kind", Text, nullable=False),
    Column("label", Text, nullable=False, server_default=""),
    Column("created_ms", Millis, nullable=False),
    Column("expires_ms", Millis),
    CheckConstraint("kind IN ('session', 'token', 'link')", name="kind"),
)

audit = Table(
    "audit",
    metadata,
    Column("id", Integer, primary_key=True),
    Column("at_ms", Millis, nullable=False),
    Column("who", Text, nullable=False),
    Column("action", Text, nullable=False),
    Column("subject", Text, nullable=False),
    Column("detail", Text, nullable=False),
)

# Small facts about this database: the revision counter of readings, when the hub last ran.
fact = Table(
    "fact",
    metadata,
    Column("name", Text, primary_key=True),
    Column("value", Text, nullable=False),
)
