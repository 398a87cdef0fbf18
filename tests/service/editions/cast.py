"""Who and what the edition tests tell of: a district of invented farms in open ocean, its rows and signals.

Eight farms lie within a few kilometres of `HOME`, in one H3 cell of resolution 5; that cell hides them all.
"""

from collections.abc import Iterable
from datetime import date, timedelta
from functools import cache
from math import cos, nan, radians
from typing import Any

from rules.book import Book
from rules.digests import digest, plain
from rules.records import Ask, CellDays, Evidence, Holding, Known, Observation, Paddock, Place, Signal, Subscriber
from rules.slip import Head, Slip, SlipView
from service import places, rulebook
from service.editions.compose import Composed, compose
from service.editions.wording import view
from tests.builders import LAT, LON, NOW, TODAY, a_holding, a_paddock, a_subscriber, an_observation
from tests.known import cell_days, known

MITE, FLEA, CUTWORM = "redlegged_earth_mite", "lucerne_flea", "cutworms"
BOOK: Book = rulebook.load()
HOME = places.centre(places.parent(places.cell_of(LAT, LON), 5))
HEAD = Head("north-2026-W20", "North Bank", TODAY, 5, False, "Ivy Marsh", attributions=("the invented buoys",))
OPENED = date(2026, 2, 15)  # when the season did
# Where the eight farms lie, in kilometres north and east of HOME.
FARMS = ((0.0, 0.0), (2.5, 1.0), (-2.5, 1.5), (1.0, -3.5), (4.0, -1.0), (-4.0, -1.5), (0.5, 4.5), (-1.0, -5.0))


def at(north_km: float, east_km: float) -> Place:
    """A place so far from HOME."""
    km = 111.195  # a degree of latitude on a sphere of 6371.0088 km
    lat = HOME[0] + north_km / km
    return places.place(lat, HOME[1] + east_km / (km * cos(radians(lat))), elevation_m=10.0)


def farms() -> list[Holding]:
    return [a_holding(f"h{i}") for i in range(len(FARMS))]


def fields(**changes: dict[str, Any]) -> list[Paddock]:
    """One paddock of canola a farm, p0 to p7; changes by paddock."""
    return [_field(i, changes.get(f"p{i}", {})) for i in range(len(FARMS))]


def _field(i: int, changes: dict[str, Any]) -> Paddock:
    values = {"holding": f"h{i}", "name": f"Kelp {i}", "place": at(*FARMS[i]), "crop": "canola"}
    return a_paddock(f"p{i}", **(values | changes))


def look(i: int, present: bool, *, ago: int = 2, pest: str = MITE, **changes: Any) -> Observation:
    """A look in paddock p<i> some days ago, counted at five spots."""
    spots = (3.0, 0.0, 2.0, 1.0, 4.0) if present else (0.0,) * 5
    values: dict[str, Any] = {
        "pest": pest,
        "present": present,
        "day": TODAY - timedelta(days=ago),
        "place": at(*FARMS[i]),
        "paddock": f"p{i}",
        "reporter": f"person{i}",
        "crop": "canola",
        "spot_counts": spots,
        "unit": "per_plant",
    }
    values |= changes
    return an_observation(f"csv:{pest}-{i}-{ago}", **values)


@cache
def weather(no_temperature: frozenset[int] = frozenset(), no_rain: frozenset[int] = frozenset()) -> CellDays:
    """The weather of the farms and of the postcode up to yesterday, but for some days so many days ago."""
    ago = range((TODAY - OPENED).days, 0, -1)
    cells = sorted({places.cell_of(LAT, LON), *(at(*farm).cell for farm in FARMS)})
    mean, rain = ([nan if n in gone else 12.0 for n in ago] for gone in (no_temperature, no_rain))
    return cell_days(OPENED, mean, rain, cells)


def district(rows: Iterable[Observation] = (), **changes: Any) -> Known:
    """The district as known on Tuesday 12 May 2026."""
    values: dict[str, Any] = {"observations": rows, "paddocks": fields(), "holdings": farms(), "weather": weather()}
    values |= changes
    return known(**values)


def reader(id: str = "s1", **changes: Any) -> Subscriber:
    """A canola grower with paddock p0."""
    return a_subscriber(id, **({"paddocks": ("p0",), "holding": "h0", "person": "person0"} | changes))


# --- signals, as the rules give them ---------------------------------------------------------------


def a_signal(kind: str, figures: dict[str, Any], **changes: Any) -> Signal:
    values: dict[str, Any] = {
        "district": "north",
        "kind": kind,
        "rule": f"{MITE}_{kind}",
        "rule_hash": "r" * 32,
        "pest": MITE,
        "ask": Ask.LOOK,
        "cells": (places.cell_of(*HOME),),
        "paddock": None,
        "first_day": TODAY,
        "last_day": TODAY,
        "figures": figures,
        "evidence": (),
        "as_of": NOW,
    }
    values |= changes
    return Signal(id=digest([kind, plain(values)]), **values)


def hatch(**changes: Any) -> Signal:
    """The weather was met on 5 May; two weeks on either side."""
    figures = {
        "rain_day": "2026-04-24",
        "met_day": "2026-05-05",
        "earliest": "2026-04-21",
        "latest": "2026-05-19",
        "rain_mm": 12.4,
        "missing_days": 0,
        "temperature_type": "south-eastern",
        "cool_below": 16.0,
        "cool_days": 10,
    }
    rows = (Evidence("station_day", "st1/2026-04-24", 1, "d" * 32, {"km": 11.0}),)
    return a_signal("hatch", figures | changes.pop("figures", {}), **({"evidence": rows} | changes))


def threshold(i: int, verdict: str = "at_or_above", *, rows: Iterable[Observation] = (), **changes: Any) -> Signal:
    """A count in paddock p<i> of canola at one true leaf, on 10 May."""
    figures = {
        "day": "2026-05-10",
        "mean": 12.4,
        "low": 10.2,
        "high": 14.6,
        "unit": "per_plant",
        "threshold_low": 10,
        "threshold_high": 10,
        "verdict": verdict,
        "spots": 5,
        "more_spots": 4 if verdict == "near" else None,
        "crop": "canola",
        "stage": 11,
        "mark": "S",
        "source": "a study, doi 10.1002/ps.3952",
    }
    evidence = tuple(Evidence("observation", row.key, row.version, row.digest) for row in rows)
    values: dict[str, Any] = {
        "ask": Ask.COUNT,
        "paddock": f"p{i}",
        "cells": (at(*FARMS[i]).cell,),
        "evidence": evidence,
    }
    return a_signal("threshold", figures | changes.pop("figures", {}), **(values | changes))


def first_seen(row: Observation, *, finds: int = 1, looks: int = 11, **changes: Any) -> Signal:
    figures = {
        "day": row.day.isoformat(),
        "finds": finds,
        "looks": looks,
        "chance": 0.4,
        "past_seasons": 5,
        "earliest_of": None,
        "earlier_than_usual": False,
        "cell": row.place.cell,
    }
    evidence = (Evidence("observation", row.key, row.version, row.digest),)
    values: dict[str, Any] = {"pest": row.pest, "cells": (row.place.cell,), "evidence": evidence}
    return a_signal("first_seen", figures | changes.pop("figures", {}), **(values | changes))


# --- what is said ----------------------------------------------------------------------------------


def said(composed: Composed, id: str = "s1") -> SlipView:
    return view(composed.slips[id], composed.statements, HEAD, BOOK)


def edition(
    rows: Iterable[Observation] = (),
    signals: Iterable[Signal] = (),
    readers: Iterable[Subscriber] = (),
    **changes: Any,
) -> Composed:
    """An edition for one reader, or several."""
    return compose(district(list(rows), **changes), list(signals), BOOK, list(readers) or [reader()])


def slip(rows: Iterable[Observation] = (), signals: Iterable[Signal] = (), **changes: Any) -> Slip:
    """The first reader's slip."""
    return next(iter(edition(rows, signals, **changes).slips.values()))
