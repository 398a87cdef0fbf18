"""Plain pages, and the policy that lets a browser load nothing but their one style sheet."""

import base64
import hashlib
from functools import cache

from jinja2 import Environment, FunctionLoader, StrictUndefined

from service.shipped import shipped


def leave() -> str:
    """Asks whether the mails shall stop; its one button posts."""
    return _page("leave")


def left() -> str:
    """Says that the mails have stopped."""
    return _page("left")


def trouble(heading: str, what: str, next_step: str) -> str:
    """Says what went wrong and what to do next."""
    return _page("trouble", heading=heading, what=what, next=next_step)


@cache
def policy() -> str:
    """The Content-Security-Policy of every page: our style sheet by its hash, our own forms, nothing else."""
    sheet = _environment().get_template("web/_style.css").render()
    mark = base64.b64encode(hashlib.sha256(sheet.encode()).digest()).decode()
    return f"default-src 'none'; style-src 'sha256-{mark}'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'"


def _page(name: str, **values: str) -> str:
    return _environment().get_template(f"web/{name}.html").render(**values)


@cache
def _environment() -> Environment:
    def source(name: str) -> str:
        return shipped("templates", *name.split("/")).read_text(encoding="utf-8")

    return Environment(loader=FunctionLoader(source), autoescape=True, undefined=StrictUndefined, auto_reload=False)
