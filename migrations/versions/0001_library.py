"""Phases with their sites, sources, aliases and tags; the history; the state; the cache of line strengths."""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None


def upgrade() -> None:
    op.create_table(
        "phase",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("uid", sa.String(32), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("name_key", sa.Text(), nullable=False),
        sa.Column("mineral_name", sa.Text(), nullable=False),
        sa.Column("formula", sa.Text(), nullable=False),
        sa.Column("formula_key", sa.Text(), nullable=False),
        sa.Column("elements", sa.Text(), nullable=False),
        sa.Column("lattice_type", sa.String(1), nullable=False),
        sa.Column("a_angstrom", sa.Double(), nullable=False),
        sa.Column("a_esd_angstrom", sa.Double(), nullable=True),
        sa.Column("a_text", sa.Text(), nullable=False),
        sa.Column("temperature_k", sa.Double(), nullable=True),
        sa.Column("expansion_per_k", sa.Double(), nullable=True),
        sa.Column("structure_type", sa.Text(), nullable=True),
        sa.Column("free_parameters", sa.Text(), nullable=False),
        sa.Column("space_group", sa.Text(), nullable=False),
        sa.Column("formula_units_per_cell", sa.Double(), nullable=True),
        sa.Column("assumed", sa.Text(), nullable=False),
        sa.Column("drift_class", sa.Text(), nullable=False),
        sa.Column("drift_reason", sa.Text(), nullable=False),
        sa.Column("a_min_angstrom", sa.Double(), nullable=True),
        sa.Column("a_max_angstrom", sa.Double(), nullable=True),
        sa.Column("measured_density_g_cm3", sa.Double(), nullable=True),
        sa.Column("remarks", sa.Text(), nullable=False),
        sa.Column("standing", sa.Text(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("entered_by", sa.Text(), nullable=False),
        sa.Column("entered_at", sa.Text(), nullable=False),
        sa.Column("changed_by", sa.Text(), nullable=True),
        sa.Column("changed_at", sa.Text(), nullable=True),
        sa.Column("checked_by", sa.Text(), nullable=True),
        sa.Column("checked_at", sa.Text(), nullable=True),
        sa.Column("withdrawn_reason", sa.Text(), nullable=True),
        sa.Column("replaced_by", sa.String(32), nullable=True),
        sa.Column("checksum", sa.String(64), nullable=False),
        sa.CheckConstraint("lattice_type IN ('P', 'I', 'F')", name="ck_phase_lattice_type"),
        sa.CheckConstraint("a_angstrom > 0 AND a_angstrom < 1000", name="ck_phase_a_angstrom"),
        sa.CheckConstraint("standing IN ('draft', 'checked', 'withdrawn')", name="ck_phase_standing"),
        sa.CheckConstraint(
            "drift_class IN ('line compound', 'alloy', 'solid solution')", name="ck_phase_drift_class"
        ),
        sa.CheckConstraint("version >= 1", name="ck_phase_version"),
        sa.PrimaryKeyConstraint("id", name="pk_phase"),
        sa.UniqueConstraint("uid", name="uq_phase_uid"),
        sa.UniqueConstraint("name_key", name="uq_phase_name_key"),
    )
    op.create_index("ix_phase_lattice_type_a_angstrom", "phase", ["lattice_type", "a_angstrom", "standing"])
    op.create_table(
        "site",
        sa.Column("phase_id", sa.Integer(), nullable=False),
        sa.Column("position", sa.Integer(), nullable=False),
        sa.Column("label", sa.Text(), nullable=False),
        sa.Column("species", sa.Text(), nullable=False),
        sa.Column("x", sa.Double(), nullable=False),
        sa.Column("y", sa.Double(), nullable=False),
        sa.Column("z", sa.Double(), nullable=False),
        sa.Column("b_iso", sa.Double(), nullable=False),
        sa.PrimaryKeyConstraint("phase_id", "position", name="pk_site"),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_site_phase_id_phase"),
    )
    op.create_table(
        "source",
        sa.Column("phase_id", sa.Integer(), nullable=False),
        sa.Column("position", sa.Integer(), nullable=False),
        sa.Column("citation", sa.Text(), nullable=False),
        sa.Column("doi", sa.Text(), nullable=False),
        sa.Column("year", sa.Integer(), nullable=True),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("how", sa.Text(), nullable=False),
        sa.Column("a_angstrom", sa.Double(), nullable=True),
        sa.Column("density_g_cm3", sa.Double(), nullable=True),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_source_phase_id_phase"),
        sa.CheckConstraint(
            "kind IN ('standard', 'handbook', 'paper', 'data package', 'measured here', 'from memory')",
            name="ck_source_kind",
        ),
        sa.PrimaryKeyConstraint("phase_id", "position", name="pk_source"),
    )
    op.create_table(
        "alias",
        sa.Column("alias_key", sa.Text(), nullable=False),
        sa.Column("phase_id", sa.Integer(), nullable=False),
        sa.Column("alias", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("alias_key", name="pk_alias"),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_alias_phase_id_phase"),
    )
    op.create_index("ix_alias_phase_id", "alias", ["phase_id"])
    op.create_table(
        "tag",
        sa.Column("phase_id", sa.Integer(), nullable=False),
        sa.Column("tag", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("phase_id", "tag", name="pk_tag"),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_tag_phase_id_phase"),
    )
    op.create_table(
        "strength_cache",
        sa.Column("phase_id", sa.Integer(), nullable=False),
        sa.Column("method", sa.Integer(), nullable=False),
        sa.Column("n", sa.LargeBinary(), nullable=False),
        sa.Column("strength", sa.LargeBinary(), nullable=False),
        sa.Column("checksum", sa.String(64), nullable=False),
        sa.PrimaryKeyConstraint("phase_id", name="pk_strength_cache"),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_strength_cache_phase_id_phase"),
    )
    op.create_table(
        "state",
        sa.Column("id", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("library_id", sa.String(32), nullable=False),
        sa.Column("phase_count", sa.Integer(), nullable=False),
        sa.Column("fingerprint", sa.String(64), nullable=False),
        sa.Column("history_count", sa.Integer(), nullable=False),
        sa.Column("history_head", sa.String(64), nullable=False),
        sa.CheckConstraint("id = 1", name="ck_state_one_row"),
        sa.PrimaryKeyConstraint("id", name="pk_state"),
    )
    op.create_table(
        "history",
        sa.Column("number", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("at", sa.Text(), nullable=False),
        sa.Column("who", sa.Text(), nullable=False),
        sa.Column("login", sa.Text(), nullable=False),
        sa.Column("host", sa.Text(), nullable=False),
        sa.Column("program_version", sa.Text(), nullable=False),
        sa.Column("action", sa.Text(), nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("key", sa.Text(), nullable=False),
        sa.Column("before", sa.Text(), nullable=True),
        sa.Column("after", sa.Text(), nullable=True),
        sa.Column("remark", sa.Text(), nullable=False),
        sa.Column("previous_hash", sa.String(64), nullable=False),
        sa.Column("hash", sa.String(64), nullable=False),
        sa.PrimaryKeyConstraint("number", name="pk_history"),
    )
    op.create_index("ix_history_key", "history", ["key"])
    _refuse_changes_of_history()


def _refuse_changes_of_history() -> None:
    dialect = op.get_bind().dialect.name
    if dialect == "sqlite":
        for event in ("UPDATE", "DELETE"):
            op.execute(
                f"CREATE TRIGGER history_no_{event.lower()} BEFORE {event} ON history "
                "BEGIN SELECT RAISE(ABORT, 'the history is append-only'); END"
            )
    elif dialect == "postgresql":
        op.execute(
            "CREATE FUNCTION history_is_append_only() RETURNS trigger LANGUAGE plpgsql AS "
            "$$ BEGIN RAISE EXCEPTION 'the history is append-only'; END $$"
        )
        op.execute(
            "CREATE TRIGGER history_no_change BEFORE UPDATE OR DELETE OR TRUNCATE ON history "
            "FOR EACH STATEMENT EXECUTE FUNCTION history_is_append_only()"
        )


def downgrade() -> None:
    for table in ("history", "state", "strength_cache", "tag", "alias", "source", "site", "phase"):
        op.drop_table(table)
    if op.get_bind().dialect.name == "postgresql":
        op.execute("DROP FUNCTION history_is_append_only()")
