"""Settle the open ocean: draw where towns, holdings, paddocks and masts stand, and who lives there."""

from collections.abc import Iterator, Sequence
from datetime import date
from typing import Any

import numpy as np

from demo_network import names
from demo_network.network import (
    DISTRICTS,
    District,
    Holding,
    Network,
    Paddock,
    Person,
    Postcode,
    Spot,
    Station,
)
from demo_network.streams import stream

STAFF = ("coordinator", "deputy", "officer", "officer", "officer", "adviser", "adviser")
_KM_PER_DEGREE = 111.195
_POSTCODES, _HOLDINGS, _PADDOCKS, _STATIONS = 20, 60, 200, 4  # in each district


def invent(seed: int) -> Network:
    """The whole network; each concern draws from its own stream."""
    parts = [_district(seed, district, at) for at, district in enumerate(DISTRICTS.values())]
    merged = [tuple(item for part in parts for item in part[kind]) for kind in range(5)]
    return Network(*merged)


def _district(seed: int, district: District, at: int) -> tuple[list[Any], ...]:
    ground = Ground(seed, district)
    postcodes = _postcodes(seed, district, ground, names.TOWNS[at * _POSTCODES :])
    people = iter(names.PEOPLE[at * 200 :])
    holdings, growers = _holdings(seed, district, ground, postcodes, names.FARMS[at * _HOLDINGS :], people)
    paddocks = _paddocks(seed, district, ground, holdings)
    return postcodes, holdings, paddocks, _staff(district, ground, people) + growers, _stations(seed, district, ground)


class Ground:
    """Low rolling ground: elevation is a smooth function of place, so that neighbours agree."""

    def __init__(self, seed: int, district: District) -> None:
        rng = stream(seed, "ground", district.id)
        self.district = district
        self._waves = rng.uniform(0.05, 0.18, (5, 2)) * rng.choice([-1, 1], (5, 2))  # radians per km
        self._phases = rng.uniform(0, 2 * np.pi, 5)

    def spot(self, east_km: float, north_km: float) -> Spot:
        """The point so far from the district's centre."""
        latitude = self.district.latitude + north_km / _KM_PER_DEGREE
        longitude = self.district.longitude + east_km / (_KM_PER_DEGREE * np.cos(np.radians(self.district.latitude)))
        height = 120 + 22 * np.sin(self._waves @ (east_km, north_km) + self._phases).sum()
        return Spot(round(latitude, 5), round(float(longitude), 5), round(float(max(height, 8)), 1))

    def near(self, spot: Spot, rng: np.random.Generator, nearest_km: float, farthest_km: float) -> Spot:
        """A point at a drawn distance and bearing from another."""
        east, north = self._offset(spot)
        km, bearing = rng.uniform(nearest_km, farthest_km), rng.uniform(0, 2 * np.pi)
        return self.spot(east + km * np.sin(bearing), north + km * np.cos(bearing))

    def _offset(self, spot: Spot) -> tuple[float, float]:
        north = (spot.latitude - self.district.latitude) * _KM_PER_DEGREE
        shrink = np.cos(np.radians(self.district.latitude))
        return (spot.longitude - self.district.longitude) * _KM_PER_DEGREE * float(shrink), north


def _postcodes(seed: int, district: District, ground: Ground, towns: Sequence[str]) -> list[Postcode]:
    """Twenty towns on a shaken grid, five by four, about eleven kilometres apart."""
    rng = stream(seed, "postcodes", district.id)
    base = 90101 if district.letter == "A" else 90201
    found = []
    for number in range(_POSTCODES):
        row, column = divmod(number, 5)
        shake = rng.uniform(-2.5, 2.5, 2)
        spot = ground.spot((column - 2) * 11 + row % 2 * 4 + shake[0], (row - 1.5) * 11 + shake[1])
        found.append(Postcode(str(base + number), district.id, towns[number], spot))
    return found


def _holdings(
    seed: int,
    district: District,
    ground: Ground,
    postcodes: Sequence[Postcode],
    farms: Sequence[str],
    people: Iterator[str],
) -> tuple[list[Holding], list[Person]]:
    """Three holdings to a postcode, each with its grower."""
    rng = stream(seed, "holdings", district.id)
    holdings, growers = [], []
    for number in range(_HOLDINGS):
        postcode = postcodes[number % _POSTCODES]
        name = next(people)
        grower = Person(f"{district.letter.lower()}-g{number + 1:02d}", district.id, name, "grower", postcode.spot)
        # three joined after this season opened: they don't count among those that hide each other
        late = number >= _HOLDINGS - 3
        registered = date(2026, 3, 2 + number % 5) if late else date(int(rng.integers(2015, 2024)), 6, 1)
        spot = ground.near(postcode.spot, rng, 0.8, 4.5)
        id = f"{district.letter.lower()}-h{number + 1:02d}"
        holdings.append(Holding(id, district.id, farms[number], postcode.code, spot, registered, grower.id))
        growers.append(grower)
    return holdings, growers


def _paddocks(seed: int, district: District, ground: Ground, holdings: Sequence[Holding]) -> list[Paddock]:
    rng = stream(seed, "paddocks", district.id)
    words = rng.permutation(names.PADDOCKS)
    found = []
    for number in range(_PADDOCKS):
        holding = holdings[number % len(holdings)]
        found.append(
            Paddock(
                id=f"{district.letter.lower()}-p{number + 1:03d}",
                holding=holding.id,
                district=district.id,
                name=str(words[(number + number // len(words) * 31) % len(words)]),
                spot=ground.near(holding.spot, rng, 0.3, 2.2),
                area_ha=int(rng.integers(18, 140)),
                enter_leave=bool(rng.random() < 0.6),
            )
        )
    return found


def _staff(district: District, ground: Ground, people: Iterator[str]) -> list[Person]:
    """The coordinator and those who work with them; numbered where there are several."""
    home = ground.spot(0, 0)
    found: list[Person] = []
    seen = dict.fromkeys(STAFF, 0)
    for role in STAFF:
        seen[role] += 1
        number = "" if STAFF.count(role) == 1 else str(seen[role])
        found.append(Person(f"{district.letter.lower()}-{role}{number}", district.id, next(people), role, home))
    return found


def _stations(seed: int, district: District, ground: Ground) -> list[Station]:
    """Four masts, one to a quarter of the district."""
    rng = stream(seed, "stations", district.id)
    corners = ((-14, 10), (14, 11), (-12, -11), (15, -10))
    found = []
    for number, (east, north) in enumerate(corners, start=1):
        shake = rng.uniform(-3, 3, 2)
        id = f"{district.letter.lower()}-s{number}"
        found.append(
            Station(id, district.id, f"Mast {district.letter}{number}", ground.spot(east + shake[0], north + shake[1]))
        )
    return found
