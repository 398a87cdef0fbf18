"""Back along the trail, and no peeking: what was signed is said again from its rows, whatever came later."""

from dataclasses import replace
from datetime import datetime, timedelta
from typing import Any

import pytest
from sqlalchemy import text

from rules.records import Observation, Paddock, StationDay
from service import pipeline
from service.clock import SetClock
from service.errors import NotFound
from service.settings import Settings
from service.store import editions, network, observations
from service.store import weather as weather_store
from service.store.base import Store
from tests import small_network

ID = "north-2026-W20"
READERS = 7


def test_a_sentence_leads_back_to_its_rows(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    found = pipeline.trail(full, ID, "s1", sentence="hatch needs")
    assert found["equal"], found["compared"]
    (hatch,) = found["sentences"][:1]
    assert hatch["figures"]["rain_mm"] == pytest.approx(9.0)
    assert any("redlegged_earth_mite" in rule for rule in hatch["rules"])
    stations = {row["id"].partition("/")[0] for row in hatch["rows"]}
    assert stations == {"buoy1", "buoy2"}
    assert all(row["now"] == "same" and row["km"] > 0 for row in hatch["rows"])
    counted = pipeline.trail(full, ID, "s1", sentence="Kittiwake 1")["sentences"]
    assert "csv:1" in {row["id"] for each in counted for row in each.get("rows", [])}


def test_every_digest_is_said_again_to_equal_bytes(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    clock.set(small_network.CUT_OFF + timedelta(days=30))
    for i in range(1, READERS + 1):
        found = pipeline.trail(full, ID, f"s{i}")
        assert found["equal"], found["compared"]


@pytest.mark.parametrize(
    ("change", "named"),
    [
        ("UPDATE observation SET spot_counts = '1;1;1;1;1;1;1;1' WHERE key = 'csv:1'", "csv:1"),
        ("UPDATE observation SET note = 'quietly added' WHERE key = 'csv:2'", "csv:2"),
        ("UPDATE station_day SET rain = 8.5 WHERE station = 'buoy1' AND day = '2026-04-12'", "buoy1/2026-04-12"),
        ("DELETE FROM observation WHERE key = 'csv:2'", "csv:2"),
        ("UPDATE paddock SET up_on = NULL WHERE id = 'p1'", "p1"),
    ],
)
def test_one_altered_row_is_found_and_named(
    full: Store, settings: Settings, clock: SetClock, change: str, named: str
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        assert c.execute(text(change)).rowcount == 1
    found = pipeline.trail(full, ID, "s1")
    assert not found["equal"]
    assert named in {row["id"] for row in found["altered_rows"]}


def test_an_altered_statement_is_found(full: Store, settings: Settings, clock: SetClock) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        hatch = next(each for each in editions.statements(c, ID).values() if each.kind == "hatch")
        body = "SELECT body FROM statement WHERE hash = :hash"
        kept = c.execute(text(f"SELECT CAST(({body}) AS TEXT)"), {"hash": hatch.hash}).scalar_one()
        other = kept.replace('"rain_mm": 9.0', '"rain_mm": 19.0')
        assert other != kept
        cast = ":body" if full.is_sqlite else "CAST(:body AS JSON)"
        c.execute(text(f"UPDATE statement SET body = {cast} WHERE hash = :hash"), {"hash": hatch.hash, "body": other})
    assert pipeline.trail(full, ID, "s1")["altered_statements"] == [hatch.hash]


def test_a_deleted_reader_leaves_no_trail_and_the_trail_says_so(
    full: Store, settings: Settings, clock: SetClock
) -> None:
    pipeline.draft(full, "north", clock=clock)
    pipeline.sign(full, settings, ID, by="ivy", clock=clock)
    with full.writing() as c:
        editions.delete_reader(c, "s2")
    with pytest.raises(NotFound, match="deleted"):
        pipeline.trail(full, ID, "s2")


# --- no peeking ---------------------------------------------------------------------------------


def test_rows_knowable_later_change_nothing_of_a_draft(full: Store, clock: SetClock) -> None:
    """Rows are appended and altered (new versions) after the cut-off; the draft of that moment stays as it was."""
    before = _drafted(full, clock)
    _add_later_rows(full)
    assert _drafted(full, clock) == before
    clock.set(small_network.CUT_OFF + timedelta(days=3))
    assert _drafted(full, clock) != before, "the later rows must matter once they are knowable"


def _drafted(store: Store, clock: SetClock) -> tuple[object, ...]:
    pipeline.draft(store, "north", clock=clock)
    with store.reading() as c:
        kept = [each for piece in editions.slips(c, ID) for each in piece]
        return editions.statements(c, ID), [slip for slip, _ in kept], pipeline.run_rules(store, "north", clock=clock)


def _add_later_rows(store: Store) -> None:
    later = small_network.CUT_OFF + timedelta(days=1)
    fields = small_network.paddocks()
    new = [small_network.look(f"csv:9{i}", fields[i], "grower2", found=True, counts=(500.0,) * 8) for i in range(6)]
    altered = small_network.look("csv:1", fields[0], "grower1", found=False)
    with store.writing() as c:
        observations.add(c, [_at_time(each, later) for each in new])
        observations.add(c, [_at_time(altered, later, version=2)])
        wetter = [each for each in small_network.station_days() if each.day.month == 4]
        weather_store.add_station_days(c, [_corrected(each, later) for each in wetter])
        network.save_paddocks(c, [_resown(each) for each in fields], later)


def _at_time(row: Observation, at: datetime, **more: Any) -> Observation:
    return replace(row, arrived_at=at, knowable_from=at, **more)


def _corrected(day: StationDay, at: datetime) -> StationDay:
    changed = replace(day, version=2, tmin=2.0, tmax=9.0, rain=40.0, arrived_at=at, knowable_from=at)
    return replace(changed, digest=weather_store.content_digest(changed))


def _resown(field: Paddock) -> Paddock:
    return replace(field, crop="wheat", up_on=None, seed_dressing=True)
