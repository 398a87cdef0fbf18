"""Read the demo's files with nothing of the demo's or the service's own code."""

import csv
from collections import defaultdict
from datetime import date
from pathlib import Path

Rows = list[dict[str, str]]
Weather = dict[str, dict[date, tuple[float, float | None]]]  # mast -> day -> mean [°C], rain [mm]


def rows(path: Path) -> Rows:
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def everywhere(folder: Path, kind: str) -> Rows:
    """The rows of every file of a kind, in the order of their paths."""
    return [row for path in sorted(folder.rglob(f"{kind}.csv")) for row in rows(path)]


def weather(folder: Path, year: int) -> Weather:
    """Every reported mast day of a season."""
    found: Weather = defaultdict(dict)
    for row in everywhere(folder, "station_days"):
        day = date.fromisoformat(row["day"])
        if day.year == year:
            mean = (float(row["tmin"]) + float(row["tmax"])) / 2
            found[row["station"]][day] = (mean, float(row["rain"]) if row["rain"] else None)
    return found
