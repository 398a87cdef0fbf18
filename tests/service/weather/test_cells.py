"""Stations to cells: against a plain double loop, by hand, and at the edges of what is allowed."""

import math

import numpy as np
import pytest

from rules.records import Station
from service.places import EARTH_RADIUS_KM, centre, place
from service.weather import cells
from tests.builders import LAT, LON

NAN = math.nan
HERE = place(LAT, LON, elevation_m=100.0)
CENTRE = centre(HERE.cell)


def station(id: str, km_north: float, height: float | None = None, base: tuple[float, float] = CENTRE) -> Station:
    """A station due north of a point: along a meridian the distance is R times the angle."""
    latitude = base[0] + math.degrees(km_north / EARTH_RADIUS_KM)
    return Station(id, "north", id, place(latitude, base[1], elevation_m=height))


def at_home(stations: list[Station], values: list[list[float]], **options: bool) -> np.ndarray:
    """The interpolated days of the one cell that holds HERE."""
    field = cells.field(stations, [HERE])
    found = cells.interpolate(field, np.array(values, float), temperature=options.get("temperature", False))
    return found[:, list(field.cells).index(HERE.cell)]


def test_two_stations_by_hand() -> None:
    # by hand: 10 and 20 km away, weights 1/100 and 1/400, so shares 0.8 and 0.2: 0.8*10 + 0.2*20 = 12
    assert at_home([station("a", 10), station("b", -20)], [[10.0, 20.0]]) == pytest.approx([12.0], abs=1e-4)


def test_the_height_correction_by_hand() -> None:
    # by hand: a (300 m) is 200 m above the cell (100 m), so 1.3 °C warmer down there; b (0 m) is 0.65 °C cooler
    # up there: 0.8*(10 + 1.3) + 0.2*(20 - 0.65) = 9.04 + 3.87 = 12.91
    two = [station("a", 10, 300.0), station("b", -20, 0.0)]
    assert at_home(two, [[10.0, 20.0]], temperature=True) == pytest.approx([12.91], abs=1e-4)
    assert at_home(two, [[10.0, 20.0]]) == pytest.approx([12.0], abs=1e-4)


def test_a_station_of_unknown_height_is_not_corrected() -> None:
    # by hand: only a is corrected: 0.8*(10 + 1.3) + 0.2*20 = 13.04
    two = [station("a", 10, 300.0), station("b", -20, None)]
    assert at_home(two, [[10.0, 20.0]], temperature=True) == pytest.approx([13.04], abs=1e-4)


def test_a_cell_takes_the_mean_height_of_its_places_else_that_of_its_nearest_station() -> None:
    second = place(CENTRE[0], CENTRE[1], elevation_m=200.0)
    unknown = place(CENTRE[0], CENTRE[1])
    field = cells.field([station("a", 10, 300.0), station("b", -20, 0.0)], [HERE, second, unknown])
    at = list(field.cells).index(HERE.cell)
    assert field.cell_height[at] == 150.0
    for i, cell in enumerate(field.cells):
        if i != at:
            near = min(((km, h) for km, h in zip(field.distance[i], (300.0, 0.0), strict=True)))[1]
            assert field.cell_height[i] == near, cell
    alone = cells.field([station("a", 10), station("b", -20, 0.0)], [unknown])
    assert np.isnan(alone.cell_height[list(alone.cells).index(HERE.cell)])


def test_a_place_and_its_six_neighbours_are_worked_out_and_no_others() -> None:
    field = cells.field([station("a", 10)], [HERE, HERE])
    assert len(field.cells) == 7
    assert list(field.cells) == sorted(field.cells)


def test_a_station_in_the_middle_of_the_cell_is_the_cell() -> None:
    exact = Station("a", "north", "a", place(*CENTRE))
    assert at_home([exact, station("b", 1)], [[7.25, 90.0]]) == pytest.approx([7.25], abs=1e-6)


def test_only_the_nearest_five_that_have_a_value_count() -> None:
    six = [station(name, km) for name, km in zip("abcdef", (1, 2, 3, 4, 5, 6), strict=True)]
    # by hand: values equal but for the sixth, so the sixth shows if it takes part
    assert at_home(six, [[1, 1, 1, 1, 1, 100]]) == pytest.approx([1.0])
    with_sixth = at_home(six, [[NAN, 1, 1, 1, 1, 100]])[0]
    # by hand: weights 1/4, 1/9, 1/16, 1/25, 1/36 (total 0.491389); (0.463611*1 + 0.027778*100)/0.491389 = 6.596387
    assert with_sixth == pytest.approx(6.596387, abs=1e-4)


def test_the_reach_ends_at_150_km() -> None:
    assert at_home([station("a", 149.999)], [[3.0]]) == pytest.approx([3.0])
    assert np.isnan(at_home([station("a", 150.001)], [[3.0]])).all()
    # a station out of reach takes no share beside one in reach
    assert at_home([station("a", 149), station("b", -151)], [[3.0, 90.0]]) == pytest.approx([3.0])


def test_exactly_150_km_is_within_reach() -> None:
    field = cells.field([station("a", 10)], [HERE])
    edge = cells.Field(
        field.stations, field.cells, np.full_like(field.distance, 150.0), field.station_height, field.cell_height
    )
    assert (cells.interpolate(edge, np.array([[4.0]]), temperature=False) == 4).all()


def test_a_day_without_any_value_is_missing_and_never_zero() -> None:
    two = [station("a", 10, 0.0), station("b", 20, 0.0)]
    found = at_home(two, [[NAN, NAN], [NAN, 6.0], [0.0, 0.0]], temperature=True)
    assert np.isnan(found[0])
    # by hand: 100 m up at 6.5 °C/km is 0.65 °C cooler
    assert found[1:] == pytest.approx([5.35, -0.65], abs=1e-5)


def test_neighbours_are_the_weights_that_are_used() -> None:
    four = [station("a", 10), station("b", -20), station("far", 151), station("c", 40)]
    near = cells.neighbours(CENTRE, four)
    assert [name for name, _, _ in near] == ["a", "b", "c"]
    assert [km for _, km, _ in near] == pytest.approx([10, 20, 40], abs=1e-6)
    # by hand: 1/100, 1/400, 1/1600 are 16 : 4 : 1
    assert [share for _, _, share in near] == pytest.approx([16 / 21, 4 / 21, 1 / 21], abs=1e-6)
    # field columns go by id: a, b, c, far
    used = at_home(four, [[1.0, 10.0, 100.0, 999.0]])
    assert used == pytest.approx([(16 * 1 + 4 * 10 + 1 * 100) / 21], abs=1e-4)
    assert cells.neighbours(CENTRE, []) == []
    assert cells.neighbours(CENTRE, [station("far", 151)]) == []


def by_the_book(field: cells.Field, values: np.ndarray, temperature: bool) -> np.ndarray:
    """The same in plain Python: for each day and cell, sort, take five, weight."""
    out = np.full((len(values), len(field.cells)), NAN)
    for day, row in enumerate(values):
        for cell in range(len(field.cells)):
            near = sorted((field.distance[cell, s], s) for s in range(len(row)) if not math.isnan(row[s]))[:5]
            near = [(km, s) for km, s in near if km <= 150]
            top = bottom = 0.0
            for km, s in near:
                value = row[s]
                heights = field.station_height[s], field.cell_height[cell]
                if temperature and not any(map(math.isnan, heights)):
                    value += 6.5 * (heights[0] - heights[1]) / 1000
                weight = 1 / max(km, 1e-6) ** 2
                top, bottom = top + weight * value, bottom + weight
            if near:
                out[day, cell] = top / bottom
    return out


@pytest.mark.parametrize("temperature", [False, True])
def test_many_cells_and_gaps_agree_with_a_plain_double_loop(temperature: bool) -> None:
    rng = np.random.default_rng(20260512)
    stations = [
        Station(
            f"s{i:02d}",
            "north",
            "",
            place(
                LAT + rng.uniform(-1.5, 1.5),
                LON + rng.uniform(-2, 2),
                elevation_m=None if i % 4 == 0 else float(rng.uniform(0, 400)),
            ),
        )
        for i in range(12)
    ]
    homes = [
        place(
            LAT + rng.uniform(-2.5, 2.5),
            LON + rng.uniform(-3, 3),
            elevation_m=None if i % 3 == 0 else float(rng.uniform(0, 400)),
        )
        for i in range(25)
    ]
    field = cells.field(stations, homes)
    values = rng.uniform(-5, 35, (40, 12))
    values[rng.random((40, 12)) < 0.5] = NAN
    values[3] = NAN
    found = cells.interpolate(field, values, temperature=temperature)
    expected = by_the_book(field, values, temperature)
    assert found.dtype == np.float32
    assert np.isnan(expected).any()
    np.testing.assert_array_equal(np.isnan(found), np.isnan(expected))
    np.testing.assert_allclose(found, expected, rtol=2e-6, atol=2e-6)


def test_a_day_comes_out_the_same_alone_and_among_others() -> None:
    rng = np.random.default_rng(7)
    field = cells.field([station(f"s{i}", float(i + 1)) for i in range(8)], [HERE])
    values = rng.uniform(0, 30, (30, 8))
    values[rng.random((30, 8)) < 0.3] = NAN
    together = cells.interpolate(field, values, temperature=False)
    alone = np.concatenate([cells.interpolate(field, values[d : d + 1], temperature=False) for d in range(30)])
    assert together.tobytes() == alone.tobytes()
