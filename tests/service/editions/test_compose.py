"""Who is told what: relevance, stages, quiet, merging, effort, and what may not change an edition."""

from dataclasses import replace
from datetime import date, timedelta
from typing import Any

import pytest

from rules.digests import canonical
from rules.records import Ask, Effort, Evidence
from service.editions.compose import compose
from tests.builders import NOW, TODAY, a_holding, a_paddock, a_postcode
from tests.service.editions import cast
from tests.service.editions.cast import CUTWORM, FLEA, MITE
from tests.service.editions.plain import printed

SOWN: dict[str, Any] = {"crop": "canola", "sown_on": date(2026, 4, 20)}


def pests(lines: tuple, statements: Any) -> list[str]:
    return [statements[line.statements[0]].pest for line in lines if line.statements]


# --- what reaches whom ----------------------------------------------------------------------------


def test_a_hatch_reaches_the_readers_own_cells_only() -> None:
    here, there = cast.at(*cast.FARMS[0]).cell, cast.at(*cast.FARMS[4]).cell
    away = {"9001": a_postcode(place=cast.at(30, 30))}
    assert cast.slip(signals=[cast.hatch(cells=(here,))], postcodes=away).asks
    assert not cast.slip(signals=[cast.hatch(cells=(there,))], postcodes=away).asks


def test_a_hatch_reaches_a_reader_by_postcode() -> None:
    code = {"9001": a_postcode(place=cast.at(30, 30))}
    slip = cast.slip(signals=[cast.hatch(cells=(cast.at(30, 30).cell,))], postcodes=code)
    assert slip.asks[0].own["near"] == ["own"]


def test_the_owner_gets_the_count_and_a_neighbour_only_a_look() -> None:
    readers = [cast.reader("owner"), cast.reader("other", paddocks=("p1",), person="person1")]
    composed = cast.edition([cast.look(0, True)], [cast.threshold(0)], readers)
    (own,), (other,) = composed.slips["owner"].asks, composed.slips["other"].asks
    counted, near = composed.statements[own.statements[0]], composed.statements[other.statements[0]]
    assert (counted.ask, counted.figures["mean"]) == (Ask.COUNT, 12.4)
    assert (near.ask, set(near.figures)) == (Ask.LOOK, {"spot"})


@pytest.mark.parametrize("verdict", ["below", "near", "at_or_above", "no_agreed_number"])
def test_a_neighbour_is_asked_alike_whatever_the_verdict(verdict: str) -> None:
    """Which number a count meets would tell in which crop it was made."""
    other = cast.reader(paddocks=("p1",), person="person1")
    slips = [cast.slip(signals=[cast.threshold(0, v)], readers=[other]) for v in (verdict, "at_or_above")]
    assert slips[0] == slips[1]


def test_a_count_of_nothing_is_no_find_for_others() -> None:
    counted = cast.threshold(0, "below", figures={"mean": 0.0})
    slip = cast.slip(signals=[counted], readers=[cast.reader(paddocks=("p1",), person="person1")])
    assert not slip.asks
    assert not slip.mind


def test_a_first_find_far_off_is_kept_in_mind_and_near_is_asked() -> None:
    row = cast.look(1, True)
    near = cast.slip([row], [cast.first_seen(row)])
    assert near.asks[0].own["near"] == [[5, None, 10]]
    code = {"9001": a_postcode(place=cast.at(80, 0))}
    far = cast.slip([row], [cast.first_seen(row)], readers=[cast.reader(paddocks=())], postcodes=code)
    assert not far.asks
    assert far.mind[0].own["near"] == [None]


def test_first_finds_of_one_day_are_each_told_from_their_own_place() -> None:
    """Eight farms here and five 60 km north; found in both on one day, named here first."""
    north = [a_paddock(f"q{i}", holding=f"n{i}", place=cast.at(60 + i / 10, 0)) for i in range(5)]
    holdings = [*cast.farms(), *(a_holding(f"n{i}") for i in range(5))]
    rows = [cast.look(1, True), cast.look(2, True, place=north[0].place, paddock="q0")]
    both = cast.first_seen(rows[0], evidence=tuple(Evidence("observation", row.key, 1, row.digest) for row in rows))
    readers = [cast.reader("here"), cast.reader("north", paddocks=("q1",), person=None)]
    slips = cast.edition(rows, [both], readers, paddocks=[*cast.fields(), *north], holdings=holdings).slips
    assert [slip.asks[0].own["near"][0][0] for slip in slips.values()] == [5, 5]


def test_a_find_of_the_readers_on_anothers_place_is_not_on_their_own() -> None:
    row = cast.look(1, True, reporter="person0")
    assert cast.slip([row], [cast.first_seen(row)]).asks[0].own["near"] == [[5, None, 10]]
    assert cast.slip([row], [cast.first_seen(row)], readers=[cast.reader(paddocks=("p1",))]).asks[0].own["near"] == [
        "own"
    ]


def test_a_pest_that_no_crop_of_the_readers_minds_is_not_mentioned() -> None:
    row = cast.look(1, True, pest=CUTWORM)  # the catalogue names no risk in pasture
    fields = cast.fields(p0={"crop": "pasture"})
    slip = cast.slip([row], [cast.first_seen(row)], paddocks=fields, readers=[cast.reader(crops=("pasture",))])
    assert (slip.asks, slip.mind, slip.around) == ((), (), ())


# --- crop stages -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("paddock", "expected"),
    [
        ({"crop": "canola"}, "unknown"),
        (SOWN, "sown"),
        (SOWN | {"up_on": date(2026, 5, 1)}, "up"),
        ({"crop": "canola", "sown_on": TODAY + timedelta(days=3)}, "before"),
        ({"crop": "pasture"}, "any"),
        # Days of last season's crop; this season opened on 15 February.
        ({"crop": "canola", "sown_on": date(2025, 4, 20), "up_on": date(2025, 5, 2)}, "unknown"),
        ({"crop": "lucerne", "sown_on": date(2023, 4, 20), "up_on": date(2023, 5, 2)}, "up"),
    ],
)
def test_how_far_a_crop_is_known_to_be_grown(paddock: dict[str, Any], expected: str) -> None:
    slip = cast.slip(signals=[cast.hatch()], paddocks=cast.fields(p0=paddock), readers=[cast.reader(crops=())])
    assert slip.asks[0].own["at"] == expected


def test_a_paddock_whose_crop_nobody_entered_has_the_one_reported() -> None:
    fields = cast.fields(p0={"crop": None})
    reported = cast.look(0, True, crop="lentil", ago=9)
    slip = cast.slip([reported], [cast.hatch()], paddocks=fields, readers=[cast.reader(crops=())])
    assert slip.asks[0].own["crop"] == "lentil"


def test_a_reported_stage_counts_for_fourteen_days() -> None:
    fields = cast.fields(p0=SOWN)
    fresh = cast.look(0, True, ago=14, stage=12)
    stale = cast.look(0, True, ago=15, stage=12)
    assert cast.slip([fresh], [cast.hatch()], paddocks=fields).asks[0].own["code"] == 12
    assert cast.slip([stale], [cast.hatch()], paddocks=fields).asks[0].own["at"] == "sown"


def test_outside_the_risk_range_there_is_no_ask() -> None:
    # The catalogue: redlegged earth mites matter to canola from BBCH 9 to 15.
    fields = cast.fields(p0=SOWN)
    at = {code: cast.slip([cast.look(0, True, stage=code)], [cast.hatch()], paddocks=fields) for code in (15, 16)}
    assert at[15].asks
    assert not at[16].asks
    assert not at[16].mind


def test_a_crop_reported_below_the_ground_is_not_up() -> None:
    slip = cast.slip([cast.look(0, False, ago=9, stage=5)], [cast.hatch()], paddocks=cast.fields(p0=SOWN))
    assert slip.asks[0].own["at"] == "before"


def test_one_paddock_at_risk_is_enough() -> None:
    fields = [*cast.fields(p0=SOWN), a_paddock("p9", holding="h0", place=cast.at(0, 1), crop="wheat")]
    grown = cast.look(0, True, stage=30)
    slip = cast.slip([grown], [cast.hatch()], paddocks=fields, readers=[cast.reader(paddocks=("p0", "p9"))])
    assert slip.asks[0].own["crop"] == "wheat"


# --- looked, none ---------------------------------------------------------------------------------


def test_a_look_without_a_find_quiets_the_ask_for_its_re_look_interval() -> None:
    fields = cast.fields(p0=SOWN)
    quiet = cast.slip([cast.look(0, False, ago=6)], [cast.hatch()], paddocks=fields)
    assert not quiet.asks
    assert quiet.mind[0].own == {"pest": MITE, "until": "2026-05-13"}  # looked on 6 May, and 7 days
    assert cast.slip([cast.look(0, False, ago=7)], [cast.hatch()], paddocks=fields).asks


def test_the_re_look_interval_is_the_pests_own_and_never_more_than_a_week() -> None:
    mite = cast.BOOK.pests[MITE]
    for days, ago, quiet in ((3, 2, True), (3, 3, False), (30, 6, True), (30, 7, False)):
        entry = replace(mite, relook_days=replace(mite.relook_days, value=days))
        book = replace(cast.BOOK, pests=cast.BOOK.pests | {MITE: entry})
        known = cast.district([cast.look(0, False, ago=ago)], paddocks=cast.fields(p0=SOWN))
        asks = compose(known, [cast.hatch()], book, [cast.reader()]).slips["s1"].asks
        assert bool(asks) != quiet, (days, ago)


def test_only_that_pest_is_quieted() -> None:
    row = cast.look(0, False, ago=1, pest=FLEA)
    assert cast.slip([row], [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks


def test_a_new_find_near_wakes_it() -> None:
    rows = [cast.look(0, False, ago=4), cast.look(1, True, ago=3)]
    assert cast.slip(rows, [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks


def test_an_older_find_near_does_not() -> None:
    rows = [cast.look(0, False, ago=4), cast.look(1, True, ago=5)]
    assert not cast.slip(rows, [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks


def test_rain_that_starts_activity_wakes_it() -> None:
    later = cast.hatch(figures={"met_day": "2026-05-10"})
    assert cast.slip([cast.look(0, False, ago=4)], [later], paddocks=cast.fields(p0=SOWN)).asks


def test_a_new_stage_wakes_it() -> None:
    grown = cast.look(0, False, ago=1, pest=FLEA, stage=12)
    none = cast.look(0, False, ago=4, stage=11)
    assert cast.slip([none, grown], [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks
    assert not cast.slip([none], [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks


def test_a_look_elsewhere_quiets_nothing_here() -> None:
    row = cast.look(1, False, ago=1, reporter="person0")
    assert cast.slip([row], [cast.hatch()], paddocks=cast.fields(p0=SOWN)).asks


def test_a_look_that_names_no_paddock_quiets_only_near_home() -> None:
    fields = cast.fields(p0=SOWN)
    there = [cast.look(0, False, ago=1, paddock=None, place=cast.at(km, 0)) for km in (4, 6)]
    assert not cast.slip([there[0]], [cast.hatch()], paddocks=fields).asks
    assert cast.slip([there[1]], [cast.hatch()], paddocks=fields).asks


def test_an_advisers_look_at_a_clients_quiets_nothing_at_home() -> None:
    """The adviser takes the digest for a postcode, with no paddock of their own; p1 is a client's."""
    row = cast.look(1, False, ago=1, reporter="person0")
    for holding, quiet in ((None, False), ("h0", False), ("h1", True)):
        adviser = cast.reader(paddocks=(), holding=holding)
        here = {"9001": a_postcode(place=cast.at(0, 0))}
        slip = cast.slip([row], [cast.hatch(cells=(cast.at(0, 0).cell,))], readers=[adviser], postcodes=here)
        assert bool(slip.asks) != quiet


# --- effort ----------------------------------------------------------------------------------------


def wordings(composed: Any) -> set[str]:
    return {statement.wording for statement in composed.statements.values()}


def test_most_finds_from_one_person_are_said_to_be() -> None:
    finds = [cast.look(i, True, ago=ago, reporter="keen") for i, ago in ((1, 2), (2, 2), (3, 3), (4, 3))]
    finds += [cast.look(5, True), cast.look(6, True)]
    composed = cast.edition(finds)  # 4 of 6 = 67 %
    (one,) = [s for s in composed.statements.values() if s.wording == "one_reporter"]
    assert one.figures == {"days": 14, "finds": 6, "by_one": 4}
    assert one.hash in composed.slips["s1"].around[0].statements
    assert "one_reporter" not in wordings(cast.edition([*finds, cast.look(7, True)]))  # 4 of 7 = 57 %
    three_of_five = [*finds[:3], cast.look(5, True), cast.look(6, True)]  # 60 %, which is not more than 60 %
    assert "one_reporter" not in wordings(cast.edition(three_of_five))
    assert "one_reporter" not in wordings(cast.edition(finds[:4]))  # four finds are too few


def usual(weeks: int = 5, a_week: int = 2, finds: bool = True) -> list:
    """Two looks a week before the last fortnight; every other one a find."""
    return [cast.look(i, finds and i == 1, ago=14 + 7 * w) for w in range(weeks) for i in range(1, 1 + a_week)]


def test_more_looking_with_no_more_finds_is_said_to_be() -> None:
    busy = [cast.look(i, i < 4, ago=3) for i in range(8)]
    composed = cast.edition([*busy, *usual()])
    (more,) = [s for s in composed.statements.values() if s.wording == "more_looking"]
    assert more.figures == {
        "looks": 8,
        "finds": 4,
        "usual_looks": 2.0,
        "weeks": 5,
        "earlier_looks": 10,
        "earlier_finds": 5,
    }


def test_a_few_more_looks_than_usual_are_no_news() -> None:
    # By hand: usually 2 a week, so from max(2 × 2, 2 + 3√2 = 6.2) on it is more; 6 is not.
    busy = [cast.look(i, i < 3, ago=3) for i in range(6)]
    assert "more_looking" not in wordings(cast.edition([*busy, *usual()]))
    busy.append(cast.look(7, False, ago=3))
    assert "more_looking" in wordings(cast.edition([*busy, *usual()]))


def test_more_finds_than_effort_explains_are_not_explained_away() -> None:
    # By hand, Wilson 95 %: 8 of 8 gives 0.676 to 1; 0 of 10 gives 0 to 0.278: they do not overlap.
    busy = [cast.look(i, True, ago=3) for i in range(8)]
    assert "more_looking" not in wordings(cast.edition([*busy, *usual(finds=False)]))


def test_too_few_weeks_to_know_what_is_usual() -> None:
    busy = [cast.look(i, i < 4, ago=3) for i in range(8)]
    assert "more_looking" not in wordings(cast.edition([*busy, *usual(weeks=2)]))


def test_looks_out_of_their_window_are_no_trials() -> None:
    known = cast.district([cast.look(1, False), cast.look(2, False)])
    dry = replace(known, looks=(replace(known.looks[0], effort=Effort.UNINFORMATIVE), known.looks[1]))
    slip = compose(dry, [], cast.BOOK, [cast.reader()]).slips["s1"]
    assert slip.own["looks"] == 1


# --- what an edition is made of ----------------------------------------------------------------------


def everything() -> tuple[list, list]:
    rows = [cast.look(i, i % 2 == 0, pest=pest) for i in range(8) for pest in (MITE, FLEA, CUTWORM)]
    seen = [cast.first_seen(row) for row in rows[3:6] if row.present] + [cast.first_seen(rows[6])]
    return rows, [cast.hatch(), cast.threshold(0), cast.threshold(3), *seen]


def test_statements_are_shared_and_named_by_content() -> None:
    rows, signals = everything()
    readers = [cast.reader(f"s{i}", paddocks=(f"p{i}",), person=f"person{i}") for i in range(1, 8)]
    composed = cast.edition(rows, signals, readers)
    hatch = [name for name, each in composed.statements.items() if each.wording == "hatch"]
    assert len(hatch) == 1
    again = cast.edition(rows, list(reversed(signals)), readers)
    assert canonical(composed.statements) == canonical(again.statements)
    assert composed.slips == again.slips


def test_two_counts_in_one_public_cell_are_one_statement_with_the_rows_of_both() -> None:
    rows = [cast.look(1, True), cast.look(2, True)]
    signals = [cast.threshold(1, rows=rows[:1]), cast.threshold(2, rows=rows[1:])]
    composed = cast.edition(rows, signals)
    (near,) = [s for s in composed.statements.values() if s.wording == "counted_near"]
    assert {row.id for row in near.evidence} == {row.key for row in rows}
    assert len(near.basis) == 2


def test_a_held_statement_is_kept_but_reaches_nobody() -> None:
    rows, signals = everything()
    known = cast.district(rows)
    (hatch,) = [n for n, s in compose(known, signals, cast.BOOK, []).statements.items() if s.wording == "hatch"]
    composed = compose(known, signals, cast.BOOK, [cast.reader()], frozenset({hatch}))
    assert hatch in composed.statements
    assert hatch not in canonical(composed.slips["s1"])
    assert hatch in canonical(compose(known, signals, cast.BOOK, [cast.reader()]).slips["s1"])


def test_held_counts_are_said_nowhere() -> None:
    """Not on the card either, nor by a digest that says that nothing was reported."""
    rows = [cast.look(1, True), cast.look(2, False, pest=FLEA)]
    known = cast.district(rows, paddocks=cast.fields(p0=SOWN))
    composed = compose(known, [], cast.BOOK, [])
    counts = [n for n, s in composed.statements.items() if s.wording == "looks" and s.pest == MITE]
    asked = compose(known, [cast.hatch()], cast.BOOK, [cast.reader()], frozenset(counts)).slips["s1"]
    assert asked.asks[0].own["found"] == [0, 0, 0]
    quiet = compose(known, [], cast.BOOK, [cast.reader()], frozenset(counts))
    assert quiet.slips["s1"].own | {"unlooked": []} == {
        "looks": 2,
        "yours": 0,
        "finds": 0,
        "kept": True,
        "unlooked": [],
    }
    assert "Nothing was reported" not in printed(cast.said(quiet))
    assert "were found" not in printed(cast.said(quiet))


def test_a_slip_is_small() -> None:
    rows, signals = everything()
    fields = cast.fields(p0=SOWN | {"seed_dressing": True, "name": "The long paddock behind the old shearing shed"})
    slip = cast.slip(rows, signals, paddocks=fields, readers=[cast.reader(crops=tuple(cast.BOOK.crops))])
    assert slip.asks
    assert len(canonical(slip).encode()) <= 2000


def test_at_most_three_asks_and_45_minutes() -> None:
    rows, signals = everything()
    slip = cast.slip(rows, signals, paddocks=cast.fields(p0=SOWN))
    assert 1 <= len(slip.asks) <= 3
    assert sum(line.own["minutes"] for line in slip.asks) <= 45


def test_what_became_knowable_later_changes_nothing() -> None:
    rows, signals = everything()
    later = [
        replace(row, version=2, present=not row.present, knowable_from=NOW + timedelta(minutes=1)) for row in rows
    ] + [replace(rows[0], key="csv:late", knowable_from=NOW + timedelta(days=3))]
    before, after = cast.edition(rows, signals), cast.edition([*rows, *later], signals)
    assert canonical(before.slips) == canonical(after.slips)
    assert canonical(before.statements) == canonical(after.statements)


def test_looks_that_became_knowable_later_change_nothing_even_if_handed_over() -> None:
    known = cast.district([cast.look(1, True)])
    late = replace(known.looks[0], reporter="late", knowable_from=NOW + timedelta(minutes=1))
    peeked = replace(known, looks=(*known.looks, late))
    readers = [cast.reader()]
    assert compose(known, [], cast.BOOK, readers).slips == compose(peeked, [], cast.BOOK, readers).slips
