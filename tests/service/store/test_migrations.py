"""The store's shape, step by step, on both stores and with rows in every table that can lose them."""

from collections.abc import Iterator
from typing import Any

import pytest
from sqlalchemy import inspect, select
from sqlalchemy.exc import IntegrityError

from rules.records import Ask
from rules.slip import Edition, Head, Slip, Statement, statement_hash
from service.errors import WrongState
from service.store import editions, network, observations, schema
from service.store.base import Store, metadata
from tests.builders import FOUNDED, NOW, TODAY, a_district, a_holding, a_paddock, a_person, a_subscriber, an_observation


@pytest.fixture
def empty(store_url: str) -> Iterator[Store]:
    opened = Store.open(store_url)
    yield opened
    opened.close()


def fill(store: Store) -> None:
    """Rows in the parents and in their children."""
    name = statement_hash("hatch", "redlegged_earth_mite", Ask.LOOK, "hatch", {"met": 1})
    statement = Statement(name, "hatch", "redlegged_earth_mite", Ask.LOOK, "hatch", {"met": 1})
    edition = Edition(
        "north-2026-W20", "north", "2026-W20", NOW, NOW, "ivy", Head("north-2026-W20", "North Bank", TODAY, 5, False)
    )
    with store.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
        network.save_holdings(c, [a_holding()], FOUNDED)
        network.save_people(c, [a_person()])
        network.save_paddocks(c, [a_paddock(), a_paddock("p2", crop="canola")], NOW)
        network.save_subscribers(c, [a_subscriber(holding="h1", person="ivy"), a_subscriber("s2")])
        observations.add(c, [an_observation()])
        slips = [Slip(id, (), (), (), {}) for id in ("s1", "s2")]
        editions.save_draft(c, edition, [statement], slips, [a_subscriber(), a_subscriber("s2")])


def rows(store: Store) -> dict[str, list[tuple[Any, ...]]]:
    with store.reading() as c:
        return {table.name: sorted(map(tuple, c.execute(select(table))), key=repr) for table in metadata.sorted_tables}


def test_every_row_survives_a_step_back_and_forth(empty: Store) -> None:
    schema.upgrade(empty)
    fill(empty)
    before = rows(empty)
    assert len(before["slip"]) == 2
    schema.migrate(empty, "-1", down=True)
    assert rows(empty) == before
    schema.migrate(empty, "head")
    assert rows(empty) == before


def test_the_newest_shape_is_what_the_code_says(empty: Store) -> None:
    assert schema.current(empty) is None
    schema.upgrade(empty)
    assert schema.differences(empty) == []
    schema.upgrade(empty)  # a second time changes nothing
    assert schema.differences(empty) == []


def test_all_the_way_back_leaves_nothing(empty: Store) -> None:
    schema.upgrade(empty)
    schema.migrate(empty, "base", down=True)
    assert set(inspect(empty.engine).get_table_names()) <= {"alembic_version"}


def test_a_second_revision_holds_what_it_added(empty: Store) -> None:
    """The step back must really take the constraint away, or the test above compares nothing."""
    schema.upgrade(empty)
    with empty.writing() as c:
        network.save_district(c, a_district(), FOUNDED)
    with pytest.raises(IntegrityError), empty.writing() as c:
        network.save_subscribers(c, [a_subscriber(state="elsewhere")])
    schema.migrate(empty, "-1", down=True)
    with empty.writing() as c:
        network.save_subscribers(c, [a_subscriber(state="elsewhere")])


def test_foreign_keys_hold_again_after_a_step(empty: Store) -> None:
    schema.upgrade(empty)
    with pytest.raises(IntegrityError), empty.writing() as c:
        network.save_holdings(c, [a_holding(district="nowhere")], FOUNDED)


def test_a_store_of_a_newer_shape_is_left_alone(empty: Store) -> None:
    schema.upgrade(empty)
    fill(empty)
    with empty.writing() as c:
        c.exec_driver_sql("UPDATE alembic_version SET version_num = '9999'")
    before = rows(empty)
    with pytest.raises(WrongState, match="newer version of this program"):
        schema.upgrade(empty)
    assert rows(empty) == before
