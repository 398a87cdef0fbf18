"""The demo: two districts walked through a season by the clock, by the same steps that a real week takes.

build the files ─► take network and history ─► each week: take ─► draft ─► (ten weeks) sign ─► send
─► read the delivered mail ─► summary.json, slips/, index.html
"""

import json
from collections import Counter
from collections.abc import Callable, Collection, Iterator
from contextlib import closing, contextmanager
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn
from rich.table import Table

from demo_network import check, keepsakes, page, room
from demo_network.build import SEED, build
from demo_network.network import COORDINATORS, DISTRICTS
from demo_network.planted import EVENTS
from demo_network.seasons import HISTORY, LIVE, SIGNED, WEEKS, cut_off, opens
from service import pipeline
from service.clock import SetClock
from service.settings import MailSettings, Settings, StoreSettings

NETWORK = ("district.toml", "postcodes.csv", "holdings.csv", "paddocks.csv", "people.csv", "stations.csv")
READERS = "subscribers.csv"  # after the paddocks that they name
DATED = ("paddocks.csv", "station_days.csv", "observations.csv")
PARTS = ("files", "mail", "slips", "store", "leafturn.toml", "index.html", "summary.json")
COUNTED = ("observations", "station_days", "signals", "slips", "delivered")
TO_SIGNING = timedelta(hours=22)  # from the cut-off to Wednesday at ten
Step = Callable[[int, int, str], None]
Outcome = dict[str, Any]


def run(
    folder: Path,
    console: Console,
    *,
    seed: int = SEED,
    without: frozenset[str] = frozenset(),
    only: Collection[str] = (),
) -> Outcome:
    """Walk the season; leave the files, the mail, a page and a summary in the folder, and return the summary.

    `without` leaves planted events out; `only` names the weeks to draft and deliver, for a shorter walk.
    """
    room.make(folder, PARTS)
    build(folder / "files", seed=seed, without=without)
    with _bar(console) as step, pipeline.mail_server(folder / "mail") as server:
        settings = _settings(folder, server.port)
        with closing(pipeline.open_store(settings)) as store:
            walk = Walk(folder / "files", store, settings)
            walk.past(step)
            weeks = walk.season(step, only or WEEKS, only or SIGNED)
    summary = _leave(folder, walk.counts, weeks)
    _tell(console, folder, summary)
    return summary


class Walk:
    """One walk through the files by the clock."""

    def __init__(self, files: Path, store: Any, settings: Settings) -> None:
        self.files, self.store, self.settings = files, store, settings
        self.clock = SetClock(datetime(LIVE, 1, 1, tzinfo=UTC))
        self.counts: Counter[str] = Counter()

    def past(self, step: Step) -> None:
        """The network as it was when the records begin, then each past season, taken when it was over."""
        self.clock.set(_morning(min(HISTORY)))
        for number, name in enumerate((*NETWORK, READERS)):
            step(number, len(NETWORK) + 1, "Taking the network in")
            self._take(self.files / "network" / name)
        for number, (year, season) in enumerate(HISTORY.items()):
            step(number, len(HISTORY), "Taking past seasons in")
            self.clock.set(_morning(year + 1) - timedelta(days=60))
            for name in DATED:
                self._take(self.files / "history" / season / name, history=name != "paddocks.csv")

    def season(self, step: Step, drafted: Collection[str], signed: Collection[str]) -> list[Outcome]:
        """Week by week, what arrived is taken; of both districts a digest is drafted, and in some weeks sent."""
        weeks = []
        for number, week in enumerate(WEEKS):
            step(number, len(WEEKS), f"Week {week}")
            noon = max(cut_off(week, district.zone) for district in DISTRICTS.values())
            self.clock.set(noon)
            for name in DATED:
                if (self.files / "season3" / week / name).exists():
                    self._take(self.files / "season3" / week / name)
            outcomes = [self._draft(district) for district in DISTRICTS if week in drafted]
            if week in signed:
                self.clock.set(noon + TO_SIGNING)
                for outcome in outcomes:
                    self._send(outcome)
            weeks += outcomes
        step(len(WEEKS), len(WEEKS), "All weeks")
        return weeks

    def _take(self, file: Path, *, history: bool = False) -> None:
        outcome = pipeline.take(self.store, file, clock=self.clock, history=history)
        self.counts[file.stem] += outcome["new"]

    def _draft(self, district: str) -> Outcome:
        drafted = pipeline.draft(self.store, district, clock=self.clock)
        self.counts["signals"] += drafted["signals"]
        return {**drafted, "district": district, "delivered": None}

    def _send(self, drafted: Outcome) -> None:
        id, coordinator = drafted["edition"], COORDINATORS[drafted["district"]]
        signed = pipeline.sign(self.store, self.settings, id, by=coordinator, clock=self.clock)
        sent = pipeline.send(self.store, self.settings, id, clock=self.clock)
        drafted["delivered"] = sent["sent"]
        self.counts["slips"] += signed["slips"]
        self.counts["delivered"] += sent["sent"]


def _morning(year: int) -> datetime:
    opening = opens(year)
    return datetime(year, opening.month, opening.day, tzinfo=UTC)


def _settings(folder: Path, port: int) -> Settings:
    """The demo's own store and mail server, whatever the environment says; also written, for the commands after."""
    store, keys = (folder / "store").absolute(), (folder / "store" / "keys").absolute()
    store.mkdir()
    ours = Settings().model_copy(
        update={
            "data_dir": str(store),
            "keys_file": str(keys),
            "store": StoreSettings(url=f"sqlite:///{store / 'leafturn.db'}"),
            "mail": MailSettings(port=port, starttls="never", sender="digest@leafturn.example"),
        }
    )
    text = f'data_dir = "{store}"\nkeys_file = "{keys}"\n\n[store]\nurl = "{ours.store.url}"\n'
    text += "\n[web]\nshow_days = 36500  # so that links of a season long past still open\n"
    (folder / "leafturn.toml").write_text(text, encoding="utf-8")
    return ours


# --- what is left behind -------------------------------------------------------------------------


def _leave(folder: Path, counts: Counter[str], weeks: list[Outcome]) -> Outcome:
    """Read the delivered mail; leave the summary, a dozen digests, and the page that leads to them."""
    readers = check.readers_of(folder / "files")
    mails = list(check.delivered(folder / "mail", readers))
    summary = {name: counts[name] for name in COUNTED} | check.judge(mails, readers)
    (folder / "summary.json").write_text(json.dumps(summary, indent=2) + "\n", encoding="utf-8")
    kept = keepsakes.keep(folder / "mail", folder / "slips", mails, readers)
    shown = next((each for each in kept if each.shows.startswith("border")), kept[0])
    page.write(
        folder / "index.html",
        summary,
        kept,
        weeks,
        edition=f"{shown.district}-{shown.week}",
        reader=shown.reader,
        settings=str(folder / "leafturn.toml"),
        files=str(folder / "files"),
    )
    return summary


def _tell(console: Console, folder: Path, summary: Outcome) -> None:
    """The same for people."""
    table = Table(title="What was hidden, and what the delivered mail says of it", title_justify="left")
    for heading in ("name", "outcome", "weeks", "what was added"):
        table.add_column(heading)
    for event in EVENTS:
        span = f"{event.weeks[0]} to {event.weeks[-1]}" if len(event.weeks) > 1 else event.weeks[0]
        table.add_row(event.name, page.outcome(event, summary), span, event.adds)
    console.print(table)
    console.print(f"Now open {folder / 'index.html'}: a dozen of the digests, and what to do next.")


@contextmanager
def _bar(console: Console) -> Iterator[Step]:
    columns = (TextColumn("{task.description:<24}"), BarColumn(), MofNCompleteColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("Writing the files", total=None)

        def step(done: int, total: int, what: str) -> None:
            bar.update(task, completed=done, total=total, description=what)

        yield step
