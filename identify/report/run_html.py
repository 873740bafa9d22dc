"""Findings of runs as one HTML file: chromatogram, table of components, their sections, what is left open."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace
from pathlib import Path

from identify.records import ClaimLevel
from identify.report.context import build_page
from identify.report.contexts import Fact
from identify.report.html import open_templates, read_template, script_digest
from identify.report.run_chart import chart_data, chart_marks, chromatogram_svg
from identify.report.run_words import (
    ComponentRow,
    Plan,
    component_row,
    date_text,
    follow_up_plans,
    share_lines,
    share_text,
)
from identify.report.words import counted, file_name, minutes_text, sentence, visible_text
from identify.runs.findings import Finding, RunFindings, RunsReport
from identify.runs.model import ComponentKind
from identify.writers.files import write_atomically

SECTION_SHARE, MAX_SECTIONS = 0.001, 60
"""Components from this share of the signal have a section of their own, at most so many; all stand in the table."""
DETAILED = 2
"""Candidates of a component shown in detail, the best and its rival: a run has ten times the queries of other reports."""
LISTED_SHARE = 0.0005
MAX_UNEXPLAINED = 15
REPEATED = 4
"""A remark on more components than this is said once, below the table."""


@dataclass(frozen=True, slots=True)
class RowContext:
    """A row of the table of components."""

    anchor: str
    link: str
    row: ComponentRow
    style: str


@dataclass(frozen=True, slots=True)
class RunContext:
    """A run on the page."""

    anchor: str
    title: str
    facts: tuple[Fact, ...]
    notes: tuple[str, ...]
    chart_svg: str
    chart_json: str
    shares: tuple[Fact, ...]
    has_index: bool
    remarks: tuple[str, ...]
    rows: tuple[RowContext, ...]
    small: tuple[RowContext, ...]
    small_title: str
    blank: tuple[RowContext, ...]
    unexplained: tuple[RowContext, ...]


def render_run_html(found: RunsReport, *, date: str = "") -> str:
    """HTML text of the findings, complete in itself.

    Parameters
    ----------
    found : RunsReport
    date : str
        Shown in the head when given.

    Returns
    -------
    str
        A document that loads nothing: its content security policy forbids every request and every script but its own.
    """
    chosen = _chosen(found)
    anchors = {id(finding): f"query-{place}" for place, finding in enumerate(chosen, start=1)}
    report = replace(found.report, identifications=tuple(f.identification for f in chosen if f.identification))
    page = build_page(report, date=date, detailed=DETAILED)
    script = read_template("details.js") + read_template("run.js")
    runs = tuple(_run(run, anchors) for run in found.runs)
    names = ", ".join(file_name(run.run.source.path) for run in found.runs)
    return (
        open_templates("identify.report")
        .get_template("run.html")
        .render(
            page=replace(
                page, title="Compounds of a GC-MS run" if len(runs) == 1 else "Compounds of GC-MS runs", subtitle=names
            ),
            runs=runs,
            plans=tuple(_plan(plan, len(runs) > 1) for plan in follow_up_plans(found.runs)),
            unknowns=tuple(_unknown(found, number) for number in range(len(found.unknowns))),
            sections_note=f"Components from {share_text(SECTION_SHARE)} of the signal, at most {MAX_SECTIONS}, have a section.",
            style=read_template("page.css") + read_template("plots.css") + read_template("run.css"),
            script=script,
            script_digest=script_digest(script),
        )
    )


def write_run_html(path: Path, found: RunsReport, *, date: str = "") -> None:
    """Nothing comes out; afterwards `path` holds the findings as one HTML file, whole or not at all.

    Parameters
    ----------
    path : Path
    found : RunsReport
    date : str
        Shown in the head when given.

    Raises
    ------
    UsageError
        If the file cannot be written.
    """
    write_atomically(path, render_run_html(found, date=date).encode("utf-8"))


def _chosen(found: RunsReport) -> list[Finding]:
    """Findings with a section: the largest, in the order of run and time."""
    weighed = []
    for run in found.runs:
        total = run.shares.compounds or 1.0
        for finding in run.findings:
            share = finding.component.area / total
            solvent = finding.component.kind is ComponentKind.SOLVENT
            if finding.identification and (solvent or (not finding.is_background and share >= SECTION_SHARE)):
                weighed.append((share, finding))
    kept = {id(finding) for _, finding in sorted(weighed, key=lambda pair: -pair[0])[:MAX_SECTIONS]}
    return [finding for run in found.runs for finding in run.findings if id(finding) in kept]


def _run(run: RunFindings, anchors: dict[int, str]) -> RunContext:
    total = run.shares.compounds
    rows, targets = [], []
    for finding in run.findings:
        anchor = f"component-{run.number}-{finding.component.number}"
        link = anchors.get(id(finding), "")
        level = finding.identification.claim.level if finding.identification else ClaimLevel.NO_CLAIM
        style = "background" if finding.is_background else level.value.replace(" ", "-")
        rows.append(RowContext(anchor, link, component_row(finding, total), style))
        targets.append(link or anchor)
    marks = chart_marks(run, targets)
    rows, repeated = _said_once(rows)
    is_small = [not f.is_background and f.component.area < LISTED_SHARE * total for f in run.findings]
    small = tuple(row for row, flag in zip(rows, is_small, strict=True) if flag)
    place = {id(f): row for f, row in zip(run.findings, rows, strict=True)}
    return RunContext(
        anchor=f"run-{run.number}",
        title=file_name(run.run.source.path),
        facts=_facts(run),
        notes=tuple(sentence(note) for note in run.notes),
        chart_svg=chromatogram_svg(run, marks, name=f"chart-{run.number}"),
        chart_json=chart_data(run, marks),
        shares=tuple(Fact(name, value) for name, value in share_lines(run)),
        has_index=any(f.retention_index is not None for f in run.findings),
        remarks=repeated,
        rows=tuple(row for row, flag in zip(rows, is_small, strict=True) if not flag),
        small=small,
        small_title=f"{counted(len(small), 'component')} below {share_text(LISTED_SHARE)} of the signal each",
        blank=tuple(place[id(f)] for f in run.findings if f.component.kind is ComponentKind.BLANK),
        unexplained=tuple(place[id(f)] for f in run.unexplained[:MAX_UNEXPLAINED]),
    )


def _said_once(rows: list[RowContext]) -> tuple[list[RowContext], tuple[str, ...]]:
    """Rows that name by number what more than `REPEATED` of them would say, and these remarks."""
    counts = Counter(text for row in rows for text in row.row.remarks)
    repeated = tuple(text for text, count in counts.items() if count > REPEATED)
    short = {text: f"Note {number}." for number, text in enumerate(repeated, start=1)}
    shown = [replace(row.row, remarks=tuple(short.get(text, text) for text in row.row.remarks)) for row in rows]
    return [replace(row, row=texts) for row, texts in zip(rows, shown, strict=True)], repeated


def _facts(run: RunFindings) -> tuple[Fact, ...]:
    first, last = run.decomposition.time_s[0], run.decomposition.time_s[-1]
    facts = [
        Fact("read from", visible_text(run.run.source.path)),
        Fact("scans", f"{run.run.n_scans}, {minutes_text(float(first))} to {minutes_text(float(last))}"),
        Fact("components", str(len(run.findings))),
    ]
    acquired = date_text(run.run.acquired)
    for name, value in (("sample", run.run.title), ("instrument", run.run.instrument), ("acquired", acquired)):
        if value:
            facts.append(Fact(name, visible_text(value)))
    if run.scale:
        words = f"from {visible_text(run.scale.origin)}, ± {run.scale.uncertainty:.0f}"
        facts.append(
            Fact(
                "retention index",
                words + ("" if run.scale.phase else "; column not stated, so it serves the order of elution only"),
            )
        )
    else:
        facts.append(Fact("retention index", "not assessed: no ladder, and too few n-alkanes in the run"))
    if run.decomposition.skew_scans_per_mz:
        facts.append(
            Fact("scan skew", f"{100 * run.decomposition.skew_scans_per_mz:+.2f} scans per 100 m/z, corrected")
        )
    return tuple(facts)


def _plan(plan: Plan, several: bool) -> dict[str, str]:
    where = f"component {plan.component} at {plan.time}" + (f" of run {plan.run}" if several else "")
    return {
        "action": visible_text(plan.plan.action),
        "where": where,
        "anchor": f"component-{plan.run}-{plan.component}",
        "reason": sentence(plan.plan.reason),
        "decides": sentence(plan.plan.decides),
    }


def _unknown(found: RunsReport, place: int) -> dict[str, object]:
    unknown = found.unknowns[place]
    rows = []
    for number, component in unknown.members:
        run = next(run for run in found.runs if run.number == number)
        finding = next(f for f in run.findings if f.component.number == component)
        rows.append((f"component-{number}-{component}", number, component_row(finding, run.shares.compounds)))
    return {"number": unknown.number, "rows": rows}
