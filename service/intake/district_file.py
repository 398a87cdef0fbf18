"""The district file: what a grower group must choose before anything else can be taken."""

import re
import tomllib
from collections.abc import Mapping, Sequence
from datetime import date
from pathlib import Path
from typing import Any
from zoneinfo import available_timezones

from rules.records import District, Reportable
from service import rows
from service.errors import BadInput
from service.rows import Row, nearest

REQUIRED = (
    *("id", "name", "zone", "hotline", "hotline_name", "temperature_type", "season_opens"),
    *("latitude", "longitude", "coordinator"),
)
OPTIONAL = ("holdings_to_hide", "cut_off", "sign_by", "reportables")
LISTED = ("id", "names", "listed_on")
TEMPERATURE_TYPES = ("western", "south-eastern")
FEWEST_TO_HIDE = 3  # of two holdings, each would know the other
WEEK_HOUR = re.compile(r"(Mon|Tue|Wed|Thu|Fri|Sat|Sun) ([01]\d|2[0-3]):[0-5]\d")


def read(path: Path) -> list[District]:
    """The districts of a file, all of them or none; BadInput names district, field and remedy."""
    try:
        content = tomllib.loads(rows.text_of(path))
    except tomllib.TOMLDecodeError as error:
        raise BadInput(f"{path.name} can't be read as TOML: {error}. Mend that line") from error
    tables = content.pop("district", [])
    if content or not isinstance(tables, list) or not tables or not all(isinstance(table, dict) for table in tables):
        raise BadInput(f"{path.name} needs one [[district]] table or more, and nothing beside them")
    checked = [Row(number, _cells(table)) for number, table in enumerate(tables, start=1)]
    found = [_district(row, table) for row, table in zip(checked, tables, strict=True)]
    rows.once(checked, lambda row: row.cells.get("id"), "id")
    rows.finish(path, checked)
    return [district for district in found if district is not None]


def _cells(table: Mapping[str, Any]) -> dict[str, str]:
    """The plain values of a table as a file of cells would hold them."""
    return {name: str(value) for name, value in table.items() if not isinstance(value, list | dict)}


def _district(row: Row, table: Mapping[str, Any]) -> District | None:
    _no_other_names(row, table, "", (*REQUIRED, *OPTIONAL))
    values: dict[str, Any] = {
        **{name: row.id(name, needed=True) for name in ("id", "coordinator")},
        **{name: row.text(name, needed=True) for name in ("name", "hotline_name")},
        "hotline": _hotline(row),
        "zone": _zone(row),
        "temperature_type": _temperature_type(row),
        "season_opens": _month_day(row),
        "latitude": row.number_in("latitude", -90, 90, needed=True),
        "longitude": row.number_in("longitude", -180, 180, needed=True),
        "reportables": _reportables(row, table.get("reportables", [])),
    }
    chosen: dict[str, Any] = {
        "holdings_to_hide": row.whole("holdings_to_hide", FEWEST_TO_HIDE, 1000),
        "cut_off": _week_hour(row, "cut_off"),
        "sign_by": _week_hour(row, "sign_by"),
    }
    if row.refusals:
        return None
    return District(**values, **{name: value for name, value in chosen.items() if value is not None})


def _hotline(row: Row) -> str | None:
    """A telephone number; one that begins with + is no formula."""
    value = row.given("hotline", needed=True)
    fault = rows.unsafe(value.removeprefix("+").strip() or "<") if value else None
    if fault:
        row.refuse("hotline", fault)
    return value or None


def _zone(row: Row) -> str | None:
    value, zones = row.text("zone", needed=True), available_timezones()
    if value is not None and value not in zones:
        row.refuse("zone", f"is no IANA time zone, such as Australia/Perth{nearest(value, sorted(zones))}")
    return value


def _temperature_type(row: Row) -> str | None:
    if not row.given("temperature_type"):
        remedy = f"has no default: choose {' or '.join(TEMPERATURE_TYPES)}, the hatch constants that hold here"
        row.refuse("temperature_type", remedy)
        return None
    return row.choice("temperature_type", TEMPERATURE_TYPES)


def _month_day(row: Row) -> str | None:
    value = row.given("season_opens", needed=True)
    try:
        if re.fullmatch(r"\d\d-\d\d", value, re.ASCII) and date.fromisoformat(f"2025-{value}"):
            return value
    except ValueError:
        pass
    if value:
        row.refuse("season_opens", "write the month and day of every year's opening as MM-DD, such as 02-15")
    return None


def _week_hour(row: Row, name: str) -> str | None:
    value = row.given(name)
    if value and not WEEK_HOUR.fullmatch(value):
        row.refuse(name, "write a weekday and an hour, such as Tue 12:00")
    return value or None


def _reportables(row: Row, listed: Any) -> tuple[Reportable, ...]:
    if not isinstance(listed, list) or not all(isinstance(entry, dict) for entry in listed):
        row.refuse("reportables", "write each as a [[district.reportables]] table")
        return ()
    found = [_reportable(row, entry, f"reportables[{number}].") for number, entry in enumerate(listed, start=1)]
    ids = [entry.id for entry in found if entry]
    for id in sorted({id for id in ids if ids.count(id) > 1}):
        row.refuse("reportables", f"{id} is listed twice; keep one")
    return tuple(entry for entry in found if entry)


def _reportable(row: Row, entry: Mapping[str, Any], prefix: str) -> Reportable | None:
    before = len(row.refusals)
    _no_other_names(row, entry, prefix, LISTED)
    row.cells |= {prefix + name: value for name, value in _cells(entry).items()}
    id = row.id(prefix + "id", needed=True)
    listed_on = row.day(prefix + "listed_on", needed=True)
    names = _names(row, prefix + "names", entry.get("names"))
    if id is None or listed_on is None or len(row.refusals) > before:
        return None
    return Reportable(id, names, listed_on)


def _names(row: Row, name: str, value: Any) -> tuple[str, ...]:
    """The names by which a report matches: at least one, each long enough not to match everything."""
    if not isinstance(value, list) or not value or not all(isinstance(each, str) for each in value):
        row.refuse(name, 'write the names as a list, such as ["khapra beetle", "Trogoderma granarium"]')
        return ()
    names = tuple(each.strip() for each in value)
    for each in names:
        fault = "shorter than three letters matches too much" if len(each) < 3 else rows.unsafe(each)
        if fault:
            row.refuse(name, f"{each!r}: {fault}")
    return names


def _no_other_names(row: Row, table: Mapping[str, Any], prefix: str, known: Sequence[str]) -> None:
    for name in table:
        if name not in known:
            row.refuse(prefix + name, f"there is no such entry{nearest(name, known)}")
