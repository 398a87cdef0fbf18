"""The rule book: what ships can be used and said, and what can't be used is refused by name."""

import re
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from shutil import copytree

import pytest

from rules.book import LIVE_MARKS, Book, Pest, Sourced
from service.errors import BadInput
from service.rulebook import load, revise, rule_hash, with_versions
from tests.builders import NOW

SHIPPED = Path(__file__).parents[2] / "rules" / "catalogue"
BOOK = load()
MITE = BOOK.pests["redlegged_earth_mite"]
HATCH = next(rule for rule in BOOK.rules if rule.id == "redlegged_earth_mite_hatch")

# people.md's promises, as words: no advice to act, no all-clear, nothing only staff say
NEVER = (
    r"spray\w*|treat\w*|control\w*|product\w*|pesticide\w*|insecticide\w*|rate|kill\w*|"
    r"no risk|none|clear|safe\w*|low risk|alert|watch|warning|"
    r"slip|edition|signal|cell|station day|bbch|look window|paddocks? at risk"
)


@pytest.fixture
def catalogue(tmp_path: Path) -> Path:
    """A copy of the shipped catalogue that a test may spoil."""
    return Path(copytree(SHIPPED, tmp_path / "catalogue"))


def _spoil(catalogue: Path, file: str, before: str, after: str) -> int:
    """Change the first such text of a file; returns its line."""
    path = catalogue / file
    text = path.read_text(encoding="utf-8")
    path.write_text(text.replace(before, after, 1), encoding="utf-8")
    return text[: text.index(before)].count("\n") + 1


# --- what ships ----------------------------------------------------------------------------------


def test_the_pests_and_crops_of_the_first_season_are_there() -> None:
    assert sorted(BOOK.pests) == ["cutworms", "lucerne_flea", "redlegged_earth_mite"]
    assert sorted(BOOK.crops) == [
        "barley", "canola", "chickpea", "clover", "faba_bean", "field_pea", "lentil",
        "lucerne", "lupin", "medic", "oats", "pasture", "wheat",
    ]  # fmt: skip


def test_every_crop_has_words_for_every_stage() -> None:
    for crop in BOOK.crops.values():
        codes = [code for code, _ in crop.stages]
        assert codes[0] == 0, crop.id
        assert codes == sorted(set(codes)), crop.id
        assert max(b - a for a, b in zip(codes, [*codes[1:], 100], strict=True)) <= 80, crop.id
    assert dict(BOOK.crops["canola"].stages)[12] == "two true leaves"


def test_mites_in_canola_have_a_sourced_number_at_one_true_leaf_only() -> None:
    live = [t for t in MITE.thresholds if t.mark in LIVE_MARKS]
    # Pest Manag Sci 2015, doi 10.1002/ps.3952: 10 a plant at the first true leaf, no number elsewhere
    assert [(t.crop, t.stage_from, t.stage_to, t.unit, t.low, t.high) for t in live if t.mark == "S"] == [
        ("canola", 11, 11, "per_plant", 10.0, 10.0)
    ]
    # common practice, no source: about 10 a plant from late seed leaf
    assert [(t.crop, t.stage_from, t.stage_to, t.low) for t in live if t.mark == "C"] == [("canola", 10, 10, 10.0)]


def test_numbers_of_flea_and_cutworm_are_common_practice() -> None:
    # common practice, no source: 10 holes a leaf; two larvae or more in half a metre of row; 2–3 in a square metre
    flea = {(t.unit, t.low, t.high) for t in BOOK.pests["lucerne_flea"].thresholds if t.mark == "C"}
    worm = {(t.crop, t.unit, t.low, t.high) for t in BOOK.pests["cutworms"].thresholds if t.mark == "C"}
    assert flea == {("holes_per_leaf", 10.0, 10.0)}
    assert ("wheat", "per_half_metre_row", 2.0, 2.0) in worm
    assert ("canola", "per_m2", 2.0, 3.0) in worm


def test_where_two_practices_differ_both_are_carried() -> None:
    assert len(MITE.when) == len(BOOK.pests["cutworms"].when) == 2
    assert "midday" in MITE.when[0].value


def test_a_live_rule_rests_on_nothing_from_memory() -> None:
    live = [rule for rule in BOOK.rules if rule.status == "live"]
    assert {mark["mark"] for rule in live for mark in rule.sources.values()} <= LIVE_MARKS
    assert sorted((rule.kind, rule.pest) for rule in live) == sorted(
        [("hatch", "redlegged_earth_mite")]
        + [(kind, pest) for kind in ("threshold", "first_seen") for pest in BOOK.pests]
    )


def test_the_live_hatch_rule_is_the_published_one() -> None:
    # Exp Appl Acarol 65:259–276, 2015, doi 10.1007/s10493-014-9876-x; rain_days: the narrowest reading
    assert {name: HATCH.parameters[name] for name in (
        "form", "rain_more_than", "rain_days", "cool_below_western", "cool_below_south_eastern", "cool_days",
        "consecutive", "scan_from",
    )} == {
        "form": "rain_then_cool", "rain_more_than": 5.0, "rain_days": 1, "cool_below_western": 20.5,
        "cool_below_south_eastern": 16.0, "cool_days": 10, "consecutive": True, "scan_from": "03-01",
    }  # fmt: skip
    others = {rule.id: rule.parameters for rule in BOOK.rules if rule.status == "understudy"}
    assert others["redlegged_earth_mite_hatch_five_days_of_rain"]["rain_days"] == 5
    assert others["redlegged_earth_mite_hatch_week_of_cool"]["form"] == "first_day"


# --- what readers read ---------------------------------------------------------------------------


def _card_words(pest: Pest) -> Iterator[tuple[str, str]]:
    for name in ("where", "before_up", "method"):
        yield name, getattr(pest, name).value
    yield from (("when", each.value) for each in pest.when)


def _sentences(book: Book) -> Iterator[tuple[str, str]]:
    for pest in book.pests.values():
        yield from ((f"{pest.id}.{name}", text) for name, text in _card_words(pest))
        yield from ((f"{pest.id}.{name}", getattr(pest, name).value) for name in ("damage", "beneficials"))
        yield from ((f"{pest.id}.notes", note.value) for note in pest.notes)
        yield from ((f"{pest.id}.thresholds", number.note) for number in pest.thresholds if number.note)
        yield from ((f"{pest.id}.lookalikes", each.apart) for each in pest.lookalikes)
    yield from ((f"cautions.{caution.id}", caution.text) for caution in book.cautions)


def _words(text: str) -> list[str]:
    return re.findall(r"[A-Za-z']+", text)


def _syllables(word: str) -> int:
    groups = re.findall(r"[aeiouy]+", word.lower().removesuffix("e"))
    return max(1, len(groups))


def test_no_sentence_tells_anyone_to_act_or_gives_an_all_clear() -> None:
    texts = [*_sentences(BOOK), *((c.id, words) for c in BOOK.crops.values() for _, words in c.stages)]
    assert [(where, text) for where, text in texts if re.search(rf"\b({NEVER})\b", text, re.IGNORECASE)] == []


def test_sentences_end_and_are_short() -> None:
    for where, text in _sentences(BOOK):
        assert text.endswith((".", "?")), where
        if where != "cautions.acting":
            assert len(_words(text)) <= 20, (where, text)


def test_a_card_leaves_room_for_the_rest() -> None:
    for pest in BOOK.pests.values():
        for first in (pest.where, pest.before_up):
            used = sum(len(_words(each.value)) for each in (first, pest.when[0], pest.method))
            assert used <= 36, pest.id  # a card is 60 words: title, spots, number and caution need the rest


def test_a_twelve_year_old_can_read_it() -> None:
    # Flesch–Kincaid grade: 0.39 words a sentence + 11.8 syllables a word − 15.59
    text = [each for where, each in _sentences(BOOK) if where != "cautions.acting"]
    words = [word for each in text for word in _words(each)]
    sentences = sum(len(re.findall(r"[.?:]", each)) for each in text)
    grade = 0.39 * len(words) / sentences + 11.8 * sum(map(_syllables, words)) / len(words) - 15.59
    assert grade <= 8


def test_before_the_crop_is_up_the_look_goes_to_its_surroundings() -> None:
    for pest in BOOK.pests.values():
        assert all(word in pest.before_up.value for word in ("weeds", "pasture edge", "fence line")), pest.id


def test_every_promise_about_looking_has_its_caution() -> None:
    tied = {when for caution in BOOK.cautions for when in caution.when}
    assert tied == {"always", "night", "lifts_cover", "warm", "dressed", "acting"}
    acting = [caution.text for caution in BOOK.cautions if "acting" in caution.when]
    assert len(acting) == 1
    for part in ("adviser", "label", "law", "protective", "withholding", "grazing", "bees", "neighbours", "rotate"):
        assert part in acting[0]


# --- what can't be used --------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("file", "before", "after", "entry", "remedy"),
    [
        ("pests/cutworms.toml", 'mark = "C"\nsource = "common practice, no source: the eggs', 'source = "the eggs',
         "before_up, mark", "add it"),
        ("pests/cutworms.toml", "[damage]", '[damage]\ncolour = "grey"', "damage, colour", "no such key"),
        ("pests/lucerne_flea.toml", 'mark = "C"', 'mark = "X"', "lookalikes 1, mark", "'S', 'C', 'M' or 'calc'"),
        ("pests/redlegged_earth_mite.toml", "stage_from = 9\nstage_to = 15", "stage_from = 16\nstage_to = 15",
         "risks 1", "swap them"),
        ("pests/redlegged_earth_mite.toml", "low = 20\nhigh = 30", "low = 40\nhigh = 30", "thresholds 5", "swap them"),
        ("pests/redlegged_earth_mite.toml", "[relook_days]\nvalue = 7", "[relook_days]\nvalue = 8",
         "relook_days, value", "less than or equal to 7"),
        ("pests/redlegged_earth_mite.toml", '["pasture"]', '["pastures"]', "risks 3, crops", "it has: barley"),
        ("pests/redlegged_earth_mite.toml", "[unit]\nvalue = \"per_plant\"", "[unit]\nvalue = \"a plant\"",
         "unit, value", "'per_plant'"),
        ("crops.toml", '[12, "two true leaves"]', '[11, "two true leaves"]', "crops 1", "must rise"),
        ("cautions.toml", '["night"]', '["midnight"]', "cautions 6, when 1", "'night'"),
        ("rules/hatch.toml", "value = 10\n", "value = 0\n", "rules 1, parameters, cool_days, value", "greater than"),
        ("rules/hatch.toml", "[rules.parameters.consecutive]\nvalue = true\n", "[rules.parameters.consecutive]\n",
         "rules 1, parameters, consecutive, value", "add it"),
        ("rules/hatch.toml", 'value = "rain_then_cool"', 'value = "cool_then_rain"',
         "rules 1, parameters, form, value", "'rain_then_cool' or 'first_day'"),
        ("rules/hatch.toml", 'value = "03-01"', 'value = "13-01"', "rules 1, parameters, scan_from, value", "03-01"),
        ("rules/hatch.toml", 'pest = "redlegged_earth_mite"', 'pest = "mite"', "rules 1, pest", "it has: cutworms"),
        ("rules/hatch.toml", 'status = "understudy"', 'status = "live"', "rules 2, parameters, rain_days", "memory"),
    ],
)  # fmt: skip
def test_a_bad_value_is_refused_by_file_entry_and_remedy(
    catalogue: Path, file: str, before: str, after: str, entry: str, remedy: str
) -> None:
    running = load(catalogue)
    _spoil(catalogue, file, before, after)
    with pytest.raises(BadInput) as refused:
        load(catalogue)
    assert file.rpartition("/")[2] in str(refused.value)
    assert [refusal.field for refusal in refused.value.refusals] == [entry]
    assert remedy in refused.value.refusals[0].remedy
    assert running == BOOK  # what runs stays as it was


def test_a_refusal_names_the_line(catalogue: Path) -> None:
    line = _spoil(catalogue, "pests/redlegged_earth_mite.toml", "low = 20\nhigh = 30", 'low = "20"\nhigh = 30')
    with pytest.raises(BadInput, match=f"redlegged_earth_mite.toml line {line}: thresholds 5, low") as refused:
        load(catalogue)
    assert refused.value.refusals[0].row == line


def test_a_file_that_is_no_toml_is_refused_with_its_line(catalogue: Path) -> None:
    line = _spoil(catalogue, "crops.toml", 'id = "wheat"', "id = wheat")
    with pytest.raises(BadInput, match=rf"crops.toml can't be read as TOML: .*line {line},"):
        load(catalogue)


def test_two_rules_of_one_name_are_refused(catalogue: Path) -> None:
    _spoil(catalogue, "rules/threshold.toml", '"lucerne_flea_threshold"', '"cutworms_threshold"')
    with pytest.raises(BadInput, match="two rules named 'cutworms_threshold'"):
        load(catalogue)


# --- versions ------------------------------------------------------------------------------------


def _longer_run() -> dict[str, Sourced]:
    return {"cool_days": Sourced(12, "C", "common practice here, no source")}


def test_a_change_makes_the_next_version_and_another_hash() -> None:
    changed = revise(HATCH, _longer_run(), by="ivy", why="Ten days came too early here.", made_at=NOW)
    assert (changed.version, changed.parameters["cool_days"], changed.by) == (2, 12, "ivy")
    assert changed.hash != HATCH.hash
    assert HATCH.parameters["cool_days"] == 10
    assert with_versions(BOOK, [changed]).rules == tuple(
        changed if rule.id == HATCH.id else rule for rule in BOOK.rules
    )


def test_who_changed_a_rule_leaves_its_hash() -> None:
    assert rule_hash(replace(HATCH, version=7, by="olive", why="No change.", made_at=NOW)) == HATCH.hash


def test_a_rule_of_the_district_is_added_at_the_end() -> None:
    own = replace(HATCH, id="own_hatch", version=1, made_at=NOW)
    assert with_versions(BOOK, [own]).rules == (*BOOK.rules, own)


def test_a_change_that_can_not_be_is_refused() -> None:
    with pytest.raises(BadInput, match=r"cool_days, value: .*greater than or equal to 1"):
        revise(HATCH, {"cool_days": Sourced(0, "C", "a slip of the pen")}, by="ivy", why="?", made_at=NOW)
    with pytest.raises(BadInput, match="cool_days is from memory"):
        revise(HATCH, {"cool_days": Sourced(9, "M", "from memory")}, by="ivy", why="?", made_at=NOW)


def test_the_catalogue_hash_follows_facts_not_comments(catalogue: Path) -> None:
    _spoil(catalogue, "pests/cutworms.toml", "# Marks:", "# The marks:")
    assert load(catalogue).catalogue_hash == BOOK.catalogue_hash
    _spoil(catalogue, "pests/cutworms.toml", "up to 50 mm long", "up to 5 cm long")
    assert load(catalogue).catalogue_hash != BOOK.catalogue_hash
