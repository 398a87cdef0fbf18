"""Where a row was: its district, and the place that a paddock or a postcode stands for."""

from rules.records import Place
from service.intake.frame import Frame

# A postcode's centre says where a report is from only this closely [m]; rural postcodes are about this wide.
POSTCODE_UNCERTAINTY_M = 20_000.0


def district_of(frame: Frame, paddock: str | None, postcode: str | None, named: str | None) -> tuple[str | None, bool]:
    """The district of a row, and whether its paddock or postcode belongs to another one.

    The paddock decides, then the row's own word, then a postcode that only one district has, then the
    district of the whole file.
    """
    sharing = frame.postcodes.get(postcode or "", {})
    ours = frame.paddocks.get(paddock or "")
    home = None if ours is None else ours.district
    only = next(iter(sharing)) if len(sharing) == 1 else None
    district = home or named or only or frame.default_district
    elsewhere = home is not None and named is not None and home != named
    return district, elsewhere or (postcode is not None and district not in sharing)


def place_of(frame: Frame, paddock: str | None, postcode: str | None, district: str) -> Place | None:
    """The place that stands for a row without a position of its own."""
    ours = frame.paddocks.get(paddock or "")
    if ours is not None:
        return ours.place
    if postcode is None:
        return None
    at = frame.postcodes[postcode][district].place
    return Place(at.latitude, at.longitude, at.cell, POSTCODE_UNCERTAINTY_M, at.elevation_m)
