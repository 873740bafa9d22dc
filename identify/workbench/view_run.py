"""Run: a chromatogram, its components, what they were identified as; blank and ladder can be given later."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from fastapi import APIRouter, File, Form, Query, Request, UploadFile

from identify.report.words import minutes_text, probability_text, relative_text, visible_text
from identify.retention import parse_ladder
from identify.workbench.case_rows import QueryRow
from identify.workbench.chromatogram import Mark, chromatogram_svg
from identify.workbench.desk import Desk, NotFound
from identify.workbench.job_list import find_job
from identify.workbench.pages import Id, Outcome, TheDesk, ThePerson, View, add_action, add_view, workbench_of
from identify.workbench.view_work_list import display_name, keep_upload, query_line

Minutes = Annotated[float | None, Query(ge=0, le=100_000)]
MAX_COMPONENTS = 5000
MARGIN_MIN = 0.5


def add_routes(pages: APIRouter, twins: APIRouter) -> None:
    """Add the routes of this view."""
    add_view(pages, twins, "/runs/{run_id}", show_run)
    add_action(pages, twins, "/runs/{run_id}/again", search_again)


def _find_run(desk: Desk, run_id: int) -> tuple[int, str, str, dict[str, Any]]:
    found = desk.case.run(run_id)
    if found is None:
        raise NotFound("run", found=str(run_id), expected="a number from the work list")
    return found


def show_run(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    run_id: Id,
    start: Minutes = None,
    end: Minutes = None,
    which: Annotated[Literal["claimed", "compounds", "all"], Query()] = "claimed",
) -> View:
    """Chromatogram between two times (in minutes) and the components that elute there."""
    job_id, name, at, run = _find_run(desk, run_id)
    rows = {row.number: row for row in desk.case.queries(run_id=run_id, limit=MAX_COMPONENTS)}
    first, last = run["time_s"][0] / 60.0, run["time_s"][-1] / 60.0
    times = [item["time_s"] / 60.0 for item in run["components"]] or [first, last]
    start_min = min(max(min(times) - MARGIN_MIN if start is None else start, first), last)
    end_min = max(min(max(times) + MARGIN_MIN if end is None else end, last), first)
    if end_min - start_min < 0.01:
        start_min, end_min = first, last
    components = [_line(item, rows.get(item["number"])) for item in run["components"]]
    told = {key: value for key, value in run.items() if key not in ("components", "time_s", "intensity")}
    data = {
        "id": run_id, "name": visible_text(name), "at": at, "job": job_id, "run": told, "components": components,
        "start_min": round(start_min, 3), "end_min": round(end_min, 3),
        "first_min": round(first, 3), "last_min": round(last, 3), "which": which,
    }  # fmt: skip

    def draw() -> dict[str, Any]:
        return _draw(data, run)

    return View("run.html", visible_text(name), data, draw)


def _draw(data: dict[str, Any], run: dict[str, Any]) -> dict[str, Any]:
    start_s, end_s = 60.0 * data["start_min"], 60.0 * data["end_min"]
    inside = [item for item in data["components"] if start_s - 0.5 <= item["time_s"] <= end_s + 0.5]
    marks = [
        Mark(item["number"], item["time_s"], item["height"], item["style"], item["text"], item["address"])
        for item in inside
    ]
    title = f"Chromatogram of {data['name']}, {data['start_min']:.2f} to {data['end_min']:.2f} min"
    compounds = [item for item in inside if item["kind"] == "compound"]
    claimed = [item for item in compounds if item["query"] and item["query"]["level"] != "no claim"]
    shown = {"claimed": claimed, "compounds": compounds, "all": inside}[data["which"]]
    # The solvent would leave nothing to see of everything else.
    top = max((item["height"] for item in compounds), default=0.0) * 1.02
    width = data["end_min"] - data["start_min"]
    return {
        "plot_svg": chromatogram_svg(run["time_s"], run["intensity"], marks, start_s, end_s, title, top),
        "shown": shown,
        "sizes": {"claimed": len(claimed), "compounds": len(compounds), "all": len(inside)},
        "is_cut": any(
            y > top > 0 for t, y in zip(run["time_s"], run["intensity"], strict=True) if start_s <= t <= end_s
        ),
        "is_zoomed": width < data["last_min"] - data["first_min"] - 0.01,
        "steps": {
            "earlier": (data["start_min"] - 0.8 * width, data["start_min"] + 0.2 * width),
            "closer": (data["start_min"] + 0.25 * width, data["end_min"] - 0.25 * width),
            "later": (data["start_min"] + 0.8 * width, data["end_min"] + 0.8 * width),
        },
    }


def _line(item: dict[str, Any], row: QueryRow | None) -> dict[str, Any]:
    found = query_line(row) if row else None
    text = f"component {item['number']}, {minutes_text(item['time_s'])}, {item['kind']}"
    if found:
        text += f": {found['statement']}"
    return {
        **item,
        "query": found,
        "address": f"/queries/{row.id}" if row else "",
        "style": "compound" if item["kind"] == "compound" else "artefact",
        "text": text,
        "minutes": f"{item['time_s'] / 60.0:.3f}",
        "share_text": relative_text(100.0 * item["share_of_signal"]),
        "purity_text": probability_text(item["purity"]),
    }


def search_again(
    desk: TheDesk,
    person: ThePerson,
    request: Request,
    run_id: Id,
    blank: Annotated[UploadFile | None, File()] = None,
    ladder: Annotated[str, Form(max_length=20_000)] = "",
    column: Annotated[str, Form(max_length=100)] = "",
) -> Outcome:
    """Read the run again with a blank run and a ladder; the earlier result is kept."""
    job_id, name, _, _ = _find_run(desk, run_id)
    job = find_job(desk.case, job_id)
    options: dict[str, Any] = dict(job.options) if job else {}
    desk.upload(str(options.get("upload", "")))
    if ladder.strip():
        parse_ladder(ladder, "ladder")
    options |= {"ladder": ladder.strip(), "column": column.strip()}
    if blank is not None and (blank.filename or blank.size):
        options |= {"blank_upload": keep_upload(desk, blank), "blank_name": display_name(blank.filename)}
    new = workbench_of(request).jobs.add("run", name, person.name, options)
    return "/?said=received", {"jobs": [new]}
