"""The digests that are kept whole: one for each week that a reader may have."""

from collections.abc import Callable
from datetime import date, timedelta
from pathlib import Path
from typing import Any

from rules.slip import SlipView
from tests.builders import TODAY
from tests.service.editions import cast
from tests.service.editions.plain import printed

FOLDER = Path(__file__).parents[2] / "golden_slips"
SOWN: dict[str, Any] = {"crop": "canola", "sown_on": date(2026, 4, 20)}
NOT_SOWN: dict[str, Any] = {"crop": "canola", "sown_on": TODAY + timedelta(days=8)}


def neighbours() -> list:
    """What others reported in the last two weeks."""
    return [
        cast.look(1, True),
        cast.look(2, False),
        cast.look(3, True, ago=4),
        cast.look(4, False, ago=9),
        cast.look(5, False, ago=10),
        cast.look(2, False, pest=cast.FLEA),
        cast.look(6, False, pest=cast.FLEA, ago=5),
        cast.look(3, True, pest=cast.CUTWORM),
    ]


def asks() -> SlipView:
    """An own count at the number, a neighbour's find, and the hatch."""
    own = cast.look(0, True, stage=11, stage_scale="BBCH")
    rows = [*neighbours(), own]
    signals = [cast.hatch(), cast.threshold(0, rows=[own]), cast.threshold(1), cast.first_seen(rows[7])]
    return cast.said(cast.edition(rows, signals, paddocks=cast.fields(p0=SOWN)))


def one_number() -> SlipView:
    """An own count that came without its spots."""
    own = cast.look(0, True, stage=11, stage_scale="BBCH", spot_counts=())
    bare = cast.threshold(0, "count_by_spots", rows=[own], figures={"low": None, "high": None, "spots": None})
    return cast.said(cast.edition([*neighbours(), own], [bare], paddocks=cast.fields(p0=SOWN)))


def no_ask() -> SlipView:
    """Looks near, and nothing that asks for one."""
    rows = [row for row in neighbours() if not row.present]
    return cast.said(cast.edition(rows, paddocks=cast.fields(p0=SOWN)))


def nobody_looked() -> SlipView:
    return cast.said(cast.edition(paddocks=cast.fields(p0=SOWN)))


def weather_missing() -> SlipView:
    """Looks near, nothing asked, and two days whose weather did not come."""
    rows = [row for row in neighbours() if not row.present]
    gone = cast.weather(no_rain=frozenset({1, 5}))
    return cast.said(cast.edition(rows, paddocks=cast.fields(p0=SOWN), weather=gone))


def dressed_seed() -> SlipView:
    """The hatch, on a paddock sown with dressed seed that may be up."""
    dressed = SOWN | {"seed_dressing": True}
    return cast.said(cast.edition(neighbours(), [cast.hatch()], paddocks=cast.fields(p0=dressed)))


def before_emergence() -> SlipView:
    """The hatch, before the reader has sown."""
    return cast.said(cast.edition(neighbours(), [cast.hatch()], paddocks=cast.fields(p0=NOT_SOWN)))


ALL: dict[str, Callable[[], SlipView]] = {
    each.__name__: each
    for each in (asks, one_number, no_ask, nobody_looked, weather_missing, dressed_seed, before_emergence)
}

if __name__ == "__main__":
    FOLDER.mkdir(exist_ok=True)
    for name, make in ALL.items():
        (FOLDER / f"{name}.txt").write_text(printed(make()), encoding="utf-8")
