"""What is hidden in the demo's files for the service to find, and two things it must not be fooled by.

Only the demo reads this list: `build` to write the files, `check` to see what the delivered mails say.
Each event has a district, a place, a pest or weeks of its own, so that no event's rows are another's evidence.
"""

from demo_network import planting
from demo_network.event import ARTEFACT, Event
from demo_network.finds import CUTWORM, FLEA, MITE


def _weeks(first: int, last: int) -> tuple[str, ...]:
    return tuple(f"2026-W{week:02d}" for week in range(first, last + 1))


EVENTS = (
    Event(
        name="hatch",
        kind="hatch",
        pest=MITE,
        district="sextant",
        latitude=-46.0,
        longitude=92.0,
        radius_km=45.0,
        weeks=_weeks(19, 21),
        adds="25 mm of rain on 21 and 22 April after a dry autumn, then two weeks with daily means under 15 °C",
        shown_as="the weather that the mites' hatch needs has likely come, with a span of dates",
        change=planting.rain_then_cool,
    ),
    Event(
        name="border",
        kind="threshold",
        pest=MITE,
        district="lantern",
        latitude=-44.05,
        longitude=105.9,
        radius_km=30.0,
        weeks=_weeks(20, 20),
        adds="one canola paddock at one true leaf, its edge counted by eight spots: 15 to 21 mites a plant at each",
        shown_as="the count along the edge is at or above the number that matters",
        rows=planting.edge_count,
    ),
    Event(
        name="first_find",
        kind="first_seen",
        pest=FLEA,
        district="sextant",
        latitude=-45.93,
        longitude=92.12,
        radius_km=30.0,
        weeks=_weeks(22, 23),
        adds="two finds by two people on two days, where nobody had found any this season",
        shown_as="first lucerne fleas in the district this season, with the looks made before",
        rows=planting.first_find,
    ),
    Event(
        name="moth_flight",
        kind="trap_flight",
        pest=CUTWORM,
        district="lantern",
        latitude=-44.0,
        longitude=106.0,
        radius_km=45.0,
        weeks=_weeks(13, 14),
        adds="all three light traps catch ten to twenty moths a night, in place of fewer than one",
        shown_as="a flight: when to look for small larvae",
        rows=planting.moth_flight,
    ),
    Event(
        name="flare",
        kind="after_spray",
        pest=FLEA,
        district="lantern",
        latitude=-43.9,
        longitude=106.15,
        radius_km=20.0,
        weeks=_weeks(24, 25),
        adds="a group 3A treatment record on one paddock, and lucerne flea damage there two weeks later",
        shown_as="to the paddock's owner only: check lucerne fleas and the mites that hunt them",
        rows=planting.flare,
    ),
    Event(
        name="spread",
        kind="cluster",
        pest=MITE,
        district="sextant",
        latitude=-46.08,
        longitude=91.85,
        radius_km=15.0,
        weeks=_weeks(25, 29),
        adds="finds by several people around one place: four in the first week, two more each week, farther out",
        shown_as="more finds near here than the looking explains, growing over weeks",
        rows=planting.spread,
    ),
    Event(
        name="busy_looking",
        kind=ARTEFACT,
        pest=MITE,
        district="lantern",
        latitude=-44.0,
        longitude=106.0,
        radius_km=45.0,
        weeks=_weeks(23, 23),
        adds="130 more looks in one week by everybody who reports, finding mites no more often than usual",
        shown_as="more looking than usual",
        rows=planting.busy_week,
    ),
    Event(
        name="one_reporter",
        kind=ARTEFACT,
        pest=MITE,
        district="lantern",
        latitude=-44.1,
        longitude=106.1,
        radius_km=45.0,
        weeks=_weeks(26, 26),
        adds="one grower reports mite damage on the same few paddocks every day of a week, without a count",
        shown_as="most of the finds came from one person",
        rows=planting.one_reporter,
    ),
)
NAMES = frozenset(event.name for event in EVENTS)
