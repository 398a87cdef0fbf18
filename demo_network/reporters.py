"""Who reports, how often, why they look, and when their rows come in: the habits that every count rests on."""

from dataclasses import dataclass
from datetime import date, datetime, timedelta

import numpy as np

from demo_network.network import DISTRICTS, Network, Person
from demo_network.seasons import local
from demo_network.streams import stream

ROUTINE, ASKED, DAMAGE, FIELD_DAY, UNKNOWN = "routine", "asked", "saw damage", "field day", "unknown"
WHYS = {
    "officer": ((ROUTINE, 0.85), (ASKED, 0.10), (DAMAGE, 0.05)),
    "adviser": ((ROUTINE, 0.65), (ASKED, 0.10), (DAMAGE, 0.25)),
    "grower": ((ROUTINE, 0.42), (ASKED, 0.12), (DAMAGE, 0.34), (UNKNOWN, 0.12)),
}
KEENNESS = {"officer": 9.0, "adviser": 4.0, "grower": 1.0}
GROWERS_WHO_REPORT = 34  # in each district; the others read and never write


@dataclass(frozen=True)
class Habit:
    """One reporter: how keen, why they look, and on which weekday they send the looks that found nothing."""

    person: Person
    role: str
    keenness: float
    batch_weekday: int  # Monday is 0


def habits(network: Network, seed: int, district: str) -> list[Habit]:
    """The reporters of a district; a few growers are far keener than the rest."""
    rng = stream(seed, "habits", district)
    found = []
    for role in KEENNESS:
        people = network.people_in(district, role)
        for person in people[:GROWERS_WHO_REPORT]:
            keen = KEENNESS[role] * float(rng.lognormal(0, 0.9 if role == "grower" else 0.2))
            found.append(Habit(person, role, keen, int(rng.choice([4, 5, 6]))))
    return found


def why(habit: Habit, rng: np.random.Generator) -> str:
    """The reason for one look."""
    reasons = WHYS[habit.role]
    return reasons[int(rng.choice(len(reasons), p=[share for _, share in reasons]))][0]


def arrival(habit: Habit, day: date, found: bool, rng: np.random.Generator) -> datetime:
    """A find is sent that evening or the next; looks without one wait for the reporter's day, or the one after."""
    zone = DISTRICTS[habit.person.district].zone
    if found:
        return local(day + timedelta(days=int(rng.random() < 0.3)), rng.uniform(17.5, 22), zone)
    wait = (habit.batch_weekday - day.weekday()) % 7 + 7 * int(rng.random() < 0.2)
    return local(day + timedelta(days=wait), rng.uniform(18, 22), zone)
