"""From stations to cells: inverse-distance weighting, with a height correction for temperature.

A cell that no station with a value lies near enough to has NaN, never 0. The sums run over the neighbours
one after the other, so the result does not depend on how many days or cells are worked out together.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rules.records import Place, Station
from service import places

POWER = 2.0
NEAREST = 5
REACH_KM = 150.0
LAPSE_C_PER_KM = 6.5  # common practice, no source
TOUCHING_KM = 1e-6  # a station nearer than a millimetre counts as that near: its weight outdoes all others

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Field:
    """Stations and cells as arrays: what the weights depend on. Heights in metres, NaN where unknown."""

    stations: tuple[str, ...]
    cells: npt.NDArray[np.int64]
    distance: Floats  # (cells, stations) [km]
    station_height: Floats
    cell_height: Floats

    @property
    def warmer(self) -> Floats:
        """What is added to a station's temperature at a cell (cells, stations) [°C]; 0 without both heights."""
        fall = LAPSE_C_PER_KM / 1000 * (self.station_height[None, :] - self.cell_height[:, None])
        return np.where(np.isnan(fall), 0.0, fall)


def field(stations: Sequence[Station], inhabited: Iterable[Place]) -> Field:
    """The field over the cells that hold one of the places, and over their neighbours."""
    ordered = sorted(stations, key=lambda station: station.id)
    heights = _mean_heights(inhabited)
    cells = np.array(places.with_neighbours(heights), np.int64)
    centres = np.array([places.centre(int(cell)) for cell in cells]).reshape(-1, 2)
    distance = _distances(centres, ordered)
    station_height = np.array([_known(station.place.elevation_m) for station in ordered])
    nearest = station_height[distance.argmin(axis=1)]
    own = np.array([heights.get(int(cell), np.nan) for cell in cells])
    return Field(
        stations=tuple(station.id for station in ordered),
        cells=cells,
        distance=distance,
        station_height=station_height,
        cell_height=np.where(np.isnan(own), nearest, own),
    )


def interpolate(field: Field, values: Floats, *, temperature: bool) -> npt.NDArray[np.float32]:
    """Weight station values into cells, day by day.

    Parameters
    ----------
    field : Field
        Stations and cells.
    values : array (days, stations)
        [°C] or [mm]; NaN where a station has no value that day.
    temperature : bool
        Correct each station's value for the difference in height, 6.5 °C/km.

    Returns
    -------
    array (days, cells), float32
        Σ w·v / Σ w with w = distance⁻² over the nearest five stations that have a value that day and lie
        within 150 km (150 km itself included); NaN where there is none.

    Notes
    -----
    Days that miss the same stations share their weights. Of two stations at the same distance the one
    first by id counts as nearer.

    References
    ----------
    Shepard, D. (1968). A two-dimensional interpolation function for irregularly-spaced data. Proc. 23rd
    ACM National Conference, 517-524. doi:10.1145/800186.810616 (power and search radius are choices of
    ours; its direction and slope terms are left out).
    """
    result = np.full((len(values), len(field.cells)), np.nan, np.float32)
    order = np.argsort(field.distance, axis=1, kind="stable")
    filled, add = np.nan_to_num(values), field.warmer if temperature else np.zeros_like(field.distance)
    patterns, which = np.unique(~np.isnan(values), axis=0, return_inverse=True)
    for number, has in enumerate(patterns):
        index, weight = _weights(field.distance, order, has)
        days = np.flatnonzero(which.ravel() == number)
        reached = weight.any(axis=1)
        total = np.zeros((len(days), len(field.cells)))
        for near, share in zip(index.T, weight.T, strict=True):
            total += share * (filled[days][:, near] + np.take_along_axis(add, near[:, None], axis=1).T)
        result[days] = np.where(reached, total, np.nan)
    return result


def neighbours(latlon: tuple[float, float], stations: Sequence[Station]) -> list[tuple[str, float, float]]:
    """The stations that a place's weather comes from, nearest first: id, distance [km] and share of the weight.

    Give the stations that have a value on the day in question.
    """
    ordered = sorted(stations, key=lambda station: station.id)
    if not ordered:
        return []
    distance = _distances(np.array([latlon]), ordered)
    has = np.ones(len(ordered), np.bool_)
    index, weight = _weights(distance, np.argsort(distance, axis=1, kind="stable"), has)
    pairs = zip(index[0], weight[0], strict=True)
    return [(ordered[i].id, float(distance[0, i]), float(share)) for i, share in pairs if share > 0]


def _weights(
    distance: Floats, order: npt.NDArray[np.intp], has: npt.NDArray[np.bool_]
) -> tuple[npt.NDArray[np.intp], Floats]:
    """The nearest stations that have a value: (cells, at most 5) indices and shares; share 0 where none is left."""
    rank = np.cumsum(has[order], axis=1)  # how many with a value there are up to here
    count = min(NEAREST, order.shape[1])
    at = np.stack([(rank >= nth).argmax(axis=1) for nth in range(1, count + 1)], axis=1)
    index = np.take_along_axis(order, at, axis=1)
    away = np.take_along_axis(distance, index, axis=1)
    there = (np.arange(1, count + 1) <= rank[:, -1:]) & (away <= REACH_KM)
    raw = np.where(there, np.maximum(away, TOUCHING_KM) ** -POWER, 0.0)
    total = raw.sum(axis=1, keepdims=True)
    return index, np.divide(raw, total, out=np.zeros_like(raw), where=total > 0)


def _distances(latlon: Floats, stations: Sequence[Station]) -> Floats:
    at = np.array([(station.place.latitude, station.place.longitude) for station in stations])
    return places.distance_km(latlon[:, None, 0], latlon[:, None, 1], at[None, :, 0], at[None, :, 1])


def _mean_heights(inhabited: Iterable[Place]) -> Mapping[int, float]:
    """The mean height of the places in each cell that holds one; NaN where none of them has a height."""
    found: dict[int, list[float]] = {}
    for place in inhabited:
        known = found.setdefault(place.cell, [])
        if place.elevation_m is not None:
            known.append(place.elevation_m)
    return {cell: sum(sorted(known)) / len(known) if known else np.nan for cell, known in found.items()}


def _known(value: float | None) -> float:
    return np.nan if value is None else value
