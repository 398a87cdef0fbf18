"""Write the invented network as the plain files that `leafturn take` reads.

network/            who and what there is when the records begin
history/season1,2/  two past seasons: paddocks as sown, observations, weather
season3/2026-Wnn/   what came in since the week before, up to the week's cut-off
"""

from collections import defaultdict
from collections.abc import Iterable
from pathlib import Path

from demo_network import directory, farming, notifiable, observations, paddocks, room, traps, weather
from demo_network.event import Event
from demo_network.farming import World
from demo_network.files import Row, write
from demo_network.network import DISTRICTS
from demo_network.planted import EVENTS, NAMES
from demo_network.seasons import HISTORY, LIVE, SEASONS, arrival_week
from demo_network.streams import row_id

SEED = 20260215
PARTS = ("network", "history", "season3")
ARRIVAL_UNKNOWN = 0.3  # share of the oldest season's rows that came without a note of when they arrived


def build(folder: Path, *, seed: int = SEED, without: frozenset[str] = frozenset()) -> None:
    """Write the whole network into a folder; `without` names planted events to leave out.

    The same seed writes the same bytes. Leaving an event out changes only that event's rows. What an
    earlier build left in the folder is removed.
    """
    unknown = without - NAMES
    if unknown:
        raise ValueError(
            f"no planted event is called {', '.join(sorted(unknown))}; there are {', '.join(sorted(NAMES))}"
        )
    room.make(folder, PARTS)
    world = farming.invent(seed)
    events = tuple(event for event in EVENTS if event.name not in without)
    _network(folder / "network", world)
    _paddocks(folder, world)
    _dated(folder, world, "observations", _observations(world, events))
    _dated(folder, world, "station_days", _station_days(world, events))


def _network(folder: Path, world: World) -> None:
    directory.write_all(folder, world)
    write(folder / "paddocks.csv", "paddocks", paddocks.fallow(world))


def _paddocks(folder: Path, world: World) -> None:
    for year, name in HISTORY.items():
        write(folder / "history" / name / "paddocks.csv", "paddocks", paddocks.as_sown(world, year))
    for week, rows in paddocks.by_week(world).items():
        write(folder / "season3" / week / "paddocks.csv", "paddocks", rows)


def _observations(world: World, events: Iterable[Event]) -> list[Row]:
    """Ordinary and planted rows; where a planted one has an ordinary one's id, it stands in its place."""
    ordinary = [*observations.rows(world), *traps.rows(world), notifiable.row(world)]
    found = {row["record_id"]: row for row in ordinary}
    for event in events:
        found |= {row["record_id"]: row for row in (event.rows(event, world) if event.rows else ())}
    return sorted(found.values(), key=lambda row: (row["arrived_at"], row["record_id"]))


def _station_days(world: World, events: Iterable[Event]) -> list[Row]:
    changes = tuple(event.change(event, world) for event in events if event.change)
    found = weather.rows(world.network, world.seed, changes)
    return sorted(found, key=lambda row: (row["arrived_at"], row["station"], row["day"]))


def _dated(folder: Path, world: World, kind: str, rows: list[Row]) -> None:
    """Past seasons into a file each, the live one into a folder for the week of arrival."""
    past: dict[int, list[Row]] = defaultdict(list)
    live: dict[str, list[Row]] = defaultdict(list)
    for row in rows:
        if row["day"].year < LIVE:
            past[row["day"].year].append(row)
        elif week := arrival_week(row["arrived_at"], _zone(row)):
            live[week].append(row)
    for year, name in HISTORY.items():
        write(folder / "history" / name / f"{kind}.csv", kind, _some_undated(world, year, past[year]))
    for week, some in live.items():
        write(folder / "season3" / week / f"{kind}.csv", kind, some)


def _zone(row: Row) -> str:
    """The zone of the row's district; a mast's id begins with the district's letter."""
    letter = str(row.get("station", "")).partition("-")[0].upper()
    return next(d.zone for d in DISTRICTS.values() if row.get("district") == d.id or d.letter == letter)


def _some_undated(world: World, year: int, rows: list[Row]) -> list[Row]:
    """In the oldest season, some rows have no note of when they arrived."""
    if year != SEASONS[0]:
        return rows
    return [{**row, "arrived_at": None} if _undated(world, row) else row for row in rows]


def _undated(world: World, row: Row) -> bool:
    """Drawn by the row itself, so that no other row's coming or going changes it."""
    name = row.get("record_id") or f"{row['station']}/{row['day']}"
    return int(row_id(world.seed, "undated", str(name))[:6], 16) < ARRIVAL_UNKNOWN * 16**6
