"""The shape of the catalogue's files: every value with its mark and source, and ranges that can be.

A missing mark or source, a key that does not exist, or an impossible value is refused here; the words of
the refusal are made in `lines.py`.
"""

from datetime import date
from typing import Annotated, Any, Generic, Literal, Self, TypeVar

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, model_validator

V = TypeVar("V")
Mark = Literal["S", "C", "M", "calc"]
Text = Annotated[str, Field(min_length=1)]
Stage = Annotated[int, Field(ge=0, le=99)]
Name = Annotated[str, Field(pattern=r"^[a-z0-9_]+$")]
Unit = Literal[
    "per_plant",
    "per_100cm2",
    "per_m2",
    "per_metre_row",
    "per_half_metre_row",
    "holes_per_leaf",
    "per_10_sweeps",
    "per_trap_night",
    "per_refuge",
    "percent_plants",
]


class Shape(BaseModel):
    """Base of all: nothing that is not named, nothing changed once read, no number from a text."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, allow_inf_nan=False)


class Marked(Shape):
    """Where a fact comes from."""

    mark: Mark
    source: Text


class Value(Marked, Generic[V]):
    value: V


class Span(Marked):
    """A span of stages of some crops."""

    crops: list[Name] = Field(min_length=1)
    stage_from: Stage
    stage_to: Stage

    @model_validator(mode="after")
    def _in_order(self) -> Self:
        if self.stage_from > self.stage_to:
            raise ValueError(f"stage_from {self.stage_from} is after stage_to {self.stage_to}; swap them")
        return self


class ThresholdShape(Span):
    unit: Unit
    low: float = Field(gt=0)
    high: float = Field(gt=0)
    note: str = ""

    @model_validator(mode="after")
    def _low_first(self) -> Self:
        if self.low > self.high:
            raise ValueError(f"low {self.low:g} is above high {self.high:g}; swap them")
        return self


class Names(Marked):
    one: Text
    many: Text
    scientific: list[Text] = Field(min_length=1)
    aliases: list[Text] = []


class LookalikeShape(Marked):
    name: Text
    apart: Text


class PestShape(Shape):
    """One file of `pests/`."""

    id: Name
    names: Names
    eppo: Value[Text] | None = None
    lookalikes: list[LookalikeShape] = Field(min_length=1)
    damage: Value[Text]
    where: Value[Text]
    before_up: Value[Text]
    when: list[Value[Text]] = Field(min_length=1)
    method: Value[Text]
    unit: Value[Unit]
    spots: Value[Annotated[int, Field(ge=1, le=20)]]
    units_per_spot: Value[Annotated[int, Field(ge=1, le=100)]]
    minutes: Value[Annotated[int, Field(ge=1, le=45)]]
    relook_days: Value[Annotated[int, Field(ge=1, le=7)]]
    edge_first: Value[bool]
    night: Value[bool]
    lifts_cover: Value[bool]
    dry_soil_uninformative: Value[bool]
    beneficials: Value[Text]
    notes: list[Value[Text]] = []
    risks: list[Span] = Field(min_length=1)
    thresholds: list[ThresholdShape] = []


class CropShape(Marked):
    id: Name
    name: Text
    aliases: list[Text] = []
    scale: Literal["BBCH", "Zadoks"]
    seedling_to: Stage
    stages: list[tuple[Stage, Text]] = Field(min_length=1)

    @model_validator(mode="before")
    @classmethod
    def _pairs(cls, data: Any) -> Any:
        """TOML has lists only; a pair of code and words is one of two."""
        if isinstance(data, dict) and isinstance(data.get("stages"), list):
            return data | {"stages": [tuple(pair) if isinstance(pair, list) else pair for pair in data["stages"]]}
        return data

    @model_validator(mode="after")
    def _ascending(self) -> Self:
        codes = [code for code, _ in self.stages]
        if codes != sorted(set(codes)):
            raise ValueError(f"the codes of the stages of {self.id} must rise from line to line")
        return self


class Crops(Shape):
    crops: list[CropShape] = Field(min_length=1)


class CautionShape(Marked):
    id: Name
    text: Text
    when: list[Literal["always", "night", "lifts_cover", "warm", "dressed", "acting"]] = Field(min_length=1)


class Cautions(Shape):
    cautions: list[CautionShape] = Field(min_length=1)


# --- rules: a parameter model for each kind ------------------------------------------------------


def _month_and_day(text: str) -> str:
    try:
        date.fromisoformat(f"2001-{text}")
    except ValueError as error:
        raise ValueError(f"{text!r} is not a month and day; write it as 03-01") from error
    return text


Millimetres = Annotated[float, Field(gt=0, le=250)]
Celsius = Annotated[float, Field(ge=-10, le=50)]
Days = Annotated[int, Field(ge=1, le=60)]
Share = Annotated[float, Field(gt=0, lt=1)]


class HatchForm(Shape):
    """Which of the two forms a hatch rule has; read first, since it says what else there must be."""

    model_config = ConfigDict(extra="ignore")

    form: Value[Literal["rain_then_cool", "first_day"]]


class HatchSpan(Shape):
    """What both forms of the hatch rule have."""

    scan_from: Value[Annotated[str, AfterValidator(_month_and_day)]]
    cool_days: Value[Days]
    span_days: Value[Annotated[int, Field(ge=14, le=60)]]  # never narrower than ± 14 days
    speaks_for_days: Value[Days]
    station_within_km: Value[Annotated[float, Field(gt=0, le=500)]]


class RainThenCool(HatchSpan):
    form: Value[Literal["rain_then_cool"]]
    rain_more_than: Value[Millimetres]
    rain_days: Value[Days]
    cool_below_western: Value[Celsius]
    cool_below_south_eastern: Value[Celsius]
    consecutive: Value[bool]


class FirstDay(HatchSpan):
    form: Value[Literal["first_day"]]
    cool_at_most: Value[Celsius]
    rain_at_least: Value[Millimetres]
    rain_within: Value[Days]


class ThresholdParameters(Shape):
    count_within_days: Value[Annotated[int, Field(ge=1, le=7)]]
    confidence: Value[Share]


class FirstSeenParameters(Shape):
    within_days: Value[Days]
    earlier_if_chance_at_most: Value[Share]
    earlier_needs_seasons: Value[Annotated[int, Field(ge=1, le=50)]]


Parameters = RainThenCool | FirstDay | ThresholdParameters | FirstSeenParameters
PARAMETERS: dict[str, type[Parameters]] = {
    "threshold": ThresholdParameters,
    "first_seen": FirstSeenParameters,
}
HATCH_FORMS: dict[str, type[Parameters]] = {"rain_then_cool": RainThenCool, "first_day": FirstDay}


class RuleShape(Shape):
    """One rule of a file of `rules/`; its parameters are checked by the model of its kind."""

    id: Name
    kind: Literal["hatch", "threshold", "first_seen"]
    pest: Name
    crops: list[Name]
    wording: Name
    status: Literal["live", "understudy"]
    by: Text
    why: Text
    parameters: dict[str, Any]


class Rules(Shape):
    rules: list[RuleShape] = Field(min_length=1)
