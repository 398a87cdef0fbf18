"""Versions of rules: a change adds one, nothing is overwritten, and a read names its moment."""

from datetime import datetime
from typing import Any

from sqlalchemy import JSON, Column, Connection, Integer, Row, String, Table, and_, func, insert, select

from rules.book import Rule
from rules.digests import plain
from service.errors import WrongState
from service.store.base import UtcTime, metadata

rule_version = Table(
    "rule_version",
    metadata,
    Column("id", String, primary_key=True),
    Column("version", Integer, primary_key=True),
    Column("made_at", UtcTime, nullable=False),
    Column("kind", String, nullable=False),
    Column("pest", String, nullable=False),
    Column("crops", JSON, nullable=False),
    Column("parameters", JSON, nullable=False),
    Column("sources", JSON, nullable=False),
    Column("wording", String, nullable=False),
    Column("status", String, nullable=False),
    Column("by", String, nullable=False),
    Column("why", String, nullable=False),
    Column("hash", String, nullable=False, index=True),
)


def save_version(c: Connection, rule: Rule) -> None:
    """Add a version of a rule; WrongState if there is one of its number or a later one."""
    newest = c.execute(select(func.max(rule_version.c.version)).where(rule_version.c.id == rule.id)).scalar()
    if newest is not None and rule.version <= newest:
        raise WrongState(f"rule {rule.id} is at version {newest} already; read it again and change that version")
    c.execute(insert(rule_version).values({name: _column(rule, name) for name in Rule.__dataclass_fields__}))


def versions(c: Connection, as_of: datetime) -> list[Rule]:
    """The newest version of each rule made by a moment, by id."""
    newest = (
        select(rule_version.c.id, func.max(rule_version.c.version).label("version"))
        .where(rule_version.c.made_at <= as_of)
        .group_by(rule_version.c.id)
        .subquery()
    )
    same = and_(rule_version.c.id == newest.c.id, rule_version.c.version == newest.c.version)
    return [_rule_of(row) for row in c.execute(select(rule_version).join(newest, same).order_by(rule_version.c.id))]


def _column(rule: Rule, name: str) -> Any:
    value = getattr(rule, name)
    return plain(value) if name in ("crops", "parameters", "sources") else value


def _rule_of(row: Row[Any]) -> Rule:
    values = {name: getattr(row, name) for name in Rule.__dataclass_fields__}
    return Rule(**(values | {"crops": tuple(row.crops)}))
