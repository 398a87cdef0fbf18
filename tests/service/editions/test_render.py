"""What a slip looks like: the same bytes each time, complete in text and HTML, and proof against any name."""

import email
import email.policy
import hashlib
import os
import re
import shutil
import subprocess
import sys
from dataclasses import replace
from html import unescape
from html.parser import HTMLParser
from itertools import pairwise
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, SlipView
from service.delivery import mime
from service.editions.gate import check, texts_of
from service.editions.render import Renderer, hash_of, page, render, templates_hash
from service.editions.running_text import one_line, without_tags
from service.shipped import shipped
from tests.builders import NOW
from tests.service.editions.views import a_card, a_quiet_view, a_view, said

VOID = {"meta", "br", "input", "link", "img", "hr"}
VIEWS = [a_view(), a_quiet_view(), a_view(signed_by=""), a_view(cards=(a_card(number=(), details=()),), note=())]


class Outline(HTMLParser):
    """The tags of a page in order, with what stands open."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.attributes: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []
        self.feed(html)
        self.close()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.attributes.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag


def mailed_sentences(view: SlipView) -> list[str]:
    """Every sentence that stands in the mail itself."""
    cards = [[c.title, *c.what, c.when, c.how, *c.number, *([c.caution] if c.caution else [])] for c in view.cards]
    parts = [[view.answer, *view.before_looking], *cards, view.keep_in_mind, view.silence, view.around, view.note]
    return [s.text for part in [*parts, [view.before_acting, *view.foot]] for s in part]


# --- the same bytes ----------------------------------------------------------------------------


@pytest.mark.parametrize("view", VIEWS)
def test_kept_parts_give_the_bytes_of_plain_jinja(view: SlipView) -> None:
    fast, plain = Renderer(), Renderer(keep=0)
    assert fast.render(view) == fast.render(view) == plain.render(view) == render(view)


@settings(max_examples=60, deadline=None)
@given(st.text(max_size=80), st.text(max_size=80), st.lists(st.text(max_size=40), max_size=3))
def test_kept_parts_give_the_same_bytes_whatever_is_said(title: str, note: str, around: list[str]) -> None:
    view = a_view(cards=(a_card(title=said(title)),) * 2, note=(said(note),), around=tuple(map(said, around)))
    assert FAST.render(view) == PLAIN.render(view)


FAST, PLAIN = Renderer(keep=3), Renderer(keep=0)  # so few that most are made anew


def test_another_process_with_another_hash_seed_gives_the_same_bytes() -> None:
    program = (
        "import hashlib; from service.editions.render import render, page, templates_hash;"
        "from tests.service.editions.views import a_view; r = render(a_view());"
        "print(hashlib.sha256((r.subject + r.text + r.html + page(a_view()) + templates_hash()).encode()).hexdigest())"
    )
    ours = render(a_view())
    mark = ours.subject + ours.text + ours.html + page(a_view()) + templates_hash()
    root = Path(__file__).parents[3]
    environment = os.environ | {"PYTHONHASHSEED": "7", "PYTHONPATH": str(root)}
    done = subprocess.run([sys.executable, "-c", program], env=environment, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == hashlib.sha256(mark.encode()).hexdigest()


def test_the_templates_hash_covers_every_name_and_byte(tmp_path: Path) -> None:
    copy = tmp_path / "email"
    shutil.copytree(str(shipped("templates", "email")), copy)
    assert hash_of(copy) == templates_hash()
    body = copy / "digest" / "body.txt"
    body.write_text(body.read_text() + " ")
    altered = hash_of(copy)
    assert altered != templates_hash()
    body.rename(copy / "digest" / "other.txt")
    assert hash_of(copy) not in (altered, templates_hash())


# --- complete ----------------------------------------------------------------------------------


@pytest.mark.parametrize("view", VIEWS)
def test_text_and_html_say_the_same(view: SlipView) -> None:
    made = render(view)
    shown = one_line(without_tags(made.html))
    for sentence in mailed_sentences(view):
        assert sentence in made.text
        assert sentence in shown
    for card in view.cards:
        for words in (f"{card.ask.value.upper()} · {card.minutes} min",):
            assert words in made.text
            assert words in shown
    for link in (SHOW_LINK, UNSUBSCRIBE_LINK):
        assert made.text.count(link) == 1
        assert f'href="{link}"' in made.html


@pytest.mark.parametrize("view", VIEWS)
def test_the_answer_comes_first(view: SlipView) -> None:
    made = render(view)
    assert made.text.splitlines()[1] == view.answer.text
    visible = without_tags(made.html.partition("</head>")[2]).split("\n\n")
    assert next(line.strip() for line in visible if line.strip()) == view.answer.text  # what a mail list previews


def test_general_cautions_stand_above_the_first_card_and_the_first_link() -> None:
    html = render(a_view()).html
    assert html.index("Before you look") < html.index('class="card"') < html.index("href=")


def test_the_page_holds_what_stands_behind_each_card_closed() -> None:
    view = a_view()
    made = page(view)
    shown = one_line(without_tags(made))
    for card in view.cards:
        for detail in card.details:
            assert f"<summary>{detail.heading}</summary>" in made
            assert all(sentence.text in shown for sentence in detail.sentences)
    for sentence in mailed_sentences(view):
        assert sentence in shown
    assert made.count("<details>") == sum(len(card.details) for card in view.cards)
    assert "<details open" not in made


def test_each_card_in_the_mail_leads_to_its_own_place_on_the_page() -> None:
    view = a_view()
    anchors = re.findall(re.escape(SHOW_LINK) + r'#([\w-]+)"', render(view).html)
    assert anchors == ["ask-1", "ask-2"]
    assert re.findall(r'<article class="card" id="([\w-]+)"', page(view)) == anchors


def test_a_note_keeps_its_paragraphs() -> None:
    view = a_view(note=(said("First\nline.\n\nSecond."),))
    assert "\n\nFirst line.\n\nSecond.\n\n" in render(view).text
    assert ">First line.</p>" in render(view).html


def test_an_unsigned_draft_names_nobody() -> None:
    made = render(a_view(signed_by=""))
    assert "signed" not in made.text.replace(a_card().caution.text, "")
    assert "\nA NOTE\n" in made.text


# --- how it is built ---------------------------------------------------------------------------


@pytest.mark.parametrize("view", VIEWS)
def test_mail_and_page_are_well_formed_and_load_nothing(view: SlipView) -> None:
    for html in (render(view).html, page(view)):
        outline = Outline(html)
        assert outline.open == []
        assert not {"img", "script", "link", "iframe", "object", "video", "audio", "base"} & set(outline.tags)
        assert not re.search(r"url\(|@import|https?:|src=", html)
        assert outline.attributes[0] == ("html", {"lang": "en", "dir": "ltr"})
        assert outline.tags.count("h1") == 1


def test_mail_stands_without_its_style_sheet() -> None:
    html = re.sub(r"<style>.*?</style>", "", render(a_view()).html, flags=re.DOTALL)
    for tag, attributes in Outline(html).attributes:
        assert ("class" in attributes) == ("style" in attributes), (tag, attributes)
        assert "display:grid" not in (attributes.get("style") or "")
    for colour in ("#FBF8F1", "#FFFFFF", "#EFE8D8", "#22261F", "#565042", "#23564A", "#8A5000"):
        assert colour in html


def test_layout_tables_are_hidden_from_screen_readers_and_the_facts_are_not() -> None:
    tables = [attributes for tag, attributes in Outline(render(a_view()).html).attributes if tag == "table"]
    assert [table.get("role") for table in tables] == ["presentation", "presentation", None, None]
    assert render(a_view()).html.count('<th scope="row"') == 6


def test_mail_has_a_dark_and_a_forced_colours_form() -> None:
    html = render(a_view()).html
    assert "@media (prefers-color-scheme:dark)" in html
    assert "@media (forced-colors:active)" in html
    assert '<meta name="color-scheme" content="light dark">' in html


def test_only_three_sizes_of_type_and_targets_of_44_px() -> None:
    rules = dict(re.findall(r"^\.(\w+) \{(.*)\}$", _sheet(), re.MULTILINE))
    assert set(re.findall(r"(?:font-size:|font:)(\d+)", _sheet())) == {"17", "21", "28", "0"}
    assert {"more", "button"} <= rules.keys()
    for name in ("more", "button"):
        pads = re.search(r"padding:(\d+)px", rules[name])
        line = re.search(r"line-height:(\d+)px", rules[name])
        assert pads is not None
        assert line is not None
        assert 2 * int(pads[1]) + int(line[1]) >= 44


def _sheet() -> str:
    return shipped("templates", "email", "_inline.css").read_text(encoding="utf-8")


def luminance(colour: str) -> float:
    """Relative luminance of an sRGB colour, as WCAG 2.2 defines it."""
    parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    red, green, blue = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


def contrast(one: str, other: str) -> float:
    light, dark = sorted((luminance(one), luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def test_contrast_formula() -> None:
    assert contrast("#000000", "#FFFFFF") == pytest.approx(21)  # WCAG 2.2: black on white is 21:1
    assert contrast("#777777", "#FFFFFF") == pytest.approx(4.48, abs=0.005)  # the well-known grey just under AA


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_every_text_colour_reads_on_every_ground(scheme: str) -> None:
    sheet = shipped("templates", "web", "_style.css").read_text(encoding="utf-8")
    light, dark = re.findall(r":root\{([^}]*--paper[^}]*)\}", sheet)
    colours = dict(re.findall(r"--([\w-]+):(#\w{6})", {"light": light, "dark": dark}[scheme]))
    for ground in ("paper", "card", "tint"):
        for text in ("ink", "loam", "field", "ochre"):
            assert contrast(colours[text], colours[ground]) >= 4.5, (text, ground)  # WCAG 2.2, 1.4.3
        assert contrast(colours["line"], colours[ground]) >= 3, ground  # WCAG 2.2, 1.4.11
    assert contrast(colours["on-field"], colours["field"]) >= 4.5
    mail = _sheet() + shipped("templates", "email", "_dark.css").read_text(encoding="utf-8")
    assert all(colour in mail for colour in colours.values())  # mail and page use one palette


def test_the_largest_digest_stays_under_90_kb() -> None:
    long = said("Größe 🌾 " * 70)  # about 600 characters in every place
    card = a_card(
        title=long, what=(long,) * 3, when=long, how=long, number=(long,) * 3, caution=long, details=a_card().details
    )
    view = a_view(answer=long, cards=(card,) * 3, around=(long,) * 3, note=(said("x" * 4000),), foot=(long,) * 2)
    assert len(render(view).html.encode()) <= 90_000
    assert len(render(a_view()).html.encode()) <= 12_000


# --- hostile names -----------------------------------------------------------------------------

HOSTILE = {
    "quotes": """O'Brien's "Top" & <Bottom>""",
    "script": "<script>alert(1)</script>",
    "attribute": '" onmouseover="alert(1)',
    "closing": "</td></tr></table></style><!--",
    "template": "{{ view }} {% for x in y %}",
    "emoji": "🌾👩🏽‍🌾 Flat",
    "right to left": "\u200fحقل القمح\u200f",
    "long": "Long" * 125,
    "combining": "Z̷͍a̵͈l̶͖g̷̱o̴",
}


@pytest.mark.parametrize("name", HOSTILE.values(), ids=HOSTILE)
def test_hostile_names_stay_right_and_break_nothing(name: str) -> None:
    def view(word: str) -> SlipView:
        spoken = said(f"Found in {word} twice.")
        return a_view(
            subject=said(f"This week: {word}"),
            answer=spoken,
            cards=(a_card(title=spoken, what=(spoken,), when=spoken, how=spoken),),
            around=(spoken,),
            note=(spoken,),
            signed_by=word,
            day=word,
        )

    made, plain = render(view(name)), render(view("Kelp"))
    assert f"Found in {name} twice." in made.text
    assert f"Found in {name} twice.".split() == _spoken(made.html).split()
    assert Outline(made.html).tags == Outline(plain.html).tags
    assert Outline(page(view(name))).tags == Outline(page(view("Kelp"))).tags
    assert [sorted(a) for _, a in Outline(made.html).attributes] == [
        sorted(a) for _, a in Outline(plain.html).attributes
    ]
    assert len(made.text.splitlines()) == len(plain.text.splitlines())


def _spoken(html: str) -> str:
    """The text of the heading of the first part, as an HTML reader hears it."""

    class Heading(HTMLParser):
        inside, text = False, ""

        def handle_starttag(self, tag: str, attrs: object) -> None:
            self.inside = self.inside or tag == "h1"

        def handle_endtag(self, tag: str) -> None:
            self.inside = self.inside and tag != "h1"

        def handle_data(self, data: str) -> None:
            self.text += data if self.inside else ""

    reader = Heading()
    reader.feed(html)
    return reader.text


def test_marks_that_reorder_their_neighbours_are_dropped_and_names_keep_their_own_direction() -> None:
    view = a_view(around=(said("At \u202eevil\u202c and \u2066x\u2069, \u200fحقل\u200f, bell\x07, half \ud83d."),))
    made = render(view)
    assert "At evil and x, \u200fحقل\u200f, bell, half ." in made.text
    assert "At evil and x, \u200fحقل\u200f, bell, half ." in unescape(made.html)


@pytest.mark.parametrize("view", VIEWS)
def test_html_travels_as_it_is(view: SlipView) -> None:
    """ASCII, no line over 998 and no space at the end of one: what RFC 2045 (2.7) lets pass unencoded."""
    html = render(replace(view, note=(said("Größe 🌾 ‏حقل‏"),))).html
    assert html.isascii()
    assert "Größe 🌾 ‏حقل‏" in unescape(html)
    assert max(map(len, html.splitlines())) <= 998
    assert not re.search(r"[ \t]$", html, re.MULTILINE)


def test_a_link_that_a_person_typed_is_no_placeholder() -> None:
    typed = said(f"see {UNSUBSCRIBE_LINK} and {SHOW_LINK}")
    made, plain = render(a_view(around=(typed,), note=(typed,))), render(a_view())
    for link in (SHOW_LINK, UNSUBSCRIBE_LINK):
        assert made.text.count(link) == plain.text.count(link)
        assert made.html.count(link) == plain.html.count(link)


@pytest.mark.parametrize(
    "subject", ["a\r\nBcc: x@example.org", "a\nb", "a\x00b\x85c\u2028d", "=?utf-8?q?x?=", "🌾" * 200, "x" * 500]
)
def test_a_subject_can_not_break_out_of_its_header(subject: str) -> None:
    made = render(a_view(subject=said(subject)))
    assert "\n" not in made.subject
    assert "\r" not in made.subject
    data = mime.build(
        rendered=made,
        sender="digest@example.org",
        sender_name="x",
        recipient="reader@example.org",
        message_id="1@example.org",
        date=NOW,
        show_url="https://example.org/show/x",
        unsubscribe_url="https://example.org/unsubscribe/x",
        list_id="north.example.org",
    )
    message = email.message_from_bytes(data, policy=email.policy.default)
    assert "Bcc" not in message
    assert str(message["Subject"]).strip() == made.subject


# --- words -------------------------------------------------------------------------------------


@pytest.mark.parametrize("view", VIEWS)
def test_our_own_words_pass_the_gate(view: SlipView) -> None:
    assert (
        check(texts_of(render(view)) | {"page.html": page(view)}, ["Kelp Reach", "Home", "12", "A", "Ned Pike"]) == []
    )


def test_never_colour_alone() -> None:
    """Taking every colour away leaves each card's ask in words."""
    html = re.sub(r"#\w{6}|<style>.*?</style>", "", render(a_view()).html, flags=re.DOTALL)
    assert [word in html for word in ("GO AND LOOK", "COUNT IT")] == [True, True]


def test_headings_go_down_one_step_at_a_time() -> None:
    for html in (render(a_view()).html, page(a_view())):
        levels = [int(tag[1]) for tag in Outline(html).tags if re.fullmatch(r"h\d", tag)]
        assert levels[0] == 1
        assert all(b - a <= 1 for a, b in pairwise(levels))


def test_a_view_without_a_number_has_no_number_line() -> None:
    view = replace(a_view(), cards=(a_card(number=()),))
    assert "Number" not in render(view).text
    assert "Number" not in render(view).html
