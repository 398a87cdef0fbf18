"""Tables of the first release."""

import sqlalchemy as sa
from alembic import op

revision = "0001"
down_revision = None
branch_labels = None
depends_on = None


def upgrade() -> None:
    op.create_table(
        "audit_entry",
        sa.Column("number", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), autoincrement=True, nullable=False),
        sa.Column("at", sa.BigInteger(), nullable=False),
        sa.Column("who", sa.String(), nullable=False),
        sa.Column("what", sa.String(), nullable=False),
        sa.Column("subject", sa.String(), nullable=False),
        sa.Column("why", sa.String(), nullable=False),
        sa.Column("detail", sa.JSON(), nullable=False),
        sa.PrimaryKeyConstraint("number", name=op.f("pk_audit_entry")),
    )
    with op.batch_alter_table("audit_entry", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_audit_entry_at"), ["at"], unique=False)
        batch_op.create_index(batch_op.f("ix_audit_entry_subject"), ["subject"], unique=False)
        batch_op.create_index(batch_op.f("ix_audit_entry_what"), ["what"], unique=False)

    op.create_table(
        "district",
        sa.Column("id", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_district")),
    )
    op.create_table(
        "holding", sa.Column("id", sa.String(), nullable=False), sa.PrimaryKeyConstraint("id", name=op.f("pk_holding"))
    )
    op.create_table(
        "job_run",
        sa.Column("job", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("due", sa.Date(), nullable=False),
        sa.Column("attempt", sa.Integer(), nullable=False),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("claimed_at", sa.BigInteger(), nullable=False),
        sa.Column("expires_at", sa.BigInteger(), nullable=False),
        sa.Column("finished_at", sa.BigInteger(), nullable=True),
        sa.Column("summary", sa.JSON(), nullable=False),
        sa.PrimaryKeyConstraint("job", "district", "due", name=op.f("pk_job_run")),
    )
    op.create_table(
        "observation",
        sa.Column("key", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), autoincrement=False, nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("pest", sa.String(), nullable=False),
        sa.Column("present", sa.Boolean(), nullable=False),
        sa.Column("day", sa.Date(), nullable=False),
        sa.Column("latitude", sa.Float(precision=53), nullable=False),
        sa.Column("longitude", sa.Float(precision=53), nullable=False),
        sa.Column("cell", sa.BigInteger(), nullable=False),
        sa.Column("uncertainty_m", sa.Float(precision=53), nullable=True),
        sa.Column("elevation_m", sa.Float(precision=53), nullable=True),
        sa.Column("reporter", sa.String(), nullable=False),
        sa.Column("why", sa.String(), nullable=False),
        sa.Column("arrived_at", sa.BigInteger(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("digest", sa.LargeBinary(), nullable=False),
        sa.Column("paddock", sa.String(), nullable=True),
        sa.Column("postcode", sa.String(), nullable=True),
        sa.Column("crop", sa.String(), nullable=True),
        sa.Column("stage", sa.Integer(), nullable=True),
        sa.Column("stage_scale", sa.String(), nullable=True),
        sa.Column("count", sa.Float(precision=53), nullable=True),
        sa.Column("unit", sa.String(), nullable=True),
        sa.Column("units_sampled", sa.Integer(), nullable=True),
        sa.Column("method", sa.String(), nullable=True),
        sa.Column("damage", sa.String(), nullable=True),
        sa.Column("plants_per_m2", sa.Float(precision=53), nullable=True),
        sa.Column("row_spacing_m", sa.Float(precision=53), nullable=True),
        sa.Column("confidence", sa.String(), nullable=True),
        sa.Column("spot_counts", sa.String(), nullable=True),
        sa.Column("units_per_spot", sa.Integer(), nullable=True),
        sa.Column("spot_at", sa.String(), nullable=True),
        sa.Column("trap", sa.String(), nullable=True),
        sa.Column("lure", sa.String(), nullable=True),
        sa.Column("nights", sa.Integer(), nullable=True),
        sa.Column("serviced_on", sa.Date(), nullable=True),
        sa.Column("beneficials", sa.String(), nullable=True),
        sa.Column("treated_group", sa.String(), nullable=True),
        sa.Column("treated_on", sa.Date(), nullable=True),
        sa.Column("note", sa.String(), nullable=True),
        sa.Column("history", sa.Boolean(), nullable=False),
        sa.Column("arrival_assumed", sa.Boolean(), nullable=False),
        sa.PrimaryKeyConstraint("key", "version", name=op.f("pk_observation")),
    )
    with op.batch_alter_table("observation", schema=None) as batch_op:
        batch_op.create_index("ix_observation_district_day", ["district", "day"], unique=False)

    op.create_table(
        "reportable_case",
        sa.Column("number", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("received_at", sa.BigInteger(), nullable=False),
        sa.Column("row", sa.JSON(), nullable=False),
        sa.Column("reporter", sa.String(), nullable=True),
        sa.PrimaryKeyConstraint("number", name=op.f("pk_reportable_case")),
    )
    with op.batch_alter_table("reportable_case", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_reportable_case_district"), ["district"], unique=False)

    op.create_table(
        "rule_version",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("made_at", sa.BigInteger(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("pest", sa.String(), nullable=False),
        sa.Column("crops", sa.JSON(), nullable=False),
        sa.Column("parameters", sa.JSON(), nullable=False),
        sa.Column("sources", sa.JSON(), nullable=False),
        sa.Column("wording", sa.String(), nullable=False),
        sa.Column("status", sa.String(), nullable=False),
        sa.Column("by", sa.String(), nullable=False),
        sa.Column("why", sa.String(), nullable=False),
        sa.Column("hash", sa.String(), nullable=False),
        sa.PrimaryKeyConstraint("id", "version", name=op.f("pk_rule_version")),
    )
    with op.batch_alter_table("rule_version", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_rule_version_hash"), ["hash"], unique=False)

    op.create_table(
        "statement",
        sa.Column("hash", sa.String(), nullable=False),
        sa.Column("body", sa.JSON(), nullable=False),
        sa.PrimaryKeyConstraint("hash", name=op.f("pk_statement")),
    )
    op.create_table(
        "station", sa.Column("id", sa.String(), nullable=False), sa.PrimaryKeyConstraint("id", name=op.f("pk_station"))
    )
    op.create_table(
        "district_version",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("record", sa.JSON(), nullable=False),
        sa.ForeignKeyConstraint(["id"], ["district.id"], name=op.f("fk_district_version_id_district")),
        sa.PrimaryKeyConstraint("id", "version", name=op.f("pk_district_version")),
    )
    op.create_table(
        "edition",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("week", sa.String(), nullable=False),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("as_of", sa.BigInteger(), nullable=False),
        sa.Column("drafted_at", sa.BigInteger(), nullable=False),
        sa.Column("drafted_by", sa.String(), nullable=False),
        sa.Column("note", sa.String(), nullable=False),
        sa.Column("hold_reason", sa.String(), nullable=True),
        sa.Column("held_by", sa.String(), nullable=True),
        sa.Column("held_at", sa.BigInteger(), nullable=True),
        sa.Column("signed_at", sa.BigInteger(), nullable=True),
        sa.Column("signed_by", sa.String(), nullable=True),
        sa.Column("sent_at", sa.BigInteger(), nullable=True),
        sa.Column("sent_by", sa.String(), nullable=True),
        sa.Column("hashes", sa.JSON(), nullable=False),
        sa.Column("head", sa.JSON(), nullable=False),
        sa.CheckConstraint("state IN ('draft', 'held', 'signed', 'sent')", name=op.f("ck_edition_state")),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_edition_district_district")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_edition")),
    )
    with op.batch_alter_table("edition", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_edition_district"), ["district"], unique=False)

    op.create_table(
        "holding_version",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("registered_on", sa.Date(), nullable=False),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_holding_version_district_district")),
        sa.ForeignKeyConstraint(["id"], ["holding.id"], name=op.f("fk_holding_version_id_holding")),
        sa.PrimaryKeyConstraint("id", "version", name=op.f("pk_holding_version")),
    )
    with op.batch_alter_table("holding_version", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_holding_version_district"), ["district"], unique=False)

    op.create_table(
        "paddock",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("holding", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("latitude", sa.Float(precision=53), nullable=False),
        sa.Column("longitude", sa.Float(precision=53), nullable=False),
        sa.Column("cell", sa.BigInteger(), nullable=False),
        sa.Column("uncertainty_m", sa.Float(precision=53), nullable=True),
        sa.Column("elevation_m", sa.Float(precision=53), nullable=True),
        sa.Column("area_ha", sa.Float(precision=53), nullable=True),
        sa.Column("crop", sa.String(), nullable=True),
        sa.Column("sown_on", sa.Date(), nullable=True),
        sa.Column("up_on", sa.Date(), nullable=True),
        sa.Column("last_crop", sa.String(), nullable=True),
        sa.Column("pasture_before", sa.Boolean(), nullable=True),
        sa.Column("capeweed_before", sa.Boolean(), nullable=True),
        sa.Column("seed_dressing", sa.Boolean(), nullable=True),
        sa.Column("dressing_group", sa.String(), nullable=True),
        sa.Column("grazed", sa.JSON(), nullable=False),
        sa.Column("flowering", sa.Boolean(), nullable=True),
        sa.Column("row_spacing_m", sa.Float(precision=53), nullable=True),
        sa.Column("plants_per_m2", sa.Float(precision=53), nullable=True),
        sa.Column("enter_leave", sa.Boolean(), nullable=False),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_paddock_district_district")),
        sa.ForeignKeyConstraint(["holding"], ["holding.id"], name=op.f("fk_paddock_holding_holding")),
        sa.PrimaryKeyConstraint("id", "version", name=op.f("pk_paddock")),
    )
    with op.batch_alter_table("paddock", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_paddock_cell"), ["cell"], unique=False)
        batch_op.create_index(batch_op.f("ix_paddock_district"), ["district"], unique=False)
        batch_op.create_index(batch_op.f("ix_paddock_holding"), ["holding"], unique=False)

    op.create_table(
        "person",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("email", sa.String(), nullable=True),
        sa.Column("roles", sa.JSON(), nullable=False),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_person_district_district")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_person")),
    )
    with op.batch_alter_table("person", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_person_district"), ["district"], unique=False)

    op.create_table(
        "postcode",
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("code", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("latitude", sa.Float(precision=53), nullable=False),
        sa.Column("longitude", sa.Float(precision=53), nullable=False),
        sa.Column("cell", sa.BigInteger(), nullable=False),
        sa.Column("uncertainty_m", sa.Float(precision=53), nullable=True),
        sa.Column("elevation_m", sa.Float(precision=53), nullable=True),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_postcode_district_district")),
        sa.PrimaryKeyConstraint("district", "code", "version", name=op.f("pk_postcode")),
    )
    with op.batch_alter_table("postcode", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_postcode_cell"), ["cell"], unique=False)

    op.create_table(
        "signal",
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("as_of", sa.BigInteger(), nullable=False),
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("place_in_run", sa.Integer(), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("rule", sa.String(), nullable=False),
        sa.Column("rule_hash", sa.String(), nullable=False),
        sa.Column("pest", sa.String(), nullable=False),
        sa.Column("ask", sa.String(), nullable=False),
        sa.Column("cells", sa.JSON(), nullable=False),
        sa.Column("paddock", sa.String(), nullable=True),
        sa.Column("first_day", sa.Date(), nullable=False),
        sa.Column("last_day", sa.Date(), nullable=False),
        sa.Column("figures", sa.JSON(), nullable=False),
        sa.Column("evidence", sa.JSON(), nullable=False),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_signal_district_district")),
        sa.PrimaryKeyConstraint("district", "as_of", "id", name=op.f("pk_signal")),
    )
    op.create_table(
        "station_day",
        sa.Column("station", sa.String(), nullable=False),
        sa.Column("day", sa.Date(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("tmin", sa.Float(precision=53), nullable=True),
        sa.Column("tmax", sa.Float(precision=53), nullable=True),
        sa.Column("rain", sa.Float(precision=53), nullable=True),
        sa.Column("arrived_at", sa.BigInteger(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("arrival_assumed", sa.Boolean(), nullable=False),
        sa.Column("digest", sa.String(length=32), nullable=False),
        sa.ForeignKeyConstraint(["station"], ["station.id"], name=op.f("fk_station_day_station_station")),
        sa.PrimaryKeyConstraint("station", "day", "version", name=op.f("pk_station_day")),
    )
    op.create_table(
        "station_version",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("version", sa.Integer(), nullable=False),
        sa.Column("knowable_from", sa.BigInteger(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("latitude", sa.Float(precision=53), nullable=False),
        sa.Column("longitude", sa.Float(precision=53), nullable=False),
        sa.Column("cell", sa.BigInteger(), nullable=False),
        sa.Column("uncertainty_m", sa.Float(precision=53), nullable=True),
        sa.Column("elevation_m", sa.Float(precision=53), nullable=True),
        sa.Column("attribution", sa.String(), nullable=True),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_station_version_district_district")),
        sa.ForeignKeyConstraint(["id"], ["station.id"], name=op.f("fk_station_version_id_station")),
        sa.PrimaryKeyConstraint("id", "version", name=op.f("pk_station_version")),
    )
    with op.batch_alter_table("station_version", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_station_version_cell"), ["cell"], unique=False)
        batch_op.create_index(batch_op.f("ix_station_version_district"), ["district"], unique=False)

    op.create_table(
        "weather_block",
        sa.Column("key", sa.String(length=64), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("month", sa.Date(), nullable=False),
        sa.Column("variable", sa.String(), nullable=False),
        sa.Column("content", sa.String(length=64), nullable=False),
        sa.Column("data", sa.LargeBinary(), nullable=False),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_weather_block_district_district")),
        sa.PrimaryKeyConstraint("key", name=op.f("pk_weather_block")),
    )
    with op.batch_alter_table("weather_block", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_weather_block_district"), ["district"], unique=False)

    op.create_table(
        "edition_statement",
        sa.Column("edition", sa.String(), nullable=False),
        sa.Column("hash", sa.String(), nullable=False),
        sa.Column("basis", sa.JSON(), nullable=False),
        sa.Column("evidence", sa.JSON(), nullable=False),
        sa.Column("held_reason", sa.String(), nullable=True),
        sa.Column("held_by", sa.String(), nullable=True),
        sa.Column("held_at", sa.BigInteger(), nullable=True),
        sa.ForeignKeyConstraint(["edition"], ["edition.id"], name=op.f("fk_edition_statement_edition_edition")),
        sa.ForeignKeyConstraint(["hash"], ["statement.hash"], name=op.f("fk_edition_statement_hash_statement")),
        sa.PrimaryKeyConstraint("edition", "hash", name=op.f("pk_edition_statement")),
    )
    with op.batch_alter_table("edition_statement", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_edition_statement_hash"), ["hash"], unique=False)

    op.create_table(
        "outbox",
        sa.Column("id", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("kind", sa.String(), nullable=False),
        sa.Column("key", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("edition", sa.String(), nullable=True),
        sa.Column("subscriber", sa.String(), nullable=False),
        sa.Column("domain", sa.String(), nullable=False),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("due", sa.BigInteger(), nullable=False),
        sa.Column("attempts", sa.Integer(), nullable=False),
        sa.Column("fence", sa.Integer(), nullable=False),
        sa.Column("lease_until", sa.BigInteger(), nullable=True),
        sa.Column("leased_by", sa.String(), nullable=True),
        sa.Column("message_id", sa.String(), nullable=False),
        sa.Column("expires_at", sa.BigInteger(), nullable=False),
        sa.Column("last_answer", sa.String(), nullable=True),
        sa.Column("mime_hash", sa.String(), nullable=True),
        sa.Column("updated_at", sa.BigInteger(), nullable=False),
        sa.CheckConstraint(
            "state IN ('queued', 'leased', 'sending', 'sent', 'deferred', 'failed', 'expired', 'withdrawn')",
            name=op.f("ck_outbox_state"),
        ),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_outbox_district_district")),
        sa.ForeignKeyConstraint(["edition"], ["edition.id"], name=op.f("fk_outbox_edition_edition")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_outbox")),
        sa.UniqueConstraint("kind", "key", name=op.f("uq_outbox_kind_key")),
    )
    with op.batch_alter_table("outbox", schema=None) as batch_op:
        batch_op.create_index(
            "ix_outbox_expiring",
            ["expires_at"],
            unique=False,
            sqlite_where=sa.text("state IN ('queued', 'deferred')"),
            postgresql_where=sa.text("state IN ('queued', 'deferred')"),
        )
        batch_op.create_index(
            "ix_outbox_held",
            ["state", "lease_until"],
            unique=False,
            sqlite_where=sa.text("state IN ('leased', 'sending')"),
            postgresql_where=sa.text("state IN ('leased', 'sending')"),
        )
        batch_op.create_index(
            "ix_outbox_waiting",
            ["edition", "due", "id"],
            unique=False,
            sqlite_where=sa.text("state IN ('queued', 'deferred')"),
            postgresql_where=sa.text("state IN ('queued', 'deferred')"),
        )

    op.create_table(
        "subscriber",
        sa.Column("id", sa.String(), nullable=False),
        sa.Column("district", sa.String(), nullable=False),
        sa.Column("email", sa.String(), nullable=False),
        sa.Column("name", sa.String(), nullable=False),
        sa.Column("postcode", sa.String(), nullable=False),
        sa.Column("crops", sa.JSON(), nullable=False),
        sa.Column("paddocks", sa.JSON(), nullable=False),
        sa.Column("holding", sa.String(), nullable=True),
        sa.Column("language", sa.String(), nullable=False),
        sa.Column("state", sa.String(), nullable=False),
        sa.Column("consent", sa.String(), nullable=True),
        sa.Column("person", sa.String(), nullable=True),
        sa.ForeignKeyConstraint(["district"], ["district.id"], name=op.f("fk_subscriber_district_district")),
        sa.ForeignKeyConstraint(["holding"], ["holding.id"], name=op.f("fk_subscriber_holding_holding")),
        sa.ForeignKeyConstraint(["person"], ["person.id"], name=op.f("fk_subscriber_person_person")),
        sa.PrimaryKeyConstraint("id", name=op.f("pk_subscriber")),
    )
    with op.batch_alter_table("subscriber", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_subscriber_district"), ["district"], unique=False)

    op.create_table(
        "delivery",
        sa.Column("outbox", sa.BigInteger().with_variant(sa.Integer(), "sqlite"), nullable=False),
        sa.Column("attempt", sa.Integer(), nullable=False),
        sa.Column("at", sa.BigInteger(), nullable=False),
        sa.Column("code", sa.Integer(), nullable=True),
        sa.Column("answer", sa.String(), nullable=False),
        sa.Column("outcome", sa.String(), nullable=False),
        sa.ForeignKeyConstraint(["outbox"], ["outbox.id"], name=op.f("fk_delivery_outbox_outbox")),
        sa.PrimaryKeyConstraint("outbox", "attempt", name=op.f("pk_delivery")),
    )
    op.create_table(
        "slip",
        sa.Column("edition", sa.String(), nullable=False),
        sa.Column("subscriber", sa.String(), nullable=False),
        sa.Column("reader", sa.String(), nullable=False),
        sa.Column("body", sa.String(), nullable=False),
        sa.Column("bytes", sa.Integer(), nullable=False),
        sa.Column("canonical_hash", sa.String(), nullable=True),
        sa.CheckConstraint("bytes <= 2000", name=op.f("ck_slip_bytes")),
        sa.ForeignKeyConstraint(["edition"], ["edition.id"], name=op.f("fk_slip_edition_edition")),
        sa.ForeignKeyConstraint(["subscriber"], ["subscriber.id"], name=op.f("fk_slip_subscriber_subscriber")),
        sa.PrimaryKeyConstraint("edition", "subscriber", name=op.f("pk_slip")),
    )
    with op.batch_alter_table("slip", schema=None) as batch_op:
        batch_op.create_index(batch_op.f("ix_slip_subscriber"), ["subscriber"], unique=False)


def downgrade() -> None:
    with op.batch_alter_table("slip", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_slip_subscriber"))

    op.drop_table("slip")
    op.drop_table("delivery")
    with op.batch_alter_table("subscriber", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_subscriber_district"))

    op.drop_table("subscriber")
    with op.batch_alter_table("outbox", schema=None) as batch_op:
        batch_op.drop_index(
            "ix_outbox_waiting",
            sqlite_where=sa.text("state IN ('queued', 'deferred')"),
            postgresql_where=sa.text("state IN ('queued', 'deferred')"),
        )
        batch_op.drop_index(
            "ix_outbox_held",
            sqlite_where=sa.text("state IN ('leased', 'sending')"),
            postgresql_where=sa.text("state IN ('leased', 'sending')"),
        )
        batch_op.drop_index(
            "ix_outbox_expiring",
            sqlite_where=sa.text("state IN ('queued', 'deferred')"),
            postgresql_where=sa.text("state IN ('queued', 'deferred')"),
        )

    op.drop_table("outbox")
    with op.batch_alter_table("edition_statement", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_edition_statement_hash"))

    op.drop_table("edition_statement")
    with op.batch_alter_table("weather_block", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_weather_block_district"))

    op.drop_table("weather_block")
    with op.batch_alter_table("station_version", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_station_version_district"))
        batch_op.drop_index(batch_op.f("ix_station_version_cell"))

    op.drop_table("station_version")
    op.drop_table("station_day")
    op.drop_table("signal")
    with op.batch_alter_table("postcode", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_postcode_cell"))

    op.drop_table("postcode")
    with op.batch_alter_table("person", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_person_district"))

    op.drop_table("person")
    with op.batch_alter_table("paddock", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_paddock_holding"))
        batch_op.drop_index(batch_op.f("ix_paddock_district"))
        batch_op.drop_index(batch_op.f("ix_paddock_cell"))

    op.drop_table("paddock")
    with op.batch_alter_table("holding_version", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_holding_version_district"))

    op.drop_table("holding_version")
    with op.batch_alter_table("edition", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_edition_district"))

    op.drop_table("edition")
    op.drop_table("district_version")
    op.drop_table("station")
    op.drop_table("statement")
    with op.batch_alter_table("rule_version", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_rule_version_hash"))

    op.drop_table("rule_version")
    with op.batch_alter_table("reportable_case", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_reportable_case_district"))

    op.drop_table("reportable_case")
    with op.batch_alter_table("observation", schema=None) as batch_op:
        batch_op.drop_index("ix_observation_district_day")

    op.drop_table("observation")
    op.drop_table("job_run")
    op.drop_table("holding")
    op.drop_table("district")
    with op.batch_alter_table("audit_entry", schema=None) as batch_op:
        batch_op.drop_index(batch_op.f("ix_audit_entry_what"))
        batch_op.drop_index(batch_op.f("ix_audit_entry_subject"))
        batch_op.drop_index(batch_op.f("ix_audit_entry_at"))

    op.drop_table("audit_entry")
