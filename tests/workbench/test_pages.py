"""Every page answers, says the same as its JSON twin, and needs nothing from elsewhere."""

from __future__ import annotations

import html
import re
from html.parser import HTMLParser

import jsonschema
import pytest
from bench import Bench

from identify.report.words import signed_text
from identify.writers.results_json import load_schema

PAGES = (
    "/", "/?state=open", "/?text=drum", "/?components=true", "/queries/1", "/queries/3?why_not=toluene", "/jobs/1", "/library",
    "/library?name=xyl", "/library?formula=C7H8", "/library?mass=106", "/library?ion=91+106", "/library?name=xyl&ion=91",
    "/library/1/entries/1", "/standards", "/standards?query=2", "/follow-up", "/trail", "/report",
)  # fmt: skip


class Outline(HTMLParser):
    """Ids, links to them, loads, inline code and unlabelled fields of a page."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.fragments: list[str] = []
        self.loads: list[str] = []
        self.inline: list[str] = []
        self.headings: list[int] = []
        self.open_labels = 0
        self.unlabelled: list[dict[str, str | None]] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        values = dict(attrs)
        if values.get("id"):
            self.ids.append(str(values["id"]))
        href = values.get("href") or ""
        if href.startswith("#") and len(href) > 1:
            self.fragments.append(href[1:])
        if tag in ("script", "link", "img", "iframe") and (values.get("src") or values.get("href")):
            self.loads.append(str(values.get("src") or values.get("href")))
        if "style" in values or any(name.startswith("on") for name in values):
            self.inline.append(f"{tag} {attrs}")
        if tag == "style" or (tag == "script" and not values.get("src")):
            self.inline.append(tag)
        if re.fullmatch("h[1-6]", tag):
            self.headings.append(int(tag[1]))
        if tag == "label":
            self.open_labels += 1
        if tag in ("input", "select", "textarea") and values.get("type") != "hidden":
            named = self.open_labels or values.get("aria-label")
            if not named:
                self.unlabelled.append(values)

    def handle_endtag(self, tag: str) -> None:
        if tag == "label":
            self.open_labels -= 1


@pytest.mark.parametrize("path", PAGES)
def test_a_page_and_its_twin_answer(used_bench: Bench, path: str) -> None:
    page = used_bench.client.get(path)
    assert page.status_code == 200, page.text
    twin = re.search(r'rel="alternate" type="application/json" href="([^"]+)"', page.text)
    assert twin
    data = used_bench.client.get(twin[1].replace("&amp;", "&"))
    assert data.status_code == 200
    assert data.headers["content-type"] == "application/json"
    assert data.json()


@pytest.mark.parametrize("path", PAGES)
def test_a_page_is_sound(used_bench: Bench, path: str) -> None:
    outline = Outline(used_bench.client.get(path).text)
    assert len(outline.ids) == len(set(outline.ids)), "an id twice"
    assert set(outline.fragments) <= set(outline.ids), "a link to nowhere"
    assert not outline.inline, "inline style or script, which the policy forbids"
    assert all(load.startswith(("/static/", "/api/", "data:,")) for load in outline.loads), outline.loads
    assert not outline.unlabelled, "a field without a label"
    assert outline.headings[0] == 1 and outline.headings.count(1) == 1
    assert all(after - before <= 1 for before, after in zip(outline.headings, outline.headings[1:], strict=False))


def test_the_page_and_its_twin_say_the_same(used_bench: Bench) -> None:
    data = used_bench.query(3)
    page = html.unescape(used_bench.client.get("/queries/3").text)
    hits = data["result"]["queries"][0]["hits"]
    for hit in hits[:5]:
        assert hit["name"] in page
    assert data["query"]["statement"] in page
    # The tree of the first candidate shows the value that the twin gives, to two decimals.
    assert signed_text(hits[0]["explanation"]["value"]) in page


def test_a_result_is_kept_as_the_result_contract(used_bench: Bench) -> None:
    for query_id in range(1, 7):
        jsonschema.validate(used_bench.query(query_id)["result"], load_schema())


def test_the_static_files_and_the_schema_are_served(used_bench: Bench) -> None:
    for name in ("report.css", "report.js", "workbench.css", "workbench.js"):
        answer = used_bench.client.get(f"/static/{name}")
        assert answer.status_code == 200
        assert len(answer.text) > 900
        assert "http" not in answer.text.replace("http://www.w3.org", ""), "nothing comes from elsewhere"
    paths = used_bench.client.get("/api/openapi.json").json()["paths"]
    assert {"/api/work-list", "/api/queries/{query_id}", "/api/uploads", "/api/trail"} <= set(paths)


def test_why_not_names_what_separates_a_compound_from_the_answer(used_bench: Bench) -> None:
    data = used_bench.query(3)
    second = data["result"]["queries"][0]["hits"][1]
    told = used_bench.client.get("/api/queries/3", params={"why_not": second["name"]}).json()["why_not"]["answers"]
    assert told[0]["rank"] == 2
    far = used_bench.client.get("/api/queries/3", params={"why_not": "palmitic acid"}).json()["why_not"]["answers"]
    assert far[0]["rank"] is None
    assert any("not among" in reason for reason in far[0]["reasons"])
    none = used_bench.client.get("/api/queries/3", params={"why_not": "unobtainium"}).json()["why_not"]["answers"]
    assert none == []


def test_an_ion_search_finds_entries_in_which_the_ion_dominates(used_bench: Bench) -> None:
    rows = used_bench.client.get("/api/library", params={"ion": "91"}).json()["entries"]
    assert "toluene" in [row["name"] for row in rows[:10]]
    both = used_bench.client.get("/api/library", params={"name": "toluene", "ion": "91"}).json()["entries"]
    assert both and all("toluene" in row["name"] for row in both)


@pytest.mark.parametrize(
    ("path", "status"),
    [
        ("/queries/99999", 404), ("/queries/0", 422), ("/queries/x", 422), ("/queries/99999999999999999999", 422),
        ("/runs/9", 404), ("/jobs/9999", 404), ("/library/7/entries/1", 404), ("/library/1/entries/999999", 404),
        ("/queries/1?result=9999", 404), ("/nowhere", 404), ("/static/desk.py", 404),
        ("/jobs/", 404),
    ],
)  # fmt: skip
def test_an_address_that_does_not_exist_is_told_in_words(used_bench: Bench, path: str, status: int) -> None:
    page = used_bench.client.get(path)
    assert page.status_code == status
    assert "This did not work" in page.text
    if not path.startswith("/static"):
        twin = used_bench.client.get(f"/api{path}")
        assert twin.status_code == status
        assert twin.json()["error"]["what"]


def test_a_look_up_that_makes_no_sense_says_so(used_bench: Bench) -> None:
    for query in ("mass=abc", "formula=Xx9", "ion=5.5.5", "ion=" + "9" * 150):
        answer = used_bench.client.get(f"/api/library?{query}")
        assert answer.status_code == 200
        assert answer.json()["fault"]


def test_a_query_page_says_whether_it_is_one_compound_and_what_it_is_like(used_bench: Bench) -> None:
    """The same sentences as in the report, for every query that has them."""
    from identify.report.nature import nature_sentences, purity_sentences

    desk, n_said = used_bench.desk, 0
    for row in desk.case.queries():
        page = html.unescape(used_bench.client.get(f"/queries/{row.id}").text)
        found = desk.shown_result(row.id, row.result_id).identification
        for text in (*purity_sentences(found), *nature_sentences(found)):
            assert text in page
            n_said += 1
    assert n_said
