"""The first step of a week: open the store, and take a file in, whatever it holds.

Apart from the steps that follow, so that a take need not wait for what only they use to be loaded.
"""

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any

from service import intake, weather
from service.clock import Clock
from service.errors import BadInput
from service.intake.kinds import kind_of
from service.intake.network_files import take_network
from service.settings import Settings
from service.store import schema
from service.store.base import Store

Outcome = dict[str, Any]
Progress = Callable[[int, int | None, str], None] | None


def open_store(settings: Settings) -> Store:
    """The store in its newest shape; an empty one is filled with tables."""
    store = Store.open(settings.store.url, settings.store.busy_s)
    schema.upgrade(store)
    return store


def take(
    store: Store,
    file: Path,
    *,
    clock: Clock,
    progress: Progress = None,
    history: bool = False,
    district: str | None = None,
    source: str = "csv",
    keep_good: Path | None = None,
    revise: bool = False,
) -> Outcome:
    """Take a file in, whatever it holds: all of it, or nothing and what to mend."""
    observed = partial(intake.take_observations, source=source, district=district, keep_good=keep_good, revise=revise)
    try:
        with store.arrivals():
            if (kind := kind_of(file)) == "observations":
                counts = observed(store, file, clock=clock, history=history, progress=progress)
            elif kind == "station_days":
                counts = weather.take_station_days(store, file, clock=clock, history=history)
            else:
                counts = take_network(store, file, clock=clock)
    except BadInput as error:
        raise intake.unreadable(store, file, error, clock=clock) from None
    first = counts.pop("to_the_hotline", None)  # read before anything else; the file's name may be what it is about
    return {"to_the_hotline": first, "file": "this file" if first else file.name, "kind": kind, **counts}
