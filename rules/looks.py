"""Looks from rows: one visit to a paddock or place, for one pest, by one person, on one day."""

from collections import defaultdict
from collections.abc import Collection, Iterable, Mapping, Sequence

from rules.records import Effort, Look, Observation, Why

# Where rows of one look give different reasons, the one that makes a find likeliest stands for it, so that
# a prompted look never passes as routine; a reason that nobody gave yields to any that was given.
PROMPTS_MOST = (Why.DAMAGE, Why.ASKED, Why.FIELD_DAY, Why.LOT, Why.ROUTINE, Why.UNKNOWN)


def is_trap_reading(row: Observation) -> bool:
    """Whether a row reads a trap: moths that flew in from afar, not a visit that looked for the pest in a paddock."""
    return row.trap is not None or row.unit == "per_trap_night"


def is_find(row: Observation) -> bool:
    """Whether a row found the pest; one who is unsure what it was has not."""
    return row.present and row.confidence != "unsure"


def derive(
    observations: Sequence[Observation], spots_planned: Mapping[str, int], uninformative: Collection[str] = frozenset()
) -> list[Look]:
    """The looks that a set of rows tells of.

    Parameters
    ----------
    observations : sequence of Observation
        One version of each row, in any order. Readings of traps are no looks and are left out.
    spots_planned : mapping of pest to int
        Spots that a complete look takes.
    uninformative : collection of str, default empty
        Keys of rows made where the pest hides from any look, such as slugs in dry soil. A look of such
        rows alone that found nothing says nothing about absence; a find stays a find.

    Returns
    -------
    list of Look
        By day, pest, place and reporter. A look is one district, paddock (or cell where no paddock is
        given), pest, reporter and day; found if any row surely found it; knowable once all its rows are.
        Where someone was unsure and nothing was surely found, it is neither a find nor an absence.

    Notes
    -----
    Rows of one look may count the same spots twice (small and large larvae), so its spots are those of
    its longest row, never their sum.
    """
    visits: dict[tuple[object, ...], list[Observation]] = defaultdict(list)
    for row in observations:
        if is_trap_reading(row):
            continue
        where = row.paddock or f"cell {row.place.cell}"
        visits[row.day, row.pest, row.district, row.paddock is None, where, row.reporter].append(row)
    return [_look(rows, spots_planned, uninformative) for _, rows in sorted(visits.items(), key=lambda item: item[0])]


def _look(rows: list[Observation], spots_planned: Mapping[str, int], uninformative: Collection[str]) -> Look:
    rows = sorted(rows, key=lambda row: row.key)
    first, found = rows[0], any(is_find(row) for row in rows)
    unsure = any(row.present for row in rows)
    says_nothing = not found and (unsure or all(row.key in uninformative for row in rows))
    return Look(
        district=first.district,
        pest=first.pest,
        day=first.day,
        reporter=first.reporter,
        place=min(rows, key=_doubt_m).place,
        found=found,
        why=min((row.why for row in rows), key=PROMPTS_MOST.index),
        effort=Effort.UNINFORMATIVE if says_nothing else _effort(rows, spots_planned.get(first.pest)),
        paddock=first.paddock,
        crop=_first_given(row.crop for row in rows),
        knowable_from=max(row.knowable_from for row in rows),
        rows=tuple(row.key for row in rows),
    )


def _effort(rows: Sequence[Observation], planned: int | None) -> Effort:
    """Complete at the planned number of spots; partial where any size was given; else unsized."""
    spots = max(_spots(row) for row in rows)
    if planned is not None and spots >= planned:
        return Effort.COMPLETE
    sized = spots > 0 or any(row.units_sampled for row in rows)
    return Effort.PARTIAL if sized else Effort.UNSIZED


def _spots(row: Observation) -> int:
    """Spots that a row tells of: its counts by spot, else units sampled by units per spot; 0 if not given."""
    if row.spot_counts:
        return len(row.spot_counts)
    return row.units_sampled // row.units_per_spot if row.units_sampled and row.units_per_spot else 0


def _doubt_m(row: Observation) -> float:
    return float("inf") if row.place.uncertainty_m is None else row.place.uncertainty_m


def _first_given(values: Iterable[str | None]) -> str | None:
    return next((value for value in values if value is not None), None)
