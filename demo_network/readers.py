"""Who is sent the digest: growers with their paddocks, their partners, and people who only gave a postcode."""

from dataclasses import dataclass

import numpy as np

from demo_network import names
from demo_network.farming import World
from demo_network.network import DISTRICTS, Holding, Network
from demo_network.seasons import LIVE
from demo_network.settle import STAFF
from demo_network.streams import stream

EACH, PARTNERS = 150, 30  # readers in a district, and how many of them share another reader's holding
CONSENT = (
    "signed the paper list at the autumn meeting on 2026-02-03",
    "asked for it by mail on 2026-01-19",
    "said yes on the telephone to the coordinator on 2026-02-11",
)


@dataclass(frozen=True)
class Reader:
    id: str
    district: str
    name: str
    postcode: str
    crops: tuple[str, ...]
    paddocks: tuple[str, ...] = ()
    holding: str | None = None
    person: str | None = None

    @property
    def email(self) -> str:
        return names.address(self.name)


def invent(world: World) -> list[Reader]:
    """Three hundred readers, half in each district."""
    network = world.network
    found: list[Reader] = []
    for at, district in enumerate(DISTRICTS.values()):
        rng = stream(world.seed, "readers", district.id)
        holdings = [holding for holding in network.holdings if holding.district == district.id]
        unused = iter(names.PEOPLE[at * 200 + len(holdings) + len(STAFF) :])
        owners = [_owner(world, holding, rng) for holding in holdings]
        partners = [_partner(owner, next(unused)) for owner in owners[:PARTNERS]]
        advisers = [_adviser(network, district.id, number, rng) for number in range(2)]
        rest = EACH - len(owners) - len(partners) - len(advisers)
        plain = [_plain(network, district.id, number, next(unused), rng) for number in range(rest)]
        found += owners + partners + advisers + plain
    return found


def _owner(world: World, holding: Holding, rng: np.random.Generator) -> Reader:
    """The grower of a holding; one in ten gave no paddocks."""
    own = [paddock.id for paddock in world.network.own(holding.grower)]
    crops = sorted({world.plans[paddock, LIVE].crop for paddock in own})
    name = next(person.name for person in world.network.people if person.id == holding.grower)
    shown = tuple(own) if rng.random() < 0.9 else ()
    id = holding.grower.replace("-g", "-r")
    return Reader(id, holding.district, name, holding.postcode, tuple(crops), shown, holding.id, holding.grower)


def _partner(owner: Reader, name: str) -> Reader:
    return Reader(owner.id + "b", owner.district, name, owner.postcode, owner.crops, owner.paddocks, owner.holding)


def _adviser(network: Network, district: str, number: int, rng: np.random.Generator) -> Reader:
    person = network.people_in(district, "adviser")[number]
    postcode = _postcode(network, district, rng)
    return Reader(
        person.id.replace("adviser", "v"), district, person.name, postcode, ("canola", "wheat"), person=person.id
    )


def _plain(network: Network, district: str, number: int, name: str, rng: np.random.Generator) -> Reader:
    """A reader without paddocks, who named a postcode and some crops."""
    crops = ("canola", "wheat", "barley", "lupin", "lentil", "lucerne", "medic", "pasture")
    chosen = rng.choice(len(crops), size=int(rng.integers(1, 5)), replace=False)
    id = f"{DISTRICTS[district].letter.lower()}-n{number + 1:02d}"
    return Reader(id, district, name, _postcode(network, district, rng), tuple(sorted(crops[at] for at in chosen)))


def _postcode(network: Network, district: str, rng: np.random.Generator) -> str:
    codes = [postcode.code for postcode in network.postcodes if postcode.district == district]
    return str(codes[int(rng.integers(len(codes)))])
