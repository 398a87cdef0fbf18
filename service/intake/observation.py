"""One observation as a person reports it: the one model that says whether a row can be taken, and why not."""

from collections.abc import Mapping
from datetime import date, datetime
from typing import Any

import numpy as np
from pydantic import BaseModel, ConfigDict, ValidationError, ValidationInfo, field_validator, model_validator
from pydantic_core import PydanticCustomError

from rules.records import Refusal
from service.intake import cells, consistency
from service.intake.consistency import Mask, Numbers
from service.intake.frame import Frame
from service.intake.where import district_of
from service.store.base import micros


class Observation(BaseModel):
    """The columns of an observation file. Validate with a `Frame` as context; an empty cell is None."""

    model_config = ConfigDict(frozen=True, extra="forbid", validate_default=True)

    day: date | None = None
    pest: str | None = None
    status: str | None = None
    reporter: str | None = None
    record_id: str | None = None
    source: str | None = None
    latitude: float | None = None
    longitude: float | None = None
    uncertainty_m: float | None = None
    paddock: str | None = None
    postcode: str | None = None
    district: str | None = None
    crop: str | None = None
    stage: int | None = None
    stage_scale: str | None = None
    count: float | None = None
    unit: str | None = None
    units_sampled: int | None = None
    method: str | None = None
    damage: str | None = None
    plants_per_m2: float | None = None
    row_spacing_m: float | None = None
    confidence: str | None = None
    why: str | None = None
    spot_counts: tuple[float, ...] | None = None
    units_per_spot: int | None = None
    spot_at: tuple[str, ...] | None = None
    trap: str | None = None
    lure: str | None = None
    nights: int | None = None
    serviced_on: date | None = None
    beneficials: str | None = None
    treated_group: str | None = None
    treated_on: date | None = None
    note: str | None = None
    arrived_at: datetime | None = None

    @field_validator("*", mode="before")
    @classmethod
    def _read(cls, value: str | None, info: ValidationInfo) -> Any:
        try:
            return cells.read(str(info.field_name), value or "", _frame(info))
        except ValueError as error:
            raise PydanticCustomError("cell", "{remedy}", {"remedy": str(error)}) from None

    @model_validator(mode="after")
    def _hold_together(self, info: ValidationInfo) -> "Observation":
        frame = _frame(info)
        view = _RowView(dict(self), frame)
        for rule in consistency.rules(frame):
            if rule.broken(view, frame)[0]:
                words = rule.words(view.values, frame)
                raise PydanticCustomError("row", "{remedy}", {"remedy": words, "field": rule.field})
        return self


COLUMNS = tuple(Observation.model_fields)


def refusals(row: int, values: Mapping[str, str], frame: Frame) -> list[Refusal]:
    """What is wrong with one row, cell by cell; between its cells only where each is right by itself."""
    try:
        Observation.model_validate(dict(values), context=frame)
    except ValidationError as error:
        found = []
        for fault in error.errors(include_url=False):
            told = fault.get("ctx", {})
            name = told.get("field") or str(fault["loc"][0])
            found.append(Refusal(row, name, values.get(name, "")[:80], told.get("remedy", fault["msg"])))
        return found
    return []


def _frame(info: ValidationInfo) -> Frame:
    if not isinstance(info.context, Frame):
        raise TypeError("an observation is validated against a frame: model_validate(..., context=frame)")
    return info.context


class _RowView:
    """One row as the consistency rules look at it."""

    rows = 1

    def __init__(self, values: dict[str, Any], frame: Frame) -> None:
        spots, at = values["spot_counts"], values["spot_at"]
        district, misplaced = district_of(frame, values["paddock"], values["postcode"], values["district"])
        self.values = values | {
            "district": district,
            "misplaced": misplaced or None,
            "spot_n": None if spots is None else len(spots),
            "spot_total": None if spots is None else sum(spots),
            "spot_at_n": None if at is None else len(at),
        }

    def given(self, name: str) -> Mask:
        return np.array([self.values[name] is not None])

    def number(self, name: str) -> Numbers:
        value = self.values[name]
        if isinstance(value, datetime):
            return consistency.day_number(np.array([float(micros(value))]))
        if isinstance(value, date):
            value = value.toordinal()
        return np.array([np.nan if value is None else value], float)

    def equals(self, name: str, value: str) -> Mask:
        return np.array([self.values[name] == value])

    def mapped(self, name: str, numbers: Mapping[str, float]) -> Numbers:
        return np.array([numbers.get(self.values[name], np.nan)])
