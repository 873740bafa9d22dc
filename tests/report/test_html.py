"""The page: complete in itself, safe with hostile names, in order for screen readers, honest with numbers."""

from __future__ import annotations

import base64
import dataclasses
import hashlib
import itertools
import re
from collections import Counter
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import pytest

import identify.report
from identify.records import Analogue, ClassEvidence, EntryStatus, Part, Purity, Report, Verdict
from identify.report import contexts
from identify.report.context import DETAILED, LONG_REPORT, build_page
from identify.report.contexts import ExplanationNode
from identify.report.html import render_html, write_html
from identify.report.words import CAUTIONS, NO_BREAK
from tests.builders import (
    build_candidate,
    build_identification,
    build_large_report,
    build_query,
    build_report,
)

TEMPLATES = Path(identify.report.__file__).parent / "templates"
VOID = {"meta", "link", "br", "path", "use"}
HOSTILE = "<script>alert(1)</script><img src=x onerror=alert(2)>\"'&\x1b\u202e\udc80"


class Page(HTMLParser):
    """Elements of a page in order, with attributes; fails where tags do not nest."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[str] = []
        self._open: list[str] = []
        self.feed(text)
        self.close()
        assert not self._open, self._open

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        assert len(attrs) == len({name for name, _ in attrs}), (tag, attrs)
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self._open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self._open.pop() == tag

    def handle_data(self, data: str) -> None:
        if not self._open or self._open[-1] not in ("style", "script"):
            self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).replace(NO_BREAK, " ").split())

    def all(self, *tags: str) -> list[dict[str, str | None]]:
        return [attributes for tag, attributes in self.elements if tag in tags]


def _hostile_report() -> Report:
    found = build_identification()
    query = build_query({77: 3.0, 105: 9.0}, HOSTILE, source=HOSTILE)
    candidate = build_candidate(
        name=HOSTILE, formula=HOSTILE, measured_as=HOSTILE, smiles=HOSTILE, inchikey=HOSTILE, licence=HOSTILE, authors=HOSTILE,
        library=HOSTILE, notes=(HOSTILE,),
        evidence=tuple(replace(item, kind=HOSTILE, reason=HOSTILE, observed=HOSTILE, expected=HOSTILE, source=HOSTILE)
                       for item in build_candidate().evidence),
    )  # fmt: skip
    claim = replace(found.claim, statement=HOSTILE, members=(HOSTILE, HOSTILE), msi_2007=HOSTILE)
    plan = replace(found.follow_up[0], action=HOSTILE, reason=HOSTILE, decides=HOSTILE, candidates=(HOSTILE,))
    hostile = replace(found, query=query, candidates=(candidate,), claim=claim, follow_up=(plan,), notes=(HOSTILE,))
    report = build_report(hostile)
    rejected = tuple(
        replace(item, source=HOSTILE, reason=HOSTILE, found=HOSTILE, hint=HOSTILE) for item in report.rejected
    )
    libraries = (replace(report.libraries[0], path=HOSTILE, fingerprint=HOSTILE),)
    return replace(report, rejected=rejected, libraries=libraries, settings={HOSTILE: HOSTILE}, version=HOSTILE)


@pytest.fixture(scope="module")
def html() -> str:
    return render_html(build_report(), date="14 May 2025")


@pytest.fixture(scope="module")
def page(html: str) -> Page:
    return Page(html)


def test_page_has_language_title_landmarks_and_skip_link(page: Page) -> None:
    assert page.all("html") == [{"lang": "en"}]
    assert "Identification of unknown spectra: 3 queries against lab.ionlib" in page.text
    assert len(page.all("main")) == 1 and len(page.all("header")) == 1 and len(page.all("article")) == 3
    assert page.all("a")[0] == {"class": "skip", "href": "#answers"}


def test_headings_go_down_one_level_at_a_time(page: Page) -> None:
    levels = [int(tag[1]) for tag, _ in page.elements if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1 and levels.count(1) == 1
    assert all(after <= before + 1 for before, after in itertools.pairwise(levels))


@pytest.mark.parametrize(
    "report", [build_report(), _hostile_report(), build_large_report(3, 8)], ids=["usual", "hostile", "long"]
)
def test_ids_are_unique_and_every_reference_has_its_target(report: Report) -> None:
    page = Page(render_html(report))
    ids = Counter(attributes["id"] for _, attributes in page.elements if "id" in attributes)
    assert max(ids.values()) == 1
    wanted = {(attributes["href"] or "")[1:] for attributes in page.all("a", "use")}
    wanted |= {name for _, attributes in page.elements for name in (attributes.get("aria-labelledby") or "").split()}
    assert wanted <= set(ids)


def test_nothing_is_loaded_from_anywhere(html: str) -> None:
    """No address in any attribute, style or script; the page's own policy forbids requests as well."""
    assert not re.findall(r"https?:|//[a-z]|@import|url\(|\bsrc=|\bfetch\(|XMLHttpRequest", html)
    policy = re.search(r'http-equiv="Content-Security-Policy" content="([^"]*)"', html)
    assert policy and "default-src &#39;none&#39;" in policy.group(1).replace("'", "&#39;")
    assert {attributes["href"] for attributes in Page(html).all("link")} == {"data:,"}


def test_policy_allows_exactly_the_script_in_the_page(html: str) -> None:
    (script,) = re.findall(r"<script>(.*?)</script>", html, re.DOTALL)
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    assert f"script-src 'sha256-{digest}'" in html


def test_hostile_text_stays_text() -> None:
    text = render_html(_hostile_report())
    page = Page(text)
    assert len(page.all("script")) == 1 and not page.all("img")
    assert not [name for _, attributes in page.elements for name in attributes if name.startswith("on")]
    assert "\x1b" not in text and "\u202e" not in text and "\udc80" not in text
    shown = page.text.count("<script>alert(1)</script><img src=x onerror=alert(2)>\"'&⟨1B⟩⟨202E⟩⟨DC80⟩")
    assert shown > 40
    text.encode("utf-8")


def test_templates_print_markup_only_from_this_package() -> None:
    for template in TEMPLATES.glob("*.html"):
        for name in re.findall(r"\{\{\s*([\w.]+)\s*\|\s*safe", template.read_text("utf-8")):
            assert name.endswith(("_svg", "_json")) or name in ("style", "script"), (template.name, name)


def test_every_context_field_is_printed_and_nothing_else_is_asked_for() -> None:
    asked = set(re.findall(r"\.(\w+)", " ".join(re.findall(r"\{[{%].*?[%}]\}", _all_templates(), re.DOTALL))))
    known = {
        field.name
        for item in vars(contexts).values()
        if dataclasses.is_dataclass(item) and item is not None
        for field in dataclasses.fields(item)
    }
    assert asked - known <= {"html", "last"} and known <= asked


def _all_templates() -> str:
    """Templates of the query report; the page of runs has contexts of its own."""
    names = sorted(path for path in TEMPLATES.glob("*.html") if not path.name.startswith("run"))
    return "".join(path.read_text("utf-8") for path in names)


def test_tables_have_captions_and_scoped_headers(page: Page) -> None:
    assert len(page.all("table")) == len(page.all("caption")) > 10
    assert {attributes.get("scope") for attributes in page.all("th")} == {"row", "col"}


def test_drawings_are_named_or_hidden(page: Page) -> None:
    for attributes in page.all("svg"):
        named = attributes.get("role") == "img" and (attributes.get("aria-labelledby") or attributes.get("aria-label"))
        assert named or attributes.get("aria-hidden") == "true", attributes


def test_report_says_all_it_must(page: Page) -> None:
    for words in (
        "Acetophenone, supported by the library match",
        "MSI 2007 level 2, Schymanski 2014 level 2a",
        "3 isomers without an entry could give the same spectrum",
        "12 of 12 ions match, compared from m/z 38",
        "✓ agrees . The query shows a peak where this formula puts the molecular ion.",
        "The query has nominal masses only.",
        "measure an authentic standard of acetophenone",
        "m/z 28 and 32 stand in the ratio of air",
        "28 (4120), 32 (1015)",
        "5f0c9a7e41d28b63" * 4,
        "B. Beispiel, Sample Institute",
        "weighting.mz_power 1.3",
        "1 MEOX 5 TMS",
        "measured as n TMS",
        "own standard",
        "found 43 peaks, expected 44 peaks",
        "ionwitness 0.1.0",
        "14 May 2025",
        *CAUTIONS,
    ):
        assert words in page.text, words


def test_no_probability_reads_certain_or_impossible() -> None:
    found = build_identification()
    candidates = (build_candidate(probability=1.0, evidence=()), build_candidate(2, probability=0.0, evidence=()))
    claim = replace(
        found.claim, probability=1.0, compound_probability=1.0, group_probability=1.0, class_probability=1.0
    )
    report = build_report(replace(found, candidates=candidates, claim=claim, in_library_probability=1.0))
    text = Page(render_html(report)).text
    probabilities = text.replace("105 (100 %)", "")
    assert "> 99 %" in text and "< 1 %" in text
    assert not re.search(r"(?<![\d.])(?:100|0) %", probabilities)


def _check_sums(node: ExplanationNode) -> None:
    def value(text: str) -> int:
        return round(float(text.replace("−", "-")) * 100)

    if node.parts:
        assert sum(value(part.value) for part in node.parts) == value(node.value), node.label
    for part in node.parts:
        _check_sums(part)


def test_printed_parts_of_every_explanation_add_up_as_printed() -> None:
    details = [detail for query in build_page(build_large_report(6, 6)).queries for detail in query.details]
    assert len(details) == 6 * DETAILED
    for detail in details:
        _check_sums(detail.explanation)


def test_candidates_beyond_the_detailed_are_rows_without_links() -> None:
    (query,) = build_page(build_large_report(1, 12)).queries
    assert len(query.candidates.rows) == DETAILED == len(query.details) and len(query.further.rows) == 7
    assert all(row.anchor for row in query.candidates.rows) and not any(row.anchor for row in query.further.rows)
    assert query.further.caption == "7 more candidates for Unknown 1"


def test_a_standing_shared_by_all_entries_is_said_once() -> None:
    entries = [build_candidate(rank, status=EntryStatus.DEMONSTRATION) for rank in (1, 2, 3)]
    (query,) = build_page(build_report(replace(build_identification(), candidates=tuple(entries)))).queries
    assert query.candidates.caption.endswith("standing of every entry: demonstration")
    assert {row.standing for row in query.candidates.rows} == {""}
    mixed = (*entries, build_candidate(4, status=EntryStatus.OWN_STANDARD))
    (query,) = build_page(build_report(replace(build_identification(), candidates=mixed))).queries
    assert [row.standing for row in query.candidates.rows] == ["demonstration"] * 3 + ["own standard"]


def test_each_source_is_stated_once_and_numbered() -> None:
    page = build_page(build_report())
    texts = [row.text for row in page.sources]
    assert len(set(texts)) == len(texts) and "common practice." in texts
    used = {item.source for query in page.queries for detail in query.details for item in detail.evidence}
    assert used - {""} == {row.number for row in page.sources}


def test_each_structure_is_drawn_once() -> None:
    report = build_report(build_identification("q1"), build_identification("q2"))
    symbols = re.findall(r'<symbol id="([^"]*)"', render_html(report))
    assert len(symbols) == len(set(symbols)) == 4


def test_a_structure_that_cannot_be_drawn_is_shown_as_text() -> None:
    candidate = build_candidate(smiles="C1CC(")
    text = Page(render_html(build_report(replace(build_identification(), candidates=(candidate,))))).text
    assert "Not drawn: C1CC(" in text


def test_empty_reports_are_pages_too() -> None:
    page = Page(render_html(replace(build_report(), identifications=(), libraries=())))
    assert "No query could be used." in page.text and "0 queries against no library" in page.text
    alone = Page(
        render_html(build_report(replace(build_identification(), candidates=(), follow_up=()), rejected=False))
    )
    assert "No entry of the library shares a peak with this spectrum." in alone.text


def test_same_report_gives_the_same_page() -> None:
    assert render_html(build_report()) == render_html(build_report())


def test_size_stays_bounded_by_the_number_of_queries() -> None:
    """200 queries of 25 candidates with 90 peaks each must open in a browser: under 100 kB a query."""
    small, large = (len(render_html(build_large_report(count)).encode()) for count in (1, 5))
    assert (large - small) / 4 < 100_000


def test_only_long_reports_skip_layout_out_of_sight() -> None:
    assert not build_page(build_report()).is_long
    many = replace(build_report(), identifications=(build_identification(),) * (LONG_REPORT + 1))
    assert build_page(many).is_long


def _luminance(colour: str) -> float:
    channels = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    linear = [value / 12.92 if value <= 0.04045 else ((value + 0.055) / 1.055) ** 2.4 for value in channels]
    return sum(weight * value for weight, value in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def test_text_colours_have_enough_contrast() -> None:
    """WCAG 2.1, success criterion 1.4.3 (AA): 4.5 : 1 for text; luminance formula of the same document."""
    colours = dict(re.findall(r"--(\w+): (#[0-9a-f]{6})", (TEMPLATES / "page.css").read_text("utf-8")))
    for ink in ("ink", "quiet", "agree", "against"):
        for paper in ("paper", "shade"):
            light, dark = sorted((_luminance(colours[ink]), _luminance(colours[paper])), reverse=True)
            assert (light + 0.05) / (dark + 0.05) >= 4.5, (ink, paper)


def test_file_is_written_whole(tmp_path: Path) -> None:
    write_html(tmp_path / "report.html", build_report())
    assert (tmp_path / "report.html").read_text("utf-8") == render_html(build_report())


@pytest.mark.slow
def test_page_works_in_a_browser_at_both_widths(tmp_path: Path) -> None:
    """Chromium, where it is installed: no request, no error, no sideways scrolling, links open closed parts."""
    browser_path = Path("/usr/bin/chromium")
    if not browser_path.exists():
        pytest.skip("Chromium not found at /usr/bin/chromium: this check runs where it is installed")
    api = pytest.importorskip("playwright.sync_api", reason="playwright is not installed")
    path = tmp_path / "report.html"
    write_html(path, _hostile_report())
    options = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
    with api.sync_playwright() as tool:
        browser = tool.chromium.launch(executable_path=str(browser_path), args=options)
        for width in (1280, 390):
            view = browser.new_page(viewport={"width": width, "height": 900})
            trouble: list[str] = []
            view.on("pageerror", lambda error, seen=trouble: seen.append(str(error)))
            view.on("console", lambda message, seen=trouble: seen.append(message.text))
            view.on("dialog", lambda dialog, seen=trouble: (seen.append("dialog"), dialog.dismiss()))
            view.on("request", lambda asked, seen=trouble: asked.url.startswith("file:") or seen.append(asked.url))
            view.goto(path.as_uri())
            view.get_by_role("button", name="Open all parts").click()
            assert view.evaluate("document.querySelectorAll('details:not([open])').length") == 0
            assert view.evaluate("document.documentElement.scrollWidth") <= width
            assert trouble == []
            view.close()
        browser.close()


def test_mixture_classes_and_analogues_stand_before_the_candidates(page: Page) -> None:
    said = " ".join(" ".join(page.words).split())
    first = said.index("Two entries together explain the query far better than one.")
    assert "Left over, to be searched as a query of its own: m/z 105 (40 %), 94 (8.0 %), 120 (5.5 %)." in said
    assert "Like Ethyl hexanoate, plus CH2 (+14 Da); similarity after shifting 0.830." in said
    assert first < said.rindex("Candidates")


def test_purity_sentences_from_a_library_are_shown_as_text() -> None:
    found = build_identification()
    purity = Purity(Verdict.CONFLICTS, HOSTILE, (Part(HOSTILE, HOSTILE, 0.5),), background=(HOSTILE,))
    like = Analogue(HOSTILE, HOSTILE, 1, HOSTILE, 0.9)
    kind = ClassEvidence(HOSTILE, 0.9, (HOSTILE,), (HOSTILE,))
    shown = render_html(build_report(replace(found, purity=purity, analogues=(like,), classes=(kind,))))
    assert "<script>alert" not in shown
    assert "<img" not in shown
