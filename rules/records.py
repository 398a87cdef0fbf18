"""The nouns that all stages share: frozen, comparable, and without behaviour of their own.

Times are aware datetimes in UTC, days are local dates of the district, cells are H3 indexes of
resolution 7 held as signed 64-bit integers, distances are kilometres, positions WGS 84 degrees.
A value that nobody gave is None (NaN inside arrays); it never becomes 0.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import date, datetime
from enum import StrEnum
from typing import Any

import numpy as np
import numpy.typing as npt

Figures = Mapping[str, Any]


class Ask(StrEnum):
    """What a signal asks of the reader, weakest first. There is nothing stronger than *count it*."""

    KEEP_IN_MIND = "keep in mind"
    LOOK = "go and look"
    COUNT = "count it"


class Why(StrEnum):
    """Why a look was made; the chance of a find depends on it."""

    ROUTINE = "routine"
    ASKED = "asked"
    LOT = "drawn by lot"
    DAMAGE = "saw damage"
    FIELD_DAY = "field day"
    UNKNOWN = "unknown"


class Effort(StrEnum):
    """How much a look can say about absence."""

    COMPLETE = "complete"
    PARTIAL = "partial"
    UNSIZED = "unsized"
    UNINFORMATIVE = "not informative"


# --- the network -------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Place:
    """A position with its doubt and its rule-grid cell."""

    latitude: float
    longitude: float
    cell: int
    uncertainty_m: float | None = None
    elevation_m: float | None = None


@dataclass(frozen=True, slots=True)
class Reportable:
    """One entry of a district's dated list of notifiable pests: the names by which a row matches it."""

    id: str
    names: tuple[str, ...]
    listed_on: date


@dataclass(frozen=True, slots=True)
class District:
    """One grower group's area, with the choices that have no default anywhere else."""

    id: str
    name: str
    zone: str
    hotline: str
    hotline_name: str
    temperature_type: str  # "western" or "south-eastern": which published hatch constant applies
    season_opens: str  # "MM-DD"; holdings registered by then are the ones that hide each other
    latitude: float
    longitude: float
    coordinator: str
    holdings_to_hide: int = 5
    cut_off: str = "Tue 12:00"
    sign_by: str = "Wed 12:00"
    reportables: tuple[Reportable, ...] = ()


@dataclass(frozen=True, slots=True)
class Postcode:
    district: str
    code: str
    name: str
    place: Place


@dataclass(frozen=True, slots=True)
class Holding:
    id: str
    district: str
    name: str
    registered_on: date


@dataclass(frozen=True, slots=True)
class Paddock:
    """A paddock as it was known at some time; every history field is optional."""

    id: str
    holding: str
    district: str
    name: str
    place: Place
    area_ha: float | None = None
    crop: str | None = None
    sown_on: date | None = None
    up_on: date | None = None
    last_crop: str | None = None
    pasture_before: bool | None = None
    capeweed_before: bool | None = None
    seed_dressing: bool | None = None
    dressing_group: str | None = None
    grazed: tuple[date, ...] = ()
    flowering: bool | None = None
    row_spacing_m: float | None = None
    plants_per_m2: float | None = None
    enter_leave: bool = False  # recorded leave for an officer to enter


@dataclass(frozen=True, slots=True)
class Person:
    """Staff or reporter. Roles: coordinator, deputy, officer, adviser, grower."""

    id: str
    district: str
    name: str
    email: str | None
    roles: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Subscriber:
    """A reader. `paddocks` are the reader's own; their finds may be shown to them exactly."""

    id: str
    district: str
    email: str
    name: str
    postcode: str
    crops: tuple[str, ...]
    paddocks: tuple[str, ...] = ()
    holding: str | None = None
    language: str = "en"
    state: str = "confirmed"  # confirmed, paused, left
    consent: str | None = None  # how and when consent was given
    person: str | None = None  # the reporter this reader is, if any


# --- observations ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Observation:
    """One reported row in one version. `happened`, `arrived_at` and `knowable_from` are kept apart."""

    key: str  # source and record id; the idempotency key
    version: int
    district: str
    pest: str
    present: bool
    day: date
    place: Place
    reporter: str
    why: Why
    arrived_at: datetime
    knowable_from: datetime
    digest: str
    paddock: str | None = None
    postcode: str | None = None
    crop: str | None = None
    stage: int | None = None  # BBCH; Zadoks codes are equal for cereals
    stage_scale: str | None = None
    count: float | None = None
    unit: str | None = None
    units_sampled: int | None = None
    method: str | None = None
    damage: str | None = None
    plants_per_m2: float | None = None
    row_spacing_m: float | None = None
    confidence: str | None = None  # sure, fairly sure, unsure
    spot_counts: tuple[float, ...] = ()
    units_per_spot: int | None = None
    spot_at: tuple[str, ...] = ()  # "edge" or "middle", one a spot
    trap: str | None = None
    lure: str | None = None
    nights: int | None = None
    serviced_on: date | None = None
    beneficials: str | None = None
    treated_group: str | None = None
    treated_on: date | None = None
    note: str | None = None
    history: bool = False
    arrival_assumed: bool = False


@dataclass(frozen=True, slots=True)
class Look:
    """One visit for one pest, found or not: the unit of effort, derived from rows, never stored by hand."""

    district: str
    pest: str
    day: date
    reporter: str
    place: Place
    found: bool
    why: Why
    effort: Effort
    paddock: str | None
    crop: str | None
    knowable_from: datetime
    rows: tuple[str, ...]  # keys of the observations it was derived from


# --- weather -----------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Station:
    id: str
    district: str
    name: str
    place: Place
    attribution: str | None = None


@dataclass(frozen=True, slots=True)
class StationDay:
    """One station's day, on the district's local date. `tmean` is (tmin + tmax) / 2 [°C], rain [mm]."""

    station: str
    day: date
    version: int
    tmin: float | None
    tmax: float | None
    rain: float | None
    arrived_at: datetime
    knowable_from: datetime
    digest: str
    arrival_assumed: bool = False


@dataclass(frozen=True, slots=True, eq=False)
class CellDays:
    """One district's interpolated weather: arrays of shape (days, cells), float32, NaN where unknown."""

    district: str
    first_day: date
    cells: npt.NDArray[np.int64]
    tmin: npt.NDArray[np.float32]
    tmax: npt.NDArray[np.float32]
    rain: npt.NDArray[np.float32]
    digest: str

    @property
    def tmean(self) -> npt.NDArray[np.float32]:
        """Daily mean as the rules use it, (tmin + tmax) / 2 [°C]."""
        return (self.tmin + self.tmax) / np.float32(2)


# --- signals, editions -------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Evidence:
    """A row that a figure rests on: which table, which row, which version, and its content's digest."""

    table: str  # observation, station_day, paddock
    id: str
    version: int
    digest: str
    detail: Figures = field(default_factory=dict)  # such as the distance of a station [km]


@dataclass(frozen=True, slots=True)
class Signal:
    """What a rule says about a place and a span of days, with its evidence."""

    id: str
    district: str
    kind: str
    rule: str
    rule_hash: str
    pest: str
    ask: Ask
    cells: tuple[int, ...]
    paddock: str | None  # set where the signal is about one paddock
    first_day: date
    last_day: date
    figures: Figures
    evidence: tuple[Evidence, ...]
    as_of: datetime


@dataclass(frozen=True, slots=True)
class Refusal:
    """Why one row of input was not taken, and what to do about it."""

    row: int
    field: str
    value: str
    remedy: str


@dataclass(frozen=True, slots=True, eq=False)
class Known:
    """All that was knowable of one district at one moment: the only input of signals and editions.

    `observations` hold the newest version knowable at `as_of` of every row, history included, by key;
    `looks` are derived from them. `weather` and `station_days` begin at `season_from`.
    """

    district: District
    as_of: datetime
    today: date  # the district's local date at `as_of`
    season_from: date  # the newest season opening on or before `today`
    observations: tuple[Observation, ...]
    looks: tuple[Look, ...]
    postcodes: Mapping[str, Postcode]
    holdings: Mapping[str, Holding]  # registered by `season_from`: the ones that hide each other
    paddocks: Mapping[str, Paddock]
    people: Mapping[str, Person]
    stations: Mapping[str, Station]
    station_days: tuple[StationDay, ...]
    weather: CellDays | None
