"""The tables of the first version."""

from collections.abc import Sequence

import sqlalchemy as sa
from alembic import op

revision: str = "0001"
down_revision: str | None = None
branch_labels: str | Sequence[str] | None = None
depends_on: str | Sequence[str] | None = None

# SQLite numbers rows by itself only for a key typed INTEGER, which is 64 bits wide there anyway.
KEY = sa.BigInteger().with_variant(sa.Integer(), "sqlite")


def upgrade() -> None:
    """Bring the tables one version forward."""
    op.create_table(
        "person",
        sa.Column("id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("address", sa.String(length=200), nullable=False, comment="e-mail address in lower case"),
        sa.Column("password_hash", sa.Text(), nullable=True),
        sa.Column("keeper", sa.Boolean(), nullable=False, comment="of the whole registry"),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("shut_out_at", sa.DateTime(timezone=True), nullable=True),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_person")),
        sa.UniqueConstraint("address", name=op.f("uq_person_address")),
    )
    op.create_table(
        "access_token",
        sa.Column("id", KEY, nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("token_hash", sa.String(length=64), nullable=False),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("expires_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("revoked_at", sa.DateTime(timezone=True), nullable=True),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_access_token_person_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_access_token")),
        sa.UniqueConstraint("token_hash", name=op.f("uq_access_token_token_hash")),
    )
    op.create_index(op.f("ix_access_token_person_id"), "access_token", ["person_id"], unique=False)
    op.create_table(
        "registry_event",
        sa.Column("number", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("what", sa.String(length=20), nullable=False),
        sa.Column("before", sa.Text(), nullable=True),
        sa.Column("after", sa.Text(), nullable=True),
        sa.Column("previous", sa.String(length=64), nullable=False),
        sa.Column("hash", sa.String(length=64), nullable=False),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_registry_event_person_id")),
        sa.PrimaryKeyConstraint("number", name=op.f("pk_registry_event")),
    )
    op.create_table(
        "series",
        sa.Column("id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("about", sa.Text(), nullable=False),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("created_by", KEY, nullable=False),
        sa.ForeignKeyConstraint(["created_by"], ["person.id"], name=op.f("fk_series_created_by")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_series")),
        sa.UniqueConstraint("name", name=op.f("uq_series_name")),
    )
    op.create_table(
        "session",
        sa.Column("token_hash", sa.String(length=64), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("expires_at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_session_person_id")),
        sa.PrimaryKeyConstraint("token_hash", name=op.f("pk_session")),
    )
    op.create_index(op.f("ix_session_person_id"), "session", ["person_id"], unique=False)
    op.create_table(
        "column_mapping",
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("heads_digest", sa.String(length=64), nullable=False),
        sa.Column("choices", sa.JSON(), nullable=False),
        sa.Column("used_at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_column_mapping_series_id")),
        sa.PrimaryKeyConstraint("series_id", "heads_digest", name=op.f("pk_column_mapping")),
    )
    op.create_table(
        "condition",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("about", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_condition_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_condition")),
        sa.UniqueConstraint("series_id", "name", name=op.f("uq_condition_series_id_name")),
    )
    op.create_table(
        "factor",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("about", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_factor_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_factor")),
        sa.UniqueConstraint("series_id", "name", name=op.f("uq_factor_series_id_name")),
    )
    op.create_table(
        "invitation",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("address", sa.String(length=200), nullable=False),
        sa.Column("role", sa.String(length=20), nullable=False),
        sa.Column("token_hash", sa.String(length=64), nullable=False),
        sa.Column("invited_by", KEY, nullable=False),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("expires_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("accepted_at", sa.DateTime(timezone=True), nullable=True),
        sa.CheckConstraint("role IN ('viewer', 'logger', 'analyst', 'keeper')", name=op.f("ck_invitation_role")),
        sa.ForeignKeyConstraint(["invited_by"], ["person.id"], name=op.f("fk_invitation_invited_by")),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_invitation_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_invitation")),
        sa.UniqueConstraint("token_hash", name=op.f("uq_invitation_token_hash")),
    )
    op.create_index(op.f("ix_invitation_series_id"), "invitation", ["series_id"], unique=False)
    op.create_table(
        "membership",
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("role", sa.String(length=20), nullable=False),
        sa.Column("granted_at", sa.DateTime(timezone=True), nullable=False),
        sa.CheckConstraint("role IN ('viewer', 'logger', 'analyst', 'keeper')", name=op.f("ck_membership_role")),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_membership_person_id")),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_membership_series_id")),
        sa.PrimaryKeyConstraint("series_id", "person_id", name=op.f("pk_membership")),
    )
    op.create_index(op.f("ix_membership_person_id"), "membership", ["person_id"], unique=False)
    op.create_table(
        "reader_link",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("scope", sa.String(length=20), nullable=False),
        sa.Column("subject", sa.JSON(), nullable=False, comment="which studies and choices the page shows"),
        sa.Column("kind", sa.String(length=20), nullable=False),
        sa.Column("content", sa.Text(), nullable=True),
        sa.Column("token_hash", sa.String(length=64), nullable=False),
        sa.Column("passcode_hash", sa.Text(), nullable=True),
        sa.Column("made_by", KEY, nullable=False),
        sa.Column("made_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("expires_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("revoked_at", sa.DateTime(timezone=True), nullable=True),
        sa.CheckConstraint("kind = 'live' OR content IS NOT NULL", name=op.f("ck_reader_link_fixed_has_content")),
        sa.CheckConstraint("kind IN ('fixed', 'live')", name=op.f("ck_reader_link_kind")),
        sa.CheckConstraint("scope IN ('study', 'comparison', 'series', 'board')", name=op.f("ck_reader_link_scope")),
        sa.ForeignKeyConstraint(["made_by"], ["person.id"], name=op.f("fk_reader_link_made_by")),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_reader_link_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_reader_link")),
        sa.UniqueConstraint("token_hash", name=op.f("uq_reader_link_token_hash")),
    )
    op.create_index("ix_reader_link_series_id", "reader_link", ["series_id"], unique=False)
    op.create_table(
        "response",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("about", sa.Text(), nullable=False),
        sa.Column("dimension", sa.String(length=20), nullable=False),
        sa.Column("wanted", sa.String(length=20), nullable=False),
        sa.Column("kind", sa.String(length=20), nullable=False),
        sa.Column("part", sa.String(length=20), nullable=False),
        sa.Column("plausible_low", sa.String(length=60), nullable=True),
        sa.Column("plausible_high", sa.String(length=60), nullable=True),
        sa.Column("numerator_id", KEY, nullable=True),
        sa.Column("denominator_id", KEY, nullable=True),
        sa.CheckConstraint("kind IN ('measured', 'yes_no')", name=op.f("ck_response_kind")),
        sa.CheckConstraint("part IN ('primary', 'guard')", name=op.f("ck_response_part")),
        sa.CheckConstraint("wanted IN ('lower', 'higher', 'none')", name=op.f("ck_response_wanted")),
        sa.CheckConstraint(
            "(numerator_id IS NULL) = (denominator_id IS NULL)", name=op.f("ck_response_quotient_whole")
        ),
        sa.ForeignKeyConstraint(["denominator_id"], ["response.id"], name=op.f("fk_response_denominator_id")),
        sa.ForeignKeyConstraint(["numerator_id"], ["response.id"], name=op.f("fk_response_numerator_id")),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_response_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_response")),
        sa.UniqueConstraint("series_id", "name", name=op.f("uq_response_series_id_name")),
    )
    op.create_table(
        "study",
        sa.Column("id", KEY, nullable=False),
        sa.Column("series_id", KEY, nullable=False),
        sa.Column("title", sa.String(length=200), nullable=False),
        sa.Column("question", sa.Text(), nullable=False),
        sa.Column("site", sa.String(length=200), nullable=False),
        sa.Column("time_zone", sa.String(length=200), nullable=False),
        sa.Column("status", sa.String(length=20), nullable=False),
        sa.Column("close_reason", sa.String(length=20), nullable=True),
        sa.Column("close_note", sa.Text(), nullable=True),
        sa.Column("spread", sa.String(length=20), nullable=True, comment="fixed in the plan; empty until it is locked"),
        sa.Column("revision", sa.BigInteger(), nullable=False),
        sa.Column("created_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("created_by", KEY, nullable=False),
        sa.Column("started_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("closed_at", sa.DateTime(timezone=True), nullable=True),
        sa.CheckConstraint(
            "(status = 'closed') = (close_reason IS NOT NULL)", name=op.f("ck_study_closed_with_reason")
        ),
        sa.CheckConstraint("close_reason IN ('size_reached', 'early', 'extended')", name=op.f("ck_study_close_reason")),
        sa.CheckConstraint("spread IN ('shared', 'own')", name=op.f("ck_study_spread")),
        sa.CheckConstraint("status IN ('planned', 'running', 'closed', 'withdrawn')", name=op.f("ck_study_status")),
        sa.CheckConstraint("revision >= 0", name=op.f("ck_study_revision")),
        sa.ForeignKeyConstraint(["created_by"], ["person.id"], name=op.f("fk_study_created_by")),
        sa.ForeignKeyConstraint(["series_id"], ["series.id"], name=op.f("fk_study_series_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_study")),
    )
    op.create_index("ix_study_series_id", "study", ["series_id"], unique=False)
    op.create_table(
        "amendment",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("what", sa.String(length=20), nullable=False),
        sa.Column("before", sa.Text(), nullable=False),
        sa.Column("after", sa.Text(), nullable=False),
        sa.Column("reason", sa.Text(), nullable=False),
        sa.Column("trials_logged", sa.BigInteger(), nullable=False),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_amendment_person_id")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_amendment_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_amendment")),
    )
    op.create_table(
        "cell",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("weight", sa.String(length=60), nullable=True, comment="share of the live operation, when stated"),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_cell_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_cell")),
    )
    op.create_table(
        "decision",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("decided_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("what", sa.Text(), nullable=False),
        sa.Column("from_day", sa.Date(), nullable=True),
        sa.Column("expected_saving", sa.String(length=60), nullable=True),
        sa.Column("saving_unit", sa.String(length=20), nullable=True),
        sa.Column("review_day", sa.Date(), nullable=True),
        sa.Column("held", sa.String(length=20), nullable=True),
        sa.Column("held_note", sa.Text(), nullable=True),
        sa.Column("held_at", sa.DateTime(timezone=True), nullable=True),
        sa.CheckConstraint("held IN ('yes', 'partly', 'no')", name=op.f("ck_decision_held")),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_decision_person_id")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_decision_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_decision")),
    )
    op.create_table(
        "free_text",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("salt", sa.String(length=64), nullable=False),
        sa.Column("body", sa.Text(), nullable=True, comment="empty once erased"),
        sa.Column("erased_at", sa.DateTime(timezone=True), nullable=True),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_free_text_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_free_text")),
    )
    op.create_table(
        "import_job",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("content", sa.LargeBinary(), nullable=True),
        sa.Column("digest", sa.String(length=64), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("given_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("state", sa.String(length=20), nullable=False),
        sa.Column("ended_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("first_trial", sa.BigInteger(), nullable=True),
        sa.Column("last_trial", sa.BigInteger(), nullable=True),
        sa.CheckConstraint("state IN ('waiting', 'done', 'dropped')", name=op.f("ck_import_job_state")),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_import_job_person_id")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_import_job_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_import_job")),
    )
    op.create_table(
        "level",
        sa.Column("id", KEY, nullable=False),
        sa.Column("factor_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.Column("definition", sa.Text(), nullable=False),
        sa.Column("running", sa.Text(), nullable=False, comment="what running this level means on the floor"),
        sa.Column("replaces_id", KEY, nullable=True, comment="the level that this one was until its meaning changed"),
        sa.ForeignKeyConstraint(["factor_id"], ["factor.id"], name=op.f("fk_level_factor_id")),
        sa.ForeignKeyConstraint(["replaces_id"], ["level.id"], name=op.f("fk_level_replaces_id")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_level")),
        sa.UniqueConstraint("factor_id", "name", name=op.f("uq_level_factor_id_name")),
    )
    op.create_table(
        "pinned_result",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", KEY, autoincrement=False, nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("headline", sa.Text(), nullable=False),
        sa.Column("content", sa.Text(), nullable=False),
        sa.Column("fingerprint", sa.String(length=64), nullable=False),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_pinned_result_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_pinned_result")),
    )
    op.create_table(
        "plan",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("per_cell", KEY, nullable=False),
        sa.Column("planned", sa.BigInteger(), nullable=False),
        sa.Column("alpha", sa.String(length=60), nullable=False),
        sa.Column("looks", sa.String(length=20), nullable=False),
        sa.Column(
            "tau_squared",
            sa.String(length=60),
            nullable=True,
            comment="tuning of the anytime interval, spread-squared units",
        ),
        sa.Column("planning_variance", sa.String(length=60), nullable=True),
        sa.Column("comparisons", sa.JSON(), nullable=False),
        sa.Column("trials_a_week", sa.String(length=60), nullable=True, comment="of the live operation"),
        sa.Column("locked_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("locked_by", KEY, nullable=False),
        sa.CheckConstraint("looks IN ('closed', 'as_you_go')", name=op.f("ck_plan_looks")),
        sa.CheckConstraint("per_cell > 0 AND planned > 0", name=op.f("ck_plan_size")),
        sa.ForeignKeyConstraint(["locked_by"], ["person.id"], name=op.f("fk_plan_locked_by")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_plan_study_id")),
        sa.PrimaryKeyConstraint("study_id", name=op.f("pk_plan")),
    )
    op.create_table(
        "reader_link_visits",
        sa.Column("link_id", KEY, nullable=False),
        sa.Column("visits", sa.BigInteger(), nullable=False),
        sa.Column("last_at", sa.DateTime(timezone=True), nullable=False),
        sa.ForeignKeyConstraint(["link_id"], ["reader_link.id"], name=op.f("fk_reader_link_visits_link_id")),
        sa.PrimaryKeyConstraint("link_id", name=op.f("pk_reader_link_visits")),
    )
    op.create_table(
        "study_factor",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("position", KEY, autoincrement=False, nullable=False),
        sa.Column("factor_id", KEY, nullable=False),
        sa.Column("role", sa.String(length=20), nullable=False),
        sa.Column("set_anew", sa.Boolean(), nullable=False, comment="can it be set anew for every trial?"),
        sa.CheckConstraint("role IN ('treatment', 'block', 'held')", name=op.f("ck_study_factor_role")),
        sa.ForeignKeyConstraint(["factor_id"], ["factor.id"], name=op.f("fk_study_factor_factor_id")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_study_factor_study_id")),
        sa.PrimaryKeyConstraint("study_id", "position", name=op.f("pk_study_factor")),
        sa.UniqueConstraint("study_id", "factor_id", name=op.f("uq_study_factor_study_id_factor_id")),
    )
    op.create_table(
        "study_response",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("response_id", KEY, nullable=False),
        sa.Column("rank", KEY, nullable=False),
        sa.Column("unit", sa.String(length=20), nullable=False),
        sa.Column("step", sa.String(length=60), nullable=False),
        sa.Column("anchor", sa.BigInteger(), nullable=True, comment="the first reading logged, in steps; it stays"),
        sa.Column("margin", sa.String(length=60), nullable=True),
        sa.Column("guard_margin", sa.String(length=60), nullable=True),
        sa.Column("scale", sa.String(length=20), nullable=False),
        sa.Column("unit_value", sa.String(length=60), nullable=True, comment="what one unit is worth"),
        sa.CheckConstraint("scale IN ('raw', 'log')", name=op.f("ck_study_response_scale")),
        sa.ForeignKeyConstraint(["response_id"], ["response.id"], name=op.f("fk_study_response_response_id")),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_study_response_study_id")),
        sa.PrimaryKeyConstraint("study_id", "response_id", name=op.f("pk_study_response")),
        sa.UniqueConstraint("study_id", "rank", name=op.f("uq_study_response_study_id_rank")),
    )
    op.create_table(
        "event",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("what", sa.String(length=20), nullable=False),
        sa.Column("trial", sa.BigInteger(), nullable=True),
        sa.Column("response_id", KEY, nullable=True),
        sa.Column("before", sa.Text(), nullable=True),
        sa.Column("after", sa.Text(), nullable=True),
        sa.Column("text_number", KEY, nullable=True),
        sa.Column("text_hash", sa.String(length=64), nullable=True),
        sa.Column("previous", sa.String(length=64), nullable=False),
        sa.Column("hash", sa.String(length=64), nullable=False),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_event_person_id")),
        sa.ForeignKeyConstraint(
            ["study_id", "text_number"],
            ["free_text.study_id", "free_text.number"],
            name=op.f("fk_event_study_id_text_number"),
        ),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_event_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_event")),
    )
    op.create_table(
        "level_alias",
        sa.Column("level_id", KEY, nullable=False),
        sa.Column("name", sa.String(length=200), nullable=False),
        sa.ForeignKeyConstraint(["level_id"], ["level.id"], name=op.f("fk_level_alias_level_id")),
        sa.PrimaryKeyConstraint("level_id", "name", name=op.f("pk_level_alias")),
    )
    op.create_table(
        "run",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("position", KEY, autoincrement=False, nullable=False),
        sa.Column("cell", KEY, nullable=False),
        sa.Column("block", KEY, nullable=True),
        sa.Column("state", sa.String(length=20), nullable=False),
        sa.Column("skip_reason", sa.Text(), nullable=True),
        sa.Column("whole_plot", KEY, nullable=True, comment="unit that a factor hard to change is set for"),
        sa.Column("generators", sa.Text(), nullable=True, comment="of the fraction, where there is one"),
        sa.CheckConstraint("(state = 'skipped') = (skip_reason IS NOT NULL)", name=op.f("ck_run_skipped_with_reason")),
        sa.CheckConstraint("state IN ('waiting', 'done', 'skipped')", name=op.f("ck_run_state")),
        sa.ForeignKeyConstraint(
            ["study_id", "cell"], ["cell.study_id", "cell.number"], name=op.f("fk_run_study_id_cell")
        ),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_run_study_id")),
        sa.PrimaryKeyConstraint("study_id", "position", name=op.f("pk_run")),
    )
    op.create_table(
        "study_level",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("position", KEY, autoincrement=False, nullable=False),
        sa.Column("rank", KEY, autoincrement=False, nullable=False),
        sa.Column("level_id", KEY, nullable=False),
        sa.ForeignKeyConstraint(["level_id"], ["level.id"], name=op.f("fk_study_level_level_id")),
        sa.ForeignKeyConstraint(
            ["study_id", "position"],
            ["study_factor.study_id", "study_factor.position"],
            name=op.f("fk_study_level_study_id_position"),
        ),
        sa.PrimaryKeyConstraint("study_id", "position", "rank", name=op.f("pk_study_level")),
        sa.UniqueConstraint("study_id", "position", "level_id", name=op.f("uq_study_level_study_id_position_level_id")),
    )
    op.create_table(
        "tally",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("response_id", KEY, autoincrement=False, nullable=False),
        sa.Column("cell", KEY, autoincrement=False, nullable=False),
        sa.Column("n", sa.BigInteger(), nullable=False),
        sa.Column("total", sa.BigInteger(), nullable=False),
        sa.Column("squares_high", sa.BigInteger(), nullable=False),
        sa.Column("squares_low", sa.BigInteger(), nullable=False),
        sa.CheckConstraint(
            "typeof(n) = 'integer' AND typeof(total) = 'integer' AND typeof(squares_high) = 'integer' AND typeof(squares_low) = 'integer'",
            name=op.f("ck_tally_integers"),
        ).ddl_if(dialect="sqlite"),
        sa.CheckConstraint(
            "n > 0 OR (total = 0 AND squares_high = 0 AND squares_low = 0)", name=op.f("ck_tally_empty_is_zero")
        ),
        sa.CheckConstraint("n >= 0 AND n < 134217728", name=op.f("ck_tally_n")),
        sa.CheckConstraint("squares_high >= 0", name=op.f("ck_tally_squares_high")),
        sa.CheckConstraint("squares_low >= 0 AND squares_low < 1099511627776", name=op.f("ck_tally_squares_low")),
        sa.ForeignKeyConstraint(
            ["study_id", "cell"], ["cell.study_id", "cell.number"], name=op.f("fk_tally_study_id_cell")
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "response_id"],
            ["study_response.study_id", "study_response.response_id"],
            name=op.f("fk_tally_study_id_response_id"),
        ),
        sa.PrimaryKeyConstraint("study_id", "response_id", "cell", name=op.f("pk_tally")),
    )
    op.create_table(
        "cell_level",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("cell", KEY, autoincrement=False, nullable=False),
        sa.Column("position", KEY, autoincrement=False, nullable=False),
        sa.Column("rank", KEY, nullable=False),
        sa.ForeignKeyConstraint(
            ["study_id", "cell"], ["cell.study_id", "cell.number"], name=op.f("fk_cell_level_study_id_cell")
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "position", "rank"],
            ["study_level.study_id", "study_level.position", "study_level.rank"],
            name=op.f("fk_cell_level_study_id_position_rank"),
        ),
        sa.PrimaryKeyConstraint("study_id", "cell", "position", name=op.f("pk_cell_level")),
    )
    op.create_table(
        "trial",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("number", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("cell", KEY, nullable=False, comment="as assigned; tallies count this one"),
        sa.Column("actual_cell", KEY, nullable=True, comment="only where it differs"),
        sa.Column("run_position", KEY, nullable=True),
        sa.Column("happened_at", sa.DateTime(timezone=True), nullable=True),
        sa.Column("phone_clock", sa.DateTime(timezone=True), nullable=True),
        sa.Column("logged_at", sa.DateTime(timezone=True), nullable=False),
        sa.Column("person_id", KEY, nullable=False),
        sa.Column("client_key", sa.String(length=64), nullable=True, comment="a UUID; rows of an import have none"),
        sa.Column(
            "content_hash", sa.String(length=64), nullable=True, comment="of the entry as first sent under its key"
        ),
        sa.Column("kept", sa.Boolean(), nullable=False),
        sa.ForeignKeyConstraint(["person_id"], ["person.id"], name=op.f("fk_trial_person_id")),
        sa.ForeignKeyConstraint(
            ["study_id", "actual_cell"], ["cell.study_id", "cell.number"], name=op.f("fk_trial_study_id_actual_cell")
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "cell"], ["cell.study_id", "cell.number"], name=op.f("fk_trial_study_id_cell")
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "run_position"], ["run.study_id", "run.position"], name=op.f("fk_trial_study_id_run_position")
        ),
        sa.ForeignKeyConstraint(["study_id"], ["study.id"], name=op.f("fk_trial_study_id")),
        sa.PrimaryKeyConstraint("study_id", "number", name=op.f("pk_trial")),
        sa.UniqueConstraint("study_id", "client_key", name=op.f("uq_trial_study_id_client_key")),
    )
    op.create_table(
        "reading",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("trial", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("response_id", KEY, autoincrement=False, nullable=False),
        sa.Column("steps", sa.BigInteger(), nullable=False),
        sa.Column("kept", sa.Boolean(), nullable=False),
        sa.ForeignKeyConstraint(
            ["study_id", "response_id"],
            ["study_response.study_id", "study_response.response_id"],
            name=op.f("fk_reading_study_id_response_id"),
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "trial"], ["trial.study_id", "trial.number"], name=op.f("fk_reading_study_id_trial")
        ),
        sa.PrimaryKeyConstraint("study_id", "trial", "response_id", name=op.f("pk_reading")),
    )
    op.create_table(
        "trial_condition",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("trial", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("condition_id", KEY, nullable=False),
        sa.Column("value", sa.Text(), nullable=False),
        sa.ForeignKeyConstraint(["condition_id"], ["condition.id"], name=op.f("fk_trial_condition_condition_id")),
        sa.ForeignKeyConstraint(
            ["study_id", "trial"], ["trial.study_id", "trial.number"], name=op.f("fk_trial_condition_study_id_trial")
        ),
        sa.PrimaryKeyConstraint("study_id", "trial", "condition_id", name=op.f("pk_trial_condition")),
    )
    op.create_table(
        "trial_note",
        sa.Column("study_id", KEY, nullable=False),
        sa.Column("trial", sa.BigInteger(), autoincrement=False, nullable=False),
        sa.Column("text_number", KEY, autoincrement=False, nullable=False),
        sa.ForeignKeyConstraint(
            ["study_id", "text_number"],
            ["free_text.study_id", "free_text.number"],
            name=op.f("fk_trial_note_study_id_text_number"),
        ),
        sa.ForeignKeyConstraint(
            ["study_id", "trial"], ["trial.study_id", "trial.number"], name=op.f("fk_trial_note_study_id_trial")
        ),
        sa.PrimaryKeyConstraint("study_id", "trial", "text_number", name=op.f("pk_trial_note")),
    )
