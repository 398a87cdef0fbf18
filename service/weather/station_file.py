"""Station days from a file: one row a station and local day, checked before any of them is kept."""

from collections.abc import Mapping
from datetime import UTC, date, datetime, timedelta
from pathlib import Path

from rules.records import StationDay
from service import rows
from service.clock import Clock, end_of_day, local_day
from service.rows import Row
from service.store import network, weather
from service.store.base import Store

REQUIRED = ("station", "day")
OPTIONAL = ("tmin", "tmax", "rain", "arrived_at")

# Only what can't be is refused: these lie outside the usual limits for a cropping district, -10 to 50 °C
# and 250 mm a day (common practice, no source).
TEMPERATURE_C = (-30.0, 60.0)
RAIN_MM = (0.0, 500.0)

ASSUMED_LAG = timedelta(days=1)  # after the end of the day, for history without a stated arrival
OLDEST = date(1850, 1, 1)


def take_station_days(store: Store, path: Path, *, clock: Clock, history: bool = False) -> dict[str, int]:
    """Take a file of station days, all of it or nothing; BadInput names each row that can't be taken.

    Values that differ from what is known of a day are a correction: the next version, knowable from now.
    Returns the numbers of `rows`, and of those `new`, `corrected` and `same`.
    """
    table = rows.read(path, REQUIRED, OPTIONAL)
    now = clock.now()
    with store.reading() as c:
        zones = {
            station.id: district.zone
            for district in network.districts(c, now)
            for station in weather.stations(c, district.id, now)
        }
    found = [_record(row, zones, now, history) for row in table if not row.refusals]
    rows.once(table, lambda row: (row.given("station"), row.given("day")), "day")
    rows.finish(path, table)
    with store.writing() as c:
        counts = weather.add_station_days(c, [record for record in found if record], corrected_at=now)
    return {"rows": len(table)} | counts


def _record(row: Row, zones: Mapping[str, str], now: datetime, history: bool) -> StationDay | None:
    station = row.id("station", needed=True)
    day = row.day("day", needed=True)
    tmin, tmax = row.number_in("tmin", *TEMPERATURE_C), row.number_in("tmax", *TEMPERATURE_C)
    rain = row.number_in("rain", *RAIN_MM)
    stated = row.moment("arrived_at")
    if tmin is not None and tmax is not None and tmin > tmax:
        row.refuse("tmin", f"is above tmax {tmax:g}; check which is which, or leave both empty")
    if station is None or day is None:
        return None
    zone = _zone(row, station, zones)
    if zone is None or not _day_fits(row, day, stated, zone, now):
        return None
    assumed = stated is None and history
    arrived = min(end_of_day(day, zone) + ASSUMED_LAG, now) if assumed else (stated or now).astimezone(UTC)
    return StationDay(station, day, 1, tmin, tmax, rain, arrived, arrived if history else now, "", assumed)


def _zone(row: Row, station: str, zones: Mapping[str, str]) -> str | None:
    if station not in zones:
        hint = rows.nearest(station, sorted(zones))
        row.refuse("station", f"is no station we know{hint}; take the stations file first")
    return zones.get(station)


def _day_fits(row: Row, day: date, stated: datetime | None, zone: str, now: datetime) -> bool:
    """Whether the day is over or under way, and arrived neither before it began nor after now."""
    before = len(row.refusals)
    if not OLDEST <= day <= local_day(now, zone):
        row.refuse("day", f"lies in the future, or before {OLDEST.year}; check the year")
    elif stated is not None and not end_of_day(day - timedelta(days=1), zone) <= stated <= now:
        row.refuse("arrived_at", "lies before the day itself or in the future; check it, or leave it empty")
    return len(row.refusals) == before
