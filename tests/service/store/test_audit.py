"""The record of who did what and why, on both stores."""

from datetime import timedelta

import pytest

from service.store import audit
from service.store.base import Store
from tests.builders import NOW


def test_entries_are_kept_in_order_and_found_by_subject_and_act(store: Store) -> None:
    with store.writing() as c:
        first = audit.add(
            c, who="ivy", at=NOW, what="hold", subject="s-1", why="same paddock twice", detail={"on": NOW.date()}
        )
        second = audit.add(c, who="tom", at=NOW + timedelta(hours=1), what="sign", subject="e-1", why="read it all")
        assert first < second
    with store.reading() as c:
        assert [entry.number for entry in audit.entries(c)] == [first, second]
        (held,) = audit.entries(c, subject="s-1")
        assert held == audit.Entry(first, NOW, "ivy", "hold", "s-1", "same paddock twice", {"on": "2026-05-12"})
        assert [entry.who for entry in audit.entries(c, what="sign")] == ["tom"]
        assert audit.entries(c, subject="s-1", what="sign") == []


def test_the_same_act_twice_is_two_entries(store: Store) -> None:
    with store.writing() as c:
        numbers = {audit.add(c, who="ivy", at=NOW, what="hold", subject="s-1", why="unsure") for _ in range(2)}
    assert len(numbers) == 2


@pytest.mark.parametrize("missing", [{"who": " "}, {"why": ""}])
def test_nothing_is_recorded_without_a_person_and_a_reason(store: Store, missing: dict[str, str]) -> None:
    values = {"who": "ivy", "why": "unsure"} | missing
    with store.writing() as c, pytest.raises(ValueError, match="who did it and why"):
        audit.add(c, at=NOW, what="hold", subject="s-1", **values)
    with store.reading() as c:
        assert audit.entries(c) == []


def test_what_a_failed_step_recorded_goes_with_the_step(store: Store) -> None:
    def fails() -> None:
        with store.writing() as c:
            audit.add(c, who="ivy", at=NOW, what="sign", subject="e-1", why="read it")
            raise RuntimeError("power failure")

    with pytest.raises(RuntimeError):
        fails()
    with store.reading() as c:
        assert audit.entries(c) == []
