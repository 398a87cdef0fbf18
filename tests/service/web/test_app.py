"""The pages over a real server: what mailed links may do, what they can't, and what they give away."""

import base64
import hashlib
import logging
import re
import socket
from collections.abc import Iterator
from datetime import datetime, timedelta

import pytest
from fastapi import FastAPI
from fastapi.routing import APIRoute

from rules.slip import UNSUBSCRIBE_LINK
from service.errors import StoreBusy
from service.store.base import Store
from service.web import pages
from service.web.app import LARGEST_BODY, Access, Service, make_app
from service.web.limits import Patient
from tests.builders import NOW
from tests.service.editions.views import a_view
from tests.service.web.site import Site, a_site, running

ONE_CLICK = b"List-Unsubscribe=One-Click"  # RFC 8058, section 3.2
ROUTES = {
    ("GET", "/show/{token}"),
    ("GET", "/unsubscribe/{token}"),
    ("POST", "/unsubscribe/{token}"),
    ("GET", "/healthz"),
}


@pytest.fixture
def site(store: Store) -> Iterator[Site]:
    with a_site(store) as running_site:
        yield running_site


class Nothing:
    """A service that fails in the way it is told to."""

    def __init__(self, error: Exception) -> None:
        self.error = error

    def show(self, token: str, at: datetime) -> str:
        raise self.error

    def check_unsubscribe(self, token: str, at: datetime) -> None:
        raise self.error

    def unsubscribe(self, token: str, at: datetime) -> None:
        raise self.error


# --- routes ------------------------------------------------------------------------------------


def undeclared(app: FastAPI) -> list[str]:
    """Routes without a whole declaration of who may use them."""
    declared = [getattr(getattr(route, "endpoint", None), "access", None) for route in app.routes]
    return [
        str(getattr(route, "path", route))
        for route, access in zip(app.routes, declared, strict=True)
        if not (isinstance(access, Access) and access.purpose and access.role and access.district)
    ]


def test_there_are_exactly_these_routes_and_each_is_declared() -> None:
    app = make_app(Nothing(StoreBusy("busy")))
    found = {(method, route.path) for route in app.routes if isinstance(route, APIRoute) for method in route.methods}
    assert found == ROUTES
    assert len(app.routes) == len(ROUTES)  # no documents, no static files, no mounts
    assert undeclared(app) == []


def test_a_route_without_a_declaration_is_found_and_refused() -> None:
    app = make_app(Nothing(StoreBusy("busy")))

    @app.get("/forgotten")
    def forgotten() -> str:
        return "secret"

    assert undeclared(app) == ["/forgotten"]
    with running(app) as url:
        site = Site(url, None, None, None)  # type: ignore[arg-type]
        answer = site.get("/forgotten")
    assert answer.status == 403
    assert "secret" not in answer.text


def test_nothing_else_answers(site: Site) -> None:
    for path in ("/docs", "/redoc", "/openapi.json", "/", "/show", "/show/", "/metrics"):
        answer = site.get(path)
        assert answer.status == 404, path
        assert "newest digest" in answer.text


# --- show and unsubscribe ----------------------------------------------------------------------


def test_show_gives_the_readers_digest(site: Site) -> None:
    answer = site.get(site.link("show"))
    assert answer.status == 200
    assert a_view().answer.text in answer.text
    assert "<details>" in answer.text


def test_a_scanner_that_opens_every_link_changes_nothing(site: Site) -> None:
    for path in [site.link("show"), site.link("unsubscribe")] * 2:
        for method in ("GET", "HEAD", "OPTIONS"):
            site.ask(path, method=method)
    assert site.readers.state() == "confirmed"
    page = site.get(site.link("unsubscribe"))
    assert page.status == 200
    assert re.findall(r"<form[^>]*>", page.text) == ['<form method="post">']
    assert page.text.count("<button") == 1


@pytest.mark.parametrize("body", [ONE_CLICK, b"", b"List-Unsubscribe=One-Click&other=1"])
def test_a_post_stops_the_mails_and_again_changes_nothing(site: Site, body: bytes) -> None:
    first = site.ask(site.link("unsubscribe"), body, method="POST")
    assert site.readers.state() == "left"
    second = site.ask(site.link("unsubscribe"), body, method="POST")
    assert (first.status, second.status) == (200, 200)
    assert first.text == second.text
    assert "no more mails" in first.text
    assert first.headers["Set-Cookie"] is None
    assert site.readers.state() == "left"


def test_the_one_click_post_may_be_a_multipart_form(site: Site) -> None:
    body = b'--x\r\nContent-Disposition: form-data; name="List-Unsubscribe"\r\n\r\nOne-Click\r\n--x--\r\n'
    answer = site.ask(site.link("unsubscribe"), body, {"Content-Type": "multipart/form-data; boundary=x"})
    assert answer.status == 200
    assert site.readers.state() == "left"


def test_a_way_out_outlives_every_other_link(site: Site) -> None:
    site.clock.set(NOW + timedelta(days=2000))
    assert site.get(site.link("show")).status == 404
    assert site.ask(site.link("unsubscribe"), ONE_CLICK).status == 200


@pytest.mark.parametrize("purpose", ["show", "unsubscribe"])
def test_links_that_are_not_ours_are_refused_in_plain_words(site: Site, purpose: str) -> None:
    other = {"show": "unsubscribe", "unsubscribe": "show"}[purpose]
    token = site.link(purpose).rpartition("/")[2]
    swapped = token[:-1] + ("A" if token[-1] != "A" else "B")
    for bad in (token[:-4], swapped, site.link(other).rpartition("/")[2], "x", "%00", "a" * 5000):
        for body in (None, ONE_CLICK):
            if purpose == "show" and body:
                continue
            answer = site.ask(f"/{purpose}/{bad}", body)
            assert answer.status == 404, bad[:80]
            assert "This link does not work" in answer.text
            assert "newest digest" in answer.text
    assert site.readers.state() == "confirmed"


def test_a_link_of_a_reader_who_is_gone_says_so(site: Site) -> None:
    answer = site.get(site.link("show", "nobody"))
    assert answer.status == 404
    assert "no longer kept" in answer.text
    assert "nobody" not in answer.text


def test_show_takes_no_post(site: Site) -> None:
    assert site.ask(site.link("show"), b"x=1").status == 405


# --- what gets out -----------------------------------------------------------------------------


def test_headers_keep_the_token_in_and_everything_else_out(site: Site) -> None:
    paths = [site.link("show"), site.link("unsubscribe"), "/show/forged", "/healthz", "/nowhere"]
    for answer in [*map(site.get, paths), site.ask(site.link("unsubscribe"), ONE_CLICK)]:
        assert answer.headers["Referrer-Policy"] == "no-referrer"
        assert answer.headers["Cache-Control"] == "no-store"
        assert answer.headers["X-Content-Type-Options"] == "nosniff"
        assert answer.headers["X-Frame-Options"] == "DENY"
        policy = answer.headers["Content-Security-Policy"]
        assert policy.startswith("default-src 'none'; ")
        assert "frame-ancestors 'none'" in policy
        assert "unsafe" not in policy
        assert answer.headers["Server"] is None
        assert answer.headers["Set-Cookie"] is None


def test_the_policy_names_the_one_style_sheet_of_every_page(site: Site) -> None:
    for path in (site.link("show"), site.link("unsubscribe"), "/show/forged"):
        answer = site.get(path)
        (sheet,) = re.findall(r"<style>(.*?)</style>", answer.text, re.DOTALL)
        mark = base64.b64encode(hashlib.sha256(sheet.encode()).digest()).decode()  # as CSP level 3, section 2.3.1
        assert f"style-src 'sha256-{mark}'" in answer.headers["Content-Security-Policy"]
        assert "<script" not in answer.text
        assert " style=" not in answer.text
        assert not re.search(r"(src|action)=", answer.text)
        assert set(re.findall(r'href="([^"]*)"', answer.text)) <= {UNSUBSCRIBE_LINK}  # put in by the pipeline


def test_the_log_drops_the_token(site: Site, caplog: pytest.LogCaptureFixture) -> None:
    access = logging.getLogger("uvicorn.access")
    access.addHandler(caplog.handler)
    try:
        link = site.link("show")
        site.get(link)
        site.get(link.removeprefix("/show"))
        site.get("/healthz")
    finally:
        access.removeHandler(caplog.handler)
    lines = [record.getMessage() for record in caplog.records if record.name == "uvicorn.access"]
    assert [line.split('"')[1].split()[1] for line in lines] == ["/show/…", "/…", "/healthz…"]
    assert link.rpartition("/")[2] not in caplog.text


# --- limits and failures -----------------------------------------------------------------------


def test_a_large_body_is_refused_before_anything_is_done(site: Site) -> None:
    answer = site.ask(site.link("unsubscribe"), b"x" * (LARGEST_BODY + 1))
    assert answer.status == 413
    assert "nothing was changed" in answer.text
    assert site.readers.state() == "confirmed"


def conversation(site: Site, request: bytes) -> bytes:
    """Send raw bytes and read until the other side closes."""
    host, _, port = site.url.removeprefix("http://").partition(":")
    with socket.create_connection((host, int(port)), timeout=10) as plug:
        plug.sendall(request)
        answer = b""
        while piece := plug.recv(65536):
            answer += piece
    return answer


def test_a_large_body_of_unstated_length_is_refused(site: Site) -> None:
    head = f"POST {site.link('unsubscribe')} HTTP/1.1\r\nHost: x\r\nTransfer-Encoding: chunked\r\n\r\n".encode()
    answer = conversation(site, head + b"1000\r\n" + b"x" * 0x1000 + b"\r\n" + b"1\r\nx\r\n")
    assert answer.startswith(b"HTTP/1.1 413 ")
    assert site.readers.state() == "confirmed"


def test_a_body_that_dawdles_is_given_up(store: Store) -> None:
    with a_site(store, patience_s=0.2) as site:
        head = f"POST {site.link('unsubscribe')} HTTP/1.1\r\nHost: x\r\nContent-Length: 26\r\n\r\nList".encode()
        answer = conversation(site, head)
        assert answer.startswith(b"HTTP/1.1 408 ")
        assert site.readers.state() == "confirmed"


@pytest.mark.parametrize("head", [b"", b"GET /healthz HTTP/1.1\r\nHost: x\r\nSlow: "], ids=["nothing", "half a head"])
def test_a_connection_without_a_request_is_closed(site: Site, monkeypatch: pytest.MonkeyPatch, head: bytes) -> None:
    """Idle connections must not use up the places of those who want the way out."""
    monkeypatch.setattr(Patient, "patience_s", 0.2)
    assert conversation(site, head) == b""
    whole = b"GET /healthz HTTP/1.1\r\nHost: x\r\n\r\n"
    assert conversation(site, whole + head).count(b"HTTP/1.1 200 ") == 1  # answered, then closed


@pytest.mark.parametrize(
    ("error", "status", "words"),
    [(StoreBusy("held by pid 12"), 503, "Try again in a few minutes"), (KeyError("inner"), 500, "our fault")],
)
def test_failures_say_what_to_do_and_keep_their_insides(error: Exception, status: int, words: str) -> None:
    service: Service = Nothing(error)
    with running(make_app(service)) as url:
        answer = Site(url, None, None, None).get("/show/x")  # type: ignore[arg-type]
    assert answer.status == status
    assert words in answer.text
    assert "pid" not in answer.text
    assert "inner" not in answer.text
    assert answer.headers["Referrer-Policy"] == "no-referrer"


def test_health_says_ok(site: Site) -> None:
    assert site.get("/healthz").text == "ok\n"


def test_pages_escape_what_they_are_given() -> None:
    assert "<b>" not in pages.trouble("<b>", "<b>", "<b>")
