"""Places: distances, directions, the one spatial key (H3), and the one blur.

Distances are great-circle on a sphere of R = 6371.0088 km (the mean radius of WGS 84); against the
ellipsoid they err by up to 0.56 %. Cells are H3 indexes held as signed 64-bit integers, resolution 7
(about 5 km²) for the rule grid.
"""

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

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

    `shown` maps a rule-grid cell to the cell it is shown at; a cell it does not name is shown at
    district size if `district_hides`, else not at all.
    """

    shown: Mapping[int, int]
    district_hides: bool

    def public(self, cell: int) -> int | None:
        """The cell to compute every band, direction, dot and count from; None means district size or less."""
        for step in range(GRID, COARSEST - 1, -1):
            found = self.shown.get(parent(cell, step))
            if found is not None:
                return found
        return None


def blur(cells_by_holding: Mapping[str, Iterable[int]], k: int) -> Blur:
    """Work out the smallest cells that hide every holding among at least `k`.

    The ladder is the stored cell's parents, resolution 7 to 3. A cell is shown on its own only where it
    has k holdings *and* what is left of each coarser cell has none or k of its own: otherwise showing the
    one would give away the rest by subtraction, so both are shown at the coarser cell.
    """
    holdings: dict[int, set[str]] = defaultdict(set)
    children: dict[int, set[int]] = defaultdict(set)
    for holding, cells in cells_by_holding.items():
        for cell in cells:
            below = cell
            holdings[cell].add(holding)
            for step in range(GRID - 1, COARSEST - 1, -1):
                above = parent(cell, step)
                holdings[above].add(holding)
                children[above].add(below)
                below = above
    shown: dict[int, int] = {}
    for top in [cell for cell in holdings if resolution(cell) == COARSEST]:
        _show(top, holdings, children, k, shown)
    return Blur(shown, len(cells_by_holding) >= k)


def _show(
    cell: int,
    holdings: Mapping[int, set[str]],
    children: Mapping[int, set[int]],
    k: int,
    shown: dict[int, int],
) -> None:
    """Split a cell into its parts while every part, and every rest, still hides k holdings."""
    if len(holdings[cell]) < k:
        return
    parts = sorted(children.get(cell, ()))
    alone = [part for part in parts if len(holdings[part]) >= k]
    rest = {name for part in parts if part not in alone for name in holdings[part]}
    shown[cell] = cell
    if not rest or len(rest) >= k:
        for part in alone:
            _show(part, holdings, children, k, shown)
