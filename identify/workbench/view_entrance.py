"""Coming in and going out: the one-time link, names and passwords."""

from __future__ import annotations

from typing import Annotated

from fastapi import APIRouter, Form, Request
from fastapi.responses import RedirectResponse, Response

from identify.workbench.pages import View, Workbench, person_of, render, workbench_of
from identify.workbench.people import check_password, list_people
from identify.workbench.sessions import Person


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    pages.add_api_route("/open/{token}", use_link, methods=["GET"], response_model=None)
    pages.add_api_route("/sign-in", show_sign_in, methods=["GET"], response_model=None)
    pages.add_api_route("/sign-in", sign_in, methods=["POST"], response_model=None)
    pages.add_api_route("/sign-out", sign_out, methods=["POST"], response_model=None)
    twins.add_api_route("/me", me, methods=["GET"])


def _enter(bench: Workbench, session: str) -> Response:
    response = RedirectResponse("/", status_code=303)
    response.set_cookie(bench.cookie, session, httponly=True, samesite="strict", path="/")
    return response


def use_link(token: str, request: Request) -> Response:
    """Exchange the one-time link for a session."""
    bench = workbench_of(request)
    session = bench.sessions.use_link(token)
    if session is None:
        told = (
            "This link was used before, or belongs to an earlier start of the program. Start it again for a new link."
        )
        return render(request, _sign_in_view(bench, told), 403)
    return _enter(bench, session)


def _sign_in_view(bench: Workbench, told: str) -> View:
    return View("sign_in.html", "Sign in", {"told": told, "has_people": bool(list_people(bench.desk.case))})


def show_sign_in(request: Request) -> Response:
    """The page to sign in by name."""
    return render(request, _sign_in_view(workbench_of(request), ""))


def sign_in(
    request: Request,
    name: Annotated[str, Form(max_length=200)] = "",
    password: Annotated[str, Form(max_length=1000)] = "",
) -> Response:
    """Start a session for a name and its password."""
    bench = workbench_of(request)
    name = name.strip()
    if bench.sessions.is_paused(name):
        return render(request, _sign_in_view(bench, "Too many wrong passwords for this name. Wait a minute."), 429)
    role = check_password(bench.desk.case, name, password)
    bench.sessions.note_sign_in(name, is_right=role is not None)
    if role is None:
        return render(request, _sign_in_view(bench, "Name and password do not belong together."), 403)
    return _enter(bench, bench.sessions.start(Person(name, role)))


def sign_out(request: Request) -> Response:
    """End the session."""
    bench = workbench_of(request)
    bench.sessions.end(request.cookies.get(bench.cookie, ""))
    response = RedirectResponse("/sign-in", status_code=303)
    response.delete_cookie(bench.cookie, path="/")
    return response


def me(request: Request) -> dict[str, str]:
    """Who is signed in."""
    person = person_of(request)
    return {"name": person.name, "role": person.role}
