"""The report on a terminal: the claim first, the reasons under it, the cautions last."""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from identify.records import Candidate, FollowUp, Identification, Rejection, Report, Verdict
from identify.report.nature import nature_sentences, purity_sentences
from identify.report.words import (
    CAUTIONS,
    LONG_TEXT,
    NO_BREAK,
    NONE,
    PLAIN_MARKS,
    VERDICT_MARKS,
    compound_name,
    count_verdicts,
    counted,
    minutes_text,
    probability_text,
    rejection_text,
    score_text,
    sentence,
    source_text,
    visible_text,
)

if TYPE_CHECKING:
    from rich.console import Console, RenderableType
    from rich.text import Text

MAX_FOLLOW_UPS = 2
PLAIN_CHARACTERS = str.maketrans({"–": "-", "·": "|", "−": "-", "…": "...", "⟨": "<", "⟩": ">"})
"""Replacements on a terminal whose encoding lacks them."""
SCORES_LEGEND = (
    "cosine, reverse: cosine and reverse-match similarity, scores of likeness from 0 to 1, not probabilities · "
    "prob.: probability of the compound"
)
NARROW = 100
"""Below this many columns the table goes without the derivative column; the derivative joins the formula."""


def render_terminal(report: Report, console: Console, candidates_shown: int = 5) -> None:
    """Nothing comes out; the report is printed on `console`.

    Parameters
    ----------
    report : Report
    console : rich.console.Console
        Its width, colours and encoding are respected; piped output is plain text.
    candidates_shown : int
        Candidates listed per query; the rest is counted.

    Notes
    -----
    Names are printed as text, never as markup, with control characters spelled out.
    """
    marks = _marks(console)
    for found in report.identifications:
        _print_identification(found, console, marks, candidates_shown)
    if any(found.candidates for found in report.identifications):
        legend = "   ".join(f"{mark} {verdict.value}" for verdict, mark in marks.items())
        _print(console, f"Evidence: {legend}", style="dim")
        _print(console, SCORES_LEGEND, style="dim")
    print_notices(report, console)


def print_notices(report: Report, console: Console) -> None:
    """Nothing comes out; rejected inputs, libraries and cautions are printed on `console`: the end of every report.

    Parameters
    ----------
    report : Report
    console : rich.console.Console
    """
    if report.rejected:
        _print_rejected(report.rejected, console)
    _print_libraries(report, console)
    for caution in CAUTIONS:
        _print(console, f"Caution: {caution}", style="dim", hanging=9)


def _marks(console: Console) -> Mapping[Verdict, str]:
    try:
        "".join(VERDICT_MARKS.values()).encode(console.encoding)
    except UnicodeEncodeError:
        return PLAIN_MARKS
    return VERDICT_MARKS


def _print_identification(
    found: Identification, console: Console, marks: Mapping[Verdict, str], candidates_shown: int
) -> None:
    from rich.padding import Padding

    record = found.query.record
    facts = [source_text(record.source.path, record.source.line)]
    facts += [minutes_text(record.retention.time_s)] if record.retention.time_s is not None else []
    facts += [f"retention index {record.retention.index:.0f}"] if record.retention.index is not None else []
    name = visible_text(record.identity.name or record.title) or f"query {visible_text(found.query.id)}"
    _print(console, f"{name} ({', '.join(facts)})", style="underline")
    _print(console, sentence(found.claim.statement), style="bold", indent=2)
    _print(console, _levels_text(found), indent=2)
    for text in _nature_texts(found):
        _print(console, text, indent=2, hanging=2)
    if found.candidates:
        table = _candidate_table(found.candidates[:candidates_shown], console, marks)
        console.print(Padding(table, (0, 0, 0, 2), expand=False))
        hidden = len(found.candidates) - candidates_shown
        if hidden > 0:
            _print(console, f"and {counted(hidden, 'more candidate')} in the full result", style="dim", indent=2)
    for plan in found.follow_up[:MAX_FOLLOW_UPS]:
        _print(console, _follow_up_text(plan), indent=2, hanging=6)
    for note in found.notes:
        _print(console, f"Note: {sentence(note)}", indent=2, hanging=6)
    console.print()


def _nature_texts(found: Identification) -> tuple[str, ...]:
    """What is worth a line: purity unless one compound explains the query, the likeliest class and the best analogue."""
    verdict = found.purity.verdict if found.purity else Verdict.NOT_ASSESSED
    said = 1 if verdict is Verdict.CONFLICTS else 0  # the claim on a mixture gives the reason already
    purity = () if verdict is Verdict.AGREES else purity_sentences(found)[said:]
    likeliest = nature_sentences(replace(found, classes=found.classes[:1], analogues=found.analogues[:1]))
    return (*purity, *likeliest)


def _levels_text(found: Identification) -> str:
    claim = found.claim
    return (
        f"Level: {claim.level.value}. Probability: best candidate {probability_text(claim.compound_probability)}, "
        f"isomer group {probability_text(claim.group_probability)}, class {probability_text(claim.class_probability)}; "
        f"compound in the library {probability_text(found.in_library_probability)}."
    )


def _follow_up_text(plan: FollowUp) -> str:
    return f"Next: {visible_text(plan.action, LONG_TEXT)}: {sentence(plan.reason)}"


def _candidate_table(candidates: Sequence[Candidate], console: Console, marks: Mapping[Verdict, str]) -> RenderableType:
    from rich.table import Table

    derivatives = any(candidate.entry.measured_as for candidate in candidates)
    wide = console.width >= NARROW
    table = Table(box=None, padding=(0, 2 if wide else 1, 0, 0), header_style="dim", show_edge=False)
    table.add_column("#", justify="right", no_wrap=True)
    table.add_column("name", ratio=None, overflow="fold", min_width=14)
    table.add_column("formula", overflow="fold")
    if derivatives and wide:
        table.add_column("measured as", overflow="fold")
    for heading in ("cosine", "reverse", "prob."):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("evidence", no_wrap=True)
    for candidate in candidates:
        entry = candidate.entry
        formula = visible_text(entry.identity.formula, 40) or NONE
        measured_as = visible_text(entry.measured_as, 40)
        cells = [str(candidate.rank), compound_name(entry.identity.name, entry.accession)]
        if derivatives and wide:
            cells += [formula, measured_as or NONE]
        else:
            cells.append(f"{formula}\nas {measured_as}" if measured_as else formula)
        cells += [score_text(candidate.cosine), score_text(candidate.reverse), probability_text(candidate.probability)]
        cells.append(_evidence_text(candidate, marks))
        table.add_row(*(printable(cell, console) for cell in cells))
    return table


def _evidence_text(candidate: Candidate, marks: Mapping[Verdict, str]) -> str:
    if not candidate.evidence:
        return NONE
    return " ".join(f"{number}{marks[verdict]}" for verdict, number in count_verdicts(candidate.evidence))


def _print_rejected(rejected: Sequence[Rejection], console: Console, shown: int = 20) -> None:
    _print(console, f"Not used: {counted(len(rejected), 'input')}", style="bold")
    for item in rejected[:shown]:
        where = visible_text(item.source) + (f":{item.line}" if item.line is not None else "")
        _print(console, f"{where}: {visible_text(item.reason)}: {rejection_text(item)}", indent=2, hanging=4)
    if len(rejected) > shown:
        _print(console, f"and {counted(len(rejected) - shown, 'more')} in the full result", indent=2)
    console.print()


def _print_libraries(report: Report, console: Console) -> None:
    for state in report.libraries:
        text = (
            f"Library: {visible_text(state.path)}, {counted(state.entries, 'entry', 'entries')} of "
            f"{counted(state.compounds, 'compound')}, fingerprint {visible_text(state.fingerprint)[:16]}"
        )
        _print(console, f"{text} · {visible_text(report.program)} {visible_text(report.version)}", style="dim")
        if state.calibration:
            _print(console, f"Probabilities calibrated by {visible_text(state.calibration)}", style="dim", indent=2)


def _print(console: Console, text: str, *, style: str = "", indent: int = 0, hanging: int = 0) -> None:
    """Wrapped text with a left margin, its second line indented further by `hanging`; words stay whole."""
    lines = textwrap.wrap(
        text.replace(" %", f"{NO_BREAK}%"),
        max(30, console.width),
        initial_indent=" " * indent,
        subsequent_indent=" " * (indent + hanging),
        break_on_hyphens=False,
        break_long_words=False,  # a path cut in two cannot be copied
    )
    for line in lines:
        console.print(printable(line, console, style), no_wrap=True, overflow="ignore", crop=False)


def printable(text: str, console: Console, style: str = "") -> Text:
    """Text without markup in the characters that the terminal's encoding has.

    Parameters
    ----------
    text : str
    console : rich.console.Console
    style : str

    Returns
    -------
    rich.text.Text
    """
    from rich.text import Text

    text = text.replace(NO_BREAK, " ")
    try:
        text.encode(console.encoding)
    except UnicodeEncodeError:
        plain = text.translate(PLAIN_CHARACTERS)
        text = plain.encode(console.encoding, "replace").decode(console.encoding)
    return Text(text, style=style)
