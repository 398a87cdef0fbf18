"""A fresh count by spots, set against the number that matters for that crop, stage and unit.

Only numbers with a source or of common practice are compared with; a count that can't be brought to the
number's unit is not compared at all. One number for a whole paddock has no interval: it is answered with
*count by spots*, and never called.
"""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import timedelta
from typing import Any

from rules import thresholds
from rules.book import LIVE_MARKS, Pest, Rule, Threshold
from rules.records import Ask, Evidence, Known, Observation, Paddock, Signal
from rules.stages import crop_stage
from service.signals.evidence import of_observation, of_paddock, signal


@dataclass(frozen=True, slots=True)
class Count:
    """A row with a count, with the crop and stage it was made in and the row that told the stage."""

    row: Observation
    paddock: Paddock
    crop: str
    stage: int
    stage_row: Observation


@dataclass(frozen=True, slots=True)
class Measured:
    """A count in the number's unit; one without spots has its mean alone."""

    mean: float
    interval: tuple[float, float] | None = None
    spots: int | None = None
    edge_mean: float | None = None
    middle_mean: float | None = None


def evaluate(known: Known, rule: Rule, pest: Pest) -> list[Signal]:
    """At most one signal a paddock, from its newest count; paddocks by id."""
    counts = _counts(known, rule, pest)
    found = (_answer(known, rule, pest, counts[id]) for id in sorted(counts))
    return [each for each in found if each is not None]


def _counts(known: Known, rule: Rule, pest: Pest) -> dict[str, list[Observation]]:
    """The fresh rows of each paddock that were counted, and surely this pest; oldest first."""
    oldest = known.today - timedelta(days=rule.parameters["count_within_days"])
    rows = [
        row
        for row in known.observations
        if row.pest == pest.id
        and row.paddock in known.paddocks
        and oldest <= row.day <= known.today
        and (_by_spots(row) or row.count)
        and row.unit
        and row.confidence != "unsure"
    ]
    counts: dict[str, list[Observation]] = defaultdict(list)
    for row in sorted(rows, key=lambda row: (row.day, row.arrived_at, row.key)):
        counts[str(row.paddock)].append(row)
    return counts


def _by_spots(row: Observation) -> bool:
    """Whether there are spots enough for an interval: one has no spread."""
    return len(row.spot_counts) > 1


def _answer(known: Known, rule: Rule, pest: Pest, rows: Sequence[Observation]) -> Signal | None:
    """What the newest count by spots says; only where that is nothing, a later one may be asked for by spots."""
    by_spots = [row for row in rows if _by_spots(row)]
    said = _of_row(known, rule, pest, by_spots[-1]) if by_spots else None
    later = [row for row in rows if not by_spots or row.day > by_spots[-1].day]
    return _of_row(known, rule, pest, later[-1]) if said is None and later else said


def _of_row(known: Known, rule: Rule, pest: Pest, row: Observation) -> Signal | None:
    count = _placed(known, row, known.paddocks[str(row.paddock)])
    return _signal(known, rule, pest, count) if count and _at_risk(rule, pest, count) else None


def _placed(known: Known, row: Observation, paddock: Paddock) -> Count | None:
    """The count with its crop and stage; None where either is unknown."""
    crop = row.crop or paddock.crop
    told = row if row.stage is not None else _stage_report(known, paddock, row)
    if crop is None or told is None or told.stage is None:
        return None
    return Count(row, paddock, crop, told.stage, told)


def _stage_report(known: Known, paddock: Paddock, row: Observation) -> Observation | None:
    """The row that tells the stage on the day of the count, if one does."""
    reports = [each for each in known.observations if crop_stage(paddock, [each], row.day).code is not None]
    return max(reports, key=lambda each: (each.day, each.arrived_at, each.key), default=None)


def _at_risk(rule: Rule, pest: Pest, count: Count) -> bool:
    if rule.crops and count.crop not in rule.crops:
        return False
    return any(risk.crop == count.crop and risk.stage_from <= count.stage <= risk.stage_to for risk in pest.risks)


def _number(pest: Pest, count: Count) -> tuple[Threshold, float] | None:
    """The number to compare with, and what brings the count to its unit; the count's own unit goes first.

    Where more numbers are in use, they are one whose doubt reaches from the lowest to the highest.
    """
    usable = [(each, factor) for each in _live(pest, count) if (factor := _factor(each, count)) is not None]
    if not usable:
        return None
    first, factor = usable[0]
    lows, highs = ([getattr(each, end) * factor / f for each, f in usable] for end in ("low", "high"))
    weakest = min(usable, key=lambda pair: pair[0].mark)[0]  # C before S: the weaker mark speaks for all
    return replace(first, low=min(lows), high=max(highs), mark=weakest.mark, source=weakest.source), factor


def _live(pest: Pest, count: Count) -> list[Threshold]:
    """The numbers that readers may be shown for the crop and stage; those in the count's own unit first."""
    found = [each for each in pest.thresholds if each.mark in LIVE_MARKS and each.crop == count.crop]
    found = [each for each in found if each.stage_from <= count.stage <= each.stage_to]
    return sorted(found, key=lambda each: each.unit != count.row.unit)


def _factor(number: Threshold, count: Count) -> float | None:
    """What one of the count's unit is in the number's; None where there is no sound way from one to the other."""
    row, paddock = count.row, count.paddock
    try:
        return thresholds.convert(
            1.0,
            str(row.unit),
            number.unit,
            plants_per_m2=row.plants_per_m2 or paddock.plants_per_m2,
            row_spacing_m=row.row_spacing_m or paddock.row_spacing_m,
        )
    except thresholds.NotConvertible:
        return None


def _units_per_spot(row: Observation) -> float | None:
    """Units counted at each spot; None where neither they nor the units in all were given."""
    if row.units_per_spot:
        return row.units_per_spot
    return row.units_sampled / len(row.spot_counts) if row.units_sampled else None


def _signal(known: Known, rule: Rule, pest: Pest, count: Count) -> Signal | None:
    """What the count says, unless it can't be compared or lies below."""
    number = _number(pest, count)
    measured = None if number is None else _measured(rule, count.row, number[1])
    if number is None or measured is None:
        return None
    threshold, _ = number
    said = thresholds.compare(measured.mean, measured.interval, threshold.low, threshold.high, spots=measured.spots)
    if said.verdict not in ("near", "at_or_above", "count_by_spots"):
        return None
    return signal(
        known,
        rule,
        Ask.COUNT,
        cells=[count.paddock.place.cell],
        paddock=count.paddock.id,
        first_day=count.row.day,
        last_day=count.row.day + timedelta(days=rule.parameters["count_within_days"]),
        figures=_figures(count, threshold, measured, said),
        evidence=_evidence(count),
    )


def _measured(rule: Rule, row: Observation, factor: float) -> Measured | None:
    """The count in the number's unit; None where its spots can't be brought to it."""
    if not _by_spots(row):
        return Measured(float(row.count or 0) * factor)
    units = _units_per_spot(row)
    if units is None:
        return None
    found = thresholds.spot_interval(row.spot_counts, units / factor, confidence=rule.parameters["confidence"])
    edge, middle = (_mean_at(row, where, units / factor) for where in ("edge", "middle"))
    return None if found is None else Measured(found.mean, (found.low, found.high), found.spots, edge, middle)


def _figures(count: Count, threshold: Threshold, measured: Measured, said: thresholds.Comparison) -> dict[str, Any]:
    low, high = measured.interval or (None, None)
    return {
        "day": count.row.day.isoformat(),
        "mean": round(measured.mean, 2),
        "low": None if low is None else round(low, 2),
        "high": None if high is None else round(high, 2),
        "unit": threshold.unit,
        "threshold_low": round(threshold.low, 2),
        "threshold_high": round(threshold.high, 2),
        "verdict": said.verdict,
        "spots": measured.spots,
        "more_spots": said.more_spots,
        "crop": count.crop,
        "stage": count.stage,
        "mark": threshold.mark,
        "source": threshold.source,
        "edge_mean": measured.edge_mean,
        "middle_mean": measured.middle_mean,
    }


def _mean_at(row: Observation, where: str, units: float) -> float | None:
    """The mean of the spots at the edge or in the middle, which differ; None where it was not said."""
    counts = [each for each, at in zip(row.spot_counts, row.spot_at, strict=False) if at == where]
    return round(sum(counts) / len(counts) / units, 2) if counts else None


def _evidence(count: Count) -> Sequence[Evidence]:
    rows = [count.row] if count.stage_row == count.row else [count.row, count.stage_row]
    return [*(of_observation(row) for row in rows), of_paddock(count.paddock)]
