"""`take`, `take-pg`: a million observations from a CSV file into a store, beside the store's own bulk loader.

Ours is the command `leafturn take`, from its start to its end: every row is checked, keyed, given its cell
and its digest, and the rows are on the disk. The other loads the same file unchecked into a table of ten
text columns with the same indexes: a unique one on the record id, and one on (district, day). Record ids
are random, as phones make them.
"""

import json
import os
import random
import shutil
import sqlite3
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Callable, Iterator
from datetime import date, timedelta
from pathlib import Path
from statistics import median
from typing import Any

from service.places import place
from service.store import network, schema
from service.store.base import Store
from tests import postgres
from tests.bench.anchors import row
from tests.builders import LAT, LON, NOW, a_district, a_holding, a_person, a_postcode

ROWS, ROUNDS = 1_000_000, 3
DISTRICTS = [f"d{n}" for n in range(4)]
PEOPLE = [f"p{n:02d}" for n in range(40)]
PESTS = ("redlegged_earth_mite", "lucerne_flea", "cutworms")
CROPS = ("canola", "wheat", "barley", "lentil")
HEADER = "record_id,day,latitude,longitude,district,crop,pest,status,reporter,note"
TABLE = (
    "CREATE TABLE other (record_id text PRIMARY KEY, day text, latitude text, longitude text, district text, "
    "crop text, pest text, status text, reporter text, note text); CREATE INDEX other_at ON other (district, day);"
)


def rows(only: str | None) -> Iterator[dict[str, Any]]:
    """The rows of this module, or the one that is asked for."""
    wanted = [(name, bench) for name, bench in (("take", _sqlite), ("take-pg", _postgresql)) if only in (None, name)]
    if wanted:
        with tempfile.TemporaryDirectory(prefix="take") as folder:
            file = _file(Path(folder))
            for _, bench in wanted:
                yield bench(Path(folder), file)


def _file(folder: Path) -> Path:
    """A million invented observations round four centres in open ocean; about 96 MB."""
    draw = random.Random(20260512)
    days = [str(date(2024, 5, 1) + timedelta(days=n)) for n in range(700)]
    path = folder / "observations.csv"
    with path.open("w", encoding="utf-8") as file:
        file.write(HEADER + "\n")
        for _ in range(ROWS):
            at = draw.randrange(4)
            lat, lon = LAT + draw.random(), LON + at + draw.random()
            file.write(
                f"{draw.getrandbits(48):012x},{draw.choice(days)},{lat:.5f},{lon:.5f},"
                f"{DISTRICTS[at]},{draw.choice(CROPS)},{draw.choice(PESTS)},{draw.choice(('present', 'absent'))},"
                f"{draw.choice(PEOPLE)},row {draw.randrange(100)} near gate\n"
            )
    return path


def _prepare(url: str) -> None:
    """A store with the network that the file refers to."""
    store = Store.open(url)
    schema.upgrade(store)
    with store.writing() as c:
        for at, id in enumerate(DISTRICTS):
            lat, lon = LAT + 0.5, LON + at + 0.5
            network.save_district(c, a_district(id=id, latitude=lat, longitude=lon), NOW)
            network.save_postcodes(c, [a_postcode(district=id, code=f"900{at}", place=place(lat, lon))], NOW)
            network.save_holdings(c, [a_holding(f"h{at}", district=id)], NOW)
        network.save_people(c, [a_person(id, district="d0") for id in PEOPLE])
    store.close()


def _take(url: str, file: Path) -> None:
    """Ours: the command, in a new process."""
    command = [str(Path(sys.executable).with_name("leafturn")), "take", str(file), "--json"]
    done = subprocess.run(
        command, env=os.environ | {"LEAFTURN_STORE__URL": url}, capture_output=True, text=True, check=False
    )
    if done.returncode != 0 or json.loads(done.stdout)["new"] != ROWS:
        raise RuntimeError(f"leafturn take failed: {done.stdout}{done.stderr}")


def _compare(ours: Callable[[], object], other: Callable[[], object]) -> tuple[float, float]:
    """Median seconds of each, in turn."""
    taken: tuple[list[float], list[float]] = ([], [])
    for _ in range(ROUNDS):
        for seconds, run in zip(taken, (ours, other), strict=True):
            seconds.append(_timed(run))
    return median(taken[0]), median(taken[1])


def _timed(run: Callable[[], object]) -> float:
    began = time.perf_counter()
    run()
    return time.perf_counter() - began


# --- SQLite ------------------------------------------------------------------------------------


def _sqlite(folder: Path, file: Path) -> dict[str, Any]:
    shell = _tool("sqlite3", "sqlite3")
    empty, store, other = folder / "empty.db", folder / "store.db", folder / "other.db"
    _prepare(f"sqlite:///{empty}")
    statements = [TABLE, f".import --csv --skip 1 {file} other"]

    def fresh() -> str:
        for old in folder.glob("store.db*"):
            old.unlink()
        shutil.copy(empty, store)
        return f"sqlite:///{store}"

    def import_it() -> None:
        other.unlink(missing_ok=True)
        subprocess.run([shell, str(other), *statements], check=True)

    ours_s, other_s = _compare(lambda: _take(fresh(), file), import_it)
    url = fresh()
    held_s = _lock_held(store, lambda: _take(url, file))
    print(f"take: the write lock was held for {held_s:.1f} s of a take of {ROWS:,} rows (limit 6 s)", file=sys.stderr)
    return row(
        "take", ours_s, other_s, f"sqlite3 other.db '{TABLE}' '.import --csv --skip 1 FILE other'", 1.0, "higher"
    )


def _lock_held(store: Path, run: Callable[[], object]) -> float:
    """The longest time in which another writer was turned away while something runs [s]."""
    ended = threading.Event()
    worker = threading.Thread(target=lambda: (run(), ended.set()))
    worker.start()
    longest, since = 0.0, time.perf_counter()
    while not ended.wait(0.01):
        if not _turned_away(store):
            since = time.perf_counter()
        longest = max(longest, time.perf_counter() - since)
    worker.join()
    return longest


def _turned_away(store: Path) -> bool:
    writer = sqlite3.connect(store, timeout=0, isolation_level=None)
    try:
        writer.execute("BEGIN IMMEDIATE")
        writer.execute("ROLLBACK")
    except sqlite3.OperationalError:
        return True
    finally:
        writer.close()
    return False


# --- PostgreSQL --------------------------------------------------------------------------------


def _postgresql(folder: Path, file: Path) -> dict[str, Any]:
    shell = _tool("psql", "postgresql-client")
    copy = f"\\copy other from '{file}' (format csv, header)"
    ours, others = [], []
    with postgres.server() as server:
        for _ in range(ROUNDS):
            with postgres.database(server) as url:
                _prepare(url)
                ours.append(_timed(lambda url=url: _take(url, file)))
            with postgres.database(server) as url:
                plain = url.replace("postgresql+psycopg", "postgresql")
                command = [shell, plain, "-q", "-v", "ON_ERROR_STOP=1", "-c", TABLE, "-c", copy]
                others.append(_timed(lambda command=command: subprocess.run(command, check=True)))
    return row("take-pg", median(ours), median(others), f"psql -c '{TABLE}' -c '\\copy other from FILE'", 0.6, "higher")


def _tool(name: str, package: str) -> str:
    found = shutil.which(name)
    if found is None:
        raise SystemExit(f"this bench needs {name}; install Debian's package {package}")
    return found
