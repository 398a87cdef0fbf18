"""Someone who was unsure what they saw has neither found the pest nor looked in vain."""

from tests.service.editions import cast
from tests.service.editions.cast import MITE
from tests.service.editions.goldens import SOWN
from tests.service.editions.plain import printed

UNSURE = {"confidence": "unsure"}


def test_it_is_in_no_count() -> None:
    rows = [cast.look(1, False), cast.look(2, True, **UNSURE), cast.look(3, True, ago=4, **UNSURE)]
    composed = cast.edition(rows, paddocks=cast.fields(p0=SOWN))
    (counted,) = [each for each in composed.statements.values() if each.wording == "looks"]
    assert (counted.figures["finds"], counted.figures["looks"]) == (0, 1)
    assert [row.id for row in counted.evidence] == [rows[0].key]
    own = composed.slips["s1"].own
    assert (own["finds"], own["looks"]) == (0, 1)
    assert "Redlegged earth mites: not found in the one look within 20 km" in printed(cast.said(composed))


def test_it_is_in_no_count_of_the_readers_own_either() -> None:
    own = cast.slip([cast.look(0, True, **UNSURE)], paddocks=cast.fields(p0=SOWN)).own
    assert (own["finds"], own["looks"], own["yours"]) == (0, 0, 0)


def test_one_persons_unsure_finds_are_not_most_of_the_finds() -> None:
    keen = [cast.look(i % 8, True, ago=1 + i, reporter="keen", **UNSURE) for i in range(10)]
    composed = cast.edition([*keen, *(cast.look(i, True, ago=12) for i in range(5))])
    assert "one_reporter" not in {each.wording for each in composed.statements.values()}


def test_it_wakes_no_ask() -> None:
    rows = [cast.look(0, False, ago=4), cast.look(1, True, ago=3, **UNSURE)]
    slip = cast.slip(rows, [cast.hatch()], paddocks=cast.fields(p0=SOWN))
    assert not slip.asks
    assert slip.mind[0].own["pest"] == MITE


def test_it_quiets_no_ask() -> None:
    assert cast.slip([cast.look(0, True, **UNSURE)], [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks
