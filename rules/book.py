"""The rule book's own nouns: what the catalogue says, and which rules run."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any

from rules.records import Figures

LIVE_MARKS = frozenset({"S", "C", "calc"})  # numbers from memory (M) are carried, but no reader is shown them


@dataclass(frozen=True, slots=True)
class Sourced:
    """A fact of the trade with where it comes from. Marks: S source seen, C common practice, M from memory."""

    value: Any
    mark: str
    source: str


@dataclass(frozen=True, slots=True)
class Threshold:
    """A number that matters, for one crop, span of stages and unit. `low` and `high` bound its doubt."""

    crop: str
    stage_from: int
    stage_to: int
    unit: str
    low: float
    high: float
    mark: str
    source: str
    note: str = ""


@dataclass(frozen=True, slots=True)
class Lookalike:
    name: str
    apart: str
    mark: str = ""
    source: str = ""


@dataclass(frozen=True, slots=True)
class Risk:
    """The stages (BBCH) of a crop at which a pest matters."""

    crop: str
    stage_from: int
    stage_to: int
    mark: str
    source: str


@dataclass(frozen=True, slots=True)
class Pest:
    """One catalogue entry. Texts are sentences for readers; each Sourced carries its mark."""

    id: str
    name: str  # "redlegged earth mite"
    plural: str  # "redlegged earth mites"
    scientific_names: tuple[str, ...]
    eppo: str | None
    aliases: tuple[str, ...]
    lookalikes: tuple[Lookalike, ...]
    damage: Sourced
    risks: tuple[Risk, ...]
    where: Sourced  # where in the paddock to look
    before_up: Sourced  # where to look before the crop is up
    when: tuple[Sourced, ...]  # hours and weather; more than one where practices differ
    method: Sourced
    unit: str  # the sample unit counts are compared in
    spots: Sourced  # int
    units_per_spot: Sourced  # int
    minutes: Sourced  # int, for one look
    relook_days: Sourced  # int, ≤ 7
    thresholds: tuple[Threshold, ...]
    beneficials: Sourced
    notes: tuple[Sourced, ...] = ()
    edge_first: bool = False
    night: bool = False  # the look is made after dark
    lifts_cover: bool = False  # the look lifts tiles, stones or stubble
    dry_soil_uninformative: bool = False


@dataclass(frozen=True, slots=True)
class Crop:
    """A crop and the words readers know its stages by: (first BBCH code, words), ascending."""

    id: str
    name: str
    names: tuple[str, ...]
    scale: str
    stages: tuple[tuple[int, str], ...]
    seedling_to: int = 19
    mark: str = ""
    source: str = ""


@dataclass(frozen=True, slots=True)
class Caution:
    """A sentence about looking safely, tied to what makes it needed; `acting` marks the one about acting."""

    id: str
    text: str
    when: tuple[str, ...]  # always, night, lifts_cover, warm, dressed, acting
    mark: str = ""
    source: str = ""


@dataclass(frozen=True, slots=True)
class Rule:
    """One version of one rule. The hash covers everything that changes what the rule says."""

    id: str
    version: int
    kind: str
    pest: str
    crops: tuple[str, ...]
    parameters: Figures
    wording: str
    status: str  # "live" or "understudy"
    by: str
    why: str
    made_at: datetime | None
    hash: str
    sources: Figures = field(default_factory=dict)  # parameter → its mark and source


@dataclass(frozen=True, slots=True)
class Book:
    """The whole rule book as one run uses it."""

    pests: Mapping[str, Pest]
    crops: Mapping[str, Crop]
    cautions: tuple[Caution, ...]
    rules: tuple[Rule, ...]
    catalogue_hash: str
