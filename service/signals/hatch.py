"""The weather that a hatch needs has likely come: in which cells, and in what span of days.

No hatch is claimed where a day that matters is missing; missing days only widen the span.
"""

from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np
import numpy.typing as npt

from rules import hatch
from rules.book import Pest, Rule
from rules.records import Ask, CellDays, Known, Signal
from service.signals.evidence import of_weather, signal

Ints = npt.NDArray[np.int32]
Columns = npt.NDArray[np.intp]
_RAIN_THEN_COOL = ("rain_more_than", "rain_days", "cool_days", "consecutive")
_FIRST_DAY = ("cool_at_most", "cool_days", "rain_at_least", "rain_within")


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """The rule's answer for every cell, as day numbers from the first day of the weather; -1 is never."""

    start: int
    rain_day: Ints
    met: Ints
    earliest: Ints
    latest: Ints


def evaluate(known: Known, rule: Rule, pest: Pest) -> list[Signal]:
    """One signal for each day on which the weather was met somewhere, while it is news."""
    weather = known.weather
    if weather is None:
        return []
    found = _run(known, rule, weather)
    if found is None:
        return []
    today = (known.today - weather.first_day).days
    days = [int(day) for day in np.unique(found.met) if day >= 0]
    fresh = [day for day in days if today <= day + rule.parameters["speaks_for_days"]]
    return [_signal(known, rule, weather, found, day) for day in fresh]


def _run(known: Known, rule: Rule, weather: CellDays) -> Found | None:
    """Ask the rule, from the scan's start to today; None before the scan begins."""
    days = (known.today - weather.first_day).days + 1
    start = max(0, (scan_start(known, rule.parameters["scan_from"]) - weather.first_day).days)
    if start >= days:
        return None
    tmean, rain = weather.tmean[:days], weather.rain[:days]
    if rule.parameters["form"] == "first_day":
        shape = {name: rule.parameters[name] for name in _FIRST_DAY} | {"start": start}
        met = hatch.first_day(tmean, rain, **shape)
        rain_day = _newest_wet_day(rain, met, rule.parameters["rain_at_least"])
        return Found(start, rain_day, met, *hatch.bounds(tmean, rain, rule=hatch.first_day, **shape))
    shape = {name: rule.parameters[name] for name in _RAIN_THEN_COOL} | {"start": start}
    shape["cool_below"] = cool_limit(known, rule)
    met, rain_day = hatch.rain_then_cool(tmean, rain, **shape, return_rain_day=True)
    return Found(start, rain_day, met, *hatch.bounds(tmean, rain, **shape))


def _newest_wet_day(rain: npt.NDArray[np.float32], met: Ints, at_least: float) -> Ints:
    """The last day up to the met one with so much rain; -1 where it was not met."""
    found = np.full_like(met, -1)
    for cell in np.flatnonzero(met >= 0):
        found[cell] = np.flatnonzero(rain[: met[cell] + 1, cell] >= at_least)[-1]
    return found


def scan_start(known: Known, month_day: str) -> date:
    """The day the scan of this season starts at: of that month and day, the one nearest the season's opening."""
    year = known.season_from.year
    days = [date.fromisoformat(f"{near}-{month_day}") for near in (year - 1, year, year + 1)]
    return min(days, key=lambda day: abs(day - known.season_from))


def cool_limit(known: Known, rule: Rule) -> float:
    """The daily mean that a cool day stays below, or at most reaches, in this district [°C]."""
    if rule.parameters["form"] == "first_day":
        return float(rule.parameters["cool_at_most"])
    return float(rule.parameters[f"cool_below_{known.district.temperature_type.replace('-', '_')}"])


def _signal(known: Known, rule: Rule, weather: CellDays, found: Found, met: int) -> Signal:
    """What the cells say that were met on one day."""
    columns = np.flatnonzero(found.met == met)
    cells = [int(cell) for cell in weather.cells[columns]]
    rain_day = int(found.rain_day[columns].min())
    first, last = _span(found, columns, met, rule.parameters["span_days"])
    over = rule.parameters.get("rain_days", 1)  # the other form asks for one wet day
    reach_back = max(0, min(rain_day - over, met - rule.parameters["cool_days"]) + 1)

    def day(number: int) -> date:
        return weather.first_day + timedelta(days=number)

    return signal(
        known,
        rule,
        Ask.LOOK,
        cells=cells,
        first_day=day(first),
        last_day=day(last),
        figures={
            "rain_day": day(rain_day).isoformat(),
            "met_day": day(met).isoformat(),
            "earliest": day(first).isoformat(),
            "latest": day(last).isoformat(),
            "rain_mm": _rain(weather, found, columns, rain_day, over),
            "missing_days": _missing(weather, columns, found.start, met),
            "temperature_type": known.district.temperature_type,
            "cool_below": cool_limit(known, rule),
            "cool_days": rule.parameters["cool_days"],
        },
        evidence=of_weather(known, cells, day(reach_back), day(met), rule.parameters["station_within_km"]),
    )


def _span(found: Found, columns: Columns, met: int, around: int) -> tuple[int, int]:
    """The span of days: the bounds of all the cells, and the common doubt on both sides."""
    latest = found.latest[columns]
    return int(found.earliest[columns].min()) - around, max(met, int(latest.max())) + around


def _rain(weather: CellDays, found: Found, columns: Columns, rain_day: int, over: int) -> float:
    """The rain that began it [mm]: the middle of the cells that had it first, to a tenth."""
    first = [column for column in columns if found.rain_day[column] == rain_day]
    window = weather.rain[max(0, rain_day - over + 1) : rain_day + 1, first]
    return round(float(np.median(window.sum(axis=0, dtype=np.float64))), 1)


def _missing(weather: CellDays, columns: Columns, start: int, met: int) -> int:
    """Days since the scan's start on which one of the cells lacks rain or temperature."""
    gaps = np.isnan(weather.tmean[start : met + 1, columns]) | np.isnan(weather.rain[start : met + 1, columns])
    return int(gaps.any(axis=1).sum())
