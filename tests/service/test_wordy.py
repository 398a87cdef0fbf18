"""An outcome as lines: what it is about first, evidence below, nothing that steers a terminal."""

from service.wordy import lines


def test_numbers_lists_and_evidence() -> None:
    outcome = {
        "new_rows": 3,
        "nothing_given": None,
        "counts": {"sent": 2, "failed": 0},
        "names": ["hatch", "border"],
        "missed": [],
        "sentences": [{"number": 9, "text": "It rained.", "rows": [{"id": "buoy1/2026-04-12", "km": 11.1}]}],
    }
    assert list(lines(outcome)) == [
        "new rows: 3",
        "counts: sent 2, failed 0",
        "names: 2",
        "  hatch",
        "  border",
        "missed: nothing",
        "sentences: 1",
        "  It rained.",
        "      number: 9",
        "      rows: 1",
        "        id buoy1/2026-04-12, km 11.1",
    ]


def test_a_whole_text_stays_as_it_is() -> None:
    assert list(lines({"digest": "Subject: one\n\nLine\n"})) == ["Subject: one\n\nLine\n"]


def test_nothing_steers_the_terminal() -> None:
    assert list(lines({"note": "red \x1b[31m"})) == ["note: red \\x1b[31m"]
