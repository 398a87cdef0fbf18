"""One report of a notifiable pest among the live season's: it must go to closed hands and be seen nowhere else."""

from datetime import date

from demo_network.directory import REPORTABLES
from demo_network.farming import World
from demo_network.files import Row
from demo_network.network import DISTRICTS
from demo_network.reporters import habits
from demo_network.seasons import local
from demo_network.streams import row_id

DAY = date(2026, 5, 16)  # a Saturday of a signed week
DISTRICT = "lantern"


def row(world: World) -> Row:
    """A grower's find at home, under the name it is listed by."""
    paddock = world.network.paddocks_in(DISTRICT)[7]
    return {
        "record_id": row_id(world.seed, "notifiable"),
        "day": DAY,
        "district": DISTRICT,
        "paddock": paddock.id,
        "pest": REPORTABLES[0][1][0],
        "status": "present",
        "reporter": habits(world.network, world.seed, DISTRICT)[0].person.id,
        "why": "saw damage",
        "arrived_at": local(DAY, 19.5, DISTRICTS[DISTRICT].zone),
    }
