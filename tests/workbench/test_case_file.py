"""What the case file keeps, refuses to change, and survives."""

from __future__ import annotations

import os
import sqlite3
import subprocess
import sys
import threading
from pathlib import Path
from typing import Any

import httpx
import pytest
from bench import ACETONE, ROOT, running_bench, wait_until

from identify.errors import LibraryConflict, LibraryDamaged, LibraryError, UsageError
from identify.records import Rejection, Source, SpectrumRecord
from identify.workbench.case_file import CaseFile, open_case
from identify.workbench.case_rows import NewQuery, pack, unpack
from identify.workbench.case_schema import KEPT
from identify.workbench.decisions import decide, find_fault, list_decisions
from identify.workbench.job_list import add_job, find_job, finish_job, list_jobs, next_job, requeue_jobs
from identify.workbench.people import check_password, list_people, set_person

AT = "2026-01-05T10:00:00.000000Z"
DOCUMENT: dict[str, Any] = {
    "queries": [
        {
            "claim": {"level": "tentative", "statement": "acetone (library match alone)", "probability": 0.9},
            "hits": [{"name": "acetone"}],
            "follow_up": [],
        }
    ]
}


def record(title: str = "peak 1") -> SpectrumRecord:
    return SpectrumRecord(Source("a.txt", 1), [43.0, 58.0], [100.0, 30.0], title=title)  # type: ignore[arg-type]


@pytest.fixture
def case(tmp_path: Path) -> Any:
    with open_case(tmp_path / "a.ioncase") as opened:
        job = add_job(opened, "spectra", "a.txt", "Ada", AT, {})
        opened.add_queries(job, [NewQuery(1, record(), DOCUMENT)], who="Ada", at=AT, run_id=None)
        yield opened


def test_a_query_comes_back_as_it_was(case: CaseFile) -> None:
    (row,) = case.queries()
    assert (row.name, row.source, row.level, row.best, row.state) == (
        "peak 1",
        "a.txt:1",
        "tentative",
        "acetone",
        "open",
    )
    assert case.record(row.id).mz.tolist() == [43.0, 58.0]
    assert case.document(row.result_id) == DOCUMENT
    assert case.count_queries() == {"open": 1, "accepted": 0, "rejected": 0, "follow-up": 0}


def test_a_job_done_twice_adds_its_queries_once(case: CaseFile) -> None:
    (row,) = case.queries()
    added = case.add_queries(row.job_id, [NewQuery(1, record(), DOCUMENT), NewQuery(2, record("peak 2"), DOCUMENT)],
                             who="Ada", at=AT, run_id=None)  # fmt: skip
    assert [query_id for query_id, _ in added] == [item.id for item in case.queries() if item.name == "peak 2"]
    assert [item.name for item in case.queries()] == ["peak 1", "peak 2"]
    item = Rejection("a.txt", 3, "unusable", "x", "y")
    case.add_rejections(row.job_id, [item])
    case.add_rejections(row.job_id, [item])
    assert case.rejections(row.job_id) == [item]


@pytest.mark.parametrize("table", KEPT)
@pytest.mark.parametrize("statement", ["DELETE FROM {}", "UPDATE {} SET rowid = rowid + 100"])
def test_what_was_kept_cannot_be_changed(case: CaseFile, table: str, statement: str) -> None:
    (row,) = case.queries()
    case.add_run(row.job_id, "run", AT, {"x": 1})
    case.add_rejections(row.job_id, [Rejection("a.txt", 3, "unusable", "x", "y")])
    decide(case, row.id, kind="note", who="Ada", at=AT, note="x", result_id=row.result_id, seen=0)
    with pytest.raises(LibraryConflict, match="rows are only added"), case.writing() as connection:
        connection.execute(statement.format(table))
    with case.reading() as connection:
        assert connection.execute(f"SELECT count(*) FROM {table}").fetchone() == (1,)


def test_a_decision_on_something_older_than_the_latest_is_refused(case: CaseFile) -> None:
    (row,) = case.queries()
    first = decide(case, row.id, kind="follow-up", who="Ada", at=AT, result_id=row.result_id, seen=0)
    with pytest.raises(LibraryConflict, match="newer result or decision"):
        decide(case, row.id, kind="reject", who="Eve", at=AT, note="x", result_id=row.result_id, seen=0)
    newer = case.add_result(row.id, DOCUMENT, who="Ada", at=AT)
    with pytest.raises(LibraryConflict, match="newer result or decision"):
        decide(case, row.id, kind="reject", who="Eve", at=AT, note="x", result_id=row.result_id, seen=first.seq)
    decide(case, row.id, kind="reject", who="Eve", at=AT, note="x", result_id=newer, seen=first.seq)
    assert [made.kind for made in list_decisions(case, row.id)] == ["follow-up", "reject"]
    assert case.queries()[0].state == "rejected"


def test_a_note_does_not_change_the_state(case: CaseFile) -> None:
    (row,) = case.queries()
    made = decide(case, row.id, kind="accept", who="Ada", at=AT, level="tentative", compound="acetone", accession="X",
                  result_id=row.result_id, seen=0)  # fmt: skip
    made = decide(
        case, row.id, kind="note", who="Eve", at=AT, note="see page 12", result_id=row.result_id, seen=made.seq
    )
    (row,) = case.queries()
    assert (row.state, row.decided_compound, row.decided_by) == ("accepted", "acetone", "Ada")
    decide(case, row.id, kind="reopen", who="Eve", at=AT, result_id=row.result_id, seen=made.seq)
    assert case.queries()[0].state == "open"
    with pytest.raises(UsageError, match="note"):
        decide(case, row.id, kind="note", who="Eve", at=AT, note="x" * 5000, result_id=row.result_id, seen=3)


def test_a_changed_decision_or_result_is_found(case: CaseFile, tmp_path: Path) -> None:
    (row,) = case.queries()
    for number in range(3):
        decide(case, row.id, kind="note", who="Ada", at=AT, note=f"{number}", result_id=row.result_id, seen=number)
    assert find_fault(case) == ""
    with sqlite3.connect(tmp_path / "a.ioncase") as connection:
        connection.execute("DROP TRIGGER decision_update")
        connection.execute("UPDATE decision SET note = 'other' WHERE seq = 2")
    connection.close()
    assert "decision 2" in find_fault(case)
    with sqlite3.connect(tmp_path / "a.ioncase") as connection:
        connection.execute("UPDATE decision SET note = '1' WHERE seq = 2")
        connection.execute("DROP TRIGGER result_update")
        connection.execute("UPDATE result SET document = ?", (pack({"other": 1}),))
    connection.close()
    assert "decision 1" in find_fault(case)


def test_jobs_wait_run_and_wait_again_after_a_stop(case: CaseFile) -> None:
    second = add_job(case, "run", "b.cdf", "Ada", AT, {"upload": "x"})
    running = next_job(case)
    assert running is not None and running.state == "running"
    assert requeue_jobs(case) == 1
    again = next_job(case)
    assert again is not None and again.id == running.id
    finish_job(case, again.id, "done", "fine", AT)
    finish_job(case, again.id, "failed", "too late", AT)
    told = find_job(case, again.id)
    assert told is not None and (told.state, told.message) == ("done", "fine")
    assert [job.id for job in list_jobs(case, active=True)] == [second]


def test_a_foreign_file_is_no_case_file(tmp_path: Path, starter: Path) -> None:
    (tmp_path / "text").write_text("no database, but long enough to be looked at" * 50)
    for path in (starter, tmp_path / "text"):
        with pytest.raises(LibraryError):
            open_case(path)


def test_stored_data_that_do_not_unpack_are_damage(tmp_path: Path) -> None:
    assert unpack(pack({"a": [1.5, "µ"]}), tmp_path) == {"a": [1.5, "µ"]}
    for data in (b"", b"rubbish", pack({"a": 1})[:-3], pack([1]) if False else b"\x78\x9c"):  # type: ignore[arg-type]
        with pytest.raises(LibraryDamaged):
            unpack(data, tmp_path)


def test_a_password_is_kept_as_a_slow_hash(case: CaseFile, tmp_path: Path) -> None:
    set_person(case, "Eve", "reviewer", "a long enough password", AT)
    assert list_people(case) == [("Eve", "reviewer")]
    assert check_password(case, "Eve", "a long enough password") == "reviewer"
    assert check_password(case, "Eve", "another") is None
    assert check_password(case, "Nobody", "a long enough password") is None
    with case.reading() as connection:
        (kept,) = connection.execute("SELECT password_hash FROM person").fetchone()
    assert kept.startswith("$argon2id$") and "long enough" not in kept
    for name, role, password in (
        ("", "analyst", "a long enough password"),
        ("A", "king", "a long enough password"),
        ("A", "analyst", "short"),
    ):
        with pytest.raises(UsageError):
            set_person(case, name, role, password, AT)


def test_work_survives_a_restart(folder: Path) -> None:
    with running_bench(folder) as first:
        query_id = first.paste()
        page = first.client.get(f"/queries/{query_id}").text
        assert first.decide(query_id, kind="follow-up", note="measure again").status_code == 201
    with running_bench(folder) as second:
        told = second.query(query_id)
        assert told["decisions"][0]["note"] == "measure again"
        claim = page.split('<p class="said">')[1].split("</p>")[0]
        assert claim in second.client.get(f"/queries/{query_id}").text


def _serve(folder: Path) -> tuple[subprocess.Popen[str], str]:
    code = "import sys; from identify.cli.serve import serve; sys.exit(serve.main(sys.argv[1:], standalone_mode=False))"
    process = subprocess.Popen(
        [sys.executable, "-c", code, "--library", str(folder / "lab.ionlib"), "--port", "0"],
        cwd=ROOT, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True,
        env={**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1"},
    )  # fmt: skip
    assert process.stdout is not None
    line = process.stdout.readline()
    return process, line.split("Workbench: ")[1].strip()


def test_killed_in_the_middle_of_decisions_each_is_there_or_not(folder: Path) -> None:
    with running_bench(folder) as bench:
        queries = [bench.paste(ACETONE, f"peak {n}") for n in range(2)]
    process, link = _serve(folder)
    origin = link.partition("/open/")[0]
    acknowledged: list[tuple[int, str]] = []

    def decide_on(query_id: int, cookies: httpx.Cookies) -> None:
        headers = {"origin": origin}
        with httpx.Client(base_url=origin, cookies=cookies, headers=headers, trust_env=False, timeout=60.0) as client:
            seen = 0
            for number in range(10_000):
                form = {"kind": "note", "note": f"{query_id}: {number}", "result": query_id, "seen": seen}
                try:
                    answer = client.post(f"/api/queries/{query_id}/decisions", data=form)
                except httpx.TransportError:
                    return
                assert answer.status_code == 201, answer.text
                seen = answer.json()["decision"]["seq"]
                acknowledged.append((seen, answer.json()["decision"]["hash"]))

    with process, httpx.Client(trust_env=False, timeout=60.0) as client:
        assert client.get(link).status_code == 303
        threads = [threading.Thread(target=decide_on, args=(query_id, client.cookies)) for query_id in queries]
        for thread in threads:
            thread.start()
        try:
            wait_until(lambda: len(acknowledged) >= 20)
        finally:
            process.kill()
        for thread in threads:
            thread.join()
    with open_case(folder / "lab.ioncase") as case:
        assert find_fault(case) == ""
        kept = {(made.seq, made.hash) for made in list_decisions(case)}
        assert set(acknowledged) <= kept, "what was acknowledged is kept"
        assert len(kept) <= len(acknowledged) + len(queries), "and at most the one in hand of each besides"


def test_a_job_cut_off_by_a_kill_is_finished_at_the_next_start(folder: Path) -> None:
    process, link = _serve(folder)
    origin = link.partition("/open/")[0]
    text = "".join(f"NAME: peak {n}\nNum Peaks: 3\n15 {30 + n % 9}\n43 100\n58 {20 + n % 30}\n\n" for n in range(30))
    with process, httpx.Client(base_url=origin, headers={"origin": origin}, trust_env=False, timeout=60.0) as client:
        client.get(link)
        client.post("/uploads", files=[("files", ("many.msp", text.encode()))])
        try:
            wait_until(lambda: sum(client.get("/api/work-list").json()["counts"].values()) >= 10)
        finally:
            process.kill()
    with running_bench(folder) as bench:
        (job,) = bench.wait()
        assert (job["state"], job["message"]) == ("done", "30 queries identified")
        names = {row.name for row in bench.desk.case.queries(limit=1000)}
        assert len(names) == 30 and len(bench.desk.case.queries(limit=1000)) == 30
