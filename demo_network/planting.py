"""How each event is put into the files: the rows it adds, or what it does to the weather.

An event draws from a stream of its own and rests on the world before anybody looked, so that leaving one
out changes no row of another.
"""

from datetime import date, timedelta

import numpy as np

from demo_network import readers, traps, weather
from demo_network.event import Event
from demo_network.farming import PASTURES, World, stage
from demo_network.files import Row
from demo_network.finds import FLEA, MITE, burden, chance
from demo_network.network import DISTRICTS, Paddock
from demo_network.observations import counts, crop_fields, look
from demo_network.reporters import DAMAGE, FIELD_DAY, ROUTINE, habits
from demo_network.seasons import LIVE, days_of, local
from demo_network.streams import row_id, stream

RAIN_DAYS, RAIN_MM = (date(LIVE, 4, 21), date(LIVE, 4, 22)), (16.0, 9.0)
COOL_DAYS, COOL_MEAN = 15, 13.0  # from the first wet day; the mean at sea level that the spell does not pass [°C]


def rain_then_cool(event: Event, world: World) -> weather.Change:
    """A wet day and a half at every mast of the district, then two cool weeks."""

    def change(season: weather.Season) -> None:
        if (season.district, season.year) != (event.district, LIVE):
            return
        rng = stream(world.seed, "planted", event.name)
        shape = (COOL_DAYS, len(season.stations))
        first = season.days.index(RAIN_DAYS[0])
        season.rain[first : first + 2] += np.outer(RAIN_MM, rng.uniform(0.85, 1.15, shape[1]))
        height = np.array([station.spot.elevation_m for station in season.stations])
        cool = COOL_MEAN - weather.LAPSE * height + rng.uniform(-0.8, 0.8, shape)
        season.tmean[first : first + COOL_DAYS] = np.minimum(season.tmean[first : first + COOL_DAYS], cool)

    return change


def edge_count(event: Event, world: World) -> list[Row]:
    """A grower walks the edge of a paddock at one true leaf and counts mites at eight spots: many at each."""
    rng, day = _start(event, world), days_of(event.weeks[0])[4]
    listed = {id for reader in readers.invent(world) for id in reader.paddocks}
    paddock = next(
        paddock
        for paddock in _nearest(event, world)
        if paddock.id in listed
        and world.plans[paddock.id, LIVE].crop == "canola"
        and stage(world.plans[paddock.id, LIVE], day) == 11
    )
    spots = [int(n) for n in rng.integers(150, 215, 8)]
    base = _row(world, paddock, MITE, day, world.network.grower_of(paddock), ROUTINE)
    return _numbered(event, world, [base | {"method": "plants searched"} | counts(spots, "per_plant", 10, len(spots))])


def first_find(event: Event, world: World) -> list[Row]:
    """An officer finds it in a pasture, and the next day a grower nearby does too."""
    days = days_of(event.weeks[0])
    pastures = [paddock for paddock in _nearest(event, world) if world.plans[paddock.id, LIVE].crop in PASTURES]
    first = pastures[0]
    second = next(paddock for paddock in pastures if paddock.holding != first.holding)
    officer = world.network.people_in(event.district, "officer")[0].id
    seen = _row(world, first, FLEA, days[1], officer, ROUTINE) | counts([3, 0, 5, 2, 0], "holes_per_leaf", 10, 2)
    told = _row(world, second, FLEA, days[2], world.network.grower_of(second), DAMAGE)
    return _numbered(event, world, [seen, told | {"damage": "see-through spots in some leaves"}])


def moth_flight(event: Event, world: World) -> list[Row]:
    """The district's three traps catch far more than in the weeks around; the same rows, other catches."""
    rng = _start(event, world)
    found = []
    for row in traps.season(world, event.district, LIVE):
        if f"{LIVE}-W{row['day'].isocalendar().week:02d}" in event.weeks:
            catch = int(rng.integers(70, 150))
            found.append(row | {"status": "present", "count": round(catch / traps.NIGHTS, 3)})
    return found


def flare(event: Event, world: World) -> list[Row]:
    """Mites treated with group 3A on one paddock; about two weeks later lucerne fleas there, and more of them."""
    days = days_of(event.weeks[0])
    treated_on = days[0] - timedelta(days=12)
    paddock = next(p for p in _nearest(event, world) if world.plans[p.id, LIVE].crop in ("canola", "lupin"))
    grower = world.network.grower_of(paddock)
    treated = {"treated_group": "3A", "treated_on": treated_on}
    before = _row(world, paddock, MITE, treated_on + timedelta(days=3), grower, ROUTINE) | treated
    after = _row(world, paddock, FLEA, days[2], grower, DAMAGE) | treated | {"damage": "windows in many leaves"}
    again = _row(world, paddock, FLEA, days[5], grower, DAMAGE) | treated | {"damage": "holes in most leaves"}
    return _numbered(event, world, [before, after, again])


def spread(event: Event, world: World) -> list[Row]:
    """Finds by several people around one place, each week more of them and farther out."""
    rng = _start(event, world)
    people = {habit.person.id: habit for habit in habits(world.network, world.seed, event.district)}
    officers = [habit for habit in people.values() if habit.role == "officer"]
    found = []
    for at, week in enumerate(event.weeks):
        near = _nearest(event, world)[: 8 + 6 * at]
        for number, which in enumerate(rng.choice(len(near), size=4 + 2 * at, replace=False)):
            paddock = near[int(which)]
            habit = people.get(world.network.grower_of(paddock), officers[number % len(officers)])
            found.append(look(world, habit, paddock, MITE, days_of(week)[number % 6], ROUTINE, True, rng))
    return _numbered(event, world, found)


def busy_week(event: Event, world: World) -> list[Row]:
    """Several times the usual looks in one week, by many people, finding no more often than usual."""
    rng = _start(event, world)
    carried = burden(world, event.district, LIVE)
    people = habits(world.network, world.seed, event.district)
    found = []
    for number in range(130):
        habit, day = people[number % len(people)], days_of(event.weeks[0])[int(rng.integers(5))]
        own = world.network.own(habit.person.id) or world.network.paddocks_in(event.district)
        paddock, why = own[int(rng.integers(len(own)))], FIELD_DAY if number % 3 == 0 else ROUTINE
        present = bool(rng.random() < chance(MITE, paddock, day, why, carried))
        row = look(world, habit, paddock, MITE, day, why, present, rng)
        found.append(row | {"arrived_at": local(day, 18 + rng.uniform(0, 4), DISTRICTS[event.district].zone)})
    return _numbered(event, world, found)


def one_reporter(event: Event, world: World) -> list[Row]:
    """One grower reports damage on their own paddocks and the neighbours', day after day, with no counts."""
    people = {habit.person.id for habit in habits(world.network, world.seed, event.district)}
    nearest = _nearest(event, world)
    grower = next(id for paddock in nearest if (id := world.network.grower_of(paddock)) in people)
    around = list(dict.fromkeys([*world.network.own(grower), *nearest]))[:6]
    found = [
        _row(world, paddock, MITE, day, grower, DAMAGE) | {"damage": "silver leaves", "confidence": "fairly sure"}
        for day in days_of(event.weeks[0])
        for paddock in around
    ]
    return _numbered(event, world, found)


def _start(event: Event, world: World) -> np.random.Generator:
    return stream(world.seed, "planted", event.name)


def _nearest(event: Event, world: World) -> list[Paddock]:
    """The district's paddocks, nearest to the event's place first."""
    paddocks = world.network.paddocks_in(event.district)
    return sorted(paddocks, key=lambda paddock: paddock.spot.km_from(event.latitude, event.longitude))


def _row(world: World, paddock: Paddock, pest: str, day: date, reporter: str, why: str) -> Row:
    """A find that was sent the same evening."""
    return {
        "day": day,
        "district": paddock.district,
        "paddock": paddock.id,
        **crop_fields(world.plans[paddock.id, day.year], day),
        "pest": pest,
        "status": "present",
        "reporter": reporter,
        "confidence": "sure",
        "why": why,
        "arrived_at": local(day, 19.5, DISTRICTS[paddock.district].zone),
    }


def _numbered(event: Event, world: World, rows: list[Row]) -> list[Row]:
    return [row | {"record_id": row_id(world.seed, "planted", event.name, n)} for n, row in enumerate(rows)]
