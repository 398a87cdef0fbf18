"""The network's tables on both stores: what goes in comes back, and the past stays as it was known."""

from collections.abc import Callable
from datetime import date, datetime, timedelta
from typing import Any

import pytest
from sqlalchemy import Connection
from sqlalchemy.exc import IntegrityError

from service.errors import NotFound
from service.places import place
from service.store import network
from service.store.base import Store
from tests.builders import FOUNDED, LAT, LON, NOW, a_district, a_holding, a_paddock, a_person, a_postcode, a_subscriber


def test_records_come_back_as_they_went_in(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_postcodes(c, [a_postcode()], FOUNDED)
        network.save_holdings(c, [a_holding()], FOUNDED)
        network.save_people(c, [a_person()])
        network.save_subscribers(c, [a_subscriber(paddocks=("p1",))])
    with store.reading() as c:
        assert network.get_district(c, "north", NOW) == a_district()
        assert network.postcodes(c, "north", NOW) == [a_postcode()]
        assert network.holdings(c, "north", NOW, date(2026, 1, 1)) == [a_holding()]
        assert network.people(c, "north") == [a_person()]
        assert network.subscribers(c, "north") == [a_subscriber(paddocks=("p1",))]


Save = Callable[[Connection, Any, datetime], int]
Read = Callable[[Connection, datetime], list[Any]]


def _save_district(c: Connection, records: list[Any], at: datetime) -> int:
    return sum(network.save_district(c, record, at) for record in records)


VERSIONED = {
    "district": (_save_district, network.districts, a_district(), a_district(holdings_to_hide=7)),
    "postcode": (
        network.save_postcodes,
        lambda c, at: network.postcodes(c, "north", at),
        a_postcode(),
        a_postcode(place=place(LAT + 1, LON)),
    ),
    "holding": (
        network.save_holdings,
        lambda c, at: network.holdings(c, "north", at, date(2026, 2, 15)),
        a_holding(),
        a_holding(registered_on=date(2021, 1, 1)),
    ),
    "paddock": (
        network.save_paddocks,
        lambda c, at: network.paddocks(c, "north", at),
        a_paddock(),
        a_paddock(crop="canola", grazed=(date(2026, 4, 1),)),
    ),
}


@pytest.mark.parametrize(("save", "read", "first", "second"), VERSIONED.values(), ids=VERSIONED)
def test_a_change_is_added_and_the_past_stays_as_it_was_known(
    store: Store, save: Save, read: Read, first: Any, second: Any
) -> None:
    taken, again, changed, back = (NOW + timedelta(days=n) for n in range(4))
    with store.writing() as c:
        network.save_district(c, a_district(), taken)
        network.save_holdings(c, [a_holding()], taken)
        save(c, [first], taken)
        before = _rows(c)
        assert save(c, [first], again) == 0
        assert _rows(c) == before
        assert save(c, [second], changed) == 1
        assert save(c, [first], back) == 1  # the first values again are a change like any other
        assert len(_rows(c) - before) == 2
        assert before < _rows(c), "nothing is overwritten"
    with store.reading() as c:
        moments = (taken - timedelta(seconds=1), taken, again, changed, changed + timedelta(hours=1), back)
        assert [read(c, at) for at in moments] == [[], [first], [first], [second], [second], [first]]


def test_a_change_is_never_known_before_what_it_changes(store: Store) -> None:
    """A clock that was set back must not put a newer version under an older moment."""
    earlier = NOW - timedelta(days=1)
    with store.writing() as c:
        network.save_district(c, a_district(), NOW)
        network.save_district(c, a_district(name="South Bank"), earlier)
    with store.reading() as c:
        assert network.districts(c, earlier) == []
        assert network.get_district(c, "north", NOW).name == "South Bank"


def test_of_one_thing_given_twice_the_last_counts(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), NOW)
        assert network.save_postcodes(c, [a_postcode(), a_postcode(name="Kelp Point")], NOW) == 2
        assert network.postcodes(c, "north", NOW) == [a_postcode(name="Kelp Point")]


def test_a_holding_counts_from_the_day_it_was_known_to_be_registered(store: Store) -> None:
    """By hand: the season opens on 15 February; h2's date is first given as March, then mended to January."""
    opening, mended = date(2026, 2, 15), NOW + timedelta(days=1)
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_holdings(c, [a_holding("h1"), a_holding("h2", registered_on=date(2026, 3, 1))], FOUNDED)
        network.save_holdings(c, [a_holding("h2", registered_on=date(2026, 1, 1))], mended)
    with store.reading() as c:
        assert [each.id for each in network.holdings(c, "north", NOW, opening)] == ["h1"]
        assert [each.id for each in network.holdings(c, "north", mended, opening)] == ["h1", "h2"]


def test_nothing_refers_to_what_is_not_there(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), NOW)
    for record in (a_paddock(holding="h9"), a_paddock(district="nowhere")):
        with pytest.raises(IntegrityError), store.writing() as c:
            network.save_paddocks(c, [record], NOW)
    with pytest.raises(IntegrityError), store.writing() as c:
        network.save_postcodes(c, [a_postcode(district="nowhere")], NOW)


def test_a_district_says_since_when_it_is_known(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), NOW)
        network.save_district(c, a_district(name="South Bank"), NOW + timedelta(days=1))
    with store.reading() as c, pytest.raises(NotFound, match="'north' is known since 2026-05-12 02:00 UTC"):
        network.get_district(c, "north", NOW - timedelta(seconds=1))


def _rows(c: Connection) -> set[tuple[str, str]]:
    """Every row of the network, as text."""
    tables = (network.district_version, network.postcode, network.holding_version, network.paddock)
    return {(table.name, repr(tuple(row))) for table in tables for row in c.execute(table.select())}


def test_an_unknown_district_says_which_there_are(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
    with store.reading() as c, pytest.raises(NotFound, match="there is: north"):
        network.get_district(c, "south", NOW)
