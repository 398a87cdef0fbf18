"""The files themselves: which columns each kind has, and how a value is written."""

import csv
from collections.abc import Iterable, Mapping
from datetime import date, datetime
from pathlib import Path
from typing import Any

Row = dict[str, Any]

COLUMNS = {
    "postcodes": "district code name latitude longitude elevation_m",
    "holdings": "id district name registered_on",
    "paddocks": "id holding district name latitude longitude elevation_m area_ha crop sown_on up_on last_crop "
    "pasture_before capeweed_before seed_dressing dressing_group grazed flowering row_spacing_m plants_per_m2 "
    "enter_leave",
    "people": "id district name email roles",
    "subscribers": "id district email name postcode crops paddocks holding language consent person",
    "stations": "id district name latitude longitude elevation_m attribution",
    "station_days": "station day tmin tmax rain arrived_at",
    "observations": "record_id day latitude longitude uncertainty_m paddock district crop stage stage_scale pest "
    "status count unit units_sampled method damage reporter confidence why spot_counts units_per_spot spot_at "
    "trap lure nights serviced_on treated_group treated_on arrived_at",
}


def write(path: Path, kind: str, rows: Iterable[Mapping[str, Any]]) -> None:
    """One CSV file with the columns of its kind; a field that a row lacks is left empty."""
    columns = COLUMNS[kind].split()
    kept = ({name: _cell(row.get(name)) for name in columns} for row in rows)
    path.parent.mkdir(parents=True, exist_ok=True)
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, columns, lineterminator="\n")
        writer.writeheader()
        writer.writerows(kept)


def _cell(value: object) -> object:
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, datetime):
        return value.isoformat(timespec="seconds")
    if isinstance(value, date):
        return value.isoformat()
    if isinstance(value, tuple):
        return ";".join(str(_cell(item)) for item in value)
    return value
