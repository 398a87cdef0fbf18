"""The routes: exactly four, each with its declared purpose, role and district check.

A GET changes nothing, since mail scanners follow every link. Answers carry headers that keep a link's token
from leaking (no referrer, no cache) and let a page load nothing; the access log drops the token.
"""

import logging
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import datetime
from typing import Any, Protocol, TypeVar

import uvicorn
from fastapi import Depends, FastAPI, HTTPException, Request
from fastapi.responses import HTMLResponse, PlainTextResponse, Response
from starlette.exceptions import HTTPException as PlainHTTPException

from service.clock import Clock, SystemClock
from service.errors import BadToken, LeafturnError, NotFound, Unreachable
from service.web import pages
from service.web.limits import Limits, Patient

LARGEST_BODY = 4096  # bytes; the one form there is sends 30
PATIENCE_S = 10.0
_HEADERS = {
    "Cache-Control": "no-store",
    "Referrer-Policy": "no-referrer",
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "X-Robots-Tag": "noindex",
}
_FIRST_PARTS = ("/show/", "/unsubscribe/", "/healthz")
_log = logging.getLogger("leafturn.web")
Endpoint = TypeVar("Endpoint", bound=Callable[..., Any])


class Service(Protocol):
    """What the pages ask of the pipeline. Each reads the token itself, and raises BadToken where it is none."""

    def show(self, token: str, at: datetime) -> str:
        """The reader's digest as a page."""

    def check_unsubscribe(self, token: str, at: datetime) -> None:
        """Whether this link may stop somebody's mails; changes nothing."""

    def unsubscribe(self, token: str, at: datetime) -> None:
        """Stop the mails of the link's reader; the second time changes nothing."""


@dataclass(frozen=True, slots=True)
class Access:
    """Who may use a route, for what, and what keeps it inside one district."""

    purpose: str  # what a token must have been made for, or "public"
    role: str
    district: str


@dataclass(frozen=True, slots=True)
class _Trouble:
    heading: str
    what: str
    next_step: str


_LINK = "Open the newest digest in your mail and use the link there, or ask your grower group’s coordinator."
_STILL = "If the newest digest’s link does not work either, ask your grower group’s coordinator."
_TROUBLES = {
    403: _Trouble("Not open to you", "This address is not open to readers.", _LINK),
    404: _Trouble("There is no such page", "The address may have been cut short on its way to you.", _LINK),
    405: _Trouble("That can’t be done here", "This address does not take that kind of request.", _LINK),
    408: _Trouble("That took too long", "The connection was too slow and nothing was changed.", "Try once more."),
    413: _Trouble("That is too much", "The request was too large and nothing was changed.", _LINK),
    500: _Trouble(
        "Something went wrong here", "It is our fault, not yours; nothing was changed.", "Try again in an hour."
    ),
    503: _Trouble("Not reachable just now", "The service is busy; nothing was changed.", "Try again in a few minutes."),
}


def make_app(service: Service, clock: Clock | None = None, *, patience_s: float = PATIENCE_S) -> FastAPI:
    """The whole site for one service; `patience_s` is how long a request's body may take [s]."""
    app = FastAPI(openapi_url=None, docs_url=None, redoc_url=None, dependencies=[Depends(_declared)])
    _routes(app, service, clock or SystemClock())
    app.add_exception_handler(LeafturnError, _ours)
    app.add_exception_handler(PlainHTTPException, _theirs)
    app.add_exception_handler(Exception, _unforeseen)
    app.add_middleware(Limits, refuse=_refusal, largest=LARGEST_BODY, patience_s=patience_s)
    logging.getLogger("uvicorn.access").addFilter(without_token)
    return app


def serving(app: FastAPI, host: str, port: int) -> uvicorn.Config:
    """How the site is served: `uvicorn.Server(serving(app, host, port)).run()`."""
    return uvicorn.Config(
        app,
        host=host,
        port=port,
        log_level="info",
        http=Patient,
        server_header=False,
        limit_concurrency=200,
        timeout_keep_alive=5,
        timeout_graceful_shutdown=10,
        h11_max_incomplete_event_size=16_384,
    )


def without_token(record: logging.LogRecord) -> bool:
    """Filter of the access log: of a path, only a first part that we know is kept."""
    if isinstance(record.args, tuple) and len(record.args) == 5:
        client, method, path, version, status = record.args
        first = next((part for part in _FIRST_PARTS if str(path).startswith(part)), "/")
        record.args = (client, method, f"{first}…", version, status)
    return True


def _routes(app: FastAPI, service: Service, clock: Clock) -> None:
    @app.get("/show/{token}")
    @_access(Access("show", "the reader whom the link was mailed to", "the token names one reader of one district"))
    def show(token: str) -> Response:
        return _html(service.show(token, clock.now()))

    @app.get("/unsubscribe/{token}")
    @_access(Access("unsubscribe", "whoever holds the mail", "the token names one reader of one district"))
    def ask_to_leave(token: str) -> Response:
        service.check_unsubscribe(token, clock.now())
        return _html(pages.leave())

    @app.post("/unsubscribe/{token}")
    @_access(Access("unsubscribe", "whoever holds the mail", "the token names one reader of one district"))
    def leave(token: str) -> Response:
        # RFC 8058: the mail program's own post and our button's are the same; the body says nothing more
        service.unsubscribe(token, clock.now())
        return _html(pages.left())

    @app.get("/healthz")
    @_access(Access("public", "anyone", "says nothing of any district"))
    def healthz() -> Response:
        return PlainTextResponse("ok\n", headers=_headers())


def _access(access: Access) -> Callable[[Endpoint], Endpoint]:
    """Declare who may use a route; one without this is refused."""

    def declare(endpoint: Endpoint) -> Endpoint:
        endpoint.access = access  # type: ignore[attr-defined]
        return endpoint

    return declare


def _declared(request: Request) -> None:
    if not isinstance(getattr(request.scope.get("endpoint"), "access", None), Access):
        raise HTTPException(403)


def _headers() -> dict[str, str]:
    return _HEADERS | {"Content-Security-Policy": pages.policy()}


def _html(page: str, status: int = 200, more: Mapping[str, str] | None = None) -> Response:
    return HTMLResponse(page, status, headers=_headers() | dict(more or {}))


def _ours(request: Request, error: Exception) -> Response:
    """Our own errors: a link that does not work, or a store that can't answer just now."""
    if isinstance(error, BadToken | NotFound):
        why = str(error) if isinstance(error, BadToken) else "What it led to is no longer kept here."
        return _html(pages.trouble("This link does not work", why, _STILL), 404)
    if isinstance(error, Unreachable):
        _log.warning("a page could not be served: %s", error)
        return _trouble(503, {"Retry-After": "120"})
    return _unforeseen(request, error)


def _theirs(_request: Request, error: Exception) -> Response:
    assert isinstance(error, PlainHTTPException)
    return _trouble(error.status_code, error.headers)


def _unforeseen(_request: Request, error: Exception) -> Response:
    _log.error("a page failed: %s", type(error).__name__)
    return _trouble(500)


def _trouble(status: int, more: Mapping[str, str] | None = None) -> Response:
    trouble = _TROUBLES.get(status, _TROUBLES[404])
    return _html(pages.trouble(trouble.heading, trouble.what, trouble.next_step), status, more)


def _refusal(status: int) -> tuple[list[tuple[bytes, bytes]], bytes]:
    answer = _trouble(status)
    kept = [(name, value) for name, value in answer.raw_headers if name != b"content-length"]
    return kept, bytes(answer.body)
