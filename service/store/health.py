"""Whether the store is well, in words for whoever runs it."""

from datetime import datetime

from sqlalchemy import Connection, func, select

from service.store import network, schema
from service.store.base import Store
from service.store.observations import observation
from service.store.weather import station_day


def examine(store: Store) -> tuple[bool, str, datetime | None]:
    """Well or not, in words, and the newest moment at which anything became knowable."""
    with store.reading() as c:
        if store.is_sqlite and (damage := _damage(c)):
            return False, f"the store is damaged ({damage}); bring back a copy of it", None
        newest = _newest(c)
        districts = network.districts(c, newest) if newest else []
        rows = c.execute(select(func.count()).select_from(observation)).scalar_one()
    if differences := schema.differences(store):
        return False, f"the store's shape differs from this program's: {differences[0]}", newest
    where = ", ".join(each.name for each in districts) or "no district yet; next: leafturn take district.toml"
    return True, f"opens and is whole; {rows:,} observations; {where}", newest


def _damage(c: Connection) -> str | None:
    found = str(c.exec_driver_sql("PRAGMA quick_check(1)").scalar_one())
    return None if found == "ok" else found


def _newest(c: Connection) -> datetime | None:
    tables = (observation, station_day, network.district_version, network.paddock)
    moments = [c.execute(select(func.max(table.c.knowable_from))).scalar() for table in tables]
    return max((moment for moment in moments if moment is not None), default=None)
