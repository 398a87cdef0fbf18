"""Places: distances and directions by hand, the grid, and a blur that hides every holding among enough others."""

import math
from collections import defaultdict

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from service import places
from service.places import COARSEST, GRID, Blur, blur
from tests.builders import LAT, LON

DEGREE_KM = 6371.0088 * math.pi / 180  # one degree along a meridian: 111.195 km

# --- distances and directions ----------------------------------------------------------------------


def test_a_degree_along_a_meridian_and_along_the_equator_is_the_same() -> None:
    assert places.distance_km(-46, 100, -45, 100) == pytest.approx(DEGREE_KM)
    assert places.distance_km(0, 100, 0, 101) == pytest.approx(DEGREE_KM)


def test_the_antimeridian_is_no_barrier() -> None:
    assert places.distance_km(0, 179.9, 0, -179.9) == pytest.approx(0.2 * DEGREE_KM)
    assert places.direction(-46, 179.9, -46, -179.9) == "east"
    assert places.direction(-46, -179.9, -46, 179.9) == "west"


def test_opposite_ends_of_the_globe_are_half_its_round_apart() -> None:
    assert places.distance_km(-46, 100, 46, -80) == pytest.approx(180 * DEGREE_KM)
    assert places.distance_km(-46, 100, -46, 100) == 0


def test_arrays_give_a_table_of_distances() -> None:
    table = places.distance_km([[0], [1]], [[0], [0]], [0, 1, 2], [0, 0, 0])
    np.testing.assert_allclose(table / DEGREE_KM, [[0, 1, 2], [1, 0, 1]], atol=1e-12)


@pytest.mark.parametrize(
    ("north", "east", "word"),
    [
        *[(1, 0, "north"), (1, 1, "north-east"), (0, 1, "east"), (-1, 1, "south-east")],
        *[(-1, 0, "south"), (-1, -1, "south-west"), (0, -1, "west"), (1, -1, "north-west")],
        # by hand: 22.5 degrees part north from north-east; tan 22° = 0.404, tan 23° = 0.424
        *[(1, 0.404, "north"), (1, 0.424, "north-east"), (1, -0.404, "north"), (1, -0.424, "north-west")],
    ],
)
def test_directions_are_those_of_a_compass(north: float, east: float, word: str) -> None:
    small, shrink = 0.01, math.cos(math.radians(LAT))  # a degree of longitude is that much shorter there
    assert places.direction(LAT, LON, LAT + small * north, LON + small * east / shrink) == word


def test_a_point_off_the_globe_is_no_place() -> None:
    for latitude, longitude in ((90.1, 0), (-90.1, 0), (0, 180.1), (0, -180.1), (math.nan, 0), (0, math.nan)):
        with pytest.raises(ValueError, match="not a latitude"):
            places.place(latitude, longitude)
    assert places.place(-90, 180).latitude == -90


# --- the grid --------------------------------------------------------------------------------------


def test_a_place_lies_in_the_cell_that_it_names() -> None:
    spot = places.place(LAT, LON)
    assert places.resolution(spot.cell) == GRID
    assert places.cell_of(*places.centre(spot.cell)) == spot.cell
    assert -(2**63) <= spot.cell < 2**63
    # H3's table of cell statistics: a hexagon of resolution 7 has edges of about 1.4 km [M]
    assert places.distance_km(LAT, LON, *places.centre(spot.cell)) < 2


def test_neighbours_are_the_cells_that_touch() -> None:
    home = places.cell_of(LAT, LON)
    ring = places.with_neighbours([home])
    assert len(ring) == 7
    assert ring == sorted(ring)
    assert home in ring
    assert len(places.with_neighbours(ring)) == 19
    assert places.with_neighbours([]) == []


# --- the blur --------------------------------------------------------------------------------------


def _near(steps: int, size: float) -> list[int]:
    """All cells that hold a point of a fine grid round the middle of the test ocean."""
    offsets = [size * i / steps for i in range(-steps, steps + 1)]
    return sorted({places.cell_of(LAT + a, LON + b) for a in offsets for b in offsets})


CELLS = _near(40, 0.4)
WITHIN: dict[int, list[int]] = defaultdict(list)  # rule-grid cells by their parent of resolution 6
for _cell in CELLS:
    WITHIN[places.parent(_cell, 6)].append(_cell)
HOME, (A, B, C, D, *_) = next((above, cells) for above, cells in WITHIN.items() if len(cells) == 7)
FAR = places.cell_of(LAT + 3, LON)  # more than 300 km off: no common cell of any size


def holdings(**at: int | tuple[int, ...]) -> dict[str, tuple[int, ...]]:
    """Holdings by name; `a3=cell` is three of them there."""
    found = {}
    for name, cell in at.items():
        for number in range(int(name[1:])):
            found[f"{name[0]}{number}"] = cell if isinstance(cell, tuple) else (cell,)
    return found


def test_a_cell_with_enough_holdings_is_shown_as_it_is() -> None:
    made = blur(holdings(a3=A), 3)
    assert made == Blur(frozenset({A}), True)
    assert made.public(A) == A


def test_too_few_in_a_cell_are_shown_with_their_neighbours() -> None:
    made = blur(holdings(a2=A, b1=B), 3)
    assert made.shown == {HOME}
    assert made.public(A) == made.public(B) == HOME


def test_many_paddocks_of_one_holding_are_one_holding() -> None:
    made = blur({"a": (A, B, C, D), "b": (A,)}, 3)
    assert made == Blur(frozenset(), False)
    assert made.public(A) is None


def test_a_rest_that_subtraction_would_lay_bare_is_joined_by_a_part() -> None:
    made = blur(holdings(a3=A, b1=B), 3)
    assert made.public(A) == made.public(B) == HOME


def test_the_part_that_hides_fewest_joins_and_the_others_stay() -> None:
    made = blur(holdings(a5=A, b1=B, c3=C), 3)
    assert made.public(A) == A
    assert made.public(B) == made.public(C) == HOME


def test_a_rest_with_enough_holdings_of_its_own_takes_nothing() -> None:
    made = blur(holdings(a3=A, b1=B, c1=C, d1=D), 3)
    assert made.public(A) == A
    assert {made.public(cell) for cell in (B, C, D)} == {HOME}


def test_a_stray_holding_is_not_laid_bare_by_the_rest_of_its_district() -> None:
    alone = blur(holdings(a3=A, f1=FAR), 3)
    assert alone == Blur(frozenset(), True)
    assert alone.public(A) is None
    kept = blur(holdings(a3=A, b4=B, f1=FAR), 3)
    assert kept.public(B) == B
    assert kept.public(A) is kept.public(FAR) is None


def test_a_place_without_a_holding_is_shown_only_where_others_are_too() -> None:
    # a paddock of a holding that came after the season opened: its neighbours are all shown by themselves
    made = blur(holdings(a3=A, b3=B), 3)
    assert made.public(A) == A
    assert made.public(C) is None
    # beside a rest that is shown at the coarser cell, it is one more of that
    assert blur(holdings(a3=A, b2=B, c2=C), 3).public(D) == HOME


def test_fewer_holdings_than_must_be_hidden_show_nothing() -> None:
    assert blur(holdings(a2=A), 3) == Blur(frozenset(), False)
    assert blur({}, 3) == Blur(frozenset(), False)
    assert blur({"a": ()}, 1).public(A) is None


networks = st.dictionaries(
    st.integers(0, 30).map(lambda n: f"h{n}"),
    st.lists(st.sampled_from([*CELLS[::9], A, B, C, D, FAR]), min_size=1, max_size=4),
    max_size=25,
)


@settings(deadline=None)
@given(networks, st.integers(1, 6))
def test_nothing_shown_narrows_anything_below_enough_holdings(network: dict[str, list[int]], k: int) -> None:
    """Knowing all that is shown anywhere, each row still lies among the cells of at least k holdings."""
    made = blur(network, k)
    together: dict[int | None, set[str]] = defaultdict(set)
    for holding, cells in network.items():
        for cell in cells:
            together[made.public(cell)].add(holding)
    assert made.district_hides == (len(network) >= k)
    assert set(made.shown) == together.keys() - {None}
    for spot, hidden in together.items():
        assert len(hidden) >= k or (spot is None and not made.district_hides)


@settings(deadline=None)
@given(networks, st.integers(1, 6))
def test_nothing_is_shown_at_a_smaller_cell_than_the_smallest_with_enough(
    network: dict[str, list[int]], k: int
) -> None:
    made = blur(network, k)
    for cell in {cell for cells in network.values() for cell in cells}:
        spot = made.public(cell)
        if spot is not None:
            assert spot == places.parent(cell, places.resolution(spot))
            inside = {
                h for h, cells in network.items() for c in cells if places.parent(c, places.resolution(spot)) == spot
            }
            assert len(inside) >= k
            assert COARSEST <= places.resolution(spot) <= GRID


@settings(deadline=None)
@given(networks, st.randoms())
def test_the_order_of_holdings_does_not_matter(network: dict[str, list[int]], random) -> None:
    names = list(network)
    random.shuffle(names)
    assert blur({name: network[name][::-1] for name in names}, 3) == blur(network, 3)
