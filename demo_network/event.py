"""What one planted event is."""

from collections.abc import Callable
from dataclasses import dataclass

from demo_network.farming import World
from demo_network.files import Row
from demo_network.weather import Change

ARTEFACT = "artefact"


@dataclass(frozen=True)
class Event:
    """One event: where and when it can be seen, and what a reader there should be told in those weeks."""

    name: str
    kind: str  # the kind of rule that sees it, or "artefact": a thing to be said, so that nobody is fooled by it
    pest: str
    district: str
    latitude: float
    longitude: float
    radius_km: float
    weeks: tuple[str, ...]  # of the digests that can say it
    adds: str
    shown_as: str
    rows: Callable[["Event", World], list[Row]] | None = None
    change: Callable[["Event", World], Change] | None = None

    @property
    def artefact(self) -> bool:
        return self.kind == ARTEFACT

    @property
    def telling(self) -> str:
        """What a mail must state: the kind of rule, or the artefact by its own name."""
        return self.name if self.artefact else self.kind
