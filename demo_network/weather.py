"""Three seasons of daily weather at eight masts: a yearly cycle, spells shared by neighbours, rain in bouts.

All constants are invented for a plausible cool-temperate grain district; none is a climate normal.
"""

from collections.abc import Callable
from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np
import numpy.typing as npt

from demo_network.files import Row
from demo_network.network import DISTRICTS, District, Network, Station
from demo_network.seasons import LIVE, SEASONS, closes, local, opens
from demo_network.streams import stream

Array = npt.NDArray[np.float64]

YEAR_MEAN, YEAR_SWING, WARMEST_DAY = 15.2, 6.4, 25  # [°C], [°C], day of the year
SPELL_SD, SPELL_MEMORY = 1.7, 0.75  # a district's warm and cool spells [°C], their day-to-day memory
MAST_SD, MAST_REACH_KM = 0.5, 30.0  # what is each mast's own [°C], and how far that is shared
LAPSE = 6.5 / 1000  # cooling with height [°C per m]

# a district and season without a break: until that day no five days hold as much rain as this [mm]
DRY_UNTIL = {("sextant", LIVE): date(2026, 6, 7)}
DRY_FIVE_DAYS = 3.0

MISSING, LATE = 0.006, 0.03  # share of mast days never reported, and of those that come days late


@dataclass
class Season:
    """One district's season before anything goes missing: arrays of shape (days, masts)."""

    district: str
    year: int
    days: list[date]
    stations: list[Station]
    tmean: Array
    span: Array  # between the day's lowest and highest temperature [°C]
    rain: Array


Change = Callable[[Season], None]


def rows(network: Network, seed: int, changes: tuple[Change, ...] = ()) -> list[Row]:
    """Every mast day that was ever reported, oldest first."""
    found: list[Row] = []
    for year in SEASONS:
        for district in DISTRICTS.values():
            season = _season(network, seed, district, year)
            for change in changes:
                change(season)
            found += _reported(season, seed)
    return found


def _season(network: Network, seed: int, district: District, year: int) -> Season:
    days = [opens(year) + timedelta(days=n) for n in range((closes(year) - opens(year)).days + 1)]
    stations = [station for station in network.stations if station.district == district.id]
    rng = stream(seed, "weather", district.id, year)
    wet = _wet(rng, days)
    tmean = _temperature(rng, days, stations) - 1.0 * wet[:, None]
    span = np.clip(rng.normal(10.5, 2.0, len(days)) - 3.5 * wet, 3, None)[:, None] + rng.normal(0, 0.6, tmean.shape)
    rain = _rain(rng, wet, len(stations))
    if (district.id, year) in DRY_UNTIL:
        _keep_dry(rain, sum(day <= DRY_UNTIL[district.id, year] for day in days))
    return Season(district.id, year, days, stations, tmean, np.clip(span, 2, None), rain)


def _temperature(rng: np.random.Generator, days: list[date], stations: list[Station]) -> Array:
    of_year = np.array([day.timetuple().tm_yday for day in days])
    cycle = YEAR_MEAN + YEAR_SWING * np.cos(2 * np.pi * (of_year - WARMEST_DAY) / 365.25)
    spell = _remembering(rng.normal(0, SPELL_SD * np.sqrt(1 - SPELL_MEMORY**2), len(days)), SPELL_MEMORY)
    own = rng.normal(0, MAST_SD, (len(days), len(stations))) @ np.linalg.cholesky(_shared(stations)).T
    height = np.array([station.spot.elevation_m for station in stations])
    return (cycle + spell)[:, None] + own - LAPSE * height


def _shared(stations: list[Station]) -> Array:
    """Correlation of the masts' own parts: falls off with distance."""
    km = np.array([[a.spot.km_from(b.spot.latitude, b.spot.longitude) for b in stations] for a in stations])
    return np.exp(-km / MAST_REACH_KM)


def _remembering(noise: Array, memory: float) -> Array:
    for at in range(1, len(noise)):
        noise[at] += memory * noise[at - 1]
    return noise


def _wet(rng: np.random.Generator, days: list[date]) -> Array:
    """Wet days come in bouts, more of them towards winter."""
    draws, wet = rng.random(len(days)), np.zeros(len(days))
    for at, day in enumerate(days):
        usual = 0.32 - 0.17 * np.cos(2 * np.pi * (day.timetuple().tm_yday - WARMEST_DAY) / 365.25)
        wet[at] = draws[at] < (usual + 0.25 if at and wet[at - 1] else usual * 0.75)
    return wet


def _rain(rng: np.random.Generator, wet: Array, masts: int) -> Array:
    """One amount for the district's day, shaken at each mast; now and then a mast stays dry."""
    amount = rng.gamma(0.9, 5.0, len(wet))[:, None] * rng.gamma(8.0, 1 / 8.0, (len(wet), masts))
    return wet[:, None] * (rng.random((len(wet), masts)) > 0.08) * amount


def _keep_dry(rain: Array, days: int) -> None:
    """Thin the rain of the first days to drizzle."""
    rain[:days] *= 0.12
    for at in range(days):
        before = rain[max(0, at - 4) : at].sum(axis=0)
        rain[at] = np.minimum(rain[at], np.maximum(DRY_FIVE_DAYS - before, 0))


def _reported(season: Season, seed: int) -> list[Row]:
    """The rows that reach the service: some days are missing, some gauges stuck, some days late."""
    rng = stream(seed, "gaps", season.district, season.year)
    shape = season.tmean.shape
    lost = rng.random(shape) < MISSING
    broken, first = int(rng.integers(shape[1])), int(rng.integers(100, shape[0] - 20))
    lost[first : first + 6, broken] = True  # one mast falls silent for a while, after the break
    no_rain = rng.random(shape) < MISSING
    lag = np.where(rng.random(shape) < LATE, rng.integers(2, 6, shape), 1)
    return [
        _row(season, at, mast, bool(no_rain[at, mast]), int(lag[at, mast]))
        for at in range(shape[0])
        for mast in range(shape[1])
        if not lost[at, mast]
    ]


def _row(season: Season, at: int, mast: int, no_rain: bool, lag: int) -> Row:
    day, station = season.days[at], season.stations[mast]
    mean, half = season.tmean[at, mast], season.span[at, mast] / 2
    arrived = local(day + timedelta(days=lag), 6 + 0.1 * mast, DISTRICTS[season.district].zone)
    return {
        "station": station.id,
        "day": day,
        "tmin": round(float(mean - half), 1),
        "tmax": round(float(mean + half), 1),
        "rain": None if no_rain else round(float(season.rain[at, mast]), 1),
        "arrived_at": arrived,
    }
