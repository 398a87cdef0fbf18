"""What comes first, what fits into a week, and what is only kept in mind."""

from datetime import timedelta

from rules.records import Ask
from service.editions.privacy import DISTRICT, OWN, Near
from service.editions.rank import Bundle, Candidate, choose, merge, score
from service.editions.stands import Stand
from tests.builders import TODAY

CANOLA = Stand("canola", "reported", "p0", 11)


def candidate(
    pest: str = "mites", ask: Ask = Ask.LOOK, near: Near = OWN, ago: int = 1, name: str = "a", wording: str = "hatch"
) -> Candidate:
    return Candidate(name, wording, pest, ask, near, TODAY - timedelta(days=ago))


def bundle(pest: str, ask: Ask = Ask.LOOK, points: float = 1.0) -> Bundle:
    return Bundle(pest, ask, points, (CANOLA,), (candidate(pest, ask),))


def test_nearer_surer_and_newer_come_first() -> None:
    best = score(Near(5, "north"), "reported", 1)
    assert best > score(Near(10, "north"), "reported", 1) > score(Near(20, "north"), "reported", 1)
    assert best > score(Near(5, "north"), "sown", 1) > score(Near(5, "north"), "unknown", 1)
    assert best > score(Near(5, "north"), "reported", 8) > score(Near(5, "north"), "reported", 30)


def test_the_score_is_a_product() -> None:
    # By hand from the weights: 0.7 (5 to 10 km) × 0.8 (sown) × 0.7 (8 to 14 days old).
    assert abs(score(Near(10, "east"), "sown", 10) - 0.392) < 1e-12


def test_signals_of_one_pest_are_one_card_and_the_strongest_ask_wins() -> None:
    both = [candidate(ask=Ask.LOOK, name="a"), candidate(ask=Ask.COUNT, name="b", ago=9)]
    (merged,) = merge(both, {"mites": [CANOLA]}, TODAY)
    assert merged.ask is Ask.COUNT
    assert [each.statement for each in merged.candidates] == ["b", "a"]
    assert merged.score == score(OWN, "reported", 1)  # the newer one's


def test_a_pest_without_a_crop_at_risk_has_no_card() -> None:
    assert merge([candidate()], {"mites": []}, TODAY) == []


def test_the_order_does_not_depend_on_the_order_given() -> None:
    many = [candidate(pest, near=near, name=pest) for pest, near in zip("abcd", (OWN, DISTRICT, OWN, OWN), strict=True)]
    stands = {pest: [CANOLA] for pest in "abcd"}
    assert merge(many, stands, TODAY) == merge(many[::-1], stands, TODAY)
    assert [each.pest for each in merge(many, stands, TODAY)] == ["a", "c", "d", "b"]


def test_at_most_three_asks() -> None:
    asks, mind = choose([bundle(pest) for pest in "abcd"], dict.fromkeys("abcd", 10))
    assert [each.pest for each in asks] == ["a", "b", "c"]
    assert [each.pest for each in mind] == ["d"]


def test_at_most_45_minutes_and_a_shorter_look_may_still_fit() -> None:
    asks, mind = choose([bundle(pest) for pest in "abc"], {"a": 30, "b": 20, "c": 15})
    assert [each.pest for each in asks] == ["a", "c"]
    assert [each.pest for each in mind] == ["b"]


def test_keep_in_mind_takes_no_time() -> None:
    asks, mind = choose([bundle("a", Ask.KEEP_IN_MIND), bundle("b")], {"a": 40, "b": 45})
    assert [each.pest for each in asks] == ["b"]
    assert [each.pest for each in mind] == ["a"]


def test_between_equals_the_one_that_says_more_goes_first_whatever_their_names() -> None:
    for one, other in (("a", "b"), ("b", "a")):
        both = [candidate(name=one, wording="counted_near"), candidate(name=other, wording="first_seen")]
        (merged,) = merge(both, {"mites": [CANOLA]}, TODAY)
        assert [each.wording for each in merged.candidates] == ["first_seen", "counted_near"]
