"""Names that nobody bears. Each kind has words of its own, so that none turns up in a digest by accident."""

from itertools import product

TOWNS = (
    *("Sextant Flat", "Halyard Rise", "Bowline Corner", "Capstan Siding", "Binnacle Well"),
    *("Mizzen Hollow", "Taffrail Flat", "Windlass Corner", "Bulwark Rise", "Gunwale Siding"),
    *("Keelson Well", "Lanyard Hollow", "Oakum Flat", "Pintle Corner", "Ratline Rise"),
    *("Scupper Siding", "Spinnaker Well", "Sheave Hollow", "Staysail Flat", "Stanchion Corner"),
    *("Thwart Rise", "Topsail Siding", "Transom Well", "Trysail Hollow", "Yardarm Flat"),
    *("Foremast Corner", "Futtock Rise", "Grommet Siding", "Hawser Well", "Leeboard Hollow"),
    *("Backstay Flat", "Bobstay Corner", "Cleat Rise", "Davit Siding", "Fairlead Well"),
    *("Garboard Hollow", "Jackstay Flat", "Kedge Corner", "Marlinspike Rise", "Snatchblock Siding"),
)

_FARM_STARTS = (
    *("Aldra", "Brevo", "Cindle", "Dravi", "Embra", "Fenno"),
    *("Gorrin", "Hasta", "Jurro", "Lindra", "Mavro", "Nerrin"),
)
_FARM_ENDS = ("mere", "wick", "holm", "garth", "stead", "combe", "thorpe", "leigh", "worth", "beck")
FARMS = tuple(start + end for end, start in product(_FARM_ENDS, _FARM_STARTS))

_BEASTS = (
    *("Bettong", "Quoll", "Brolga", "Curlew", "Lorikeet", "Galah", "Currawong", "Bandicoot"),
    *("Numbat", "Echidna", "Dunnart", "Potoroo", "Jabiru", "Drongo", "Cassowary"),
)
_SHAPES = ("Forty", "Eighty", "Hundred", "Strip", "Block", "Square", "Twins", "Dogleg")
PADDOCKS = tuple(f"{beast} {shape}" for shape, beast in product(_SHAPES, _BEASTS))

_GIVEN = (
    *("Ivo", "Tamsin", "Oriel", "Bram", "Calla", "Dov", "Elke", "Fenn", "Greta", "Isolde", "Jory", "Lorna"),
    *("Merrin", "Nell", "Orla", "Perrin", "Quenby", "Rafe", "Tobin", "Una", "Verity", "Zelda", "Anselm", "Briony"),
)
_FAMILY = (
    *("Quillby", "Marrowick", "Tansworth", "Ollenby", "Ferrowdale", "Vintercott", "Hobbleden", "Pellamy"),
    *("Crandock", "Wexcombe", "Thornabee", "Lissamore", "Brandlecote", "Yallowby", "Oxterley", "Rundlestone"),
    *("Snaithewell", "Gaddesley", "Embleforth"),
)
# 24 and 19 have no common factor: walking both lists at once meets every pair once
PEOPLE = tuple(f"{_GIVEN[n % 24]} {_FAMILY[n % 19]}" for n in range(24 * 19))


def address(name: str) -> str:
    """An address under a top-level domain that no mail can reach (RFC 2606)."""
    return name.lower().replace(" ", ".") + "@readers.example"
