"""The chemist's rules for decisions and standards, through the pages' own addresses."""

from __future__ import annotations

import sqlite3
from pathlib import Path

import pytest
from bench import DEMO, Bench, running_bench, wait_until

from identify.errors import LibraryError
from identify.workbench import decisions, jobs
from identify.workbench.case_file import CaseFile
from identify.workbench.case_rows import Job
from identify.workbench.job_list import next_job

PROPOSAL = {"supplier": "an invented supplier", "lot": "L-1", "purity": "99 %", "measured_on": "2026-01-04"}


@pytest.fixture
def toluene_like(bench: Bench) -> int:
    """A query whose first candidate is limonene."""
    bench.upload(("04.msp", (DEMO / "04-drum-liquid.msp").read_bytes()))
    return 1


def test_an_acceptance_names_candidate_level_and_entry(bench: Bench, toluene_like: int) -> None:
    hit = bench.query(toluene_like)["result"]["queries"][0]["hits"][0]
    answer = bench.decide(toluene_like, kind="accept", level="class", candidate=1, note="terpenes by smell")
    assert answer.status_code == 201
    made = answer.json()["decision"]
    assert (made["compound"], made["accession"], made["who"], made["level"]) == (
        hit["name"],
        hit["accession"],
        "Ada",
        "class",
    )
    row = bench.query(toluene_like)["query"]
    assert (row["state"], row["decided_by"]) == ("accepted", "Ada")


def test_a_level_above_the_data_needs_a_reason(bench: Bench) -> None:
    query_id = bench.paste("41 100, 77 55, 123 80, 191 45, 203 30, 278 60")
    assert bench.query(query_id)["result"]["queries"][0]["claim"]["level"] == "no claim"
    refused = bench.decide(query_id, kind="accept", level="tentative", candidate=1)
    assert refused.status_code == 422
    assert "no claim" in refused.json()["error"]["found"]
    answer = bench.decide(query_id, kind="accept", level="tentative", candidate=1, note="a melting point")
    assert answer.status_code == 201


REFUSED: tuple[dict[str, object], ...] = (
    {"kind": "accept", "level": "tentative", "candidate": 99}, {"kind": "accept", "level": "", "candidate": 1},
    {"kind": "accept", "level": "no claim", "candidate": 1}, {"kind": "accept", "level": "certain", "candidate": 1},
    {"kind": "reject"}, {"kind": "note", "note": "   "}, {"kind": "delete"}, {"kind": "note", "note": "x", "result": 77},
)  # fmt: skip


def test_a_decision_that_lacks_something_is_refused(bench: Bench, toluene_like: int) -> None:
    for form in REFUSED:
        assert bench.decide(toluene_like, **form).status_code in (404, 422), form
        assert bench.query(toluene_like)["decisions"] == [], form


def test_two_people_cannot_decide_past_each_other(bench: Bench, toluene_like: int) -> None:
    eve = bench.person("Eve", "analyst")
    form = {"kind": "reject", "note": "no", "result": 1, "seen": 0}
    assert eve.post(f"/api/queries/{toluene_like}/decisions", data=form).status_code == 201
    late = bench.client.post(f"/api/queries/{toluene_like}/decisions", data=form)
    assert late.status_code == 409
    assert "Look at the page again" in late.json()["error"]["hint"]


def test_a_confirmation_needs_an_own_standard_of_the_compound(bench: Bench, toluene_like: int) -> None:
    name = bench.query(toluene_like)["result"]["queries"][0]["hits"][0]["name"]
    confirm = {"kind": "accept", "level": "confirmed", "candidate": 1, "note": "same time, same spectrum"}
    assert bench.decide(toluene_like, **confirm).status_code == 422
    eve = bench.person("Eve", "analyst")
    told = eve.post("/api/standards", data={"query": toluene_like, "name": name, **PROPOSAL}).json()
    early = bench.decide(toluene_like, standard=told["accession"], **confirm)
    assert early.status_code == 422, "a standard that waits for review confirms nothing"
    address = f"/api/library/1/entries/{told['entry']}"
    assert (
        bench.client.post(f"{address}/review", data={"verdict": "accept", "reason": "lot sheet seen"}).status_code
        == 201
    )
    made = bench.decide(toluene_like, standard=told["accession"], **confirm)
    assert made.status_code == 201
    assert made.json()["decision"]["accession"] == told["accession"]
    other = bench.paste("43 100, 58 12")
    assert bench.decide(other, standard=told["accession"], **confirm).status_code == 422, "of another compound"


def test_a_standard_goes_from_proposal_to_search_to_withdrawal(bench: Bench, toluene_like: int) -> None:
    name = bench.query(toluene_like)["result"]["queries"][0]["hits"][0]["name"]
    eve = bench.person("Eve", "reviewer")
    told = bench.client.post("/api/standards", data={"query": toluene_like, "name": name, **PROPOSAL}).json()
    address = f"/api/library/1/entries/{told['entry']}"
    own = bench.client.post(f"{address}/review", data={"verdict": "accept", "reason": "mine"})
    assert own.status_code == 409, "nobody reviews what they proposed"
    waiting = eve.get("/api/standards").json()["waiting"]
    assert [item["accession"] for item in waiting] == [told["accession"]]
    assert waiting[0]["details"]["supplier"] == PROPOSAL["supplier"]
    assert eve.post(f"{address}/review", data={"verdict": "accept", "reason": ""}).status_code == 422
    assert eve.post(f"{address}/review", data={"verdict": "accept", "reason": "lot sheet seen"}).status_code == 201
    assert eve.get("/api/standards").json()["waiting"] == []

    again = bench.client.post(f"/api/queries/{toluene_like}/cleaning", data={"air_and_water": "true", "noise": "true"})
    assert again.status_code == 201
    first = bench.query(toluene_like)["result"]["queries"][0]["hits"][0]
    assert (first["accession"], first["status"]) == (told["accession"], "own standard"), "found by the very next search"

    assert eve.post(f"{address}/withdrawal", data={"reason": "lot was mixed up"}).status_code == 201
    page = bench.client.get(f"/queries/{toluene_like}").text
    assert "“withdrawn” now" in page, "a result that rests on it says so"
    bench.client.post(f"/api/queries/{toluene_like}/cleaning", data={"air_and_water": "true", "noise": "true"})
    hits = bench.query(toluene_like)["result"]["queries"][0]["hits"]
    assert told["accession"] not in [hit["accession"] for hit in hits]
    history = bench.client.get(address).json()["history"]
    assert [item["kind"] for item in history] == ["proposed", "accepted", "withdrawn"]
    assert [item["who"] for item in history] == ["Ada", "Eve", "Eve"]
    kinds = [event["kind"] for event in bench.client.get("/api/trail").json()["libraries"][0]["events"]]
    assert kinds[:3] == ["withdrawn", "accepted", "proposed"]


def test_cleaning_steps_can_be_switched_and_both_results_stay(bench: Bench) -> None:
    query_id = bench.paste("17 20, 18 100, 28 50, 32 12, 43 80, 58 30, 59 1.2, 42 6, 15 20", "with air")
    first = bench.query(query_id)
    steps = [step["step"] for step in first["result"]["queries"][0]["cleaning"]]
    assert "air and water" in steps
    bench.client.post(f"/queries/{query_id}/cleaning", data={"bleed": "true", "noise": "true"})
    second = bench.query(query_id)
    assert "air and water" not in [step["step"] for step in second["result"]["queries"][0]["cleaning"]]
    assert len(second["results"]) == 2
    earlier = bench.client.get(f"/queries/{query_id}", params={"result": first["query"]["result_id"]})
    assert "This is an earlier result" in earlier.text
    assert (
        bench.client.get(f"/api/queries/{query_id}", params={"result": first["query"]["result_id"]}).json()["result"]
        == first["result"]
    )


def test_the_report_says_who_decided_what_and_when(bench: Bench, toluene_like: int) -> None:
    eve = bench.person("Eve", "analyst")
    assert (
        bench.decide(
            toluene_like, eve, kind="accept", level="tentative", candidate=1, note="for the record"
        ).status_code
        == 201
    )
    made = bench.query(toluene_like)["decisions"][0]
    page = bench.client.get("/report").text
    for text in ("Eve", made["at"][:16].replace("T", " "), "for the record", made["hash"], made["compound"], "Signed"):
        assert text in page
    bench.decide(toluene_like, kind="reopen")
    assert "No query has been decided yet" in bench.client.get("/report").text


def test_a_run_becomes_components_on_a_page(bench: Bench, shared_data: Path) -> None:
    run = shared_data / "runs" / "petrol-in-dichloromethane.cdf"
    if not run.is_file():
        pytest.skip("the open petrol run is not here")
    (job,) = bench.upload((run.name, run.read_bytes()))
    assert job["state"] == "done", job
    told = bench.client.get("/api/runs/1").json()
    assert len(told["components"]) > 50
    page = bench.client.get("/runs/1?start=4&end=12&which=compounds").text
    assert page.count('class="hit"') == sum(240.0 <= item["time_s"] <= 720.0 for item in told["components"])
    names = " ".join(item["query"]["statement"] for item in told["components"] if item["query"])
    assert "toluene" in names
    assert bench.client.get("/api/work-list").json()["runs"][0]["states"]["open"] > 50


test_a_run_becomes_components_on_a_page = pytest.mark.slow(test_a_run_becomes_components_on_a_page)


def test_work_can_be_cancelled(bench: Bench) -> None:
    text = "".join(f"NAME: peak {n}\nNum Peaks: 3\n15 30\n43 100\n58 {1 + n % 90}\n\n" for n in range(3000))
    answer = bench.client.post("/api/uploads", files=[("files", ("many.msp", text.encode()))])
    job = answer.json()["jobs"][0]
    wait_until(bench.count_queries)
    assert bench.client.post(f"/jobs/{job}/cancel").status_code == 303
    (told,) = bench.wait()
    assert told["state"] == "cancelled"
    assert 0 < bench.count_queries() < 3000


def test_the_chain_is_computed_again_only_when_the_file_has_changed(
    bench: Bench, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    query_id = bench.paste()
    assert bench.decide(query_id, kind="note", note="one").status_code == 201
    computed: list[int] = []
    monkeypatch.setattr(decisions, "decision_hash", lambda made, _: computed.append(made.seq) or made.hash)
    for _ in range(3):
        assert "every hash agrees" in bench.client.get("/trail").text
        assert bench.client.get("/report").status_code == 200
    assert computed == [1]
    monkeypatch.undo()
    with sqlite3.connect(folder / "lab.ioncase") as other:
        other.execute("DROP TRIGGER decision_update")
        other.execute("UPDATE decision SET note = 'other'")
    other.close()
    assert "not intact" in bench.client.get("/trail").text
    assert "Do not sign" in bench.client.get("/report").text


def test_a_case_file_that_cannot_be_written_for_a_while_stops_no_work(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    faults = iter([LibraryError("case file", found="no space left on the disk")] * 2)

    def fails_at_first(case: CaseFile) -> Job | None:
        for fault in faults:
            raise fault
        return next_job(case)

    monkeypatch.setattr(jobs, "next_job", fails_at_first)
    with running_bench(folder) as bench:
        assert bench.paste() == 1


def test_what_could_not_be_used_is_listed_with_its_reason(bench: Bench) -> None:
    (job,) = bench.upload(("broken.msp", b"NAME: a\nNum Peaks: 2\n43 100\nx y\n\nNAME: b\nNum Peaks: 1\n43 100\n"))
    told = bench.client.get(f"/api/jobs/{job['id']}").json()
    assert told["rejected"][0]["source"] == "broken.msp"
    assert "broken.msp" in bench.client.get(f"/jobs/{job['id']}").text


def test_verification_runs_in_the_background_and_says_intact(bench: Bench) -> None:
    assert bench.client.post("/trail/verify").status_code == 303
    (job,) = bench.wait()
    assert "intact" in job["message"] and "NOT" not in job["message"]
    assert "every hash agrees" in bench.client.get("/trail").text
