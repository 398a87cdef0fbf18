"""A slip's sentences take shape here: subject, plain text, HTML for mail, and the same digest as a page.

The canonical form is the same bytes for the same view, templates and `RENDERER`: no clock, no set order, no
address. Links stand as placeholders and are put in at sending.

Parts that many readers share (a card, the general cautions, the foot) are macros; `Renderer` keeps what a
macro made of a value, uses it again for the next reader, and hands the bodies on as the parts that they are
joined from. With `keep=0` it is plain Jinja2, and gives the same bytes.
"""

import hashlib
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from functools import cache, lru_cache
from importlib.resources.abc import Traversable

from jinja2 import Environment, FunctionLoader, StrictUndefined, Template

from rules.slip import SHOW_LINK, UNSUBSCRIBE_LINK, Joined, Rendered, Sentence, SlipView
from service.shipped import shipped

RENDERER = "1"  # raise it when the same view and templates would give other bytes

# The macros that digests share, by file, in the order in which they may use each other.
_PARTS = {"_facts": ("facts",), "_parts": ("opening", "before", "card", "kept_in_mind", "part", "closing")}
_SPACE = re.compile(r"\s+")
# Control characters, lone surrogates, and the marks that reorder text beyond the name they came in; the
# marks that only say "right-to-left starts here" (U+200E, U+200F, U+061C) stay.
_UNSEEN = re.compile("[\x00-\x08\x0e-\x1b\x7f-\x84\x86-\x9f\u202a-\u202e\u2066-\u2069\ud800-\udfff]")
_RULE = re.compile(r"^\.([\w-]+)\s*\{\s*([^}]*?)\s*\}", re.MULTILINE)
_CLASSES = re.compile(r'class="([^"]+)"')


@lru_cache(maxsize=50_000)
def tidy(text: str) -> str:
    """One line of text as it may stand in a mail: whoever wrote it can't break a line, a header or a link."""
    line = _SPACE.sub(" ", _UNSEEN.sub("", text)).strip()
    return line.replace("{{link:", "{{\u2060link:")  # a placeholder that a person typed is not a link


def paragraphs(text: str) -> list[str]:
    """What a person typed with empty lines between, as one line each."""
    return [line for line in map(tidy, re.split(r"\n\s*\n", text)) if line]


def joined(sentences: Iterable[Sentence]) -> str:
    """Sentences as one run of text."""
    return " ".join(tidy(sentence.text) for sentence in sentences)


def ascii_html(html: str) -> str:
    """HTML with every other character as a reference: it travels as it is, and no charset can garble it."""
    if html.isascii():
        return html
    return type(html)(html.encode("ascii", "xmlcharrefreplace").decode("ascii"))  # escaped stays marked as such


class Renderer:
    """Renders slips, and keeps up to `keep` shared parts of each kind for the next one."""

    def __init__(self, keep: int = 10_000) -> None:
        inline = _inline_rules(_source("email/_inline.css"))
        self._subject = _subject(keep)
        self._keep = keep
        self._text = _with_parts("txt", {}, keep)
        self._html = _with_parts("html", inline, keep)
        self._page = _environment("html", {}).get_template("web/digest.html")

    def render(self, view: SlipView) -> Rendered:
        """The canonical subject, text and HTML of one slip, with link placeholders."""
        if not self._keep:
            html = ascii_html(self._html.render(view=view))
            return Rendered(self._subject(view.subject), self._text.render(view=view), html)
        text, html = Joined(_pieces(self._text, view)), Joined(map(ascii_html, _pieces(self._html, view)))
        return Rendered(self._subject(view.subject), text, html)

    def page(self, view: SlipView) -> str:
        """The same digest as a page, what stands behind each card one tap away; its way out is a placeholder."""
        return self._page.render(view=view)


def render(view: SlipView) -> Rendered:
    """The canonical subject, text and HTML of one slip, with link placeholders."""
    return _renderer().render(view)


def page(view: SlipView) -> str:
    """One slip as a page, with what stands behind each card one tap away."""
    return _renderer().page(view)


@cache
def _renderer() -> Renderer:
    return Renderer()


@cache
def templates_hash() -> str:
    """The short hash of every template that the canonical form is made with, and of its name."""
    return hash_of(shipped("templates", "email"))


def hash_of(folder: Traversable) -> str:
    """The short hash of the names and bytes of all files in a folder."""
    seen = hashlib.sha256()
    for name, content in sorted(_files(folder, "")):
        seen.update(f"{name}\n{len(content)}\n".encode() + content)
    return seen.hexdigest()[:32]


def _files(folder: Traversable, above: str) -> Iterator[tuple[str, bytes]]:
    for entry in folder.iterdir():
        name = f"{above}/{entry.name}"
        if entry.is_dir():
            yield from _files(entry, name)
        else:
            yield name, entry.read_bytes()


def _source(name: str) -> str:
    return shipped("templates", *name.split("/")).read_text(encoding="utf-8")


def _environment(kind: str, inline: Mapping[str, str]) -> Environment:
    environment = Environment(
        loader=FunctionLoader(lambda name: _inlined(_source(name), inline)),
        autoescape=kind == "html",
        undefined=StrictUndefined,
        auto_reload=False,
    )
    environment.filters |= {"tidy": tidy, "paragraphs": paragraphs, "joined": joined}
    environment.globals |= {"show_link": SHOW_LINK, "unsubscribe_link": UNSUBSCRIBE_LINK}
    return environment


def _subject(keep: int) -> Callable[[Sentence], str]:
    template = _environment("txt", {}).get_template("email/digest/subject.txt")
    return lru_cache(maxsize=keep)(lambda subject: template.render(view={"subject": subject}).strip())


def _pieces(body: Template, view: SlipView) -> Iterator[str]:
    """What a body yields one after the other; it needs no globals, which Jinja2 would copy each time."""
    return body.root_render_func(body.new_context({"view": view}, shared=True))


def _with_parts(kind: str, inline: Mapping[str, str], keep: int) -> Template:
    """A body whose parts are filters (those are called at once), kept or made anew each time."""
    environment = _environment(kind, inline)
    for file, names in _PARTS.items():
        macros = environment.get_template(f"email/digest/{file}.{kind}").module
        made = {name: getattr(macros, name) for name in names}
        if keep:
            made = {name: _kept(macro, keep, as_html=kind == "html") for name, macro in made.items()}
        environment.filters |= made
    return environment.get_template(f"email/digest/body.{kind}")


def _kept(macro: Callable[..., str], keep: int, *, as_html: bool) -> Callable[..., str]:
    """A macro that remembers what it made; of HTML, in the form that it is mailed in."""
    return lru_cache(maxsize=keep)(lambda *given: ascii_html(macro(*given)) if as_html else macro(*given))


def _inline_rules(sheet: str) -> dict[str, str]:
    return dict(_RULE.findall(sheet))


def _inlined(source: str, rules: Mapping[str, str]) -> str:
    """The template with each class's rule written beside it, since many mail readers drop <style>."""
    if not rules:
        return source
    return _CLASSES.sub(lambda found: f'{found[0]} style="{_declarations(found[1], rules)}"', source)


def _declarations(names: str, rules: Mapping[str, str]) -> str:
    return " ".join(rules[name] for name in names.split()).replace('"', "'")
