"""Invented digests for the tests of rendering, the gate and the pages."""

from typing import Any

from rules.records import Ask
from rules.slip import Card, Detail, Sentence, SlipView


def said(text: str) -> Sentence:
    return Sentence(text, "fixed:test")


def a_card(**changes: Any) -> Card:
    values: dict[str, Any] = {
        "pest": "redlegged_earth_mite",
        "ask": Ask.LOOK,
        "minutes": 10,
        "title": said("Mites in young canola"),
        "what": (said("Found in 4 of 11 looks, 5–10 km north-west of you."),),
        "when": said("Wednesday or Thursday, 11:30–2:30, warm and sunny"),
        "how": said("5 spots, 20 plants each; edges first"),
        "number": (said("10 a plant at one true leaf."), said("Common practice; its doubt is wide.")),
        "caution": said("Your seed dressing may hide or delay feeding."),
        "details": (
            Detail("Why we ask", (said("The weather this hatch needs has likely come."),)),
            Detail("Look-alikes", (said("Blue oat mite: a red spot on a dark back."),)),
            Detail("Source and doubt", (said("From memory, signed by a local adviser."),)),
            Detail("Beneficials", (said("Snout mites eat these."),)),
        ),
    }
    return Card(**(values | changes))


def a_view(**changes: Any) -> SlipView:
    values: dict[str, Any] = {
        "subject": said("This week: two looks, about 25 minutes"),
        "day": "Tue 12 May",
        "answer": said("Two looks, about 25 minutes"),
        "before_looking": (said("Get the owner's leave before you go in."), said("Clean boots, tools and tyres.")),
        "cards": (
            a_card(),
            a_card(pest="lucerne_flea", ask=Ask.COUNT, minutes=15, title=said("Lucerne fleas"), caution=None),
        ),
        "keep_in_mind": (said("Cutworms: pasture came before this crop."),),
        "silence": (),
        "around": (said("14 looks within 20 km of you, 6 of them found mites."), said("Nobody looked south of it.")),
        "note": (said("Thanks to all who looked in the rain."),),
        "signed_by": "Ivy Marsh",
        "before_acting": said(
            "Before you act: be sure what it is, ask a licensed adviser, follow the label and the law."
        ),
        "foot": (said("Your usual crop checks still stand."), said("Worked out from 4 weather stations.")),
    }
    return SlipView(**(values | changes))


def a_quiet_view(**changes: Any) -> SlipView:
    values: dict[str, Any] = {
        "subject": said("This week: nothing to do yet"),
        "answer": said("Nothing to do yet"),
        "before_looking": (),
        "cards": (),
        "keep_in_mind": (),
        "silence": (said("Nothing reported near you."), said("Nobody looked within 20 km.")),
        "around": (),
        "note": (),
    }
    return a_view(**(values | changes))
