"""The catalogue of the first release."""

from __future__ import annotations

import sqlalchemy as sa
from alembic import op

revision = "r0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:
    """Make every table; on SQLite the trail also refuses to be changed."""
    op.create_table(
        "assessments",
        sa.Column("key", sa.String(length=64), nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("package_sha256", sa.String(length=64), nullable=False),
        sa.Column("protocol_version", sa.Text(), nullable=False),
        sa.Column("protocol_sha256", sa.String(length=64), nullable=False),
        sa.Column("revisions_sha256", sa.String(length=64), nullable=False),
        sa.Column("software_version", sa.Text(), nullable=False),
        sa.Column("status", sa.Text(), nullable=False),
        sa.Column("trouble", sa.Text(), nullable=True),
        sa.Column("reason", sa.Text(), nullable=True),
        sa.Column("evidence_sha256", sa.String(length=64), nullable=True),
        sa.Column("recorded_at_text", sa.Text(), nullable=True),
        sa.Column("assessed_at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint("status IN ('assessed', 'quarantined')", name=op.f("ck_assessments_status_known")),
        sa.PrimaryKeyConstraint("key", name=op.f("pk_assessments")),
    )
    with op.batch_alter_table("assessments", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_assessments_package_sha256"), ["package_sha256"], unique=False)

    op.create_table(
        "audit",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("who", sa.Text(), nullable=False),
        sa.Column("what", sa.Text(), nullable=False),
        sa.Column("old", sa.Text(), nullable=True),
        sa.Column("new", sa.Text(), nullable=True),
        sa.Column("why", sa.Text(), nullable=True),
        sa.Column("content", sa.Text(), nullable=True),
        sa.Column("previous_sha256", sa.String(length=64), nullable=False),
        sa.Column("row_sha256", sa.String(length=64), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_audit")),
        sa.UniqueConstraint("row_sha256", name=op.f("uq_audit_row_sha256")),
    )
    op.create_table(
        "entries",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("package", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=True),
        sa.Column("version", sa.Integer(), nullable=True),
        sa.Column("status", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=True),
        sa.Column("received_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("package_sha256", sa.String(length=64), nullable=True),
        sa.Column("first_seen_at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint("version IS NULL OR version >= 1", name=op.f("ck_entries_version_counts_from_one")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_entries")),
        sa.UniqueConstraint("site", "package", "package_sha256", name=op.f("uq_entries_site_package_package_sha256")),
    )
    with op.batch_alter_table("entries", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_entries_package_sha256"), ["package_sha256"], unique=False)
        batch_op.create_index("ix_entries_site_acquisition", ["site", "acquisition"], unique=False)

    op.create_table(
        "nights",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("started_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("ended_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("status", sa.Text(), nullable=False),
        sa.Column("process", sa.Integer(), nullable=False),
        sa.Column("release", sa.Text(), nullable=True),
        sa.Column("trouble", sa.Text(), nullable=True),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_nights")),
    )
    op.create_table(
        "releases",
        sa.Column("id", sa.Integer(), nullable=False),
        sa.Column("name", sa.Text(), nullable=False),
        sa.Column("manifest_sha256", sa.String(length=64), nullable=False),
        sa.Column("published_at", sa.DateTime(timezone=True), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_releases")),
    )
    op.create_table(
        "acquisitions",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("subject", sa.Text(), nullable=False),
        sa.Column("visit", sa.Text(), nullable=False),
        sa.Column("chamber", sa.Text(), nullable=False),
        sa.Column("recorded_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("verdict", sa.Text(), nullable=False),
        sa.Column("machine_verdict", sa.Text(), nullable=False),
        sa.Column("decided_by", sa.Text(), nullable=True),
        sa.Column("reasons", sa.Text(), nullable=True),
        sa.Column("runs", sa.Integer(), nullable=False),
        sa.Column("beats", sa.Integer(), nullable=False),
        sa.Column("beats_accepted", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_acquisitions_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", name=op.f("pk_acquisitions")),
    )
    op.create_table(
        "beats",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("run", sa.Text(), nullable=False),
        sa.Column("beat", sa.Integer(), nullable=False),
        sa.Column("start_s", sa.Double(), nullable=True),
        sa.Column("end_systole_s", sa.Double(), nullable=True),
        sa.Column("end_s", sa.Double(), nullable=True),
        sa.Column("verdict", sa.Text(), nullable=False),
        sa.Column("machine_verdict", sa.Text(), nullable=False),
        sa.Column("decided_by", sa.Text(), nullable=True),
        sa.Column("reasons", sa.Text(), nullable=True),
        sa.Column("in_window", sa.Boolean(), nullable=True),
        sa.Column("rr_s", sa.Double(), nullable=True),
        sa.Column("edv_ml", sa.Double(), nullable=True),
        sa.Column("esv_ml", sa.Double(), nullable=True),
        sa.Column("sv_ml", sa.Double(), nullable=True),
        sa.Column("ef", sa.Double(), nullable=True),
        sa.Column("edp_mmhg", sa.Double(), nullable=True),
        sa.Column("esp_mmhg", sa.Double(), nullable=True),
        sa.Column("pmax_mmhg", sa.Double(), nullable=True),
        sa.Column("sw_mmhg_ml", sa.Double(), nullable=True),
        sa.Column("ea_mmhg_per_ml", sa.Double(), nullable=True),
        sa.Column("dpdt_max_mmhg_per_s", sa.Double(), nullable=True),
        sa.Column("dpdt_min_mmhg_per_s", sa.Double(), nullable=True),
        sa.Column("tau_ms", sa.Double(), nullable=True),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_beats_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_beats")),
    )
    op.create_table(
        "changes",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("subject", sa.Text(), nullable=False),
        sa.Column("visit", sa.Text(), nullable=False),
        sa.Column("from_stage", sa.Text(), nullable=False),
        sa.Column("to_stage", sa.Text(), nullable=False),
        sa.Column("index", sa.Text(), nullable=False),
        sa.Column("estimator", sa.Text(), nullable=False),
        sa.Column("part", sa.Text(), nullable=True),
        sa.Column("difference", sa.Double(), nullable=True),
        sa.Column("unit", sa.Text(), nullable=True),
        sa.Column("ci_low", sa.Double(), nullable=True),
        sa.Column("ci_high", sa.Double(), nullable=True),
        sa.Column("status", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=True),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_changes_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_changes")),
    )
    op.create_table(
        "indices",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("subject", sa.Text(), nullable=False),
        sa.Column("visit", sa.Text(), nullable=False),
        sa.Column("chamber", sa.Text(), nullable=False),
        sa.Column("stage", sa.Text(), nullable=True),
        sa.Column("run", sa.Text(), nullable=True),
        sa.Column("index", sa.Text(), nullable=False),
        sa.Column("estimator", sa.Text(), nullable=False),
        sa.Column("primary", sa.Boolean(), nullable=False),
        sa.Column("value", sa.Double(), nullable=True),
        sa.Column("unit", sa.Text(), nullable=True),
        sa.Column("ci_low", sa.Double(), nullable=True),
        sa.Column("ci_high", sa.Double(), nullable=True),
        sa.Column("fit_ci_low", sa.Double(), nullable=True),
        sa.Column("fit_ci_high", sa.Double(), nullable=True),
        sa.Column("beats", sa.Integer(), nullable=True),
        sa.Column("runs", sa.Integer(), nullable=True),
        sa.Column("status", sa.Text(), nullable=False),
        sa.Column("machine_status", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=True),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_indices_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_indices")),
    )
    op.create_table(
        "measures",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("run", sa.Text(), nullable=True),
        sa.Column("beat", sa.Integer(), nullable=True),
        sa.Column("check", sa.Text(), nullable=False),
        sa.Column("level", sa.Text(), nullable=False),
        sa.Column("value", sa.Double(), nullable=True),
        sa.Column("verdict", sa.Text(), nullable=False),
        sa.Column("limit", sa.Double(), nullable=True),
        sa.Column("unit", sa.Text(), nullable=True),
        sa.Column("revision", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_measures_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_measures")),
    )
    op.create_table(
        "rejections",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("run", sa.Text(), nullable=True),
        sa.Column("beat", sa.Integer(), nullable=True),
        sa.Column("at_s", sa.Double(), nullable=True),
        sa.Column("check", sa.Text(), nullable=False),
        sa.Column("verdict", sa.Text(), nullable=False),
        sa.Column("decisive", sa.Boolean(), nullable=False),
        sa.Column("value", sa.Double(), nullable=True),
        sa.Column("limit", sa.Double(), nullable=True),
        sa.Column("unit", sa.Text(), nullable=True),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("action", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_rejections_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_rejections")),
    )
    op.create_table(
        "runs",
        sa.Column("assessment_key", sa.String(length=64), nullable=False),
        sa.Column("position", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("site", sa.Text(), nullable=False),
        sa.Column("acquisition", sa.Text(), nullable=False),
        sa.Column("run", sa.Text(), nullable=False),
        sa.Column("kind", sa.Text(), nullable=False),
        sa.Column("stage", sa.Text(), nullable=True),
        sa.Column("manoeuvre", sa.Text(), nullable=True),
        sa.Column("sampling_rate_hz", sa.Double(), nullable=True),
        sa.Column("duration_s", sa.Double(), nullable=True),
        sa.Column("verdict", sa.Text(), nullable=False),
        sa.Column("machine_verdict", sa.Text(), nullable=False),
        sa.Column("decided_by", sa.Text(), nullable=True),
        sa.Column("reasons", sa.Text(), nullable=True),
        sa.Column("beats", sa.Integer(), nullable=False),
        sa.Column("beats_accepted", sa.Integer(), nullable=False),
        sa.ForeignKeyConstraint(
            ["assessment_key"], ["assessments.key"], name=op.f("fk_runs_assessment_key_assessments"), ondelete="CASCADE"
        ),
        sa.PrimaryKeyConstraint("assessment_key", "position", name=op.f("pk_runs")),
    )
    for event in ("update", "delete"):
        if op.get_bind().dialect.name == "sqlite":
            op.execute(
                f"CREATE TRIGGER audit_refuses_{event} BEFORE {event} ON audit BEGIN SELECT RAISE(ABORT, 'the trail only grows'); END"
            )


def downgrade() -> None:
    """Take every table away again."""
    for event in ("update", "delete"):
        if op.get_bind().dialect.name == "sqlite":
            op.execute(f"DROP TRIGGER audit_refuses_{event}")
    op.drop_table("runs")
    op.drop_table("rejections")
    op.drop_table("measures")
    op.drop_table("indices")
    op.drop_table("changes")
    op.drop_table("beats")
    op.drop_table("acquisitions")
    op.drop_table("releases")
    op.drop_table("nights")
    with op.batch_alter_table("entries", schema=None) as batch_op:
        batch_op.drop_index("ix_entries_site_acquisition")
        batch_op.drop_index(batch_op.f("ix_entries_package_sha256"))

    op.drop_table("entries")
    op.drop_table("audit")
    with op.batch_alter_table("assessments", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_assessments_package_sha256"))

    op.drop_table("assessments")
