"""The whole walk: every planted event is found through itself, and through nothing else."""

import json
import re
from collections.abc import Callable
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest
from rich.console import Console

from demo_network import notifiable, walk
from demo_network.directory import REPORTABLES
from demo_network.planted import EVENTS
from service import pipeline, settings
from service.clock import SystemClock
from service.store import observations, reportables

FOUND = {"hatch", "border", "first_find"}
FLAGGED = {"busy_looking", "one_reporter"}
WAITING = ["moth_flight", "flare", "spread"]
# one digest in the weeks of each event that can be told so far
TELLING = ("2026-W19", "2026-W20", "2026-W22", "2026-W23", "2026-W26")
Outcome = dict[str, Any]


@pytest.fixture(scope="session")
def walked(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """What the demo leaves behind, walked once in full."""
    folder = tmp_path_factory.mktemp("walk")
    walk.run(folder, Console(quiet=True))
    return folder


@pytest.fixture
def shorter(tmp_path: Path) -> Callable[..., Outcome]:
    """A walk of the telling weeks alone, without the named events."""
    return lambda *names: walk.run(tmp_path, Console(quiet=True), without=frozenset(names), only=TELLING)


@pytest.mark.slow
def test_the_demo_finds_all_that_can_be_told_and_says_what_waits(walked: Path) -> None:
    summary = json.loads((walked / "summary.json").read_text(encoding="utf-8"))
    assert list(summary) == [
        *("observations", "station_days", "signals", "slips", "delivered"),
        *("planted_found", "planted_missed", "planted_waiting", "artefacts_flagged"),
    ]
    assert set(summary["planted_found"]) == FOUND
    assert summary["planted_missed"] == []
    assert summary["planted_waiting"] == WAITING
    assert set(summary["artefacts_flagged"]) == FLAGGED
    assert summary["slips"] == summary["delivered"] == 10 * 300  # ten signed weeks, 300 readers
    assert summary["observations"] > 5_400
    assert summary["station_days"] > 5_000
    assert summary["signals"] >= len(FOUND)


@pytest.mark.slow
def test_the_page_leads_to_a_dozen_digests_as_page_and_text(walked: Path) -> None:
    page = (walked / "index.html").read_text(encoding="utf-8")
    links = re.findall(r'href="(slips/[^"]+)"', page)
    assert len(links) == 24
    for link in links:
        assert (walked / link).stat().st_size > 500
    for event in EVENTS:
        assert f"<code>{event.name}</code>" in page
    assert "$" not in page


@pytest.mark.slow
def test_a_notifiable_find_is_seen_nowhere_but_in_closed_hands(walked: Path) -> None:
    listed = re.compile("|".join(name for _, names, _ in REPORTABLES for name in names), re.IGNORECASE)
    left = [file for file in walked.rglob("*") if file.is_file() and "files" not in file.relative_to(walked).parts]
    for file in left:
        if "store" not in file.relative_to(walked).parts:
            assert not listed.search(file.read_bytes().decode("utf-8", "replace")), file
    with closing(pipeline.open_store(settings.read(walked / "leafturn.toml"))) as store, store.reading() as c:
        assert len(reportables.cases(c, notifiable.DISTRICT)) == 1
        rows = observations.read(c, notifiable.DISTRICT, SystemClock().now())
    assert not [row for row in rows if listed.search(repr(row))]


@pytest.mark.slow
def test_one_digest_is_kept_whole(walked: Path) -> None:
    """The digest of the counted paddock's owner, as it was delivered, but for its links."""
    golden = Path(__file__).parents[2] / "demo_network/golden_digest.txt"
    (kept,) = walked.glob("slips/*-2026-W20-lantern.txt")
    said = re.sub(r"http://\S+", "(link)", kept.read_text(encoding="utf-8"))
    assert said == golden.read_text(encoding="utf-8")


@pytest.mark.slow
@pytest.mark.parametrize("name", sorted(FOUND | FLAGGED))
def test_leaving_an_event_out_takes_its_name_away_and_no_other(shorter: Callable[..., Outcome], name: str) -> None:
    outcome = shorter(name)
    assert set(outcome["planted_found"]) == FOUND - {name}
    assert set(outcome["planted_missed"]) == FOUND & {name}
    assert set(outcome["artefacts_flagged"]) == FLAGGED - {name}
    assert outcome["planted_waiting"] == WAITING


@pytest.mark.slow
def test_what_waits_is_nobody_elses_evidence(shorter: Callable[..., Outcome]) -> None:
    outcome = shorter(*WAITING)
    assert set(outcome["planted_found"]) == FOUND
    assert set(outcome["artefacts_flagged"]) == FLAGGED
