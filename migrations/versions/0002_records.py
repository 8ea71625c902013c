"""Instruments, measurements, identifications and their signatures."""

import sqlalchemy as sa
from alembic import op

revision = "0002"
down_revision = "0001"


def upgrade() -> None:
    op.create_table(
        "instrument",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("uid", sa.String(32), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("name_key", sa.Text(), nullable=False),
        sa.Column("radiation", sa.Text(), nullable=False),
        sa.Column("goniometer_radius_mm", sa.Double(), nullable=True),
        sa.Column("geometry", sa.Text(), nullable=False),
        sa.Column("zero_deg", sa.Double(), nullable=True),
        sa.Column("zero_scale_deg", sa.Double(), nullable=True),
        sa.Column("displacement_mm", sa.Double(), nullable=True),
        sa.Column("displacement_scale_mm", sa.Double(), nullable=True),
        sa.Column("line_width_deg", sa.Double(), nullable=True),
        sa.Column("standard", sa.Text(), nullable=False),
        sa.Column("calibrated_on", sa.Text(), nullable=True),
        sa.Column("remarks", sa.Text(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("entered_by", sa.Text(), nullable=False),
        sa.Column("entered_at", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_instrument"),
        sa.UniqueConstraint("uid", name="uq_instrument_uid"),
        sa.UniqueConstraint("name_key", name="uq_instrument_name_key"),
    )
    op.create_table(
        "measurement",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("uid", sa.String(32), nullable=False),
        sa.Column("source", sa.Text(), nullable=False),
        sa.Column("sha256", sa.String(64), nullable=False),
        sa.Column("sample", sa.Text(), nullable=False),
        sa.Column("radiation", sa.Text(), nullable=True),
        sa.Column("wavelength_angstrom", sa.Double(), nullable=True),
        sa.Column("peaks", sa.Text(), nullable=False),
        sa.Column("phase_id", sa.Integer(), nullable=True),
        sa.Column("entered_by", sa.Text(), nullable=False),
        sa.Column("entered_at", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_measurement"),
        sa.ForeignKeyConstraint(["phase_id"], ["phase.id"], name="fk_measurement_phase_id_phase"),
        sa.UniqueConstraint("uid", name="uq_measurement_uid"),
    )
    op.create_index("ix_measurement_phase_id", "measurement", ["phase_id"])
    op.create_table(
        "identification",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("uid", sa.String(32), nullable=False),
        sa.Column("measurement_id", sa.Integer(), nullable=False),
        sa.Column("settings", sa.Text(), nullable=False),
        sa.Column("program_version", sa.Text(), nullable=False),
        sa.Column("library_fingerprint", sa.String(64), nullable=False),
        sa.Column("history_head", sa.String(64), nullable=False),
        sa.Column("history_count", sa.Integer(), nullable=False),
        sa.Column("result", sa.Text(), nullable=False),
        sa.Column("result_sha256", sa.String(64), nullable=False),
        sa.Column("made_by", sa.Text(), nullable=False),
        sa.Column("made_at", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_identification"),
        sa.UniqueConstraint("uid", name="uq_identification_uid"),
        sa.ForeignKeyConstraint(
            ["measurement_id"], ["measurement.id"], name="fk_identification_measurement_id_measurement"
        ),
    )
    op.create_table(
        "signature",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("uid", sa.String(32), nullable=False),
        sa.Column("identification_id", sa.Integer(), nullable=False),
        sa.Column("signed_by_key", sa.Text(), nullable=False),
        sa.Column("signed_by", sa.Text(), nullable=False),
        sa.Column("signed_at", sa.Text(), nullable=False),
        sa.Column("remark", sa.Text(), nullable=False),
        sa.PrimaryKeyConstraint("id", name="pk_signature"),
        sa.UniqueConstraint("uid", name="uq_signature_uid"),
        sa.UniqueConstraint(
            "identification_id", "signed_by_key", name="uq_signature_identification_id_signed_by_key"
        ),
        sa.ForeignKeyConstraint(
            ["identification_id"],
            ["identification.id"],
            name="fk_signature_identification_id_identification",
        ),
    )


def downgrade() -> None:
    for table in ("signature", "identification", "measurement", "instrument"):
        op.drop_table(table)
