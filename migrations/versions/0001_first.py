"""Sites, nodes, packs, readings, figures, people.

House rules: name every constraint; touch data only with SQL written here, never through hub.store.tables, which moves on;
count rows before and after when a table is rebuilt.
"""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:

    op.create_table(
        "account",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("password_hash", sa.Text(), nullable=False),
        sa.Column("role", sa.Text(), nullable=False),
        sa.Column("created_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.CheckConstraint("role IN ('keeper', 'viewer')", name=op.f("ck_account_role")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_account")),
        sa.UniqueConstraint("name", name=op.f("uq_account_name")),
    )
    op.create_table(
        "audit",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("at_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("who", sa.Text(), nullable=False),
        sa.Column("action", sa.Text(), nullable=False),
        sa.Column("subject", sa.Text(), nullable=False),
        sa.Column("detail", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_audit")),
    )
    op.create_table(
        "fact",
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("value", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("name", name=op.f("pk_fact")),
    )
    op.create_table(
        "pack",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("label", sa.Text(), nullable=False),
        sa.Column("designation", sa.Text(), nullable=False),
        sa.Column("cells_in_series", sa.Integer(), nullable=False),
        sa.Column("cells_in_parallel", sa.Integer(), nullable=False),
        sa.Column("rated_capacity_ah", sa.Float(), nullable=False),
        sa.Column("commissioned", sa.Text(), nullable=True),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_pack")),
        sa.UniqueConstraint("label", name=op.f("uq_pack_label")),
    )
    op.create_table(
        "site",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("latitude", sa.Float(), nullable=False),
        sa.Column("longitude", sa.Float(), nullable=False),
        sa.Column("altitude_m", sa.Float(), nullable=False),
        sa.Column("timezone", sa.Text(), nullable=False),
        sa.Column("horizon_notes", sa.Text(), server_default="", nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_site")),
        sa.UniqueConstraint("name", name=op.f("uq_site_name")),
    )
    op.create_table(
        "node",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("site_id", sa.Integer(), nullable=False),
        sa.Column("interval_s", sa.Float(), nullable=False),
        sa.Column("current_sensing", sa.Text(), nullable=False),
        sa.Column("standing_load_a", sa.Float(), nullable=False),
        sa.Column("panel_power_w", sa.Float(), nullable=True),
        sa.Column("panel_tilt_deg", sa.Float(), nullable=True),
        sa.Column("panel_azimuth_deg", sa.Float(), nullable=True),
        sa.Column("panel_temperature_coefficient", sa.Float(), nullable=True),
        sa.Column("current_gain_error", sa.Float(), nullable=True),
        sa.Column("current_offset_a", sa.Float(), nullable=True),
        sa.Column("voltage_gain_error", sa.Float(), nullable=True),
        sa.Column("temperature_error_c", sa.Float(), nullable=True),
        sa.Column("current_full_scale_a", sa.Float(), nullable=True),
        sa.Column("integration", sa.Text(), server_default="trapezoid", nullable=False),
        sa.CheckConstraint("current_sensing IN ('net', 'charge-only')", name=op.f("ck_node_current_sensing")),
        sa.CheckConstraint("integration IN ('trapezoid', 'hold')", name=op.f("ck_node_integration")),
        sa.ForeignKeyConstraint(["site_id"], ["site.id"], name=op.f("fk_node_site_id_site")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_node")),
        sa.UniqueConstraint("name", name=op.f("uq_node_name")),
    )
    op.create_table(
        "pass",
        sa.Column("digest", sa.Text(), nullable=False),
        sa.Column("account_id", sa.Integer(), nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("label", sa.Text(), server_default="", nullable=False),
        sa.Column("created_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("expires_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.CheckConstraint("kind IN ('session', 'token', 'link')", name=op.f("ck_pass_kind")),
        sa.ForeignKeyConstraint(["account_id"], ["account.id"], name=op.f("fk_pass_account_id_account")),
        sa.PrimaryKeyConstraint("digest", name=op.f("pk_pass")),
    )
    op.create_table(
        "calibration",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("quantity", sa.Text(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("gain", sa.Float(), nullable=False),
        sa.Column("offset", sa.Float(), nullable=False),
        sa.Column("note", sa.Text(), server_default="", nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_calibration_node_id_node")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_calibration")),
        sa.UniqueConstraint("node_id", "quantity", "start_ms", name=op.f("uq_calibration_node_id_quantity_start_ms")),
    )
    op.create_table(
        "charge_figure",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("window_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("pack_id", sa.Integer(), nullable=True),
        sa.Column("end_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("charge_ah", sa.Float(), nullable=True),
        sa.Column("charge_wh", sa.Float(), nullable=True),
        sa.Column("mean_rate_it", sa.Float(), nullable=True),
        sa.Column("peak_temperature_c", sa.Float(), nullable=True),
        sa.Column("ended_by", sa.Text(), nullable=True),
        sa.Column("full_at_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("confidence", sa.Float(), nullable=True),
        sa.Column("overcharge_ah", sa.Float(), nullable=True),
        sa.Column("evidence", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_charge_figure_node_id_node")),
        sa.ForeignKeyConstraint(["pack_id"], ["pack.id"], name=op.f("fk_charge_figure_pack_id_pack")),
        sa.PrimaryKeyConstraint("node_id", "start_ms", "window_ms", name=op.f("pk_charge_figure")),
    )
    op.create_table(
        "credential",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("secret_hash", sa.Text(), nullable=False),
        sa.Column("created_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_credential_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", name=op.f("pk_credential")),
    )
    op.create_table(
        "day_figure",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("end_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("date", sa.Text(), nullable=False),
        sa.Column("pack_id", sa.Integer(), nullable=True),
        sa.Column("coverage", sa.Float(), nullable=False),
        sa.Column("observed_s", sa.Float(), nullable=False),
        sa.Column("bridged_s", sa.Float(), nullable=False),
        sa.Column("panel_wh", sa.Float(), nullable=True),
        sa.Column("charge_ah", sa.Float(), nullable=True),
        sa.Column("discharge_ah", sa.Float(), nullable=True),
        sa.Column("charge_uncertainty_ah", sa.Float(), nullable=True),
        sa.Column("discharge_uncertainty_ah", sa.Float(), nullable=True),
        sa.Column("offset_removed_a", sa.Float(), nullable=True),
        sa.Column("charge_wh", sa.Float(), nullable=True),
        sa.Column("discharge_wh", sa.Float(), nullable=True),
        sa.Column("load_wh", sa.Float(), nullable=True),
        sa.Column("clear_sky_wh", sa.Float(), nullable=True),
        sa.Column("harvest_ratio", sa.Float(), nullable=True),
        sa.Column("pack_temperature_max_c", sa.Float(), nullable=True),
        sa.Column("cell_voltage_min_v", sa.Float(), nullable=True),
        sa.Column("cell_voltage_max_v", sa.Float(), nullable=True),
        sa.Column("full_at_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_day_figure_node_id_node")),
        sa.ForeignKeyConstraint(["pack_id"], ["pack.id"], name=op.f("fk_day_figure_pack_id_pack")),
        sa.PrimaryKeyConstraint("node_id", "start_ms", name=op.f("pk_day_figure")),
    )
    with op.batch_alter_table("day_figure", schema=None) as batch_op:
        batch_op.create_index("ix_day_figure_node_id_date", ["node_id", "date"], unique=False)
        batch_op.create_index("ix_day_figure_pack_id_date", ["pack_id", "date"], unique=False)

    op.create_table(
        "clear_sky",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("digest", sa.Text(), nullable=False),
        sa.Column("data", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_clear_sky_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "start_ms", name=op.f("pk_clear_sky")),
    )
    op.create_table(
        "finding_figure",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("quantity", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("count", sa.Integer(), nullable=False),
        sa.Column("first_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("last_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_finding_figure_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "start_ms", "quantity", "reason", name=op.f("pk_finding_figure")),
    )
    op.create_table(
        "fitting",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("pack_id", sa.Integer(), nullable=False),
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("end_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_fitting_node_id_node")),
        sa.ForeignKeyConstraint(["pack_id"], ["pack.id"], name=op.f("fk_fitting_pack_id_pack")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_fitting")),
        sa.UniqueConstraint("node_id", "start_ms", name=op.f("uq_fitting_node_id_start_ms")),
        sa.UniqueConstraint("pack_id", "start_ms", name=op.f("uq_fitting_pack_id_start_ms")),
    )
    op.create_table(
        "ledger",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("start_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("end_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("date", sa.Text(), nullable=False),
        sa.Column("inputs", sa.Text(), nullable=False),
        sa.Column("carried", sa.Text(), nullable=False),
        sa.Column("newest_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_ledger_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "start_ms", name=op.f("pk_ledger")),
    )
    op.create_table(
        "log_import",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("file", sa.Text(), nullable=False),
        sa.Column("sha256", sa.Text(), nullable=False),
        sa.Column("imported_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("undone_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("first_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("last_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("lines", sa.Integer(), nullable=False),
        sa.Column("taken", sa.Integer(), nullable=False),
        sa.Column("repeated", sa.Integer(), nullable=False),
        sa.Column("set_aside", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_log_import_node_id_node")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_log_import")),
    )
    op.create_table(
        "log_mapping",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("mapping", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_log_mapping_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", name=op.f("pk_log_mapping")),
    )
    op.create_table(
        "presence",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("state", sa.Text(), nullable=False),
        sa.Column("changed_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_presence_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", name=op.f("pk_presence")),
    )
    op.create_table(
        "reading",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("time_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("received_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("device_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("boot", sa.Integer(), nullable=True),
        sa.Column("sequence", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("import_id", sa.Integer(), nullable=True),
        sa.Column("pack_voltage", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("pack_current", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("pack_temperature", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("air_temperature", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("panel_voltage", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("panel_current", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("load_current", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("charger_duty", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("charge_target", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("charge_in", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("charge_out", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("signal", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("uptime", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_reading_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "time_ms", name=op.f("pk_reading")),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "reading_block",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("utc_day", sa.Integer(), nullable=False),
        sa.Column("count", sa.Integer(), nullable=False),
        sa.Column("data", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_reading_block_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "utc_day", name=op.f("pk_reading_block")),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "reading_mark",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("utc_hour", sa.Integer(), nullable=False),
        sa.Column("revision", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_reading_mark_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "utc_hour", name=op.f("pk_reading_mark")),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "received_run",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("boot", sa.Integer(), nullable=False),
        sa.Column("first", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("last", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_received_run_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "boot", "first", name=op.f("pk_received_run")),
    )
    op.create_table(
        "set_aside",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("node_id", sa.Integer(), nullable=True),
        sa.Column("node_name", sa.Text(), nullable=True),
        sa.Column("received_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("source", sa.Text(), nullable=False),
        sa.Column("origin", sa.Text(), nullable=False),
        sa.Column("line", sa.Integer(), nullable=True),
        sa.Column("import_id", sa.Integer(), nullable=True),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("detail", sa.Text(), nullable=False),
        sa.Column("time_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=True),
        sa.Column("quantity", sa.Text(), nullable=True),
        sa.Column("value", sa.Float(), nullable=True),
        sa.Column("values", sa.Text(), nullable=True),
        sa.Column("payload", sa.LargeBinary(), nullable=True),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_set_aside_node_id_node")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_set_aside")),
    )
    with op.batch_alter_table("set_aside", schema=None) as batch_op:
        batch_op.create_index("ix_set_aside_node_id", ["node_id"], unique=False)
        batch_op.create_index("ix_set_aside_node_id_reason_time_ms", ["node_id", "reason", "time_ms"], unique=False)

    op.create_table(
        "unknown_name",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("count", sa.Integer(), nullable=False),
        sa.Column("last_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_unknown_name_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "name", name=op.f("pk_unknown_name")),
    )
    op.create_table(
        "aside_total",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("source", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("count", sa.Integer(), nullable=False),
        sa.PrimaryKeyConstraint("node_id", "source", "reason", name=op.f("pk_aside_total")),
        sqlite_with_rowid=False,
    )
    op.create_table(
        "import_fill",
        sa.Column("node_id", sa.Integer(), nullable=False),
        sa.Column("time_ms", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("quantity", sa.Text(), nullable=False),
        sa.Column("import_id", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(["import_id"], ["log_import.id"], name=op.f("fk_import_fill_import_id_log_import")),
        sa.ForeignKeyConstraint(["node_id"], ["node.id"], name=op.f("fk_import_fill_node_id_node")),
        sa.PrimaryKeyConstraint("node_id", "time_ms", "quantity", name=op.f("pk_import_fill")),
        sqlite_with_rowid=False,
    )
    with op.batch_alter_table("import_fill", schema=None) as batch_op:
        batch_op.create_index("ix_import_fill_import_id", ["import_id"], unique=False)



def downgrade() -> None:

    with op.batch_alter_table("import_fill", schema=None) as batch_op:
        batch_op.drop_index("ix_import_fill_import_id")

    op.drop_table("import_fill")
    op.drop_table("aside_total")
    op.drop_table("unknown_name")
    with op.batch_alter_table("set_aside", schema=None) as batch_op:
        batch_op.drop_index("ix_set_aside_node_id_reason_time_ms")
        batch_op.drop_index("ix_set_aside_node_id")

    op.drop_table("set_aside")
    op.drop_table("received_run")
    op.drop_table("reading_mark")
    op.drop_table("reading_block")
    op.drop_table("reading")
    op.drop_table("presence")
    op.drop_table("log_mapping")
    op.drop_table("log_import")
    op.drop_table("ledger")
    op.drop_table("fitting")
    op.drop_table("clear_sky")
    op.drop_table("finding_figure")
    with op.batch_alter_table("day_figure", schema=None) as batch_op:
        batch_op.drop_index("ix_day_figure_pack_id_date")
        batch_op.drop_index("ix_day_figure_node_id_date")

    op.drop_table("day_figure")
    op.drop_table("credential")
    op.drop_table("charge_figure")
    op.drop_table("calibration")
    op.drop_table("pass")
    op.drop_table("node")
    op.drop_table("site")
    op.drop_table("pack")
    op.drop_table("fact")
    op.drop_table("audit")
    op.drop_table("account")
