"""Station files: every fault named with its row and remedy, nothing half-taken, corrections as versions."""

from datetime import UTC, date, datetime, timedelta
from pathlib import Path

import pytest

from rules.records import Station, StationDay
from service.clock import SetClock
from service.errors import BadInput
from service.places import place
from service.store import network, weather
from service.store.base import Store
from service.weather import take_station_days
from tests.builders import FOUNDED, LAT, LON, NOW, a_district

LATER = NOW + timedelta(days=3)


@pytest.fixture
def ready(store: Store) -> Store:
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        weather.save_stations(c, [Station("kelp", "north", "Kelp", place(LAT, LON))], FOUNDED)
    return store


def take(store: Store, folder: Path, text: str, at: datetime = NOW, **options) -> dict[str, int]:
    path = folder / "station_days.csv"
    path.write_text(text, encoding="utf-8")
    return take_station_days(store, path, clock=SetClock(at), **options)


def known(store: Store, as_of: datetime = LATER) -> list[StationDay]:
    with store.reading() as c:
        return weather.station_days(c, "north", as_of, date(1900, 1, 1), date(2030, 1, 1))


def test_rows_are_taken_with_missing_values_missing(ready: Store, tmp_path: Path) -> None:
    counts = take(ready, tmp_path, "station,day,tmin,tmax,rain\nkelp,2026-05-01,4.5,16,\nkelp,2026-05-02,,,0\n")
    assert counts == {"rows": 2, "new": 2, "corrected": 0, "same": 0}
    first, second = known(ready)
    assert (first.tmin, first.tmax, first.rain, first.version) == (4.5, 16.0, None, 1)
    assert (second.tmin, second.tmax, second.rain) == (None, None, 0.0)
    assert (first.arrived_at, first.knowable_from, first.arrival_assumed) == (NOW, NOW, False)


def test_taking_twice_changes_nothing_and_other_values_are_a_correction(ready: Store, tmp_path: Path) -> None:
    text = "station,day,tmin,tmax,rain\nkelp,2026-05-01,4.5,16,0\n"
    take(ready, tmp_path, text)
    before = known(ready)
    assert take(ready, tmp_path, text, LATER)["same"] == 1
    assert known(ready) == before
    assert take(ready, tmp_path, text.replace("16,0", "16,7.2"), LATER)["corrected"] == 1
    assert [(day.version, day.rain) for day in known(ready, LATER - timedelta(seconds=1))] == [(1, 0.0)]
    assert [(day.version, day.rain) for day in known(ready)] == [(2, 7.2)]


def test_live_rows_are_knowable_from_now_whatever_arrival_they_state(ready: Store, tmp_path: Path) -> None:
    take(ready, tmp_path, "station,day,rain,arrived_at\nkelp,2026-05-01,1,2026-05-02T09:00+09:30\n")
    (day,) = known(ready)
    assert day.arrived_at == datetime(2026, 5, 1, 23, 30, tzinfo=UTC)
    assert day.knowable_from == NOW


def test_history_is_knowable_from_its_stated_arrival_or_an_assumed_lag(ready: Store, tmp_path: Path) -> None:
    rows = ("kelp,2025-05-01,1,2025-05-04T09:00+09:30", "kelp,2025-05-02,1,", "kelp,2026-05-12,2,")
    take(ready, tmp_path, "\n".join(["station,day,rain,arrived_at", *rows]), history=True)
    stated, assumed, today = known(ready)
    assert stated.knowable_from == stated.arrived_at == datetime(2025, 5, 3, 23, 30, tzinfo=UTC)
    assert not stated.arrival_assumed
    # by hand: 2 May ends in Adelaide (UTC+9:30) at 14:30 UTC; a day later is 3 May 14:30 UTC
    assert assumed.knowable_from == assumed.arrived_at == datetime(2025, 5, 3, 14, 30, tzinfo=UTC)
    assert assumed.arrival_assumed
    assert today.knowable_from == NOW  # what was taken now is known now, however long the lag


def test_a_correction_in_history_is_knowable_from_now(ready: Store, tmp_path: Path) -> None:
    text = "station,day,rain\nkelp,2025-05-01,1\n"
    take(ready, tmp_path, text, history=True)
    take(ready, tmp_path, text.replace(",1\n", ",9\n"), LATER, history=True)
    assert [day.rain for day in known(ready, LATER - timedelta(seconds=1))] == [1.0]
    assert [day.rain for day in known(ready)] == [9.0]


BAD_ROWS = [
    ("kelp,2026-05-01,17,16,0,", "tmin", "above tmax 16"),
    ("kelp,2026-05-01,-30.1,16,0,", "tmin", "from -30 to 60"),
    ("kelp,2026-05-01,5,60.1,0,", "tmax", "from -30 to 60"),
    ("kelp,2026-05-01,5,16,-0.2,", "rain", "from 0 to 500"),
    ("kelp,2026-05-01,5,16,500.1,", "rain", "from 0 to 500"),
    ("kelp,2026-05-01,5,16,nan,", "rain", "leave it empty"),
    ("kelp,2026-05-01,5,16,inf,", "rain", "leave it empty"),
    ("kelp,2026-05-01,5,1_6,0,", "tmax", "from -30 to 60"),
    ("kelp,2026-05-01,five,16,0,", "tmin", "leave it empty"),
    ("kelp,2026-05-13,5,16,0,", "day", "future"),
    ("kelp,0026-05-01,5,16,0,", "day", "1850"),
    ("kelp,01/05/2026,5,16,0,", "day", "YYYY-MM-DD"),
    ("kelp,,5,16,0,", "day", "empty"),
    ("klep,2026-05-01,5,16,0,", "station", "did you mean kelp"),
    (",2026-05-01,5,16,0,", "station", "empty"),
    ("kelp,2026-05-01,5,16,0,2026-05-02T09:00", "arrived_at", "offset"),
    ("kelp,2026-05-01,5,16,0,2026-05-14T09:00Z", "arrived_at", "future"),
    ("kelp,2026-05-01,5,16,0,2026-04-29T09:00Z", "arrived_at", "before the day"),
]


def test_a_bad_row_is_named_and_nothing_is_taken(ready: Store, tmp_path: Path) -> None:
    for row, field, remedy in BAD_ROWS:
        text = f"station,day,tmin,tmax,rain,arrived_at\nkelp,2026-04-30,5,16,0,\n{row}\n"
        with pytest.raises(BadInput) as caught:
            take(ready, tmp_path, text)
        assert [(refusal.row, refusal.field) for refusal in caught.value.refusals] == [(3, field)], row
        assert remedy in caught.value.refusals[0].remedy, row
    assert known(ready) == []


def test_the_limits_themselves_are_taken(ready: Store, tmp_path: Path) -> None:
    text = "station,day,tmin,tmax,rain\nkelp,2026-05-01,-30,60,500\nkelp,2026-05-02,8,8,0\nkelp,2026-05-12,1,2,3\n"
    assert take(ready, tmp_path, text)["new"] == 3


def test_the_future_begins_with_the_district_not_with_greenwich(ready: Store, tmp_path: Path) -> None:
    evening = datetime(2026, 5, 12, 15, 0, tzinfo=UTC)  # 00:30 on 13 May in Adelaide (UTC+9:30)
    assert take(ready, tmp_path, "station,day,rain\nkelp,2026-05-13,0\n", evening)["new"] == 1


def test_a_day_given_twice_is_refused_with_the_row_of_the_first(ready: Store, tmp_path: Path) -> None:
    with pytest.raises(BadInput) as caught:
        take(ready, tmp_path, "station,day,rain\nkelp,2026-05-01,1\nkelp,2026-05-02,1\nkelp, 2026-05-01 ,2\n")
    (refusal,) = caught.value.refusals
    assert (refusal.row, refusal.field) == (4, "day")
    assert "row 2" in refusal.remedy
    assert known(ready) == []


def test_all_faults_of_a_file_are_named_at_once(ready: Store, tmp_path: Path) -> None:
    with pytest.raises(BadInput) as caught:
        take(ready, tmp_path, "station,day,tmin,rain\nkelp,2026-05-01,99,-1\nkelp,x,5,0\n")
    assert [(refusal.row, refusal.field) for refusal in caught.value.refusals] == [(2, "tmin"), (2, "rain"), (3, "day")]
    assert "3 to mend" in str(caught.value)
