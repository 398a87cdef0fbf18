"""Places: distances, directions, the one spatial key (H3), and the one blur.

Distances are great-circle on a sphere of R = 6371.0088 km (the mean radius of WGS 84); against the
ellipsoid they err by up to 0.56 %. Cells are H3 indexes held as signed 64-bit integers, resolution 7
(about 5 km²) for the rule grid.
"""

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import h3.api.basic_int as h3
import numpy as np
import numpy.typing as npt

from rules.records import Place

EARTH_RADIUS_KM = 6371.0088
GRID = 7
COARSEST = 3
DIRECTIONS = ("north", "north-east", "east", "south-east", "south", "south-west", "west", "north-west")


def distance_km(
    lat_a: npt.ArrayLike, lon_a: npt.ArrayLike, lat_b: npt.ArrayLike, lon_b: npt.ArrayLike
) -> npt.NDArray[np.float64]:
    """Great-circle distance [km] by the haversine formula; any shapes that broadcast."""
    phi_a, phi_b = np.radians(lat_a), np.radians(lat_b)
    half_lat = (phi_b - phi_a) / 2
    half_lon = np.radians(np.subtract(lon_b, lon_a)) / 2
    chord = np.sin(half_lat) ** 2 + np.cos(phi_a) * np.cos(phi_b) * np.sin(half_lon) ** 2
    result: npt.NDArray[np.float64] = 2 * EARTH_RADIUS_KM * np.arcsin(np.sqrt(np.minimum(chord, 1)))
    return result


def direction(lat_a: float, lon_a: float, lat_b: float, lon_b: float) -> str:
    """The compass word (one of eight) in which b lies as seen from a."""
    phi_a, phi_b, lon = np.radians(lat_a), np.radians(lat_b), np.radians(lon_b - lon_a)
    east = np.sin(lon) * np.cos(phi_b)
    north = np.cos(phi_a) * np.sin(phi_b) - np.sin(phi_a) * np.cos(phi_b) * np.cos(lon)
    return DIRECTIONS[int(np.degrees(np.arctan2(east, north)) % 360 / 45 + 0.5) % 8]


def cell_of(latitude: float, longitude: float) -> int:
    """The rule-grid cell that holds a point."""
    return int(h3.latlng_to_cell(latitude, longitude, GRID))


def cells_of(latitudes: npt.NDArray[np.float64], longitudes: npt.NDArray[np.float64]) -> npt.NDArray[np.int64]:
    """The rule-grid cells that hold many points."""
    of = h3.latlng_to_cell
    found = [of(lat, lon, GRID) for lat, lon in zip(latitudes.tolist(), longitudes.tolist(), strict=True)]
    return np.array(found, np.int64)


def centre(cell: int) -> tuple[float, float]:
    """Latitude and longitude of a cell's centre."""
    lat, lon = h3.cell_to_latlng(cell)
    return lat, lon


def parent(cell: int, resolution: int) -> int:
    """The coarser cell of that resolution in H3's hierarchy."""
    return int(h3.cell_to_parent(cell, resolution))


def resolution(cell: int) -> int:
    """The resolution of a cell."""
    return int(h3.get_resolution(cell))


def with_neighbours(cells: Iterable[int]) -> list[int]:
    """The cells and those that touch them, sorted."""
    return sorted({near for cell in cells for near in h3.grid_disk(cell, 1)})


def place(
    latitude: float, longitude: float, uncertainty_m: float | None = None, elevation_m: float | None = None
) -> Place:
    """A place from its coordinates; ValueError where they are not on the globe."""
    if not (-90 <= latitude <= 90 and -180 <= longitude <= 180):
        raise ValueError(f"{latitude}, {longitude} is not a latitude and longitude in degrees")
    return Place(latitude, longitude, cell_of(latitude, longitude), uncertainty_m, elevation_m)


@dataclass(frozen=True, slots=True)
class Blur:
    """Where each cell may be shown: at itself, at a coarser cell, or only as the district.

    `shown` are the cells at which something is shown. What lies in none of them is shown at district size
    if `district_hides`, else not at all.
    """

    shown: frozenset[int]
    district_hides: bool

    def public(self, cell: int) -> int | None:
        """The cell to compute every band, direction, dot and count from; None means district size or less."""
        above = (parent(cell, step) for step in range(GRID, COARSEST - 1, -1))
        return next((found for found in above if found in self.shown), None)


def blur(cells_by_holding: Mapping[str, Iterable[int]], k: int) -> Blur:
    """Work out the smallest cells that hide every holding among at least `k`.

    The ladder is the stored cell's parents, resolution 7 to 3, then the district. What is shown at a cell is
    what none of its shown parts holds, and that rest has to hide k holdings by itself: else whoever knows the
    parts could take them away and be left with it. A rest of fewer is joined by the part that hides fewest.
    """
    shown: dict[int, set[str]] = {}
    level: dict[int, _Ground] = defaultdict(_Ground)
    for holding, cells in cells_by_holding.items():
        for cell in cells:
            level[cell].rest.add(holding)
    for step in range(GRID, COARSEST, -1):
        above: dict[int, _Ground] = defaultdict(_Ground)
        for cell in sorted(level):
            above[parent(cell, step - 1)].add(_settled(cell, level[cell], shown, k))
        level = above
    district = _Ground()
    for cell in sorted(level):
        district.add(_settled(cell, level[cell], shown, k))
    _rest(district, shown, k)
    return Blur(frozenset(shown), len(cells_by_holding) >= k)


@dataclass(slots=True)
class _Ground:
    """What a cell holds: the holdings that are shown nowhere in it yet, and its topmost shown parts."""

    rest: set[str] = field(default_factory=set)
    parts: list[int] = field(default_factory=list)

    def add(self, other: "_Ground") -> None:
        self.rest |= other.rest
        self.parts += other.parts


def _settled(cell: int, ground: _Ground, shown: dict[int, set[str]], k: int) -> _Ground:
    """The cell as the next coarser one sees it: one part, if something is shown at the cell."""
    rest = _rest(ground, shown, k)
    if rest is None:
        return ground
    shown[cell] = rest
    return _Ground(parts=[cell])


def _rest(ground: _Ground, shown: dict[int, set[str]], k: int) -> set[str] | None:
    """The holdings shown at this size; None if there are none, or too few even with a part given up."""
    if len(ground.rest) >= k:
        return ground.rest
    if not ground.rest or not ground.parts:
        return None
    fewest = min(ground.parts, key=lambda part: (len(shown[part]), part))
    return ground.rest | shown.pop(fewest)
