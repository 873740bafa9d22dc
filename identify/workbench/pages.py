"""How a view becomes a page or its JSON twin: one builder for both, templates that only loop and print."""

from __future__ import annotations

import functools
import inspect
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Annotated, Any

from fastapi import Depends, Path, Request
from fastapi.responses import HTMLResponse, JSONResponse, RedirectResponse, Response

from identify import __version__
from identify.errors import IonwitnessError
from identify.workbench.desk import Desk, Forbidden
from identify.workbench.jobs import JobRunner
from identify.workbench.rendering import environment
from identify.workbench.sessions import Person, Sessions

if TYPE_CHECKING:
    from fastapi import APIRouter


@dataclass(frozen=True, slots=True)
class View:
    """What a page shows."""

    template: str
    title: str
    data: Mapping[str, Any]
    """JSON values of the JSON twin, those the page shows too."""
    draw: Callable[[], Mapping[str, Any]] = field(default=dict)
    """Makes what only the page needs (drawings, texts); not called for the twin."""
    more: Callable[[], Mapping[str, Any]] = field(default=dict)
    """Makes what only the twin needs; not called for the page."""


@dataclass(frozen=True, slots=True)
class Workbench:
    """What every view can reach."""

    desk: Desk
    jobs: JobRunner
    sessions: Sessions
    cookie: str
    """Name of the session cookie; has the port in it, because browsers share cookies between ports."""
    is_networked: bool


class NotSignedIn(IonwitnessError):
    """Nobody is signed in."""


def workbench_of(request: Request) -> Workbench:
    """The workbench a request goes to."""
    bench: Workbench = request.app.state.workbench
    return bench


def desk_of(request: Request) -> Desk:
    """The desk a request works on."""
    return workbench_of(request).desk


def person_of(request: Request) -> Person:
    """Whoever sent the request.

    Raises
    ------
    NotSignedIn
        If there is no session.
    """
    bench = workbench_of(request)
    person = bench.sessions.find(request.cookies.get(bench.cookie, ""))
    if person is None:
        raise NotSignedIn("session", found="none, or one that has ended", expected="somebody who is signed in")
    request.state.person = person
    return person


def reviewer_of(request: Request) -> Person:
    """Whoever sent the request, who must be a reviewer.

    Raises
    ------
    NotSignedIn, Forbidden
    """
    person = person_of(request)
    if not person.may("reviewer"):
        raise Forbidden(
            "role", found=f"{person.name}, who is an {person.role}", expected="a reviewer",
            hint="Ask a reviewer to sign in and do this.",
        )  # fmt: skip
    return person


TheDesk = Annotated[Desk, Depends(desk_of)]
ThePerson = Annotated[Person, Depends(person_of)]
TheReviewer = Annotated[Person, Depends(reviewer_of)]
Id = Annotated[int, Path(ge=1, le=2**40)]
"""Number of a query, job, run or entry in an address."""
LibraryNumber = Annotated[int, Path(ge=1, le=1000)]

SAID = {
    "received": "Received. The list below fills as spectra are identified.",
    "decided": "The decision is kept.",
    "cleaned": "Cleaned and identified again with the steps chosen; the earlier result is kept.",
    "proposed": "Proposed. The standard waits for the review of a second person.",
    "reviewed": "The review is kept in the library's events.",
    "withdrawn": "Withdrawn. The entry stays in the library with its history and is not found any more.",
    "cancelled": "The work was stopped; what was found before is kept.",
    "verifying": "Verification has started; its outcome appears below.",
}
"""What a page can say after an action; the address carries only the word."""

NAVIGATION = (
    ("/", "Work list", "w"),
    ("/library", "Library", "l"),
    ("/standards", "Standards", "s"),
    ("/follow-up", "Follow-up", "f"),
    ("/trail", "Trail", "t"),
    ("/report", "Report", "r"),
)


def render(request: Request, view: View, status: int = 200) -> HTMLResponse:
    """The page of a view.

    Parameters
    ----------
    request : Request
    view : View
    status : int

    Returns
    -------
    HTMLResponse
    """
    person: Person | None = getattr(request.state, "person", None)
    path = request.url.path
    query = f"?{request.url.query}" if request.url.query else ""
    html = (
        environment()
        .get_template(view.template)
        .render(
            view=view,
            data=view.data,
            person=person,
            navigation=NAVIGATION if person else (),
            here=path,
            twin=f"/api{path.rstrip('/') or '/work-list'}{query}",
            said=SAID.get(request.query_params.get("said", ""), ""),
            version=__version__,
            **view.draw(),
        )
    )
    return HTMLResponse(html, status)


def add_view(pages: APIRouter, twins: APIRouter, path: str, builder: Callable[..., View], *, twin: str = "") -> None:
    """Nothing comes out; afterwards a page at `path` and its JSON twin below ``/api`` are made by one builder.

    Parameters
    ----------
    pages, twins : APIRouter
    path : str
    builder : callable
        Takes `request` and whatever else the address holds.
    twin : str
        Path of the twin where it differs.
    """

    @functools.wraps(builder)
    def page(*args: Any, request: Request, **kwargs: Any) -> Response:
        return render(request, builder(*args, request=request, **kwargs))

    @functools.wraps(builder)
    def data(*args: Any, **kwargs: Any) -> Response:
        view = builder(*args, **kwargs)
        return JSONResponse({**view.data, **view.more()})

    _take_signature(builder, page, data)
    # Their annotations are the builder's, which say View.
    pages.add_api_route(path, page, methods=["GET"], response_model=None, name=f"page {path}")
    twins.add_api_route(twin or path, data, methods=["GET"], response_model=None, name=f"data {path}")


def _take_signature(builder: Callable[..., Any], *routes: Callable[..., Response]) -> None:
    """Give routes the parameters of a builder, with its names looked up in its own module (an old FastAPI looks in ours)."""
    for route in routes:
        route.__signature__ = inspect.signature(builder, eval_str=True)  # type: ignore[attr-defined]


Outcome = tuple[str, Mapping[str, Any]]
"""Where the browser goes after an action, and what the twin answers."""


def add_action(pages: APIRouter, twins: APIRouter, path: str, action: Callable[..., Outcome]) -> None:
    """Nothing comes out; afterwards a form can be sent to `path`, and to its twin below ``/api``.

    Parameters
    ----------
    pages, twins : APIRouter
    path : str
    action : callable
    """

    @functools.wraps(action)
    def send(*args: Any, **kwargs: Any) -> Response:
        return RedirectResponse(action(*args, **kwargs)[0], status_code=303)

    @functools.wraps(action)
    def data(*args: Any, **kwargs: Any) -> Response:
        address, told = action(*args, **kwargs)
        return JSONResponse({**told, "page": address.partition("?")[0]}, status_code=201)

    _take_signature(action, send, data)
    pages.add_api_route(path, send, methods=["POST"], response_model=None, name=f"send {path}")
    twins.add_api_route(path, data, methods=["POST"], response_model=None, name=f"action {path}", status_code=201)
