"""Rules between the cells of a row, each written once: as a mask over columns, of one row or of many.

A rule looks at a `View` and says which rows break it; its remedy is asked for only then.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from datetime import date
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from service.intake.frame import Frame
from service.places import distance_km

Mask = npt.NDArray[np.bool_]
Numbers = npt.NDArray[np.float64]

# No paddock of a district lies further than this from its centre or from one of its postcodes' centres.
FARTHEST_KM = 250.0


class View(Protocol):
    """Columns of a file by name. Days and times are ordinals and microseconds; what is not given is NaN."""

    rows: int

    def given(self, name: str) -> Mask: ...

    def number(self, name: str) -> Numbers: ...

    def equals(self, name: str, value: str) -> Mask: ...

    def mapped(self, name: str, numbers: Mapping[str, float]) -> Numbers:
        """The number that each text of a column stands for; NaN where it stands for none."""
        ...


FIRST_DAY = date(1970, 1, 1).toordinal()


def day_number(microseconds: Numbers) -> Numbers:
    """Times since 1970 as ordinals of days, whole minutes counted."""
    found: Numbers = np.floor(microseconds / 60e6) / 1440 + FIRST_DAY
    return found


@dataclass(frozen=True, slots=True)
class Rule:
    """What can be wrong between cells: the column to point at, the rows that are wrong, and the remedy."""

    field: str
    broken: Callable[[View, Frame], Mask]
    remedy: str | Callable[[Mapping[str, Any], Frame], str]

    def words(self, values: Mapping[str, Any], frame: Frame) -> str:
        return self.remedy if isinstance(self.remedy, str) else self.remedy(values, frame)


def broken(view: View, frame: Frame) -> Mask:
    """The rows that break some rule."""
    found = np.zeros(view.rows, bool)
    for rule in rules(frame):
        found |= rule.broken(view, frame)
    return found


def rules(frame: Frame) -> Iterator[Rule]:
    """The rules that apply: those about the network only where there is one."""
    yield from _ALWAYS
    if frame.districts:
        yield from _IN_A_NETWORK


# --- where -------------------------------------------------------------------------------------


def _half_a_position(view: View, frame: Frame) -> Mask:
    return view.given("latitude") ^ view.given("longitude")


def _no_place(view: View, frame: Frame) -> Mask:
    return ~(view.given("latitude") | view.given("longitude") | view.given("paddock") | view.given("postcode"))


def _nowhere(view: View, frame: Frame) -> Mask:
    return np.equal(view.number("latitude"), 0) & np.equal(view.number("longitude"), 0)


def _no_district(view: View, frame: Frame) -> Mask:
    return ~view.given("district")


def _not_in_district(view: View, frame: Frame) -> Mask:
    return view.given("misplaced")


def _far(view: View, frame: Frame) -> Mask:
    lat, lon = view.number("latitude"), view.number("longitude")
    far = np.zeros(view.rows, bool)
    for id in frame.districts:
        here = view.equals("district", id) & ~np.isnan(lat) & ~np.isnan(lon)
        if here.any():
            far[here] = _off(lat[here], lon[here], id, frame)
    return far


def _off(lat: Numbers, lon: Numbers, district: str, frame: Frame) -> Mask:
    """Whether points are too far from every centre of a district; most are settled by the first."""
    home = frame.districts[district]
    off: Mask = distance_km(lat, lon, home.latitude, home.longitude) > FARTHEST_KM
    for of in frame.postcodes.values():
        if district in of and off.any():
            at = of[district].place
            off[off] = distance_km(lat[off], lon[off], at.latitude, at.longitude) > FARTHEST_KM
    return off


def _where_words(values: Mapping[str, Any], frame: Frame) -> str:
    """What is most likely wrong with a position that is not in its district."""
    lat, lon, district = values["latitude"], values["longitude"], values["district"]
    home = frame.districts[district]

    def fits(a: float, b: float) -> bool:
        return abs(a) <= 90 and not _off(np.array([a]), np.array([b]), district, frame)[0]

    if fits(lon, lat):
        return f"latitude and longitude look swapped: write latitude {lon:g}, longitude {lat:g}"
    if fits(-lat, lon):
        return f"the sign looks lost: south of the equator is negative; write {-lat:g}"
    if fits(lat, -lon):
        return f"the sign of the longitude looks wrong: write {-lon:g}"
    km = float(distance_km(lat, lon, home.latitude, home.longitude))
    return f"lies {km:.0f} km from the middle of {home.name}; check the position and the district"


# --- when --------------------------------------------------------------------------------------


def _ahead(name: str) -> Callable[[View, Frame], Mask]:
    def is_ahead(view: View, frame: Frame) -> Mask:
        todays = {id: float(frame.today(id).toordinal()) for id in frame.districts}
        # Without a network: the last place on earth where a day begins is 14 hours ahead.
        today = view.mapped("district", todays) if todays else frame.now.toordinal() + 1.0
        return view.number(name) > today

    return is_ahead


def _arrived_before(view: View, frame: Frame) -> Mask:
    # A day begins up to 14 hours before it does in UTC.
    return view.number("arrived_at") < view.number("day") - 14 / 24


# --- how many ----------------------------------------------------------------------------------


def _count_without_unit(view: View, frame: Frame) -> Mask:
    return (view.given("count") | view.given("spot_counts")) & ~view.given("unit")


def _absent_but_counted(view: View, frame: Frame) -> Mask:
    found: Mask = view.equals("status", "absent") & ((view.number("count") > 0) | (view.number("spot_total") > 0))
    return found


def _present_but_none(view: View, frame: Frame) -> Mask:
    none = (view.number("count") == 0) | (view.number("spot_total") == 0)
    some = (view.number("count") > 0) | (view.number("spot_total") > 0)
    found: Mask = view.equals("status", "present") & none & ~some
    return found


def _over_all(view: View, frame: Frame) -> Mask:
    found: Mask = view.equals("unit", "percent_plants") & (view.number("count") > 100)
    return found


def _spots_differ(view: View, frame: Frame) -> Mask:
    found: Mask = view.given("spot_at") & np.not_equal(view.number("spot_at_n"), view.number("spot_n"))
    return found


def _zadoks_elsewhere(view: View, frame: Frame) -> Mask:
    cereal = np.zeros(view.rows, bool)
    for crop in frame.names.cereals:
        cereal |= view.equals("crop", crop)
    return view.equals("stage_scale", "Zadoks") & ~cereal


_ALWAYS = (
    Rule("latitude", _no_place, "give latitude and longitude, a paddock or a postcode"),
    Rule("latitude", _half_a_position, "give latitude and longitude, or neither"),
    Rule("latitude", _nowhere, "0, 0 is what a phone writes without a position; give the position or a paddock"),
    Rule("day", _ahead("day"), "lies in the future; check the date"),
    Rule("serviced_on", _ahead("serviced_on"), "lies in the future; check the date"),
    Rule("treated_on", _ahead("treated_on"), "lies in the future; check the date"),
    Rule("arrived_at", _arrived_before, "lies before the day of the observation; check both"),
    Rule("unit", _count_without_unit, "a count needs its unit, such as per_plant or per_100cm2"),
    Rule("status", _absent_but_counted, "says absent, and a count is above 0; check which is right"),
    Rule("status", _present_but_none, "says present, and the count is 0; write absent, or mend the count"),
    Rule("count", _over_all, "is more than 100 per cent of plants; check the count or the unit"),
    Rule("spot_at", _spots_differ, "needs one word for each of the spot_counts"),
    Rule("stage_scale", _zadoks_elsewhere, "Zadoks codes are for cereals; name the cereal in crop, or give BBCH"),
)
_IN_A_NETWORK = (
    Rule("district", _no_district, "name the district in the row, or for the whole file with --district"),
    Rule("district", _not_in_district, "the paddock or postcode belongs to another district; check both"),
    Rule("latitude", _far, _where_words),
)
