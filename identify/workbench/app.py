"""The application: routes, errors as pages, and the guard in front."""

from __future__ import annotations

from collections.abc import Iterable
from functools import cache
from importlib import resources

from fastapi import APIRouter, FastAPI, Request
from fastapi.exceptions import RequestValidationError
from fastapi.responses import JSONResponse, RedirectResponse, Response
from starlette.exceptions import HTTPException

from identify import __version__
from identify.errors import IonwitnessError, LibraryBusy, LibraryConflict
from identify.report.html import read_template
from identify.workbench import (
    view_entrance,
    view_follow_up,
    view_library,
    view_query,
    view_report,
    view_run,
    view_standards,
    view_trail,
    view_work_list,
)
from identify.workbench.desk import Forbidden, NotFound
from identify.workbench.guard import App, Guard
from identify.workbench.identifier_process import Broken
from identify.workbench.pages import NotSignedIn, View, Workbench, person_of, render

ROOMS = (
    view_entrance,
    view_work_list,
    view_query,
    view_run,
    view_library,
    view_standards,
    view_follow_up,
    view_trail,
    view_report,
)
STATUS: tuple[tuple[type[IonwitnessError], int], ...] = (
    (NotFound, 404),
    (Forbidden, 403),
    (LibraryConflict, 409),
    (LibraryBusy, 503),
    (Broken, 500),
)
STATIC_TYPES = {"css": "text/css", "js": "text/javascript"}


def build_app(bench: Workbench, hosts: Iterable[str]) -> App:
    """The whole application, guarded.

    Parameters
    ----------
    bench : Workbench
    hosts : iterable of str
        Host headers that are ours.

    Returns
    -------
    ASGI application
    """
    app = FastAPI(
        title="ionwitness workbench", version=__version__, docs_url=None, redoc_url=None, openapi_url=None,
        redirect_slashes=False,
        description="JSON twins of the pages. Every request needs the session cookie; changes need our own Origin header.",
    )  # fmt: skip
    app.state.workbench = bench
    pages, twins = APIRouter(include_in_schema=False), APIRouter(prefix="/api")
    for room in ROOMS:
        room.add_routes(pages, twins)
    pages.add_api_route("/static/{name}", static_file, methods=["GET"], response_model=None)

    def schema(request: Request) -> Response:
        person_of(request)
        return JSONResponse(app.openapi())

    pages.add_api_route("/api/openapi.json", schema, methods=["GET"], response_model=None)
    app.include_router(pages)
    app.include_router(twins)
    app.add_exception_handler(IonwitnessError, show_error)  # type: ignore[arg-type]
    app.add_exception_handler(RequestValidationError, show_invalid)  # type: ignore[arg-type]
    app.add_exception_handler(HTTPException, show_refused)  # type: ignore[arg-type]
    return Guard(app, hosts=hosts)


def show_error(request: Request, error: IonwitnessError, status: int = 422) -> Response:
    """An error as a page, or as JSON below ``/api``; its status where its kind does not say one."""
    is_data = request.url.path.startswith("/api/")
    if isinstance(error, NotSignedIn):
        if is_data:
            return JSONResponse({"error": {"what": error.what, "found": error.found, "expected": error.expected}}, 401)
        return RedirectResponse("/sign-in", status_code=303)
    status = next((status for kind, status in STATUS if isinstance(error, kind)), status)
    told = {"what": error.what, "found": error.found, "expected": error.expected, "hint": error.hint}
    if is_data:
        return JSONResponse({"error": told}, status)
    return render(request, View("error.html", "This did not work", {"error": told, "status": status}), status)


def show_invalid(request: Request, error: RequestValidationError) -> Response:
    """Form fields or an address that cannot be used."""
    faults = [".".join(str(part) for part in fault["loc"][1:]) + ": " + fault["msg"] for fault in error.errors()[:5]]
    return show_error(
        request, IonwitnessError("form", found="; ".join(faults), expected="fields as the page sends them")
    )


def show_refused(request: Request, error: HTTPException) -> Response:
    """No page at this address, or a request that no page can have sent."""
    if error.status_code == 404:
        return show_error(request, NotFound("page", found="nothing at this address", expected="one of the pages"))
    told = IonwitnessError("request", found=str(error.detail), expected="what our own pages send")
    return show_error(request, told, error.status_code)


@cache
def _static(name: str) -> str | None:
    if name == "report.css":
        return read_template("page.css") + read_template("plots.css")
    if name == "report.js":
        return read_template("details.js")
    if name in ("workbench.css", "workbench.js"):
        return resources.files("identify.workbench").joinpath("static", name).read_text("utf-8")
    return None


def static_file(name: str) -> Response:
    """One of our own style sheets or scripts.

    Raises
    ------
    NotFound
        For any other name.
    """
    text = _static(name)
    if text is None:
        raise NotFound("page", found="nothing at this address", expected="one of the pages")
    return Response(text, media_type=STATIC_TYPES[name.rpartition(".")[2]])
