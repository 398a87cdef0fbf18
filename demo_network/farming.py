"""What grew where: each paddock's crop, sowing and history, season by season, and the stage it had reached."""

from bisect import bisect_right
from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np

from demo_network import settle
from demo_network.network import Network, Paddock
from demo_network.seasons import SEASONS
from demo_network.streams import stream

# what tends to follow what: a plain rotation, with weights
ROTATION = {
    "canola": (("wheat", 7), ("barley", 3)),
    "wheat": (("canola", 4), ("lupin", 2), ("lentil", 1), ("barley", 2), ("medic", 1)),
    "barley": (("canola", 4), ("lupin", 2), ("faba_bean", 1), ("medic", 1)),
    "lupin": (("wheat", 8), ("canola", 2)),
    "lentil": (("wheat", 6), ("barley", 2)),
    "faba_bean": (("wheat", 6), ("canola", 3)),
    "medic": (("wheat", 4), ("canola", 4), ("medic", 2)),
    "lucerne": (("lucerne", 8), ("canola", 2)),
    "pasture": (("pasture", 6), ("canola", 3)),
}
PASTURES = ("medic", "lucerne", "pasture")
START = (("wheat", 30), ("canola", 20), ("barley", 15), ("lupin", 9), ("lucerne", 7), ("medic", 8), ("pasture", 11))

# first sowing day (month, day) and the days over which sowing spreads
SOWN = {
    "canola": (4, 8, 22),
    "lupin": (4, 18, 22),
    "faba_bean": (4, 20, 20),
    "lentil": (5, 5, 22),
    "wheat": (5, 1, 35),
    "barley": (5, 8, 32),
}
ROWS_M = {"canola": 0.25, "lupin": 0.25, "faba_bean": 0.3, "lentil": 0.25, "wheat": 0.22, "barley": 0.22}
STAND = {"canola": 38, "lupin": 45, "faba_bean": 24, "lentil": 110, "wheat": 160, "barley": 150}
DRY_START_DAYS = {("sextant", 2026): 12}  # a dry autumn: sowing waited

# days from emergence to the stage's first day, for BBCH 9, 10, 11 ... in a southern autumn; invented, plausible
_DAYS_TO_STAGE = (0, 2, 9, 14, 20, 26, 33, 40, 48, 60, 75, 95)
_STAGES = (9, 10, 11, 12, 13, 14, 15, 16, 18, 30, 50, 61)


@dataclass(frozen=True)
class Plan:
    """One paddock's season."""

    crop: str
    last_crop: str
    sown_on: date | None
    up_on: date | None
    pasture_before: bool
    capeweed_before: bool | None
    seed_dressing: bool | None
    dressing_group: str | None
    grazed: tuple[date, ...]
    plants_per_m2: int | None


Plans = Mapping[tuple[str, int], Plan]


@dataclass(frozen=True)
class World:
    """All that a row of the demo may rest on: the ground, the people, the farming, the seed."""

    network: Network
    plans: Plans
    seed: int


def invent(seed: int) -> World:
    """The world of that seed, before anybody looks."""
    network = settle.invent(seed)
    return World(network, _plans(network, seed), seed)


def _plans(network: Network, seed: int) -> Plans:
    """Every paddock's plan for every season."""
    found: dict[tuple[str, int], Plan] = {}
    for paddock in network.paddocks:
        rng = stream(seed, "farming", paddock.id)
        crop = _draw(rng, START)
        for year in SEASONS:
            last, crop = crop, _draw(rng, ROTATION[crop])
            found[paddock.id, year] = _season(rng, paddock, year, last, crop)
    return found


def _draw(rng: np.random.Generator, choices: tuple[tuple[str, int], ...]) -> str:
    weights = np.array([weight for _, weight in choices], dtype=float)
    return choices[int(rng.choice(len(choices), p=weights / weights.sum()))][0]


def _season(rng: np.random.Generator, paddock: Paddock, year: int, last: str, crop: str) -> Plan:
    sown_on, up_on = _sowing(rng, paddock, year, crop)
    dressed = bool(rng.random() < 0.55) if crop == "canola" else (False if rng.random() < 0.5 else None)
    grazed = date(year, 3, 1) + timedelta(days=int(rng.integers(0, 60)))
    return Plan(
        crop=crop,
        last_crop=last,
        sown_on=sown_on,
        up_on=up_on,
        pasture_before=last in PASTURES,
        capeweed_before=bool(rng.random() < (0.6 if last in PASTURES else 0.15)) if rng.random() < 0.8 else None,
        seed_dressing=dressed,
        dressing_group="4A" if dressed else None,
        grazed=(grazed,) if crop in PASTURES and rng.random() < 0.5 else (),
        plants_per_m2=int(STAND[crop] * rng.uniform(0.8, 1.15)) if crop in STAND else None,
    )


def _sowing(rng: np.random.Generator, paddock: Paddock, year: int, crop: str) -> tuple[date | None, date | None]:
    if crop not in SOWN:
        return None, None
    month, day, spread = SOWN[crop]
    wait = DRY_START_DAYS.get((paddock.district, year), 0)
    sown_on = date(year, month, day) + timedelta(days=int(rng.integers(0, spread)) + wait)
    return sown_on, sown_on + timedelta(days=int(rng.integers(9, 15)))


def stage(season: Plan, day: date) -> int | None:
    """The crop's stage (BBCH; Zadoks in cereals) on a day; None before it is up and in standing pasture."""
    if season.up_on is None or day < season.up_on:
        return None
    return _STAGES[bisect_right(_DAYS_TO_STAGE, (day - season.up_on).days) - 1]
