"""What an ordinary look finds: when each pest starts, how often it is met, and in which paddocks."""

from datetime import date

from demo_network.farming import World
from demo_network.network import Paddock
from demo_network.reporters import DAMAGE
from demo_network.streams import stream

MITE, FLEA, CUTWORM = "redlegged_earth_mite", "lucerne_flea", "cutworms"

LOOKED_FOR = {MITE: 0.62, FLEA: 0.5, CUTWORM: 0.26}  # chance that a visit looks for it
# the ISO week of a pest's first ordinary finds: (district, year, pest)
STARTS = {
    ("sextant", 2024, MITE): 17,
    ("sextant", 2025, MITE): 18,
    ("sextant", 2026, MITE): 23,
    ("lantern", 2024, MITE): 15,
    ("lantern", 2025, MITE): 14,
    ("lantern", 2026, MITE): 14,
    ("sextant", 2024, FLEA): 19,
    ("sextant", 2025, FLEA): 20,
    ("sextant", 2026, FLEA): 26,  # a dry autumn: the flea waits for moist ground
    ("lantern", 2024, FLEA): 16,
    ("lantern", 2025, FLEA): 17,
    ("lantern", 2026, FLEA): 16,
}
CUTWORM_WEEKS = (12, 27)
PEAK = {MITE: 0.16, FLEA: 0.13, CUTWORM: 0.05}  # chance of a find in an ordinary look at the height of the season


Burden = dict[str, dict[str, float]]  # pest -> paddock -> how infested


def burden(world: World, district: str, year: int) -> Burden:
    """How infested each paddock is all season long, about 1 on average; a few carry most of it."""
    return {pest: _loads(world, district, year, pest) for pest in LOOKED_FOR}


def _loads(world: World, district: str, year: int, pest: str) -> dict[str, float]:
    rng = stream(world.seed, "burden", district, year, pest)
    found = {}
    for paddock in world.network.paddocks_in(district):
        season = world.plans[paddock.id, year]
        weedy = 1.5 if season.capeweed_before or season.pasture_before else 0.8
        found[paddock.id] = float(rng.gamma(0.7, 1 / 0.7)) * weedy * (0.5 if season.crop == "wheat" else 1.0)
    return found


def chance(pest: str, paddock: Paddock, day: date, reason: str, carried: Burden) -> float:
    """The chance that one look finds the pest."""
    usual = season_rate(paddock.district, pest, day) * carried[pest][paddock.id]
    return min(usual * (2.2 if reason == DAMAGE else 1.0), 0.9)


def season_rate(district: str, pest: str, day: date) -> float:
    """The chance that an ordinary look of that week finds the pest, before paddock and reason."""
    year, week, _ = day.isocalendar()
    if pest == CUTWORM:
        first, last = CUTWORM_WEEKS
        return PEAK[pest] if first <= week <= last else 0.0
    since = week - STARTS[district, year, pest]
    if since < 0:
        return 0.0
    return PEAK[pest] * min(1.0, (since + 1) / 4) * (1.0 if week < 36 else 0.5)
