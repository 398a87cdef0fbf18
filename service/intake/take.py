"""Take a file of observations: all of it or nothing, once however often it is taken.

1. Rows that name a notifiable pest go to the closed table, and to nothing that follows.
2. The others are checked; a row that can't be taken stops the file, unless the good ones are wanted alone.
3. They are compared with what the store knows by their keys, and the new ones are added.
"""

import codecs
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import pyarrow as pa
import pyarrow.compute as pc
from sqlalchemy import Connection

from rules.records import Refusal
from service import rulebook
from service.clock import Clock
from service.errors import BadInput, NotFound
from service.intake import cells, checking, csv_file, refusals, reportable, sheet
from service.intake.checking import Progress
from service.intake.consistency import Mask
from service.intake.frame import Frame, Names, frame_of
from service.intake.incoming import Builder
from service.intake.memory import for_many_rows
from service.intake.order import ascending
from service.intake.refusals import RowsRefused
from service.intake.sheet import Sheet
from service.store import observation_load, reportables
from service.store.base import Store, micros
from service.store.reportables import Case


@for_many_rows()
def take_observations(
    store: Store,
    path: Path,
    *,
    clock: Clock,
    source: str = "csv",
    district: str | None = None,
    history: bool = False,
    keep_good: Path | None = None,
    revise: bool = False,
    progress: Progress | None = None,
) -> dict[str, Any]:
    """Take a file of observations into the store.

    Parameters
    ----------
    source
        Whose record ids these are, for rows that don't say.
    district
        The district of rows that don't tell it by paddock, postcode or column.
    history
        Rows of past seasons: knowable from their stated arrival, or from an assumed one, flagged.
    keep_good
        Take the good rows, and write the others to this file, to mend and take again.
    revise
        Rows that changed under a known key become its next version, in place of being refused.

    Returns
    -------
    dict
        The numbers of rows `new`, `revised`, `same` (known already) and `refused`; `to_the_hotline` is what
        the reporter must read first, or None.

    Raises
    ------
    RowsRefused
        Nothing was taken; names every row that can't be, with its remedy.
    """
    frame = frame_of(store, Names.of(rulebook.load()), clock.now(), district)
    builder = Builder(frame, checked_source(source, frame), history)
    if keep_good is not None:
        refusals.check_target(keep_good, path)
    with checking.helper_for(path) as helper:
        taking = _open(store, path, frame)
        part = checking.Part(taking.whole, taking.wanted, builder)
        tables, refused = checking.check(part, helper, progress)
        taking.refused += refused
    table, twice = _once(_by_key(tables, builder), taking)
    taking.stop_if_refused(keep_good)
    with store.writing() as c:
        counts = _add(c, taking, table, builder, revise)
        taking.stop_if_refused(keep_good)
        if keep_good is not None:
            taking.keep(keep_good)
    counts["same"] += twice
    return counts | {"refused": len(taking.refused_rows()), "to_the_hotline": taking.first}


def checked_source(source: str, frame: Frame) -> str:
    """A source that can be part of a key."""
    try:
        return str(cells.read("source", source, frame) or "csv")
    except ValueError as error:
        raise BadInput(f"source {source!r}: {error}") from error


@dataclass(slots=True)
class _Taking:
    """One file on its way in: what is wanted of it, what was refused, and what must be said first."""

    name: str  # as it may be shown
    whole: Sheet
    frame: Frame
    wanted: Mask
    refused: list[Refusal]
    first: str | None

    def refused_rows(self) -> set[int]:
        return {refusal.row for refusal in self.refused}

    def stop_if_refused(self, keep_good: Path | None) -> None:
        """All or nothing, unless the good rows are wanted alone."""
        self.refused.sort(key=lambda refusal: refusal.row)
        if self.refused and keep_good is None:
            raise RowsRefused(refusals.summary(self.name, self.refused), self.refused, self.first)

    def keep(self, path: Path) -> None:
        """Write the refused rows, if there are any, to be mended and taken again."""
        numbers = self.refused_rows()
        rows = {misfit.number: misfit.cells for misfit in self.whole.misfits if misfit.number in numbers}
        fitting = sorted(numbers - set(rows))
        found = self.whole.columns.take(pa.array(np.searchsorted(self.whole.numbers, fitting)))
        rows |= {at: list(row.values()) for at, row in zip(fitting, found.to_pylist(), strict=True)}
        if rows:
            refusals.keep(path, self.whole.header, rows, self.refused)


# --- 1. notifiable pests -----------------------------------------------------------------------


def _open(store: Store, path: Path, frame: Frame) -> _Taking:
    """Read a file and put aside what must go no further."""
    try:
        whole = sheet.read(path)
    except BadInput as error:
        raise _told_apart(store, path, frame, error) from None
    matching, odd, cases = reportable.cases_in(whole, path, frame)
    first = _put_aside(store, cases, frame)
    name = reportable.showable(path.name, "the file", frame)
    return _Taking(name, whole, frame, ~matching, csv_file.misfits(whole, odd), first)


def unreadable(store: Store, path: Path, error: BadInput, *, clock: Clock) -> BadInput:
    """The refusal of a file of whatever kind that could not be read, after it was searched for listed pests.

    Raise what this gives in place of `error`: it names nothing that stands on a list, and begins with what
    the reporter must read first. A file that was searched already, and one of districts, whose lists hold these
    names, are told as they are.
    """
    if isinstance(error, RowsRefused) or path.suffix.lower() == ".toml":
        return error
    try:
        frame = frame_of(store, Names.of(rulebook.load()), clock.now())
    except NotFound:  # no district yet, so no list
        return error
    return _told_apart(store, path, frame, error)


def _told_apart(store: Store, path: Path, frame: Frame, error: BadInput) -> BadInput:
    text = _whatever_it_says(path) if path.is_file() else ""
    first = _put_aside(store, reportable.cases_in_text(text, path, frame), frame)
    words = reportable.showable(str(error), "the file is no table of observations; check its header and rows", frame)
    said = ((each, f"{each.field} {each.value} {each.remedy}") for each in error.refusals)
    told = [each for each, text in said if reportable.showable(text, "", frame) == text]
    return RowsRefused(words, told, first)


def _whatever_it_says(path: Path) -> str:
    """The text of a file in whichever encoding it is; of one that is no text, its name."""
    raw = path.read_bytes()
    for encoding in ("utf-16" if raw[:2] in (codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE) else "utf-8-sig", "latin-1"):
        try:
            text = raw.decode(encoding)
        except UnicodeDecodeError:
            continue
        return path.name if "\x00" in text else text
    return path.name


def _put_aside(store: Store, cases: list[Case], frame: Frame) -> str | None:
    """Keep cases before anything can fail; what the reporter must read first."""
    if cases:
        with store.writing() as c:
            reportables.save_cases(c, cases)
    return reportable.tell_first(cases, frame)


# --- 2. rows that can be taken -----------------------------------------------------------------


def _by_key(tables: list[pa.Table], builder: Builder) -> pa.Table:
    """All blocks as one table, sorted by key."""
    if not tables:
        return pa.table({"key": pa.array([], pa.string())})
    table = builder.join(tables).combine_chunks()
    return table.take(pa.array(ascending(table["key"].combine_chunks())))


def _once(table: pa.Table, taking: _Taking) -> tuple[pa.Table, int]:
    """Each key once: a row that says the same again is left out, one that says something else is refused."""
    keys = table["key"].combine_chunks()
    again = np.zeros(len(keys), bool)
    again[1:] = pc.equal(keys[1:], keys[:-1]).to_numpy(zero_copy_only=False)
    if not again.any():
        return table, 0
    leader = np.maximum.accumulate(np.where(again, 0, np.arange(len(keys))))
    other = ~pc.equal(table["digest"], table["digest"].take(pa.array(leader))).to_numpy()
    for at in np.flatnonzero(other).tolist():
        row, first = table["row"][at].as_py(), table["row"][int(leader[at])].as_py()
        remedy = f"row {first} has the same record id and says something else; keep one of them, or give it its own id"
        taking.refused.append(Refusal(row, "record_id", _record_id(keys[at].as_py()), remedy))
    return table.filter(pa.array(~again)), int((again & ~other).sum())


def _record_id(key: str) -> str:
    return key.partition(":")[2]


# --- 3. what is new ----------------------------------------------------------------------------


def _add(c: Connection, taking: _Taking, table: pa.Table, builder: Builder, revise: bool) -> dict[str, int]:
    """Add what is new, and next versions of what has changed if they are wanted; else that is refused."""
    if not table.num_rows:
        return {"new": 0, "revised": 0, "same": 0}
    held = observation_load.known(c, table["key"].combine_chunks(), table["digest"].combine_chunks())
    new, changed = held.newest == 0, (held.newest > 0) & ~held.same
    if not revise:
        for at in np.flatnonzero(changed).tolist():
            row, id = table["row"][at].as_py(), _record_id(table["key"][at].as_py())
            taking.refused.append(Refusal(row, "record_id", id, _CHANGED))
    wanted = new | changed if revise else new
    table = table.drop_columns("row")
    if revise and changed.any():
        table = _as_next_versions(table, held.newest, changed, taking.frame)
    if not wanted.all():
        table = table.filter(pa.array(wanted))
    observation_load.load(c, table, builder.constants(table.column_names))
    return {"new": int(new.sum()), "revised": int(changed.sum()) if revise else 0, "same": int(held.same.sum())}


def _as_next_versions(table: pa.Table, newest: npt.NDArray[np.int64], changed: Mask, frame: Frame) -> pa.Table:
    """Number the versions. A change is knowable from now, in history too: what was said before stays so."""
    table = table.append_column("version", pa.array(newest + 1))
    if "knowable_from" not in table.column_names:
        return table
    since = pc.if_else(pa.array(changed), micros(frame.now), table["knowable_from"])
    return table.set_column(table.column_names.index("knowable_from"), "knowable_from", since)


_CHANGED = "is known and said something else; mend it, or take it with --revise to make this its next version"
