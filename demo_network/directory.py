"""The standing files of the network: districts, postcodes, holdings, people, readers, masts."""

from pathlib import Path

from demo_network import names, readers
from demo_network.farming import World
from demo_network.files import write
from demo_network.network import COORDINATORS, DISTRICTS, District, Person, Spot
from demo_network.readers import CONSENT, Reader

ATTRIBUTION = "invented weather of the demo network"
# two of each district's notifiable pests; the demo's hotlines are invented, and one row of the demo matches
REPORTABLES = (
    ("khapra_beetle", ("khapra beetle", "Trogoderma granarium", "TROGGA"), "2024-01-15"),
    ("karnal_bunt", ("Karnal bunt", "Tilletia indica", "NEOVIN"), "2024-01-15"),
)


def write_all(folder: Path, world: World) -> None:
    """Every standing file but the paddocks."""
    folder.mkdir(parents=True, exist_ok=True)
    text = "\n".join(_district(district) for district in DISTRICTS.values())
    (folder / "district.toml").write_text(text, encoding="utf-8")
    network = world.network
    write(
        folder / "postcodes.csv",
        "postcodes",
        [{"district": p.district, "code": p.code, "name": p.name, **_spot(p.spot)} for p in network.postcodes],
    )
    write(folder / "holdings.csv", "holdings", [vars(holding) for holding in network.holdings])
    write(folder / "people.csv", "people", [_person(person) for person in network.people])
    write(
        folder / "stations.csv",
        "stations",
        [vars(s) | _spot(s.spot) | {"attribution": ATTRIBUTION} for s in network.stations],
    )
    write(
        folder / "subscribers.csv",
        "subscribers",
        [_reader(at, reader) for at, reader in enumerate(readers.invent(world))],
    )


def _spot(spot: Spot) -> dict[str, object]:
    return vars(spot)


def _person(person: Person) -> dict[str, object]:
    return vars(person) | {"email": names.address(person.name)}


def _reader(at: int, reader: Reader) -> dict[str, object]:
    return vars(reader) | {"email": reader.email, "language": "en", "consent": CONSENT[at % len(CONSENT)]}


def _district(district: District) -> str:
    lines = [
        "[[district]]",
        f'id = "{district.id}"',
        f'name = "{district.name}"',
        f'zone = "{district.zone}"',
        f'hotline = "{district.hotline}"',
        f'hotline_name = "{district.hotline_name}"',
        f'temperature_type = "{district.temperature_type}"',
        'season_opens = "02-15"',
        f"latitude = {district.latitude}",
        f"longitude = {district.longitude}",
        f'coordinator = "{COORDINATORS[district.id]}"',
        "holdings_to_hide = 5",
        'cut_off = "Tue 12:00"',
        'sign_by = "Wed 12:00"',
    ]
    for id, known_as, listed_on in REPORTABLES:
        spelled = ", ".join(f'"{name}"' for name in known_as)
        lines += ["", "[[district.reportables]]", f'id = "{id}"', f"names = [{spelled}]", f"listed_on = {listed_on}"]
    return "\n".join(lines) + "\n"
