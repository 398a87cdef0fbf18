"""The view that readers may have of each other's rows: moved to public cells, counted with its effort.

A row of someone else's is first moved to the smallest cell that hides its holding among enough others.
Bands, directions, counts, and *who is asked to look* come from the centres of those cells alone, so any
number of readers together learn no more than the cell. A reader's own rows stay as they are.
"""

from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import date, timedelta

import numpy as np
import numpy.typing as npt

from rules.records import Effort, Known, Look, Paddock, Place, Subscriber
from service import places

NEAR_KM = 20
AT_HOME_KM = 5  # so near to the reader's place, a look that names no paddock may be of it; our choice
RECENT_DAYS = 14
BANDS_KM = (5, 10, 20)
# Mean edge of an H3 hexagon by resolution [km] (the table in H3's documentation), rounded: how far the
# middle of a public cell may be from the row. Coarser cells say no more than "in your district".
CELL_DOUBT_KM = {7: 1, 6: 4, 5: 10}


@dataclass(frozen=True, slots=True)
class Near:
    """How near something is: the upper end of its band [km], or None for *in your district*."""

    band_km: int | None
    direction: str | None = None
    doubt_km: int = 0
    own: bool = False


DISTRICT = Near(None)
OWN = Near(0, own=True)


@dataclass(frozen=True, slots=True)
class Counts:
    """Looks for one pest and how many of them found it, near the reader and in the whole district."""

    near_finds: int = 0
    near_looks: int = 0
    near_own: int = 0  # of the looks near, how many are the reader's own
    finds: int = 0
    looks: int = 0


@dataclass(frozen=True, slots=True)
class Tally:
    """The recent looks for one pest in one public cell."""

    finds: int = 0
    looks: int = 0
    last_find: date | None = None


Crops = frozenset[str]


@dataclass(frozen=True, slots=True, eq=False)
class Farms:
    """Who can hide whom: the paddocks of the holdings that were registered when the season opened."""

    paddocks: Sequence[Paddock]
    holdings: frozenset[str]
    k: int
    blurs: dict[Crops | None, places.Blur] = field(default_factory=dict)

    def blur(self, crops: Crops | None = None) -> places.Blur:
        """The blur among all holdings, or among those known to grow one of some crops."""
        if crops not in self.blurs:
            cells: dict[str, set[int]] = {id: set() for id in sorted(self.holdings)} if crops is None else {}
            for paddock in self.paddocks:
                if paddock.holding in self.holdings and (crops is None or paddock.crop in crops):
                    cells.setdefault(paddock.holding, set()).add(paddock.place.cell)
            self.blurs[crops] = places.blur(cells, self.k)
        return self.blurs[crops]


@dataclass(frozen=True, slots=True, eq=False)
class View:
    """What one edition may show of its district's looks, and where.

    `told` names the rows of which a statement lets readers guess the crop. They are hidden among the holdings
    that grow such a crop: whoever drives past knows who grows what.
    """

    farms: Farms
    told: Mapping[str, Crops]
    tallies: Mapping[str, Mapping[int | None, Tally]]  # by pest and public cell; None is district size
    by_reporter: Mapping[str, Sequence[Look]]
    by_paddock: Mapping[str, Sequence[Look]]

    @property
    def shown(self) -> bool:
        """Whether anything of others may be shown: the district holds enough holdings to hide each one."""
        return self.farms.blur().district_hides

    def public(self, cell: int, crops: Crops | None = None) -> int | None:
        """The public cell that says how near; None where only the district may be named."""
        found = self.farms.blur(crops).public(cell) if self.shown else None
        return found if found is not None and places.resolution(found) in CELL_DOUBT_KM else None

    def spot(self, rows: Iterable[str], cell: int) -> int | None:
        """The public cell of some rows, whatever is told of them."""
        return self.public(cell, next((self.told[key] for key in rows if key in self.told), None))


def farms_of(known: Known) -> Farms:
    """The district's holdings as they stood when the season opened."""
    return Farms(tuple(known.paddocks.values()), frozenset(known.holdings), known.district.holdings_to_hide)


def view(known: Known, told: Mapping[str, Crops] | None = None) -> View:
    """A district's recent looks, each moved to its public cell."""
    bare = View(farms_of(known), told or {}, {}, {}, {})
    looks = recent(known, RECENT_DAYS)
    groups: dict[str, dict[int | None, list[Look]]] = defaultdict(lambda: defaultdict(list))
    for look in looks:
        groups[look.pest][bare.spot(look.rows, look.place.cell)].append(look)
    tallies = {pest: {spot: _tally(there) for spot, there in spots.items()} for pest, spots in groups.items()}
    return replace(bare, tallies=tallies, by_reporter=_by("reporter", looks), by_paddock=_by("paddock", looks))


def _tally(looks: Sequence[Look]) -> Tally:
    found = [look.day for look in looks if look.found]
    return Tally(len(found), len(looks), max(found, default=None))


def _by(name: str, looks: Iterable[Look]) -> dict[str, list[Look]]:
    groups: dict[str, list[Look]] = defaultdict(list)
    for look in looks:
        if getattr(look, name) is not None:
            groups[getattr(look, name)].append(look)
    return groups


def recent(known: Known, days: int, *, until: date | None = None) -> list[Look]:
    """Looks of the last `days` days that can say something, as knowable when the edition was drafted."""
    last = until or known.today
    first = last - timedelta(days=days - 1)
    return [
        look
        for look in known.looks
        if first <= look.day <= last and look.knowable_from <= known.as_of and look.effort != Effort.UNINFORMATIVE
    ]


# --- from one reader's places --------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class Vantage:
    """Where a reader stands: their own paddocks, or else the middle of their postcode."""

    latitude: npt.NDArray[np.float64]
    longitude: npt.NDArray[np.float64]

    def near(self, cells: Sequence[int]) -> dict[int, Near]:
        """How near each public cell is, from its centre alone."""
        if not cells or not self.latitude.size:
            return dict.fromkeys(cells, DISTRICT)
        centres = np.array([places.centre(cell) for cell in cells])
        km = places.distance_km(self.latitude[:, None], self.longitude[:, None], centres[:, 0], centres[:, 1])
        return {cell: self._band(cell, km[:, i], centres[i]) for i, cell in enumerate(cells)}

    def within(self, place: Place, km: float) -> bool:
        """Whether a place of the reader's own rows lies so near."""
        there = places.distance_km(self.latitude, self.longitude, place.latitude, place.longitude)
        return bool(there.size and there.min() <= km)

    def _band(self, cell: int, km: npt.NDArray[np.float64], centre: npt.NDArray[np.float64]) -> Near:
        closest = int(km.argmin())
        band = next((limit for limit in BANDS_KM if km[closest] <= limit), None)
        if band is None:
            return DISTRICT
        doubt = CELL_DOUBT_KM[places.resolution(cell)]
        if km[closest] < doubt:  # the reader may stand anywhere inside it: no direction
            return Near(band, None, doubt)
        words = places.direction(self.latitude[closest], self.longitude[closest], centre[0], centre[1])
        return Near(band, words, doubt)


def vantage(reader: Subscriber, known: Known) -> Vantage:
    """The places from which a reader's distances are measured."""
    here = [known.paddocks[id].place for id in reader.paddocks if id in known.paddocks]
    if not here and reader.postcode in known.postcodes:
        here = [known.postcodes[reader.postcode].place]
    return Vantage(np.array([p.latitude for p in here]), np.array([p.longitude for p in here]))


def own_cells(reader: Subscriber, known: Known) -> frozenset[int]:
    """The rule-grid cells that the reader's weather comes from: own paddocks and postcode."""
    here = [known.paddocks[id].place.cell for id in reader.paddocks if id in known.paddocks]
    if reader.postcode in known.postcodes:
        here.append(known.postcodes[reader.postcode].place.cell)
    return frozenset(here)


def own_looks(seen: View, reader: Subscriber, pest: str | None = None) -> list[Look]:
    """The reader's own recent looks: by themselves, or in their paddocks."""
    found = [look for paddock in reader.paddocks for look in seen.by_paddock.get(paddock, ())]
    found += seen.by_reporter.get(reader.person or "", ())
    return [look for look in dict.fromkeys(found) if pest in (None, look.pest)]


def at_home(look: Look, reader: Subscriber, known: Known, here: Vantage) -> bool:
    """Whether a look of the reader's was on their own place, as far as is known; not on that of someone else."""
    if look.paddock is None:
        return here.within(look.place, AT_HOME_KM if reader.paddocks else NEAR_KM)
    paddock = known.paddocks.get(look.paddock)
    theirs = paddock is not None and reader.holding is not None and paddock.holding == reader.holding
    return look.paddock in reader.paddocks or theirs


def counts(seen: View, pest: str, reader: Subscriber, here: Vantage, near: Mapping[int, Near]) -> Counts:
    """Looks for one pest round a reader: others' by their public cells, the reader's own as they are."""
    own = own_looks(seen, reader, pest)
    close = [look for look in own if here.within(look.place, NEAR_KM)]
    if not seen.shown:
        return Counts(_finds(close), len(close), len(close), _finds(own), len(own))
    spots = seen.tallies.get(pest, {})
    there = [tally for spot, tally in spots.items() if is_near(spot, near)]
    moved = [look for look in own if is_near(seen.spot(look.rows, look.place.cell), near)]
    return Counts(
        sum(tally.finds for tally in there) - _finds(moved) + _finds(close),
        sum(tally.looks for tally in there) - len(moved) + len(close),
        len(close),
        sum(tally.finds for tally in spots.values()),
        sum(tally.looks for tally in spots.values()),
    )


def last_find_near(seen: View, pest: str, reader: Subscriber, near: Mapping[int, Near]) -> date | None:
    """The newest find near the reader, or of their own."""
    others = seen.tallies.get(pest, {}) if seen.shown else {}
    days = [tally.last_find for spot, tally in others.items() if is_near(spot, near)]
    days += [look.day for look in own_looks(seen, reader, pest) if look.found]
    return max((day for day in days if day is not None), default=None)


def is_near(spot: int | None, near: Mapping[int, Near]) -> bool:
    """Whether a public cell counts as near the reader."""
    return spot is not None and near[spot].band_km is not None


def _finds(looks: Iterable[Look]) -> int:
    return sum(look.found for look in looks)
