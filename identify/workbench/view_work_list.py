"""Work list: everything on the bench, and the way new work gets onto it."""

from __future__ import annotations

import shutil
from dataclasses import asdict
from pathlib import PurePosixPath
from typing import Annotated, Any, Literal

from fastapi import APIRouter, File, Form, Query, Request, UploadFile

from identify.errors import InputError, UsageError
from identify.records import ClaimLevel
from identify.report.words import NONE, minutes_text, probability_text, sentence, visible_text
from identify.retention import parse_ladder
from identify.workbench.case_rows import STATES, Job, QueryRow
from identify.workbench.desk import Desk, NotFound
from identify.workbench.job_list import find_job, list_jobs
from identify.workbench.pages import Id, Outcome, TheDesk, ThePerson, View, add_action, add_view, workbench_of

PAGE_SIZE = 60
MAX_FILES = 200
MAX_PASTED = 900_000
RUN_HEADS = (b"CDF\x01", b"CDF\x02")


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/", show_work_list, twin="/work-list")
    add_action(pages, twins, "/uploads", take_upload)
    add_action(pages, twins, "/pasted", take_pasted)
    add_action(pages, twins, "/jobs/{job_id}/cancel", cancel_job)
    add_view(pages, twins, "/jobs/{job_id}", show_job)
    twins.add_api_route("/jobs", show_jobs, methods=["GET"])


def show_work_list(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    state: Annotated[Literal["", "open", "accepted", "rejected", "follow-up"], Query()] = "",
    text: Annotated[str, Query(max_length=100)] = "",
    page: Annotated[int, Query(ge=1, le=100_000)] = 1,
    components: Annotated[bool, Query()] = False,
) -> View:
    """Queries with what the data support and what was decided, runs, and work in the background."""
    jobs = _jobs_shown(desk)  # before the queries: a page whose jobs are over must show everything they found
    counts = desk.case.count_queries(text=text, in_runs=components)
    rows = desk.case.queries(state=state, text=text, in_runs=components, limit=PAGE_SIZE, offset=(page - 1) * PAGE_SIZE)
    total = counts[state] if state else sum(counts.values())
    data = {
        "counts": counts, "state": state, "text": text, "page": page, "pages": max(1, -(-total // PAGE_SIZE)),
        "queries": [query_line(row) for row in rows],
        "jobs": [job_line(job) for job in jobs],
        "runs": [_run_line(desk, *run) for run in desk.case.runs(12)],
        "components": components,
    }  # fmt: skip
    return View("work_list.html", "Work list", data, lambda: {"states": STATES, "is_busy": _is_busy(jobs)})


def _run_line(desk: Desk, run_id: int, job_id: int, name: str, at: str) -> dict[str, Any]:
    counts = desk.case.count_run(run_id)
    levels = {level.value: counts["level"][level.value] for level in ClaimLevel if level.value in counts["level"]}
    states = {state: counts["state"].get(state, 0) for state in STATES}
    return {"id": run_id, "job": job_id, "name": visible_text(name), "at": at, "levels": levels, "states": states}


def _jobs_shown(desk: Desk) -> list[Job]:
    """Jobs that are not over, and the last few that are."""
    return [job for number, job in enumerate(list_jobs(desk.case, limit=30)) if number < 4 or not job.is_over]


def _is_busy(jobs: list[Job]) -> bool:
    return any(not job.is_over for job in jobs)


def query_line(row: QueryRow) -> dict[str, Any]:
    """A line of the work list in words.

    Parameters
    ----------
    row : QueryRow

    Returns
    -------
    dict
    """
    return {
        **asdict(row),
        "name": visible_text(row.name) or f"query {row.id}",
        "source": visible_text(row.source),
        "statement": sentence(row.statement),
        "time": "" if row.time_s is None else minutes_text(row.time_s),
        # No number beside "no claim" that could be read as one of a name.
        "probability_text": NONE if row.level == ClaimLevel.NO_CLAIM.value else probability_text(row.probability),
    }


def job_line(job: Job) -> dict[str, Any]:
    """A job in words, without where its upload is kept.

    Parameters
    ----------
    job : Job

    Returns
    -------
    dict
    """
    told = {name: value for name, value in asdict(job).items() if name != "options"}
    return {**told, "name": visible_text(job.name), "message": visible_text(job.message, 1000), "is_over": job.is_over}


def show_jobs(desk: TheDesk, person: ThePerson) -> dict[str, Any]:
    """Work in the background, newest first."""
    jobs = _jobs_shown(desk)
    return {"jobs": [job_line(job) for job in jobs], "is_busy": _is_busy(jobs)}


def _find_job(desk: Desk, job_id: int) -> Job:
    job = find_job(desk.case, job_id)
    if job is None:
        raise NotFound("job", found=str(job_id), expected="a known number")
    return job


def show_job(desk: TheDesk, person: ThePerson, request: Request, job_id: Id) -> View:
    """One piece of background work and everything it could not use.

    Raises
    ------
    NotFound
        If there is none.
    """
    job = _find_job(desk, job_id)
    rejected = [{**asdict(item), "message": item.message} for item in desk.case.rejections(job_id)]
    return View("job.html", visible_text(job.name), {"job": job_line(job), "rejected": rejected})


def cancel_job(desk: TheDesk, person: ThePerson, request: Request, job_id: Id) -> Outcome:
    """Stop a job.

    Raises
    ------
    NotFound
        If there is none.
    """
    _find_job(desk, job_id)
    workbench_of(request).jobs.cancel(job_id)
    return "/?said=cancelled", {"job": job_id}


def take_upload(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    files: Annotated[list[UploadFile], File()],
    blank: Annotated[UploadFile | None, File()] = None,
    ladder: Annotated[str, Form(max_length=20_000)] = "",
    column: Annotated[str, Form(max_length=100)] = "",
    read_as: Annotated[Literal["", "run"], Form()] = "",
) -> Outcome:
    """Take files; each becomes one piece of background work.

    Raises
    ------
    InputError
        For no file, too many, or a ladder that cannot be read.
    """
    given = [file for file in files if file.filename or file.size]
    if not given or len(given) > MAX_FILES:
        raise InputError("upload", found=f"{len(given)} files", expected=f"1 to {MAX_FILES} files")
    options: dict[str, Any] = {"column": column.strip()}
    if ladder.strip():
        parse_ladder(ladder, "ladder")
        options["ladder"] = ladder
    if blank is not None and (blank.filename or blank.size):
        options |= {"blank_upload": keep_upload(desk, blank), "blank_name": display_name(blank.filename)}
    jobs = []
    for file in given:
        is_run = read_as == "run" or file.file.read(4) in RUN_HEADS
        upload = keep_upload(desk, file)
        kind, more = ("run", options) if is_run else ("spectra", {})
        name = display_name(file.filename)
        jobs.append(workbench_of(request).jobs.add(kind, name, person.name, {"upload": upload, **more}))
    return "/?said=received", {"jobs": jobs}


def take_pasted(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    peaks: Annotated[str, Form(max_length=MAX_PASTED)] = "",
    name: Annotated[str, Form(max_length=120)] = "",
) -> Outcome:
    """Take peaks as text.

    Raises
    ------
    UsageError
        For no text.
    """
    if not peaks.strip():
        raise UsageError("pasted peaks", found="nothing", expected="m/z and intensity, pair by pair")
    path = desk.new_upload()
    path.write_text(peaks, "utf-8", "replace")
    shown = visible_text(name, 120) or "pasted peaks"
    options = {"upload": path.name, "pasted": True}
    job = workbench_of(request).jobs.add("spectra", shown, person.name, options)
    return "/?said=received", {"jobs": [job]}


def display_name(name: str | None) -> str:
    """Last part of a file name as a browser sent it, made harmless; only ever shown, never opened.

    Parameters
    ----------
    name : str or None

    Returns
    -------
    str

    Examples
    --------
    >>> display_name("../../etc/passwd"), display_name("C:\\\\data\\\\a.jdx"), display_name("")
    ('passwd', 'a.jdx', 'unnamed file')
    """
    return visible_text(PurePosixPath((name or "").replace("\\", "/")).name, 120) or "unnamed file"


def keep_upload(desk: Desk, file: UploadFile) -> str:
    """Our name of an upload that is now kept.

    Parameters
    ----------
    desk : Desk
    file : UploadFile

    Returns
    -------
    str
    """
    path = desk.new_upload()
    file.file.seek(0)
    with path.open("xb") as stream:
        shutil.copyfileobj(file.file, stream)
    return path.name
