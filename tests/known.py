"""A `Known` for tests, filtered by its moment as a run's is, so that nothing later can be peeked at.

`known(observations=..., station_days=...)` keeps the newest version knowable at `as_of` of each row; the
weather is one cell's, or several cells that share it, built with `cell_days`.
"""

from collections.abc import Callable, Iterable, Sequence
from datetime import date, datetime, timedelta
from typing import Any

import numpy as np

from rules.digests import digest
from rules.looks import derive
from rules.records import CellDays, Holding, Known, Observation, Paddock, Station, StationDay
from service.clock import local_day
from service.known import season_from, spots_planned
from service.places import cell_of, place
from service.rulebook import load
from tests.builders import LAT, LON, NOW, a_district, a_holding, a_paddock, a_person, a_postcode

SPOTS_PLANNED = spots_planned(load())
STATION = Station("st1", "north", "Buoy One", place(LAT + 0.1, LON, elevation_m=5.0))


def known(
    *,
    as_of: datetime = NOW,
    observations: Iterable[Observation] = (),
    paddocks: Iterable[Paddock] = (),
    holdings: Iterable[Holding] = (),
    stations: Iterable[Station] = (STATION,),
    station_days: Iterable[StationDay] = (),
    weather: Callable[[Sequence[StationDay]], CellDays | None] | CellDays | None = None,
    **changes: Any,
) -> Known:
    """What is knowable at `as_of` of the given rows; `weather` may be worked out from the days known then."""
    district = changes.pop("district", a_district())
    today = local_day(as_of, district.zone)
    rows = newest(observations, as_of, lambda row: row.key)
    days = newest(station_days, as_of, lambda row: (row.station, row.day))
    fields = list(paddocks) or [a_paddock()]
    values: dict[str, Any] = {
        "district": district,
        "as_of": as_of,
        "today": today,
        "season_from": season_from(district, today),
        "observations": tuple(sorted(rows, key=lambda row: row.key)),
        "looks": tuple(derive(rows, SPOTS_PLANNED)),
        "postcodes": {"9001": a_postcode()},
        "holdings": {each.id: each for each in list(holdings) or [a_holding()]},
        "paddocks": {each.id: each for each in fields},
        "people": {"ivy": a_person()},
        "stations": {each.id: each for each in stations},
        "station_days": tuple(sorted(days, key=lambda row: (row.station, row.day))),
        "weather": weather(days) if callable(weather) else weather,
    }
    return Known(**(values | changes))


def newest(rows: Iterable[Any], as_of: datetime, key: Callable[[Any], Any]) -> list[Any]:
    """The newest version of each row that was knowable at a moment."""
    found: dict[Any, Any] = {}
    for row in sorted(rows, key=lambda row: row.version):
        if row.knowable_from <= as_of:
            found[key(row)] = row
    return list(found.values())


def a_station_day(
    day: date, tmean: float | None, rain: float | None, station: str = "st1", **changes: Any
) -> StationDay:
    """A station's day that arrived on the next one; its temperatures lie 5 °C around the mean."""
    values: dict[str, Any] = {
        "version": 1,
        "tmin": None if tmean is None else tmean - 5.0,
        "tmax": None if tmean is None else tmean + 5.0,
        "rain": rain,
        "arrived_at": datetime.fromisoformat(f"{day + timedelta(days=1)}T00:00+00:00"),
    }
    values |= changes
    values.setdefault("knowable_from", values["arrived_at"])
    return StationDay(station=station, day=day, digest=digest([station, day, values]), **values)


def cell_days(
    first_day: date, tmean: Sequence[float], rain: Sequence[float], cells: Sequence[int] | None = None
) -> CellDays:
    """The same weather in each cell; NaN where it is unknown."""
    here = [cell_of(LAT, LON)] if cells is None else list(cells)

    def over_cells(values: Sequence[float], shift: float) -> Any:
        column = np.asarray(values, dtype=np.float32)[:, None] + np.float32(shift)
        return np.repeat(column, len(here), axis=1)

    days = [[float(t), float(r)] for t, r in zip(tmean, rain, strict=True)]
    content = digest([first_day, here, [["" if v != v else v for v in pair] for pair in days]])
    return CellDays(
        district="north",
        first_day=first_day,
        cells=np.asarray(here, dtype=np.int64),
        tmin=over_cells(tmean, -5.0),
        tmax=over_cells(tmean, 5.0),
        rain=over_cells(rain, 0.0),
        digest=content,
    )


def from_station(
    first_day: date, last_day: date, cells: Sequence[int] | None = None
) -> Callable[[Sequence[StationDay]], CellDays]:
    """Weather for `known`: what its one station says of each day, NaN for a day not known by then."""

    def work_out(days: Sequence[StationDay]) -> CellDays:
        by_day = {row.day: row for row in days}
        span = [first_day + timedelta(days=i) for i in range((last_day - first_day).days + 1)]
        means = [_mean(by_day.get(day)) for day in span]
        rains = [_number(by_day[day].rain) if day in by_day else np.nan for day in span]
        return cell_days(first_day, means, rains, cells)

    return work_out


def _mean(row: StationDay | None) -> float:
    if row is None or row.tmin is None or row.tmax is None:
        return float("nan")
    return (row.tmin + row.tmax) / 2


def _number(value: float | None) -> float:
    return float("nan") if value is None else value
