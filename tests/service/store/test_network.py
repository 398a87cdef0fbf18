"""The network's tables on both stores: what goes in comes back, and the past stays as it was known."""

from datetime import date, timedelta

import pytest

from service.errors import NotFound
from service.store import network
from service.store.base import Store
from tests.builders import NOW, a_district, a_holding, a_paddock, a_person, a_postcode, a_subscriber


def test_records_come_back_as_they_went_in(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district())
        network.save_postcodes(c, [a_postcode()])
        network.save_holdings(c, [a_holding()])
        network.save_people(c, [a_person()])
        network.save_subscribers(c, [a_subscriber(paddocks=("p1",))])
    with store.reading() as c:
        assert network.get_district(c, "north") == a_district()
        assert network.postcodes(c, "north") == [a_postcode()]
        assert network.holdings(c, "north", date(2026, 1, 1)) == [a_holding()]
        assert network.people(c, "north") == [a_person()]
        assert network.subscribers(c, "north") == [a_subscriber(paddocks=("p1",))]


def test_a_paddock_is_read_as_it_was_known(store: Store) -> None:
    unsown, sown = a_paddock(), a_paddock(crop="canola", sown_on=date(2026, 4, 30), grazed=(date(2026, 4, 1),))
    with store.writing() as c:
        network.save_district(c, a_district())
        network.save_holdings(c, [a_holding()])
        assert network.save_paddocks(c, [unsown], NOW) == 1
        assert network.save_paddocks(c, [unsown], NOW + timedelta(days=1)) == 0
        assert network.save_paddocks(c, [sown], NOW + timedelta(days=2)) == 1
    with store.reading() as c:
        assert network.paddocks(c, "north", NOW - timedelta(seconds=1)) == []
        assert network.paddocks(c, "north", NOW + timedelta(days=1)) == [unsown]
        assert network.paddocks(c, "north", NOW + timedelta(days=2)) == [sown]


def test_an_unknown_district_says_which_there_are(store: Store) -> None:
    with store.writing() as c:
        network.save_district(c, a_district())
    with store.reading() as c, pytest.raises(NotFound, match="there is: north"):
        network.get_district(c, "south")
