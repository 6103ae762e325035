"""the first tables

Revision ID: 0001
Revises: none
"""

import sqlalchemy as sa
from alembic import op

from service.records import columns
from service.records.journal import POSTGRES_APPEND, SERVICE, START

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.create_table(
        "depot",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("title", sa.String(), nullable=False),
        sa.Column("time_zone", sa.String(), nullable=False),
        sa.Column("audit_weekday", sa.Integer(), nullable=False),
        sa.Column("audit_hour", sa.Integer(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("epoch", sa.Integer(), nullable=False),
        sa.Column("created_at", columns.UtcDateTime(), nullable=False),
        sa.CheckConstraint("audit_hour BETWEEN 0 AND 23", name=op.f("ck_depot_audit_hour_range")),
        sa.CheckConstraint("audit_weekday BETWEEN 0 AND 6", name=op.f("ck_depot_audit_weekday_range")),
        sa.PrimaryKeyConstraint("depot", name=op.f("pk_depot")),
    )
    op.create_table(
        "journal",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("sequence", sa.Integer(), nullable=False),
        sa.Column("recorded_at", sa.String(), nullable=False),
        sa.Column("actor", sa.String(), nullable=False),
        sa.Column("action", sa.String(), nullable=False),
        sa.Column("subject_kind", columns.Name(), nullable=False),
        sa.Column("subject_name", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=True),
        sa.Column("sections", sa.String(), nullable=False),
        sa.Column("content", sa.String(), nullable=False),
        sa.Column("previous_digest", sa.String(), nullable=False),
        sa.Column("digest", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("depot", "sequence", name=op.f("pk_journal")),
    )
    with op.batch_alter_table("journal", schema=None) as batch_op:
        batch_op.create_index("ix_journal_section", ["depot", "section", "sequence"], unique=False)
        batch_op.create_index("ix_journal_subject_kind", ["depot", "subject_kind", "sequence"], unique=False)

    op.create_table(
        "journal_head",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("sequence", sa.Integer(), nullable=False),
        sa.Column("digest", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("depot", name=op.f("pk_journal_head")),
    )
    op.create_table(
        "limit_book",
        sa.Column("book", columns.Name(), nullable=False),
        sa.Column("title", sa.String(), nullable=False),
        sa.Column("created_at", columns.UtcDateTime(), nullable=False),
        sa.PrimaryKeyConstraint("book", name=op.f("pk_limit_book")),
    )
    op.create_table(
        "access_key",
        sa.Column("label", columns.Name(), nullable=False),
        sa.Column("digest", columns.Name(), nullable=False),
        sa.Column("holder", sa.String(), nullable=False),
        sa.Column("scopes", sa.String(), nullable=False),
        sa.Column("depot", sa.String(), nullable=True),
        sa.Column("device", columns.Name(), nullable=True),
        sa.Column("created_at", columns.UtcDateTime(), nullable=False),
        sa.Column("expires_at", columns.UtcDateTime(), nullable=True),
        sa.Column("revoked_at", columns.UtcDateTime(), nullable=True),
        sa.Column("last_used_at", columns.UtcDateTime(), nullable=True),
        sa.ForeignKeyConstraint(["depot"], ["depot.depot"], name=op.f("fk_access_key_depot")),
        sa.PrimaryKeyConstraint("label", name=op.f("pk_access_key")),
        sa.UniqueConstraint("digest", name=op.f("uq_access_key_digest")),
    )
    op.create_table(
        "audit",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("audit", sa.Date(), nullable=False),
        sa.Column("started_at", columns.UtcDateTime(), nullable=False),
        sa.Column("finished_at", columns.UtcDateTime(), nullable=False),
        sa.Column("started_by", sa.String(), nullable=False),
        sa.Column("known_at", columns.UtcDateTime(), nullable=False),
        sa.Column("sequence", sa.Integer(), nullable=False),
        sa.Column("digest", sa.String(), nullable=False),
        sa.Column("editions", sa.String(), nullable=False),
        sa.Column("sections_judged", sa.Integer(), nullable=False),
        sa.Column("sections_not_judged", sa.Integer(), nullable=False),
        sa.Column("counts", sa.String(), nullable=False),
        sa.ForeignKeyConstraint(["depot"], ["depot.depot"], name=op.f("fk_audit_depot")),
        sa.PrimaryKeyConstraint("depot", "audit", name=op.f("pk_audit")),
    )
    op.create_table(
        "edition",
        sa.Column("book", sa.String(), nullable=False),
        sa.Column("edition", columns.Name(), nullable=False),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("content", sa.String(), nullable=False),
        sa.Column("digest", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("drafted_at", columns.UtcDateTime(), nullable=False),
        sa.Column("drafted_by", sa.String(), nullable=False),
        sa.Column("effective_on", sa.Date(), nullable=True),
        sa.Column("issued_at", columns.UtcDateTime(), nullable=True),
        sa.Column("issued_by", sa.String(), nullable=True),
        sa.Column("withdrawn_on", sa.Date(), nullable=True),
        sa.Column("withdrawn_at", columns.UtcDateTime(), nullable=True),
        sa.Column("withdrawn_by", sa.String(), nullable=True),
        sa.CheckConstraint("state IN ('draft', 'issued', 'withdrawn')", name=op.f("ck_edition_state_known")),
        sa.ForeignKeyConstraint(["book"], ["limit_book.book"], name=op.f("fk_edition_book")),
        sa.PrimaryKeyConstraint("book", "edition", name=op.f("pk_edition")),
    )
    op.create_table(
        "instrument",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("instrument", columns.Name(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("title", sa.String(), nullable=True),
        sa.Column("serial", sa.String(), nullable=True),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("recorded_at", columns.UtcDateTime(), nullable=False),
        sa.CheckConstraint("kind IN ('shunt_box', 'meter')", name=op.f("ck_instrument_kind_known")),
        sa.ForeignKeyConstraint(["depot"], ["depot.depot"], name=op.f("fk_instrument_depot")),
        sa.PrimaryKeyConstraint("depot", "instrument", name=op.f("pk_instrument")),
    )
    op.create_table(
        "section",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("folded", columns.Name(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("created_at", columns.UtcDateTime(), nullable=False),
        sa.ForeignKeyConstraint(["depot"], ["depot.depot"], name=op.f("fk_section_depot")),
        sa.PrimaryKeyConstraint("depot", "section", name=op.f("pk_section")),
        sa.UniqueConstraint("depot", "folded", name=op.f("uq_section_depot_folded")),
    )
    op.create_table(
        "audit_row",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("audit", sa.Date(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("position", sa.Integer(), nullable=False),
        sa.Column("content", sa.String(), nullable=False),
        sa.ForeignKeyConstraint(
            ["depot", "audit"], ["audit.depot", "audit.audit"], name=op.f("fk_audit_row_depot_audit")
        ),
        sa.ForeignKeyConstraint(
            ["depot", "section"],
            ["section.depot", "section.section"],
            name=op.f("fk_audit_row_depot_section"),
        ),
        sa.PrimaryKeyConstraint("depot", "audit", "section", name=op.f("pk_audit_row")),
    )
    with op.batch_alter_table("audit_row", schema=None) as batch_op:
        batch_op.create_index("ix_audit_row_rank", ["depot", "audit", "position"], unique=False)

    op.create_table(
        "calibration",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("instrument", columns.Name(), nullable=False),
        sa.Column("calibrated_on", sa.Date(), nullable=False),
        sa.Column("due_on", sa.Date(), nullable=False),
        sa.Column("result", sa.String(), nullable=False),
        sa.Column("accuracy_percent", sa.Float(), nullable=True),
        sa.Column("resolution", sa.Float(), nullable=True),
        sa.Column("resolution_unit", sa.String(), nullable=True),
        sa.Column("lead_resistance_ohm", sa.Float(), nullable=True),
        sa.Column("certificate", sa.String(), nullable=True),
        sa.Column("recorded_at", columns.UtcDateTime(), nullable=False),
        sa.CheckConstraint(
            "result IN ('pass', 'adjusted', 'out_of_tolerance')", name=op.f("ck_calibration_result_known")
        ),
        sa.ForeignKeyConstraint(
            ["depot", "instrument"],
            ["instrument.depot", "instrument.instrument"],
            name=op.f("fk_calibration_depot_instrument"),
        ),
        sa.PrimaryKeyConstraint("depot", "instrument", "calibrated_on", name=op.f("pk_calibration")),
    )
    op.create_table(
        "concession",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("concession", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("limit_name", columns.Name(), nullable=True),
        sa.Column("task", columns.Name(), nullable=True),
        sa.Column("test_point", columns.Name(), nullable=True),
        sa.Column("allowed_min", sa.Float(), nullable=True),
        sa.Column("allowed_max", sa.Float(), nullable=True),
        sa.Column("conditions", sa.String(), nullable=False),
        sa.Column("protection", sa.String(), nullable=True),
        sa.Column("asked_by", sa.String(), nullable=False),
        sa.Column("approved_by", sa.String(), nullable=False),
        sa.Column("from_on", sa.Date(), nullable=False),
        sa.Column("until_on", sa.Date(), nullable=False),
        sa.Column("granted_at", columns.UtcDateTime(), nullable=False),
        sa.Column("granted_by", sa.String(), nullable=False),
        sa.Column("ended_on", sa.Date(), nullable=True),
        sa.Column("ended_at", columns.UtcDateTime(), nullable=True),
        sa.Column("ended_by", sa.String(), nullable=True),
        sa.Column("ended_why", sa.String(), nullable=True),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.CheckConstraint(
            "(limit_name IS NULL) <> (task IS NULL)", name=op.f("ck_concession_limit_or_task")
        ),
        sa.CheckConstraint("asked_by <> approved_by", name=op.f("ck_concession_two_people")),
        sa.ForeignKeyConstraint(
            ["depot", "section"],
            ["section.depot", "section.section"],
            name=op.f("fk_concession_depot_section"),
        ),
        sa.PrimaryKeyConstraint("depot", "concession", name=op.f("pk_concession")),
    )
    with op.batch_alter_table("concession", schema=None) as batch_op:
        batch_op.create_index("ix_concession_section", ["depot", "section"], unique=False)

    op.create_table(
        "finding",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("finding", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("identity", columns.Name(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("quantity", columns.Name(), nullable=True),
        sa.Column("task", columns.Name(), nullable=True),
        sa.Column("test_point", columns.Name(), nullable=True),
        sa.Column("hazard", sa.String(), nullable=True),
        sa.Column("state", columns.Name(), nullable=False),
        sa.Column("opened_on", sa.Date(), nullable=False),
        sa.Column("last_seen_on", sa.Date(), nullable=False),
        sa.Column("cleared_on", sa.Date(), nullable=True),
        sa.Column("first_audit_on", sa.Date(), nullable=True),
        sa.Column("reopens", columns.Name(), nullable=True),
        sa.Column("concession", columns.Name(), nullable=True),
        sa.Column("visit", columns.Name(), nullable=True),
        sa.Column("verdict", sa.String(), nullable=True),
        sa.Column("response", sa.String(), nullable=True),
        sa.Column("reported_at", columns.UtcDateTime(), nullable=True),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.CheckConstraint("hazard IN ('wrong_side', 'right_side')", name=op.f("ck_finding_hazard_known")),
        sa.CheckConstraint(
            "kind IN ('outside', 'found_outside', 'not_shown', 'overdue', 'configuration', 'poor_rail_contact', 'concession_lapsing', 'doubtful')",
            name=op.f("ck_finding_kind_known"),
        ),
        sa.CheckConstraint("state IN ('new', 'open', 'cleared')", name=op.f("ck_finding_state_known")),
        sa.ForeignKeyConstraint(
            ["depot", "section"], ["section.depot", "section.section"], name=op.f("fk_finding_depot_section")
        ),
        sa.PrimaryKeyConstraint("depot", "finding", name=op.f("pk_finding")),
    )
    with op.batch_alter_table("finding", schema=None) as batch_op:
        batch_op.create_index("ix_finding_section", ["depot", "section"], unique=False)
        batch_op.create_index("ix_finding_state", ["depot", "state", "finding"], unique=False)
        batch_op.create_index(
            "uq_finding_open_identity",
            ["depot", "identity"],
            unique=True,
            sqlite_where=sa.text("state <> 'cleared'"),
            postgresql_where=sa.text("state <> 'cleared'"),
        )

    op.create_table(
        "latest",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("quantity", columns.Name(), nullable=False),
        sa.Column("test_point", columns.Name(), nullable=False),
        sa.Column("visit", columns.Name(), nullable=False),
        sa.Column("visited_at", columns.UtcDateTime(), nullable=False),
        sa.Column("as_found", sa.Float(), nullable=True),
        sa.Column("as_left", sa.Float(), nullable=True),
        sa.Column("comparison", sa.String(), nullable=False),
        sa.Column("instrument", columns.Name(), nullable=True),
        sa.Column("shunt_ohm", sa.Float(), nullable=True),
        sa.Column("source", sa.String(), nullable=True),
        sa.Column("doubtful", sa.String(), nullable=True),
        sa.ForeignKeyConstraint(
            ["depot", "section"], ["section.depot", "section.section"], name=op.f("fk_latest_depot_section")
        ),
        sa.PrimaryKeyConstraint("depot", "section", "quantity", "test_point", name=op.f("pk_latest")),
    )
    op.create_table(
        "section_version",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("valid_from_on", sa.Date(), nullable=False),
        sa.Column("recorded_at", columns.UtcDateTime(), nullable=False),
        sa.Column("recorded_by", sa.String(), nullable=False),
        sa.Column("title", sa.String(), nullable=True),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("line_name", columns.Name(), nullable=True),
        sa.Column("from_km", sa.Float(), nullable=True),
        sa.Column("to_km", sa.Float(), nullable=True),
        sa.Column("length_m", sa.Float(), nullable=True),
        sa.Column("circuit_kind", sa.String(), nullable=False),
        sa.Column("traction", sa.String(), nullable=False),
        sa.Column("return_rails", sa.Integer(), nullable=True),
        sa.Column("place", sa.String(), nullable=True),
        sa.Column("sleepers", sa.String(), nullable=True),
        sa.Column("commissioned_on", sa.Date(), nullable=True),
        sa.Column("book", sa.String(), nullable=True),
        sa.Column("required_test_points", sa.String(), nullable=False),
        sa.Column("points_ends", sa.Integer(), nullable=True),
        sa.Column("insulated_joints", sa.Integer(), nullable=True),
        sa.Column("bonding", sa.String(), nullable=True),
        sa.Column("longest_parallel_m", sa.Float(), nullable=True),
        sa.Column("bonds_duplicated", sa.Boolean(), nullable=True),
        sa.Column("interrupter_required", sa.Boolean(), nullable=True),
        sa.Column("interrupter_fitted", sa.Boolean(), nullable=True),
        sa.Column("train_frequency", sa.String(), nullable=True),
        sa.Column("adjacent", sa.String(), nullable=False),
        sa.Column("equipment", sa.String(), nullable=True),
        sa.Column("layout", sa.String(), nullable=True),
        sa.Column("succeeds", columns.Name(), nullable=True),
        sa.Column("asset_reference", columns.Name(), nullable=True),
        sa.CheckConstraint(
            "bonding IN ('series', 'parallel', 'mixed')", name=op.f("ck_section_version_bonding_known")
        ),
        sa.CheckConstraint(
            "circuit_kind IN ('dc', 'dc_ac_immune', 'ac_single_rail', 'ac_double_rail', 'audio_frequency', 'impulse', 'coded')",
            name=op.f("ck_section_version_circuit_kind_known"),
        ),
        sa.CheckConstraint("place IN ('block', 'yard')", name=op.f("ck_section_version_place_known")),
        sa.CheckConstraint(
            "sleepers IN ('wood', 'concrete', 'steel', 'slab')",
            name=op.f("ck_section_version_sleepers_known"),
        ),
        sa.CheckConstraint(
            "state IN ('planned', 'in_use', 'out_of_use', 'recovered')",
            name=op.f("ck_section_version_state_known"),
        ),
        sa.CheckConstraint(
            "traction IN ('none', 'dc_third_rail', 'dc_fourth_rail', 'dc_overhead', 'ac_overhead')",
            name=op.f("ck_section_version_traction_known"),
        ),
        sa.CheckConstraint(
            "return_rails BETWEEN 0 AND 2", name=op.f("ck_section_version_return_rails_range")
        ),
        sa.ForeignKeyConstraint(["book"], ["limit_book.book"], name=op.f("fk_section_version_book")),
        sa.ForeignKeyConstraint(
            ["depot", "section"],
            ["section.depot", "section.section"],
            name=op.f("fk_section_version_depot_section"),
        ),
        sa.PrimaryKeyConstraint("depot", "section", "version", name=op.f("pk_section_version")),
    )
    with op.batch_alter_table("section_version", schema=None) as batch_op:
        batch_op.create_index("ix_section_version_book", ["depot", "book"], unique=False)

    op.create_table(
        "status",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("as_of", sa.Date(), nullable=False),
        sa.Column("compliance", columns.Name(), nullable=True),
        sa.Column("overdue", sa.Boolean(), nullable=False),
        sa.Column("worst_hazard", columns.Name(), nullable=True),
        sa.Column("next_due_on", sa.Date(), nullable=True),
        sa.Column("holds_until", sa.Date(), nullable=True),
        sa.Column("sequence", sa.Integer(), nullable=False),
        sa.CheckConstraint(
            "compliance IN ('no', 'not_shown', 'yes')", name=op.f("ck_status_compliance_known")
        ),
        sa.CheckConstraint(
            "worst_hazard IN ('wrong_side', 'right_side')", name=op.f("ck_status_worst_hazard_known")
        ),
        sa.ForeignKeyConstraint(
            ["depot", "section"], ["section.depot", "section.section"], name=op.f("fk_status_depot_section")
        ),
        sa.PrimaryKeyConstraint("depot", "section", name=op.f("pk_status")),
    )
    with op.batch_alter_table("status", schema=None) as batch_op:
        batch_op.create_index("ix_status_compliance", ["depot", "compliance", "section"], unique=False)
        batch_op.create_index("ix_status_holds_until", ["depot", "holds_until"], unique=False)
        batch_op.create_index("ix_status_overdue", ["depot", "overdue", "section"], unique=False)
        batch_op.create_index("ix_status_worst_hazard", ["depot", "worst_hazard", "section"], unique=False)

    op.create_table(
        "visit",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("visit", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("visited_at", columns.UtcDateTime(), nullable=False),
        sa.Column("received_at", columns.UtcDateTime(), nullable=False),
        sa.Column("received_by", sa.String(), nullable=False),
        sa.Column("holder", sa.String(), nullable=False),
        sa.Column("found_outside", sa.Boolean(), nullable=False),
        sa.Column("clock_offset_s", sa.Integer(), nullable=True),
        sa.Column("device", columns.Name(), nullable=True),
        sa.Column("tester", sa.String(), nullable=True),
        sa.Column("ballast", sa.String(), nullable=True),
        sa.Column("ballast_state", sa.String(), nullable=True),
        sa.Column("rail", sa.String(), nullable=True),
        sa.Column("air_temperature_c", sa.Float(), nullable=True),
        sa.Column("tasks", sa.String(), nullable=False),
        sa.Column("work_done", sa.String(), nullable=False),
        sa.Column("condition_left", sa.String(), nullable=True),
        sa.Column("remarks", sa.String(), nullable=True),
        sa.Column("replaces", columns.Name(), nullable=True),
        sa.Column("pack", columns.Name(), nullable=True),
        sa.Column("digest", sa.String(), nullable=False),
        sa.CheckConstraint(
            "ballast IN ('dry', 'frozen', 'damp', 'wet', 'flooded')", name=op.f("ck_visit_ballast_known")
        ),
        sa.CheckConstraint(
            "ballast_state IN ('clean', 'fouled', 'overgrown')", name=op.f("ck_visit_ballast_state_known")
        ),
        sa.CheckConstraint(
            "condition_left IN ('fit', 'restricted', 'disconnected')",
            name=op.f("ck_visit_condition_left_known"),
        ),
        sa.CheckConstraint("rail IN ('clean', 'rusty', 'contaminated')", name=op.f("ck_visit_rail_known")),
        sa.ForeignKeyConstraint(
            ["depot", "section"], ["section.depot", "section.section"], name=op.f("fk_visit_depot_section")
        ),
        sa.PrimaryKeyConstraint("depot", "visit", name=op.f("pk_visit")),
    )
    with op.batch_alter_table("visit", schema=None) as batch_op:
        batch_op.create_index("ix_visit_received", ["depot", "received_at", "visit"], unique=False)
        batch_op.create_index("ix_visit_replaces", ["depot", "replaces"], unique=False)
        batch_op.create_index("ix_visit_section", ["depot", "section", "visited_at"], unique=False)

    op.create_table(
        "reading",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("visit", columns.Name(), nullable=False),
        sa.Column("quantity", columns.Name(), nullable=False),
        sa.Column("test_point", columns.Name(), nullable=False),
        sa.Column("stage", columns.Name(), nullable=False),
        sa.Column("section", columns.Name(), nullable=False),
        sa.Column("visited_at", columns.UtcDateTime(), nullable=False),
        sa.Column("comparison", sa.String(), nullable=False),
        sa.Column("value", sa.Float(), nullable=False),
        sa.Column("value_given", sa.Float(), nullable=False),
        sa.Column("unit_given", sa.String(), nullable=False),
        sa.Column("instrument", columns.Name(), nullable=True),
        sa.Column("shunt_ohm", sa.Float(), nullable=True),
        sa.Column("source", sa.String(), nullable=True),
        sa.Column("doubtful", sa.String(), nullable=True),
        sa.CheckConstraint("comparison IN ('eq', 'ge', 'lt')", name=op.f("ck_reading_comparison_known")),
        sa.CheckConstraint("source IN ('shunt', 'train')", name=op.f("ck_reading_source_known")),
        sa.CheckConstraint("stage IN ('as_found', 'as_left')", name=op.f("ck_reading_stage_known")),
        sa.ForeignKeyConstraint(
            ["depot", "visit"], ["visit.depot", "visit.visit"], name=op.f("fk_reading_depot_visit")
        ),
        sa.PrimaryKeyConstraint("depot", "visit", "quantity", "test_point", "stage", name=op.f("pk_reading")),
    )
    with op.batch_alter_table("reading", schema=None) as batch_op:
        batch_op.create_index(
            "ix_reading_section", ["depot", "section", "quantity", "test_point", "visited_at"], unique=False
        )

    op.create_table(
        "void",
        sa.Column("depot", columns.Name(), nullable=False),
        sa.Column("visit", columns.Name(), nullable=False),
        sa.Column("voided_at", columns.UtcDateTime(), nullable=False),
        sa.Column("voided_by", sa.String(), nullable=False),
        sa.Column("why", sa.String(), nullable=False),
        sa.ForeignKeyConstraint(
            ["depot", "visit"], ["visit.depot", "visit.visit"], name=op.f("fk_void_depot_visit")
        ),
        sa.PrimaryKeyConstraint("depot", "visit", name=op.f("pk_void")),
    )
    op.execute(
        sa.table("journal_head", sa.column("depot"), sa.column("sequence"), sa.column("digest"))
        .insert()
        .values(depot=SERVICE, sequence=0, digest=START)
    )
    if op.get_bind().dialect.name == "postgresql":
        op.execute(POSTGRES_APPEND)


def downgrade() -> None:
    if op.get_bind().dialect.name == "postgresql":
        op.execute("DROP FUNCTION journal_append")
    op.drop_table("void")
    with op.batch_alter_table("reading", schema=None) as batch_op:
        batch_op.drop_index("ix_reading_section")

    op.drop_table("reading")
    with op.batch_alter_table("visit", schema=None) as batch_op:
        batch_op.drop_index("ix_visit_section")
        batch_op.drop_index("ix_visit_replaces")
        batch_op.drop_index("ix_visit_received")

    op.drop_table("visit")
    with op.batch_alter_table("status", schema=None) as batch_op:
        batch_op.drop_index("ix_status_worst_hazard")
        batch_op.drop_index("ix_status_overdue")
        batch_op.drop_index("ix_status_holds_until")
        batch_op.drop_index("ix_status_compliance")

    op.drop_table("status")
    with op.batch_alter_table("section_version", schema=None) as batch_op:
        batch_op.drop_index("ix_section_version_book")

    op.drop_table("section_version")
    op.drop_table("latest")
    with op.batch_alter_table("finding", schema=None) as batch_op:
        batch_op.drop_index(
            "uq_finding_open_identity",
            sqlite_where=sa.text("state <> 'cleared'"),
            postgresql_where=sa.text("state <> 'cleared'"),
        )
        batch_op.drop_index("ix_finding_state")
        batch_op.drop_index("ix_finding_section")

    op.drop_table("finding")
    with op.batch_alter_table("concession", schema=None) as batch_op:
        batch_op.drop_index("ix_concession_section")

    op.drop_table("concession")
    op.drop_table("calibration")
    with op.batch_alter_table("audit_row", schema=None) as batch_op:
        batch_op.drop_index("ix_audit_row_rank")

    op.drop_table("audit_row")
    op.drop_table("section")
    op.drop_table("instrument")
    op.drop_table("edition")
    op.drop_table("audit")
    op.drop_table("access_key")
    op.drop_table("limit_book")
    op.drop_table("journal_head")
    with op.batch_alter_table("journal", schema=None) as batch_op:
        batch_op.drop_index("ix_journal_subject_kind")
        batch_op.drop_index("ix_journal_section")

    op.drop_table("journal")
    op.drop_table("depot")
