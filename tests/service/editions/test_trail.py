"""From a sentence back to rows: what it rests on, and whether the same would be said again."""

from dataclasses import replace

from rules.digests import digest
from rules.records import Evidence, Observation
from service.editions.trail import Said, Trace, trace
from tests.service.editions import cast

OWN = cast.look(0, True, stage=11)
NEAR = cast.look(1, True)
ROWS = [OWN, NEAR, cast.look(2, False)]
SIGNALS = [cast.threshold(0, rows=[OWN]), cast.threshold(1, rows=[NEAR])]


def said(rows: list[Observation] = ROWS, signals: list = SIGNALS) -> Said:
    composed = cast.edition(rows, signals)
    return Said(composed.slips["s1"], composed.statements, cast.HEAD, cast.BOOK)


def standing(rows: list[Observation] = ROWS):
    """The digests of the rows as they stand."""
    by_key = {row.key: row.digest for row in rows}
    return lambda evidence: by_key.get(evidence.id)


def followed(**changes) -> Trace:
    given = {"kept": said(), "again": said(), "standing": standing()} | changes
    return trace(**given)


def test_a_digest_that_can_be_said_again() -> None:
    found = followed()
    assert found.same
    assert [source.number for source in found.sources] == list(range(1, len(found.sources) + 1))


def test_a_sentence_leads_to_figures_rule_and_rows() -> None:
    (source, *_) = [each for each in followed().sources if "12.4 a plant" in each.sentence.text]
    assert source.kind == "threshold"
    assert source.figures["mean"] == 12.4
    assert [(each.rule, each.rule_hash) for each in source.basis] == [("redlegged_earth_mite_threshold", "r" * 32)]
    assert [(row.evidence.id, row.found) for row in source.rows] == [(OWN.key, "same")]


def test_counts_rest_on_every_look_behind_them() -> None:
    (source,) = [each for each in followed().sources if "found in 2 of 3 looks" in each.sentence.text]
    assert {row.evidence.id for row in source.rows} == {row.key for row in ROWS}


def test_a_fixed_sentence_rests_on_no_rows() -> None:
    (source, *_) = [each for each in followed().sources if each.sentence.origin == "fixed:usual"]
    assert (source.statement, source.rows) == (None, ())


def test_an_altered_row_is_named() -> None:
    altered = [replace(OWN, count=99.0, digest=digest("another"))]
    found = followed(standing=standing([*altered, *ROWS[1:]]))
    assert not found.same
    assert [(row.evidence.id, row.found) for row in found.altered] == [(OWN.key, "altered")]


def test_a_row_that_is_gone_is_named_apart() -> None:
    found = followed(standing=standing(ROWS[:2]))
    assert [(row.evidence.id, row.found) for row in found.altered] == [(ROWS[2].key, "gone")]


def test_a_sentence_that_would_be_said_otherwise_is_shown_with_both_texts() -> None:
    again = said([OWN, NEAR, replace(ROWS[2], present=True)])
    differences = followed(again=again).differences
    assert any("found in 2 of 3 looks" in str(each.said) for each in differences)
    assert all("3 of 3" in str(each.again) for each in differences if "2 of 3" in str(each.said))


def test_a_reader_who_would_get_nothing_now() -> None:
    found = followed(again=None)
    assert not found.same
    assert all(each.again is None for each in found.differences)
    assert len(found.differences) == len(found.sources)


def test_figures_changed_behind_a_statements_name_are_found() -> None:
    kept = said()
    name = kept.slip.asks[0].statements[0]
    changed = replace(kept.statements[name], figures={**kept.statements[name].figures, "mean": 3.0})
    found = followed(kept=replace(kept, statements={**kept.statements, name: changed}))
    assert found.misnamed == (name,)
    assert not found.same


def test_evidence_of_other_tables_is_asked_for_by_table() -> None:
    asked: list[Evidence] = []

    def remember(evidence: Evidence) -> str:
        asked.append(evidence)
        return evidence.digest

    kept = said(signals=[cast.hatch()])
    assert trace(kept, kept, remember).same
    assert ("station_day", "st1/2026-04-24", 1, 11.0) in [(e.table, e.id, e.version, e.detail.get("km")) for e in asked]
