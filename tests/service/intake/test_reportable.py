"""Rows that name a listed pest: kept in the closed table, and in nothing that anyone else sees.

The listed pests are invented. A decoy row of an ordinary pest goes through beside each.
"""

import logging
from pathlib import Path

import pytest

from rules.records import Refusal
from service.errors import BadInput
from service.intake import reportable, unreadable
from service.intake.refusals import RowsRefused
from service.store import reportables
from service.store.base import Store, metadata
from service.store.reportables import Case
from tests.builders import NOW
from tests.service.intake.network import CLOCK, all_of, csv_of, row, settle, take, write

LISTED = "ghost beetle"
FIRST = "Please ring the invented plant health line now: 0000 000 000."


def cases(store: Store, district: str = "north") -> list[Case]:
    with store.reading() as c:
        return reportables.cases(c, district)


@pytest.mark.parametrize(
    "changes",
    [
        pytest.param({"pest": "Ghost Beetle"}, id="pest name"),
        pytest.param({"pest": "imago FABULOSA"}, id="scientific name"),
        pytest.param({"note": "maybe ghost-beetles on the fence"}, id="note, in the plural"),
        pytest.param({"note": "elan weevil?"}, id="accent left out"),
        pytest.param({"damage": "Élan  Weevil"}, id="accent written"),
        pytest.param({"method": "gh\u00f6st b\u00e9\u00e9tle"}, id="other accents"),
        pytest.param({"lure": "ghost_beetle lure"}, id="another free field"),
        pytest.param({"beneficials": "none, ghost\u200b beetle"}, id="an invisible sign in it"),
        pytest.param({"record_id": "ghost beetle 1"}, id="record id"),
        pytest.param({"latitude": "ghost beetle"}, id="a field for numbers"),
        pytest.param({"reporter": "ghost beetle"}, id="a field for an id"),
        pytest.param({"status": "absent", "pest": "ghost beetle"}, id="looked for and not found"),
        pytest.param({"day": "99/99", "pest": "ghost beetle", "count": "x"}, id="malformed beside it"),
        pytest.param({"paddock": "p9", "pest": "ghost beetle"}, id="district can't be told"),
        pytest.param({"note": '"saw, near\nthe gate, a\nghost\nbeetle"'}, id="across lines"),
    ],
)
def test_a_row_that_names_one_goes_to_the_closed_table_and_nowhere_else(
    store: Store, tmp_path: Path, changes: dict[str, str], caplog: pytest.LogCaptureFixture
) -> None:
    settle(store)
    caplog.set_level(logging.DEBUG)
    text = csv_of(
        [
            dict.fromkeys(changes, "") | row(record_id="0"),
            row() | {k: f'"{v.strip(chr(34))}"' for k, v in changes.items()},
        ]
    )
    counts = take(store, write(tmp_path, text), keep_good=tmp_path / "rest.csv")
    assert counts.pop("to_the_hotline").startswith(FIRST)
    assert counts == {"new": 1, "revised": 0, "same": 0, "refused": 0}
    [case] = cases(store)
    assert (case.district, case.received_at) == ("north", NOW)
    assert all(case.row[name] == value.strip('"') for name, value in changes.items())
    assert [found.key for found in all_of(store)] == ["csv:0"]
    assert not (tmp_path / "rest.csv").exists()
    assert "eetle" not in caplog.text
    assert "eevil" not in caplog.text


@pytest.mark.parametrize("note", ["ghostly beetles", "a beetle like a ghost", "ghost beetleman", "the host beetle"])
def test_words_that_only_look_alike_do_not_match(store: Store, tmp_path: Path, note: str) -> None:
    settle(store)
    assert take(store, write(tmp_path, [row(note=note)]))["to_the_hotline"] is None
    assert cases(store) == []
    assert len(all_of(store)) == 1


def test_the_name_of_the_file_counts_for_every_row(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = write(tmp_path, [row(), row(record_id="2", day="x")], "2026_ghost-beetle_photos.csv")
    counts = take(store, path)
    assert counts["to_the_hotline"].startswith(FIRST)
    assert (counts["new"], len(cases(store)), all_of(store)) == (0, 2, [])


def test_a_file_taken_twice_makes_no_second_case(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = write(tmp_path, [row(pest=LISTED, reporter="ada"), row(record_id="2")])
    first = take(store, path)
    before = cases(store)
    second = take(store, path)
    assert first["to_the_hotline"] == second["to_the_hotline"]
    assert cases(store) == before
    assert [case.reporter for case in before] == ["ada"]
    assert second["same"] == 1


def test_a_refusal_of_other_rows_tells_the_hotline_first_and_nothing_of_it(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = write(tmp_path, [row(pest=LISTED, day="x"), row(record_id="2", day="y")])
    with pytest.raises(BadInput) as error:
        take(store, path)
    assert str(error.value).startswith(FIRST)
    assert [refusal.row for refusal in error.value.refusals] == [3]
    assert "host" not in str(error.value).removeprefix(FIRST)
    assert len(cases(store)) == 1
    rest = tmp_path / "rest.csv"
    assert take(store, path, keep_good=rest)["refused"] == 1
    assert LISTED not in rest.read_text()
    assert len(rest.read_text().splitlines()) == 2
    assert len(cases(store)) == 1


@pytest.mark.parametrize(
    "text",
    [
        pytest.param("day,pest,status,reporter,where\n2026-05-10,ghost beetle,present,ivy,p1\n", id="unknown column"),
        pytest.param('day,pest,status,reporter,paddock\n2026-05-10,"ghost beetle,present,ivy,p1\n', id="unclosed"),
        pytest.param("ghost beetle near the silo\n", id="no table at all"),
    ],
)
def test_what_is_no_table_is_searched_by_line(store: Store, tmp_path: Path, text: str) -> None:
    settle(store)
    with pytest.raises(BadInput) as error:
        take(store, write(tmp_path, text))
    assert str(error.value).startswith(FIRST)
    assert "beetle" not in str(error.value)
    assert all("beetle" not in refusal.value for refusal in error.value.refusals)
    assert [list(case.row.values()) for case in cases(store) if "beetle" in str(case.row)] != []
    assert all_of(store) == []


def test_a_file_of_no_known_kind_is_searched_before_it_is_refused(store: Store, tmp_path: Path) -> None:
    path = write(tmp_path, "when,what\ntoday,ghost beetle\n", "ghost beetle.csv")
    error = BadInput(f"{path.name} fits no kind of file")
    assert unreadable(store, path, error, clock=CLOCK) is error  # no district, so no list
    settle(store)
    told = str(unreadable(store, path, error, clock=CLOCK))
    assert told.startswith(FIRST)
    assert "beetle" not in told
    assert [case.row for case in cases(store)] != []
    plain = write(tmp_path, "when,what\ntoday,mites\n", "mites.csv")
    assert str(unreadable(store, plain, BadInput("mites.csv fits no kind"), clock=CLOCK)) == "mites.csv fits no kind"


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "latin-1"])
def test_what_is_no_table_is_searched_in_whatever_encoding_it_is(store: Store, tmp_path: Path, encoding: str) -> None:
    settle(store)
    path = tmp_path / "sightings.csv"
    path.write_bytes("when,what\ntoday,\u00e9lan weevil by the gate\n".encode(encoding))
    told = str(unreadable(store, path, BadInput(f"{path.name} fits no kind"), clock=CLOCK))
    assert told.startswith(FIRST)
    assert [case.row for case in cases(store)] == [{"line": "today,\u00e9lan weevil by the gate"}]


def test_a_photo_named_after_one_is_one_case(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = tmp_path / "ghost beetle.jpg"
    path.write_bytes(b"\xff\xd8\x00\x10" + bytes(range(256)) * 40)
    told = str(unreadable(store, path, BadInput(f"{path.name}: what ends in .jpg"), clock=CLOCK))
    assert told.startswith(FIRST)
    assert "beetle" not in told
    assert [case.row for case in cases(store)] == [{"line": "ghost beetle.jpg"}]


def test_the_remedies_of_another_file_do_not_repeat_one(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = write(tmp_path, "station,day\nghost beetle,2026-05-10\n", "days.csv")
    refused = [
        Refusal(2, "station", "ghost beetle", "write an id"),
        Refusal(2, "crops", "x", "ghost beetle is no crop we know"),
        Refusal(1, "ghost beetle", "", "there is no such column"),
        Refusal(2, "rain", "y", "write a number"),
    ]
    error = unreadable(store, path, BadInput("1 to mend: 'ghost beetle'", refused), clock=CLOCK)
    assert isinstance(error, BadInput)
    assert [refusal.field for refusal in error.refusals] == ["rain"]
    assert "beetle" not in str(error)
    assert len(cases(store)) == 1


def test_what_was_searched_already_and_a_list_itself_make_no_case(store: Store, tmp_path: Path) -> None:
    settle(store)
    names = write(tmp_path, 'names = ["ghost beetle"]\n', "district.toml")
    for path, error in ((names, BadInput("line 1")), (tmp_path / "a.csv", RowsRefused("2 to mend"))):
        assert unreadable(store, path, error, clock=CLOCK) is error
    assert cases(store) == []


def test_a_row_of_another_length_is_searched_too(store: Store, tmp_path: Path) -> None:
    settle(store)
    text = "day,pest,status,reporter,paddock\n2026-05-10,ghost beetle,present\n2026-05-10,RLEM,absent,ivy,p1\n"
    counts = take(store, write(tmp_path, text))
    assert counts.pop("to_the_hotline").startswith(FIRST)
    assert counts == {"new": 1, "revised": 0, "same": 0, "refused": 0}
    assert len(cases(store)) == 1


def test_a_file_in_another_encoding_is_searched_too(store: Store, tmp_path: Path) -> None:
    settle(store)
    path = tmp_path / "observations.csv"
    path.write_bytes(csv_of([row(pest="élan weevil", note="ünder")]).encode("latin-1"))
    with pytest.raises(BadInput) as error:
        take(store, path)
    assert str(error.value).startswith(FIRST)
    assert len(cases(store)) == 1


def test_the_list_is_the_districts_own(store: Store, tmp_path: Path) -> None:
    """The south lists nothing: the same name is an unknown pest there, and a case in the north."""
    settle(store, south=True)
    path = write(tmp_path, [row(pest=LISTED, district="south", latitude="-60")])
    with pytest.raises(BadInput) as error:
        take(store, path)
    assert [refusal.field for refusal in error.value.refusals] == ["pest"]
    assert cases(store) == cases(store, "south") == []
    assert take(store, write(tmp_path, [row(pest=LISTED, district="north")]))["to_the_hotline"].startswith(FIRST)


def test_no_other_table_holds_a_word_of_it(store: Store, tmp_path: Path) -> None:
    settle(store)
    take(store, write(tmp_path, [row(), row(record_id="2", note=f"{LISTED} by the silo", reporter="ada")]))
    with store.reading() as c:
        held = {table.name: str(c.execute(table.select()).fetchall()) for table in metadata.sorted_tables}
    assert [name for name, rows in held.items() if "by the silo" in rows] == ["reportable_case"]


def test_what_is_told_first_asks_for_every_care() -> None:
    for words in ("does not report it for you", "legal duty to ring now", "Leave it", "plants, soil or samples",
                  "Limit people and machines", "Don't post it"):  # fmt: skip
        assert words in reportable.TELL_FIRST
