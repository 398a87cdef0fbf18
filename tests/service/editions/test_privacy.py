"""Nobody's paddock is given away, however many readers put their digests together."""

import html
import random
from collections.abc import Iterable
from datetime import date

import pytest

from rules.records import Holding, Known, Observation, Paddock, Place, Signal, Subscriber
from rules.slip import Rendered
from service import places
from service.editions import privacy
from service.editions.compose import compose
from service.editions.privacy import Near
from service.editions.render import render
from tests.builders import LAT, LON, a_district, a_holding, a_paddock, a_postcode, an_observation
from tests.known import known
from tests.service.editions import cast
from tests.service.editions.plain import printed

HOLDINGS = 40
HIDE = 5


def scattered(seed: int = 7) -> list[Place]:
    """Where 40 farms lie: half of them close together, half strewn over some 60 km."""
    draw = random.Random(seed)
    spread = [6.0] * (HOLDINGS // 2) + [45.0] * (HOLDINGS // 2)
    return [cast.at(draw.gauss(0, km / 2), draw.gauss(0, km / 2)) for km in spread]


FARMS = scattered()


def farm_paddocks() -> list[Paddock]:
    """Each farm's crop differs from its neighbour's, which must not tell it apart."""
    crops = ("canola", "wheat", "lucerne", "chickpea", "pasture")
    return [
        a_paddock(f"f{i}", holding=f"g{i}", name=f"Wave {i}", place=where, crop=crops[i % len(crops)])
        for i, where in enumerate(FARMS)
    ]


def farm_holdings() -> list[Holding]:
    return [a_holding(f"g{i}") for i in range(HOLDINGS)]


def strangers(n: int = 50) -> tuple[list[Subscriber], dict]:
    """Readers without paddocks, their pins strewn round the farms."""
    draw = random.Random(11)
    pins = [cast.at(draw.uniform(-40, 40), draw.uniform(-40, 40)) for _ in range(n)]
    codes = {f"c{i}": a_postcode(code=f"c{i}", place=pin) for i, pin in enumerate(pins)}
    readers = [cast.a_subscriber(f"x{i:02}", postcode=f"c{i}", crops=("canola", "pasture")) for i in range(n)]
    return readers, codes


READERS, CODES = strangers()


def found_at(i: int, counted: bool) -> tuple[list[Observation], list[Signal]]:
    """One find on farm i, the first of the season; and what the rules say of it.

    A count has a number to be compared with in canola only, so elsewhere no rule speaks of it.
    """
    crop = farm_paddocks()[i].crop
    row = an_observation(
        "csv:find", day=date(2026, 5, 10), place=FARMS[i], paddock=f"f{i}", reporter=f"grower{i}", crop=crop
    )
    count = [cast.threshold(0, rows=[row], paddock=f"f{i}", cells=(FARMS[i].cell,))] if counted else []
    return [row], [cast.first_seen(row), *count]


def what_strangers_read(i: int, counted: bool, hide: int = HIDE) -> tuple[str, ...]:
    """All that fifty strangers are told of a find on farm i, put together."""
    rows, signals = found_at(i, counted)
    composed = compose(a_known(rows, hide), signals, cast.BOOK, READERS)
    return tuple(mailed(render(cast.said(composed, reader.id))) for reader in READERS)


def mailed(rendered: Rendered) -> str:
    """Subject, text and HTML source, as they arrive."""
    return "\n".join((rendered.subject, rendered.text, html.unescape(rendered.html)))


def a_known(rows: Iterable[Observation], hide: int = HIDE) -> Known:
    return known(
        observations=rows,
        paddocks=farm_paddocks(),
        holdings=farm_holdings(),
        postcodes=CODES,
        district=a_district(holdings_to_hide=hide),
    )


Reading = tuple[str, ...]


@pytest.fixture(scope="module")
def told() -> dict[tuple[int, bool], Reading]:
    """What the strangers read, by farm and whether its count was compared: all weeks that can have been."""
    canola = [i for i, paddock in enumerate(farm_paddocks()) if paddock.crop == "canola"]
    cases = [(i, False) for i in range(HOLDINGS)] + [(i, True) for i in canola]
    return {case: what_strangers_read(*case) for case in cases}


def test_fifty_strangers_together_can_not_tell_fewer_than_five_farms_apart(
    told: dict[tuple[int, bool], Reading],
) -> None:
    """The fifty know every farm and its crop; what they read together still fits five farms or more."""
    for case, reading in told.items():
        alike = {i for (i, _), other in told.items() if other == reading}
        assert len(alike) >= HIDE, f"a find as in {case} could only be on {alike}"


def test_strangers_are_told_something_all_the_same(told: dict[tuple[int, bool], Reading]) -> None:
    """The promise is not kept by saying nothing: some are asked to look, and at different distances."""
    assert any("GO AND LOOK" in text for text in told[0, False])
    rows, signals = found_at(0, True)
    counted = compose(a_known(rows), signals[1:], cast.BOOK, READERS)  # without the first find, which says more
    assert any("found and counted" in printed(cast.said(counted, reader.id)) for reader in READERS)
    assert len(set(told.values())) > 2


def test_without_hiding_the_strangers_would_know() -> None:
    """The same fifty, in a district that hides nobody: this reading does narrow, so the test above can fail."""
    readings = [what_strangers_read(i, False, hide=1) for i in range(8)]
    assert all(readings.count(reading) < HIDE for reading in readings)


def test_no_text_names_a_farm_a_paddock_or_a_reporter(told: dict[tuple[int, bool], Reading]) -> None:
    texts = "\n".join(text for reading in told.values() for text in reading)
    assert not any(name in texts for name in ("Wave", "Holding", "grower"))


def test_a_statement_about_others_keeps_no_paddock_and_no_day() -> None:
    rows, signals = found_at(0, True)
    composed = compose(a_known(rows), signals, cast.BOOK, READERS)
    used = {name for slip in composed.slips.values() for line in (*slip.asks, *slip.mind) for name in line.statements}
    assert {composed.statements[name].wording for name in used} <= {"first_seen", "counted_near"}
    assert used
    for name in used:
        figures = composed.statements[name].figures
        assert "paddock" not in figures
        assert "day" not in figures
        assert FARMS[0].cell not in figures.values()


def test_a_count_is_hidden_among_those_who_grow_its_crop() -> None:
    """With four growers of canola in the district, others hear nothing of a count in it; its owner does."""
    four = [{"crop": "canola" if i < 4 else "lentil"} for i in range(8)]
    fields = cast.fields(**{f"p{i}": crop for i, crop in enumerate(four)})
    row = cast.look(0, True)
    readers = [cast.reader("owner"), cast.reader("other", paddocks=("p1",), person="person1")]
    composed = cast.edition([row], [cast.threshold(0, rows=[row])], readers, paddocks=fields)
    assert composed.slips["owner"].asks
    assert not composed.slips["other"].asks
    five = cast.fields(**{f"p{i}": {"crop": "canola" if i < 5 else "lentil"} for i in range(8)})
    assert cast.edition([row], [cast.threshold(0, rows=[row])], readers, paddocks=five).slips["other"].asks


# --- the view -------------------------------------------------------------------------------------


def test_with_too_few_farms_nothing_of_others_is_shown() -> None:
    rows = [cast.look(1, True), cast.look(2, False)]
    few = cast.edition(rows, [cast.first_seen(rows[0])], holdings=cast.farms()[:4])
    slip = few.slips["s1"]
    assert (slip.asks, slip.mind, slip.around) == ((), (), ())
    assert slip.own == {"looks": 0, "yours": 0, "finds": 0, "hidden": True}
    assert "can't be shown" in printed(cast.said(few))


def test_a_farm_that_joined_after_the_season_opened_hides_nobody() -> None:
    """`known.holdings` holds those of the opening; a paddock of a later one counts for none."""
    late = cast.farms()[:4]
    seen = privacy.view(cast.district([], holdings=late))
    assert not seen.shown


def test_the_readers_own_rows_stay_as_they_are() -> None:
    own = cast.look(0, True)
    slip = cast.slip([own], holdings=cast.farms()[:4])
    assert slip.own == {"looks": 1, "yours": 1, "finds": 1, "hidden": True}


def test_own_looks_are_counted_once() -> None:
    rows = [cast.look(0, True), cast.look(1, False)]
    counted = cast.slip(rows).around[0].own["found"]
    assert counted == [1, 2, 1]


def test_a_look_far_off_is_not_near() -> None:
    far = [a_paddock(f"q{i}", holding=f"h{i}", place=cast.at(60 + i / 10, 0)) for i in range(5)]
    row = an_observation("csv:far", place=far[0].place, paddock="q0", reporter="x")
    slip = cast.slip([row], paddocks=[*cast.fields(), *far])
    assert slip.around[0].own["found"] == [0, 0, 0]
    assert "nobody looked within 20 km; found in the one look in the district" in printed(
        cast.said(cast.edition([row], paddocks=[*cast.fields(), *far]))
    )


@pytest.mark.parametrize(
    ("north", "east", "expected"),
    [
        # Distances from the cell's own centre, so the expected band is the distance put in.
        (-3.0, 0.0, Near(5, "north", 1)),
        (0.0, -7.0, Near(10, "east", 1)),
        (10.0, 10.0, Near(20, "south-west", 1)),  # 14.1 km
        (0.3, 0.3, Near(5, None, 1)),  # 0.4 km: inside the cell, so no direction
        (25.0, 0.0, Near(None)),
    ],
)
def test_bands_and_directions(north: float, east: float, expected: Near) -> None:
    cell = places.cell_of(LAT, LON)
    lat, lon = places.centre(cell)
    km = 111.195
    pin = places.place(lat + north / km, lon + east / (km * 0.6947))  # cos 46° = 0.6947
    here = privacy.vantage(cast.reader(paddocks=()), cast.district(postcodes={"9001": a_postcode(place=pin)}))
    assert here.near([cell])[cell] == expected


def test_a_coarse_cell_says_its_doubt() -> None:
    """Eight farms hidden in a cell of resolution 5 are at most its edge, 10 km, from its middle."""
    seen = privacy.view(cast.district())
    spot = seen.public(cast.at(*cast.FARMS[1]).cell)
    assert spot is not None
    assert places.resolution(spot) == 5
    here = privacy.vantage(cast.reader(), cast.district())
    assert here.near([spot])[spot] == Near(5, None, 10)
