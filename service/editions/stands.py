"""A reader's crops and how far each is known to be grown: what decides whether a pest matters to them."""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import date
from functools import partial

from rules.book import Pest
from rules.records import Known, Observation, Paddock, Subscriber
from rules.stages import crop_stage

UP = 9  # BBCH and Zadoks: the crop breaks the surface
# A pest whose risk begins by then may be waiting for the crop on weeds and pasture edges. Our choice.
WAITS_UNTIL = 10
LAST_FOR_YEARS = frozenset({"lucerne", "pasture"})  # when such a stand was sown or came up may be long ago


@dataclass(frozen=True, slots=True)
class Stand:
    """One crop of a reader's. `at` is reported, up, sown, unknown, or before (it is not up yet)."""

    crop: str
    at: str
    paddock: str | None = None
    code: int | None = None
    dressed: bool = False


class Stages:
    """Crop stages of a district's paddocks on any day, each worked out once."""

    def __init__(self, known: Known) -> None:
        self._paddocks = {id: _this_seasons(paddock, known.season_from) for id, paddock in known.paddocks.items()}
        self._reports: Mapping[str, list[Observation]] = defaultdict(list)
        for row in known.observations:
            fresh = known.season_from <= row.day and row.knowable_from <= known.as_of
            if row.paddock and fresh and (row.crop or row.stage is not None):
                self._reports[row.paddock].append(row)
        self._done: dict[tuple[str, date], Stand] = {}

    def stand(self, paddock: str, day: date) -> Stand:
        """A paddock's crop as known on a day from what was reported by then."""
        key = (paddock, day)
        if key not in self._done:
            reports = [row for row in self._reports.get(paddock, ()) if row.day <= day]
            self._done[key] = _stand(_with_crop(self._paddocks[paddock], reports), reports, day)
        return self._done[key]


def _this_seasons(paddock: Paddock, opened: date) -> Paddock:
    """A paddock without the days of an earlier season's crop: nobody has said yet how this one stands."""
    if paddock.crop in LAST_FOR_YEARS:
        return paddock
    sown, up = (day if day and day >= opened else None for day in (paddock.sown_on, paddock.up_on))
    return replace(paddock, sown_on=sown, up_on=up)


def _with_crop(paddock: Paddock, reports: Sequence[Observation]) -> Paddock:
    """A paddock whose crop nobody entered has the one last reported from it this season."""
    if paddock.crop:
        return paddock
    named = [row for row in reports if row.crop]
    return replace(paddock, crop=max(named, key=lambda row: row.day).crop) if named else paddock


def _stand(paddock: Paddock, reports: Sequence[Observation], day: date) -> Stand:
    stage = crop_stage(paddock, reports, day)
    make = partial(Stand, paddock.crop or "", paddock=paddock.id, dressed=bool(paddock.seed_dressing))
    if stage.code is not None:
        return make("before" if stage.code < UP else "reported", code=stage.code)
    not_yet = paddock.sown_on is not None and paddock.sown_on > day
    return make("before" if not_yet else stage.basis)


def stands(reader: Subscriber, known: Known, stages: Stages) -> list[Stand]:
    """The reader's crops: paddock by paddock, then crops that no paddock of theirs is known to hold."""
    own = [stages.stand(id, known.today) for id in reader.paddocks if id in known.paddocks]
    found = [stand for stand in own if stand.crop]
    held = {stand.crop for stand in found}
    return found + [Stand(crop, "unknown") for crop in reader.crops if crop not in held]


def at_risk(pest: Pest, stand: Stand) -> bool:
    """Whether a pest may matter to a crop at its stage; an unknown stage can't rule it out."""
    risks = [risk for risk in pest.risks if risk.crop == stand.crop]
    if stand.at == "before":
        return any(risk.stage_from <= WAITS_UNTIL for risk in risks)
    if stand.code is None:
        return bool(risks)
    return any(risk.stage_from <= stand.code <= risk.stage_to for risk in risks)


def any_stage(pest: Pest, crop: str) -> bool:
    """Whether a pest matters to a crop whatever its stage, as in pasture."""
    return any(risk.crop == crop and risk.stage_from < UP and risk.stage_to >= 90 for risk in pest.risks)
