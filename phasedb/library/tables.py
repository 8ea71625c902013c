"""The store's tables. The revisions in migrations/ build the same; a test compares the two."""

from __future__ import annotations

from typing import Final

import sqlalchemy as sa

REVISIONS: Final = ("0001", "0002")
"""Every revision in order; the last is what this program reads and writes. Kept here so that opening a store
does not import Alembic."""

metadata = sa.MetaData()


def _text(name: str, *, optional: bool = False) -> sa.Column[str]:
    return sa.Column(name, sa.Text(), nullable=optional)


def _double(name: str, *, optional: bool = True) -> sa.Column[float]:
    return sa.Column(name, sa.Double(), nullable=optional)


def _phase_id(table: str, *, optional: bool = False) -> tuple[sa.Column[int], sa.ForeignKeyConstraint]:
    return (
        sa.Column("phase_id", sa.Integer(), nullable=optional),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name=f"fk_{table}_phase_id_phase"),
    )


phase = sa.Table(
    "phase",
    metadata,
    sa.Column("id", sa.Integer(), nullable=False),
    sa.Column("uid", sa.String(32), nullable=False),
    _text("name"),
    _text("name_key"),
    _text("mineral_name"),
    _text("formula"),
    _text("formula_key"),
    _text("elements"),
    sa.Column("lattice_type", sa.String(1), nullable=False),
    _double("a_angstrom", optional=False),
    _double("a_esd_angstrom"),
    _text("a_text"),
    _double("temperature_k"),
    _double("expansion_per_k"),
    _text("structure_type", optional=True),
    _text("free_parameters"),
    _text("space_group"),
    _double("formula_units_per_cell"),
    _text("assumed"),
    _text("drift_class"),
    _text("drift_reason"),
    _double("a_min_angstrom"),
    _double("a_max_angstrom"),
    _double("measured_density_g_cm3"),
    _text("remarks"),
    _text("standing"),
    sa.Column("version", sa.Integer(), nullable=False),
    _text("entered_by"),
    _text("entered_at"),
    _text("changed_by", optional=True),
    _text("changed_at", optional=True),
    _text("checked_by", optional=True),
    _text("checked_at", optional=True),
    _text("withdrawn_reason", optional=True),
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
sa.Index("ix_phase_lattice_type_a_angstrom", phase.c.lattice_type, phase.c.a_angstrom, phase.c.standing)

site = sa.Table(
    "site",
    metadata,
    *_phase_id("site"),
    sa.Column("position", sa.Integer(), nullable=False),
    _text("label"),
    _text("species"),
    _double("x", optional=False),
    _double("y", optional=False),
    _double("z", optional=False),
    _double("b_iso", optional=False),
    sa.PrimaryKeyConstraint("phase_id", "position", name="pk_site"),
)

source = sa.Table(
    "source",
    metadata,
    *_phase_id("source"),
    sa.Column("position", sa.Integer(), nullable=False),
    _text("citation"),
    _text("doi"),
    sa.Column("year", sa.Integer(), nullable=True),
    _text("kind"),
    _text("how"),
    _double("a_angstrom"),
    _double("density_g_cm3"),
    sa.CheckConstraint(
        "kind IN ('standard', 'handbook', 'paper', 'data package', 'measured here', 'from memory')",
        name="ck_source_kind",
    ),
    sa.PrimaryKeyConstraint("phase_id", "position", name="pk_source"),
)

alias = sa.Table(
    "alias",
    metadata,
    _text("alias_key"),
    *_phase_id("alias"),
    _text("alias"),
    sa.PrimaryKeyConstraint("alias_key", name="pk_alias"),
)
sa.Index("ix_alias_phase_id", alias.c.phase_id)

tag = sa.Table(
    "tag",
    metadata,
    *_phase_id("tag"),
    _text("tag"),
    sa.PrimaryKeyConstraint("phase_id", "tag", name="pk_tag"),
)

strength_cache = sa.Table(
    "strength_cache",
    metadata,
    *_phase_id("strength_cache"),
    sa.Column("method", sa.Integer(), nullable=False),
    sa.Column("n", sa.LargeBinary(), nullable=False),
    sa.Column("strength", sa.LargeBinary(), nullable=False),
    sa.Column("checksum", sa.String(64), nullable=False),
    sa.PrimaryKeyConstraint("phase_id", name="pk_strength_cache"),
)

state = sa.Table(
    "state",
    metadata,
    sa.Column("id", sa.Integer(), autoincrement=False, nullable=False),
    sa.Column("library_id", sa.String(32), nullable=False),
    sa.Column("phase_count", sa.Integer(), nullable=False),
    sa.Column("fingerprint", sa.String(64), nullable=False),
    sa.Column("history_count", sa.Integer(), nullable=False),
    sa.Column("history_head", sa.String(64), nullable=False),
    sa.CheckConstraint("id = 1", name="ck_state_one_row"),
    sa.PrimaryKeyConstraint("id", name="pk_state"),
)

history = sa.Table(
    "history",
    metadata,
    sa.Column("number", sa.Integer(), autoincrement=False, nullable=False),
    _text("at"),
    _text("who"),
    _text("login"),
    _text("host"),
    _text("program_version"),
    _text("action"),
    _text("kind"),
    _text("key"),
    _text("before", optional=True),
    _text("after", optional=True),
    _text("remark"),
    sa.Column("previous_hash", sa.String(64), nullable=False),
    sa.Column("hash", sa.String(64), nullable=False),
    sa.PrimaryKeyConstraint("number", name="pk_history"),
)
sa.Index("ix_history_key", history.c.key)

instrument = sa.Table(
    "instrument",
    metadata,
    sa.Column("id", sa.Integer(), nullable=False),
    sa.Column("uid", sa.String(32), nullable=False),
    _text("name"),
    _text("name_key"),
    _text("radiation"),
    _double("goniometer_radius_mm"),
    _text("geometry"),
    _double("zero_deg"),
    _double("zero_scale_deg"),
    _double("displacement_mm"),
    _double("displacement_scale_mm"),
    _double("line_width_deg"),
    _text("standard"),
    _text("calibrated_on", optional=True),
    _text("remarks"),
    sa.Column("version", sa.Integer(), nullable=False),
    _text("entered_by"),
    _text("entered_at"),
    sa.PrimaryKeyConstraint("id", name="pk_instrument"),
    sa.UniqueConstraint("uid", name="uq_instrument_uid"),
    sa.UniqueConstraint("name_key", name="uq_instrument_name_key"),
)

measurement = sa.Table(
    "measurement",
    metadata,
    sa.Column("id", sa.Integer(), nullable=False),
    sa.Column("uid", sa.String(32), nullable=False),
    _text("source"),
    sa.Column("sha256", sa.String(64), nullable=False),
    _text("sample"),
    _text("radiation", optional=True),
    _double("wavelength_angstrom"),
    _text("peaks"),
    *_phase_id("measurement", optional=True),
    _text("entered_by"),
    _text("entered_at"),
    sa.PrimaryKeyConstraint("id", name="pk_measurement"),
    sa.UniqueConstraint("uid", name="uq_measurement_uid"),
)
sa.Index("ix_measurement_phase_id", measurement.c.phase_id)

identification = sa.Table(
    "identification",
    metadata,
    sa.Column("id", sa.Integer(), nullable=False),
    sa.Column("uid", sa.String(32), nullable=False),
    sa.Column("measurement_id", sa.Integer(), nullable=False),
    _text("settings"),
    _text("program_version"),
    sa.Column("library_fingerprint", sa.String(64), nullable=False),
    sa.Column("history_head", sa.String(64), nullable=False),
    sa.Column("history_count", sa.Integer(), nullable=False),
    _text("result"),
    sa.Column("result_sha256", sa.String(64), nullable=False),
    _text("made_by"),
    _text("made_at"),
    sa.PrimaryKeyConstraint("id", name="pk_identification"),
    sa.UniqueConstraint("uid", name="uq_identification_uid"),
    sa.ForeignKeyConstraint(
        ["measurement_id"], ["measurement.id"], name="fk_identification_measurement_id_measurement"
    ),
)

signature = sa.Table(
    "signature",
    metadata,
    sa.Column("id", sa.Integer(), nullable=False),
    sa.Column("uid", sa.String(32), nullable=False),
    sa.Column("identification_id", sa.Integer(), nullable=False),
    _text("signed_by_key"),
    _text("signed_by"),
    _text("signed_at"),
    _text("remark"),
    sa.PrimaryKeyConstraint("id", name="pk_signature"),
    sa.UniqueConstraint("uid", name="uq_signature_uid"),
    sa.UniqueConstraint(
        "identification_id", "signed_by_key", name="uq_signature_identification_id_signed_by_key"
    ),
    sa.ForeignKeyConstraint(
        ["identification_id"], ["identification.id"], name="fk_signature_identification_id_identification"
    ),
)
