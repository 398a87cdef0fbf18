"""What a file holds, told from its ending and its columns: one table of every kind that can be taken."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from service import rows
from service.errors import BadInput


@dataclass(frozen=True, slots=True)
class Columns:
    """The columns of one kind of table: those it must have, and those it may have."""

    required: tuple[str, ...]
    optional: tuple[str, ...] = ()


NETWORK = {
    "postcodes": Columns(("district", "code", "name", "latitude", "longitude"), ("elevation_m",)),
    "holdings": Columns(("id", "district", "name", "registered_on")),
    "paddocks": Columns(
        ("id", "holding", "district", "name", "latitude", "longitude"),
        (
            "elevation_m",
            "area_ha",
            "crop",
            "sown_on",
            "up_on",
            "last_crop",
            "pasture_before",
            "capeweed_before",
            "seed_dressing",
            "dressing_group",
            "grazed",
            "flowering",
            "row_spacing_m",
            "plants_per_m2",
            "enter_leave",
        ),
    ),
    "people": Columns(("id", "district", "name", "roles"), ("email",)),
    "subscribers": Columns(
        ("id", "district", "email", "name", "postcode", "crops", "consent"),
        ("paddocks", "holding", "language", "person"),
    ),
    "stations": Columns(
        ("id", "district", "name", "latitude", "longitude"),
        ("elevation_m", "attribution"),
    ),
}

REQUIRED = {name: columns.required for name, columns in NETWORK.items()} | {
    "observations": ("day", "pest", "status", "reporter"),
    "station_days": ("station", "day"),
}


def kind_of(path: Path) -> str:
    """The kind of a file; BadInput names every kind and its required columns where it is none of them."""
    ending = path.suffix.lower()
    if ending == ".toml":
        return "district"
    if ending != ".csv":
        raise BadInput(f"{path.name}: what ends in {ending or 'nothing'} can't be taken. {_choices()}")
    header = rows.header_of(path)
    fits = {name: len(required) for name, required in REQUIRED.items() if set(required) <= set(header)}
    best = [name for name, size in fits.items() if size == max(fits.values())]
    if len(best) == 1:
        return best[0]
    if best:
        raise BadInput(f"{path.name} could be {' or '.join(best)}; leave out the columns of the other")
    raise BadInput(f"{path.name} fits no kind of file{_closest(header)}. {_choices()}")


def _closest(header: Sequence[str]) -> str:
    """Which kind the file is nearest to and what it lacks, if it has half of that kind's columns."""
    share = {name: len(set(required) & set(header)) / len(required) for name, required in REQUIRED.items()}
    name = max(share, key=lambda kind: share[kind])
    if share[name] < 0.5:
        return ""
    missing = [column for column in REQUIRED[name] if column not in header]
    return f"; it is nearest to {name}, which also needs: {', '.join(missing)}"


def _choices() -> str:
    lines = [f"  {name}: {','.join(required)}" for name, required in REQUIRED.items()]
    return "Take a district file (.toml), or a CSV with at least these columns:\n" + "\n".join(lines)
