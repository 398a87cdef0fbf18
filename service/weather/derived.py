"""The weather of a district's cells as it was known at a moment: kept where it can be, worked out where not."""

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date, datetime, timedelta

import numpy as np
import numpy.typing as npt

from rules.records import CellDays, District, Paddock, Place, Postcode, StationDay
from service.store import network, weather
from service.store.base import Store
from service.store.weather import Block
from service.weather import blocks, cells
from service.weather.blocks import VARIABLES
from service.weather.cells import Field, Floats

Values = npt.NDArray[np.float32]


@dataclass(frozen=True, slots=True, eq=False)
class _Part:
    """One variable of one month: what it is worked out from, and the name its block has."""

    key: str
    month: date
    variable: str
    values: Floats


def cell_days(store: Store, district: District, as_of: datetime, first_day: date, last_day: date) -> CellDays | None:
    """The district's weather by cell and day as it was knowable at `as_of`, both days included.

    None where the district has no station, or no paddock and no postcode. Months that were worked out
    before from the same inputs are read, others are worked out and kept.
    """
    if last_day < first_day:
        raise ValueError(f"the days run backwards: {first_day} to {last_day}")
    months = _months(first_day, last_day)
    with store.reading() as c:
        stations = weather.stations(c, district.id, as_of)
        known = weather.station_days(c, district.id, as_of, months[0], _following(months[-1]) - timedelta(days=1))
        inhabited = _inhabited(network.paddocks(c, district.id, as_of), network.postcodes(c, district.id, as_of))
        if not stations or not inhabited:
            return None
        field = cells.field(stations, inhabited)
        parts = _parts(district.id, months, field, known)
        stored = weather.blocks(c, [part.key for part in parts])
    arrays = _read_or_work_out(store, district.id, field, parts, stored)
    return _cut(district.id, field, months[0], arrays, first_day, last_day)


def _inhabited(paddocks: Sequence[Paddock], postcodes: Sequence[Postcode]) -> list[Place]:
    """Where paddocks and readers are.

    Every postcode counts, whether or not a reader is there today: a reader who joins or leaves must not
    change what was worked out for an earlier moment.
    """
    return [paddock.place for paddock in paddocks] + [postcode.place for postcode in postcodes]


def _parts(district: str, months: Sequence[date], field: Field, known: Sequence[StationDay]) -> list[_Part]:
    parts = []
    for month in months:
        days = (_following(month) - month).days
        of_month = [day for day in known if month <= day.day < _following(month)]
        for variable, values in _matrices(field, month, days, of_month).items():
            key = blocks.key_of(district, month, variable, field, values)
            parts.append(_Part(key, month, variable, values))
    return parts


def _matrices(field: Field, first: date, days: int, known: Sequence[StationDay]) -> dict[str, Floats]:
    """Station values as (days, stations), NaN where missing.

    A temperature counts only where the day has both, so that minimum and maximum rest on the same
    stations and never cross.
    """
    column = {name: number for number, name in enumerate(field.stations)}
    found = {name: np.full((days, len(column)), np.nan) for name in VARIABLES}
    for record in known:
        at = ((record.day - first).days, column[record.station])
        if record.rain is not None:
            found["rain"][at] = record.rain
        if record.tmin is not None and record.tmax is not None:
            found["tmin"][at], found["tmax"][at] = record.tmin, record.tmax
    return found


def _read_or_work_out(
    store: Store, district: str, field: Field, parts: Sequence[_Part], stored: dict[str, Block]
) -> dict[str, Values]:
    """The variables over all months; what is missing or was altered is worked out and kept."""
    found: dict[str, list[Values]] = {name: [] for name in VARIABLES}
    fresh = []
    for part in parts:
        block = stored.get(part.key)
        values = None if block is None else blocks.unpack(block)
        if values is None:
            values = cells.interpolate(field, part.values, temperature=part.variable != "rain")
            fresh.append(blocks.pack(part.key, district, part.month, part.variable, field.cells, values))
        found[part.variable].append(values)
    if fresh:
        with store.writing() as c:
            weather.save_blocks(c, fresh)
    return {name: np.concatenate(months) for name, months in found.items()}


def _cut(
    district: str, field: Field, start: date, arrays: dict[str, Values], first_day: date, last_day: date
) -> CellDays:
    """The days asked for, with the digest of all that is in them."""
    days = slice((first_day - start).days, (last_day - start).days + 1)
    tmin, tmax, rain = (np.ascontiguousarray(arrays[name][days]) for name in VARIABLES)
    total = hashlib.sha256(f"{district} {first_day} {last_day}".encode())
    for array in (field.cells, tmin, tmax, rain):
        total.update(array.tobytes())
    return CellDays(district, first_day, field.cells, tmin, tmax, rain, total.hexdigest()[:32])


def _months(first_day: date, last_day: date) -> list[date]:
    """The first days of the months that a span touches."""
    months = [first_day.replace(day=1)]
    while (following := _following(months[-1])) <= last_day:
        months.append(following)
    return months


def _following(month: date) -> date:
    return (month + timedelta(days=31)).replace(day=1)
