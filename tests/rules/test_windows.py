"""The first find of a season against the looking behind it."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.windows import first_of_season


def past(seasons=5, weeks=4, classes=1, looks=10, finds=0):
    shape = (seasons, weeks, classes)
    return np.full(shape, finds), np.full(shape, looks)


def test_worked_season():
    # by hand: one past season, weeks 0-2, one class, 10 looks each, finds 0, 0, 6. Season (6 + .5) / 31 = .209677.
    # Week 0 with week 1: (0 + 2 x .209677) / 22 = .0190616; shrunk again: (0 + 10 x .0190616) / 20 = .0095308.
    # Week 1 with both: (6 + .419355) / 32 = .200605; again: 2.00605 / 20 = .100302.
    # Two looks in week 0, one in week 1: 1 - (1 - .0095308)² x (1 - .100302) = .117370
    finds = np.array([[[0], [0], [6]]])
    looks = np.full((1, 3, 1), 10)
    got = first_of_season(finds, looks, 8, [0, 6, 7, 9], [0, 0, 0, 0])
    assert got.chance == pytest.approx(0.117370, abs=2e-6)
    assert (got.seasons, got.looks) == (1, 3)


def test_earlier_than_usual_needs_a_small_chance_and_four_seasons():
    finds, looks = past(seasons=4, looks=50)
    finds[:, 3] = 20
    assert first_of_season(finds, looks, 0, [0], [0]).earlier_than_usual()
    assert not first_of_season(finds[:3], looks[:3], 0, [0], [0]).earlier_than_usual()
    assert not first_of_season(finds, looks, 27, [0, 21, 27], [0, 0, 0]).earlier_than_usual()


def test_many_looks_make_an_early_find_less_telling():
    finds, looks = past(looks=40)
    finds[:, 1:] = 10
    few, many = (first_of_season(finds, looks, 6, [3] * n, [0] * n).chance for n in (2, 40))
    assert few < 0.10 < many


def test_without_past_or_present_looks_nothing_is_claimed():
    none = first_of_season(*past(looks=0), 10, [3], [0])
    assert none == (None, 0, 1)
    assert first_of_season(*past(), 10, [11], [0]) == (None, 5, 0)
    assert not none.earlier_than_usual()


def test_seasons_that_nobody_looked_in_by_then_do_not_count():
    finds, looks = past(seasons=6)
    looks[:3, 0] = 0
    assert first_of_season(finds, looks, 6, [0], [0]).seasons == 3
    assert first_of_season(finds, looks, 7, [0], [0]).seasons == 6


def test_a_class_that_finds_more_weighs_more():
    finds, looks = past(classes=2, looks=50)
    finds[:, :, 1] = 25
    routine, damage = (first_of_season(finds, looks, 3, [1], [c]).chance for c in (0, 1))
    assert routine < damage


def test_unusable_input_is_named():
    finds, looks = past()
    for args, says in (
        ((finds, looks[:, :2], 3, [1], [0]), "one shape"),
        ((looks + 1, looks, 3, [1], [0]), "between 0 and looks"),
        ((finds, looks, 3, [1], [0, 0]), "one class a look"),
        ((finds, looks, 40, [35], [0]), "4 weeks"),
        ((finds, looks, 3, [1], [1]), "1 classes"),
    ):
        with pytest.raises(ValueError, match=says):
            first_of_season(*args)


@given(st.integers(0, 2**32 - 1), st.integers(0, 27))
def test_always(seed, day):
    rng = np.random.default_rng(seed)
    looks = rng.integers(0, 12, (5, 4, 3))
    finds = rng.binomial(looks, 0.3)
    days, classes = rng.integers(0, 28, 15), rng.integers(0, 3, 15)
    got = first_of_season(finds, looks, day, days, classes)
    later = first_of_season(finds, looks, day + 1, days, classes)
    order = rng.permutation(15)
    assert first_of_season(finds, looks, day, days[order], classes[order]) == pytest.approx(got)
    if got.chance is not None:
        assert 0 < got.chance < 1
        assert later.chance >= got.chance - 1e-12
        more = first_of_season(finds, looks, day, [*days, day], [*classes, 0])
        assert more.chance > got.chance
        quieter = first_of_season(finds, looks, day, [*days, 27], [*classes, 0])
        assert day == 27 or quieter == got
