"""A small network and observation files for the tests of intake."""

from collections.abc import Mapping, Sequence
from datetime import date, timedelta
from pathlib import Path
from typing import Any

from rules.records import Observation, Reportable
from service.clock import SetClock
from service.intake import take_observations
from service.places import place
from service.store import network, observations
from service.store.base import Store
from tests.builders import LAT, LON, NOW, a_district, a_holding, a_paddock, a_person, a_postcode

CLOCK = SetClock(NOW)
SINCE = NOW - timedelta(days=365)  # when the network was taken
LISTED = (
    Reportable("false_moth", ("false kelp moth", "Imago fabulosa", "élan weevil"), date(2026, 1, 1)),
    Reportable("ghost_beetle", ("ghost beetle",), date(2026, 1, 1)),
)
GOOD = {
    "record_id": "1",
    "day": "2026-05-10",
    "latitude": str(LAT),
    "longitude": str(LON),
    "pest": "redlegged_earth_mite",
    "status": "present",
    "reporter": "ivy",
}


def settle(store: Store, *, south: bool = False) -> None:
    """Fill a store with one district that lists two invented pests; and one far south of it that lists none."""
    with store.writing() as c:
        network.save_district(c, a_district(reportables=LISTED), SINCE)
        network.save_postcodes(c, [a_postcode()], SINCE)
        network.save_holdings(c, [a_holding()], SINCE)
        network.save_people(c, [a_person(), a_person("ada")])
        network.save_paddocks(c, [a_paddock(place=place(LAT + 0.1, LON, elevation_m=10.0))], SINCE)
        if south:
            network.save_district(c, a_district(id="south", name="South Bank", latitude=-60.0), SINCE)


def csv_of(rows: Sequence[Mapping[str, str]]) -> str:
    """Rows as a plain CSV text; cells are written as they are."""
    names = list(dict.fromkeys(name for row in rows for name in row))
    return "".join(
        ",".join(cells) + "\n" for cells in [names, *([row.get(name, "") for name in names] for row in rows)]
    )


def write(folder: Path, rows: Sequence[Mapping[str, str]] | str, name: str = "observations.csv") -> Path:
    path = folder / name
    path.write_text(rows if isinstance(rows, str) else csv_of(rows), encoding="utf-8", newline="")
    return path


def row(**changes: str) -> dict[str, str]:
    """A row that can be taken, with changes."""
    return GOOD | changes


def take(store: Store, path: Path, **options: Any) -> dict[str, Any]:
    return take_observations(store, path, clock=options.pop("clock", CLOCK), **options)


def all_of(store: Store, district: str = "north") -> list[Observation]:
    with store.reading() as c:
        return observations.read(c, district, NOW)
