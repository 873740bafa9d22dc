"""What a hostile page, file, neighbour or colleague must not be able to do."""

from __future__ import annotations

import io
import os
import random
import re
import socket
import zipfile
from pathlib import Path

import httpx
import pytest
from bench import ACETONE, PASSWORD, Bench, running_bench

from identify.errors import InputError
from identify.workbench.intake_process import IntakeProcess, Limits
from identify.workbench.people import set_person
from identify.workbench.server import bind
from identify.workbench.sessions import Person, Sessions

SCRIPT = "<script>alert(1)</script>"


@pytest.mark.parametrize(
    "host",
    [
        "attacker.example",
        "attacker.example:{port}",
        "127.0.0.1",
        "127.0.0.1:1",
        "localhost.attacker.example:{port}",
        "",
    ],
)
def test_a_host_name_that_is_not_ours_gets_nothing(used_bench: Bench, host: str) -> None:
    for path in ("/", "/api/work-list", "/static/workbench.js", used_bench.link.partition(str(used_bench.port))[2]):
        answer = used_bench.client.get(path, headers={"host": host.format(port=used_bench.port)})
        assert answer.status_code in (400, 421)
        assert "Work list" not in answer.text


@pytest.mark.parametrize(
    "origin",
    ["http://attacker.example", "null", "http://127.0.0.1:1", "https://127.0.0.1:{port}", "http://localhost:{port}"],
)
def test_a_form_from_another_origin_changes_nothing(used_bench: Bench, origin: str) -> None:
    before = used_bench.client.get("/api/work-list").json()["counts"]
    for path, form in (
        ("/pasted", {"peaks": ACETONE}),
        ("/api/queries/1/decisions", {"kind": "note", "result": 1, "note": "x"}),
    ):
        answer = used_bench.client.post(path, data=form, headers={"origin": origin.format(port=used_bench.port)})
        assert answer.status_code == 403
    bare = {key: value for key, value in used_bench.client.headers.items() if key != "origin"}
    with httpx.Client(
        base_url=used_bench.origin, cookies=used_bench.client.cookies, headers=bare, trust_env=False
    ) as client:
        assert client.post("/pasted", data={"peaks": ACETONE}).status_code == 403
        assert (
            client.post("/pasted", data={"peaks": ACETONE}, headers={"sec-fetch-site": "same-site"}).status_code == 403
        )
    assert used_bench.client.get("/api/work-list").json()["counts"] == before


def test_another_site_may_not_read_in_the_background(used_bench: Bench) -> None:
    for site in ("cross-site", "same-site"):
        answer = used_bench.client.get("/api/work-list", headers={"sec-fetch-site": site, "sec-fetch-mode": "no-cors"})
        assert answer.status_code == 403


def test_every_answer_carries_the_headers_that_close_it(used_bench: Bench) -> None:
    for path in ("/", "/nowhere", "/api/work-list", "/static/workbench.css", "/sign-in"):
        headers = used_bench.client.get(path).headers
        policy = headers["content-security-policy"]
        assert "default-src 'none'" in policy and "frame-ancestors 'none'" in policy and "unsafe" not in policy
        assert headers["x-content-type-options"] == "nosniff"
        assert headers["cross-origin-resource-policy"] == "same-origin"
        assert headers["cache-control"] == "no-store"
    refused = used_bench.client.get("/", headers={"host": "attacker.example"})
    assert "content-security-policy" in refused.headers


def test_nothing_is_shown_without_a_session(used_bench: Bench) -> None:
    client = used_bench.new_client()
    for path in ("/", "/queries/1", "/library", "/trail", "/report", "/runs/1"):
        assert client.get(path).headers["location"] == "/sign-in"
        assert client.get(f"/api{path if path != '/' else '/work-list'}").status_code == 401
    assert client.get("/api/openapi.json").status_code in (303, 401)
    assert client.post("/pasted", data={"peaks": ACETONE}).headers["location"] == "/sign-in"
    assert (
        used_bench.new_client({f"ionwitness-{used_bench.port}": "guessed"}).get("/").headers["location"] == "/sign-in"
    )


def test_the_link_works_once(bench: Bench) -> None:
    again = bench.new_client().get(bench.link)
    assert again.status_code == 403
    assert "set-cookie" not in again.headers


def test_the_cookie_is_out_of_reach_of_scripts_and_other_sites(folder: Path) -> None:
    with running_bench(folder) as bench:
        set_person(bench.desk.case, "Eve", "analyst", PASSWORD, bench.desk.now())
        cookie = bench.new_client().post("/sign-in", data={"name": "Eve", "password": PASSWORD}).headers["set-cookie"]
        assert "HttpOnly" in cookie and "SameSite=strict" in cookie and "Path=/" in cookie


def test_a_session_and_a_link_are_worth_nothing_after_a_restart(folder: Path) -> None:
    # The port stays ours between the two.
    with bind("127.0.0.1", 0) as held:
        with running_bench(folder, held.dup()) as first:
            link, cookies = first.link, dict(first.client.cookies)
            assert first.client.get("/").status_code == 200
        second_listener = held.dup()
    with running_bench(folder, second_listener) as second:
        thief = second.new_client(cookies)
        assert thief.get("/").headers["location"] == "/sign-in"
        assert thief.get("/api/work-list").status_code == 401
        assert thief.get(link).status_code == 403


def test_a_session_ends_after_long_idleness_and_on_signing_out(bench: Bench) -> None:
    now = [0.0]
    sessions = Sessions(clock=lambda: now[0])
    session = sessions.start(Person("Ada", "analyst"))
    now[0] = 11 * 3600.0
    assert sessions.find(session)
    now[0] = 24 * 3600.0
    assert sessions.find(session) is None
    assert bench.client.post("/sign-out").status_code == 303
    assert bench.client.get("/").headers["location"] == "/sign-in"


def test_wrong_passwords_are_slowed_down_and_names_are_not_told(bench: Bench) -> None:
    bench.person("Eve", "analyst")
    client = bench.new_client()
    answers = [client.post("/sign-in", data={"name": "Eve", "password": f"wrong {n}"}) for n in range(6)]
    assert [answer.status_code for answer in answers] == [403] * 5 + [429]
    assert client.post("/sign-in", data={"name": "Eve", "password": PASSWORD}).status_code == 429
    unknown = client.post("/sign-in", data={"name": "Nobody", "password": "wrong"})
    assert re.findall(r'role="alert">([^<]*)', unknown.text) == re.findall(r'role="alert">([^<]*)', answers[0].text)


def test_an_analyst_may_not_review_or_withdraw(bench: Bench) -> None:
    analyst = bench.person("Eve", "analyst")
    for path, form in (("review", {"verdict": "accept", "reason": "x"}), ("withdrawal", {"reason": "x"})):
        for prefix in ("", "/api"):
            answer = analyst.post(f"{prefix}/library/1/entries/1/{path}", data=form)
            assert answer.status_code == 403
            assert "reviewer" in answer.text
    assert bench.client.get("/api/library/1/entries/1").json()["entry"]["status"] == "demonstration"


def test_a_file_name_never_becomes_a_path(bench: Bench, folder: Path) -> None:
    names = ("../../../etc/passwd", "..\\..\\x.jdx", "/etc/shadow", "a\x00b", "%2e%2e%2fx", "C:\\x\\y.csv")
    before = {path for path in folder.rglob("*") if "uploads" not in path.parts[-2]}
    bench.upload(*((name, ACETONE.replace(", ", "\n").encode()) for name in names))
    after = {path for path in folder.rglob("*") if "uploads" not in path.parts[-2]}
    assert {path.name for path in after - before} <= {"lab.ioncase-wal", "lab.ioncase-shm"}
    kept = list((folder / "lab.ioncase-uploads").iterdir())
    assert len(kept) == len(names) and all(re.fullmatch("[0-9a-f]{32}", path.name) for path in kept)
    rows = bench.client.get("/api/work-list").json()["queries"]
    assert len(rows) == len(names)
    assert not any("/" in row["source"] or str(folder) in row["source"] for row in rows)


@pytest.mark.parametrize(
    "path",
    [
        "/static/../server.py",
        "/static/..%2fserver.py",
        "/static/%2e%2e/%2e%2e/etc/passwd",
        "/..%2f..%2fetc/passwd",
        "//etc/passwd",
    ],
)
def test_no_address_reaches_a_file(used_bench: Bench, path: str) -> None:
    request = used_bench.client.build_request("GET", used_bench.origin)
    request.url = request.url.copy_with(raw_path=path.encode())
    answer = used_bench.client.send(request)
    assert answer.status_code == 404
    assert "root:" not in answer.text and "uvicorn" not in answer.text


def test_a_script_in_a_name_is_text(bench: Bench) -> None:
    record = "\n".join(
        [
            f"##TITLE={SCRIPT}", "##JCAMP-DX=4.24", "##DATA TYPE=MASS SPECTRUM", f"##ORIGIN={SCRIPT}", "##OWNER=x",
            "##XUNITS=M/Z", "##YUNITS=RELATIVE ABUNDANCE", "##NPOINTS=3", "##PEAK TABLE=(XY..XY)", "15 34", "43 100",
            "58 38", "##END=", "",
        ]
    )  # fmt: skip
    bench.upload((f"{SCRIPT}.jdx", record.encode()))
    query_id = bench.client.get("/api/work-list").json()["queries"][0]["id"]
    assert bench.decide(query_id, kind="accept", level="tentative", candidate=1, note=SCRIPT).status_code == 201
    proposal = {"query": query_id, "name": SCRIPT, "supplier": SCRIPT, "note": SCRIPT}
    assert bench.client.post("/api/standards", data=proposal).status_code == 201
    pages = ("/", f"/queries/{query_id}", f"/queries/{query_id}?why_not={SCRIPT}", "/report", "/trail", "/standards",
             f"/library?name={SCRIPT}", f"/?text={SCRIPT}", f"/standards?query={query_id}", "/follow-up", "/jobs/1")  # fmt: skip
    for path in pages:
        page = bench.client.get(path)
        assert page.status_code == 200, path
        assert "<script>alert" not in page.text, path
    assert "&lt;script&gt;" in bench.client.get("/standards").text


@pytest.mark.parametrize(
    ("path", "size", "status"),
    [
        ("/uploads", 300 * 2**20, 413),
        ("/pasted", 2 * 2**20, 413),
        ("/api/uploads", 10**18, 413),
        ("/uploads", None, 411),
    ],
)
def test_an_upload_that_is_too_large_is_refused_before_it_is_read(
    used_bench: Bench, path: str, size: int | None, status: int
) -> None:
    length = "transfer-encoding: chunked" if size is None else f"content-length: {size}"
    lines = [f"POST {path} HTTP/1.1", f"host: 127.0.0.1:{used_bench.port}", f"origin: {used_bench.origin}", length]
    with socket.create_connection(("127.0.0.1", used_bench.port), timeout=60.0) as connection:
        connection.sendall("\r\n".join([*lines, "", ""]).encode())
        answer = connection.recv(4096).decode()
    assert answer.startswith(f"HTTP/1.1 {status} "), "answered although not one byte of the body was sent"


@pytest.mark.parametrize(
    ("path", "origin", "status", "words"),
    [
        ("/pasted", "http://attacker.example", 403, b"(Origin header)."),
        ("/nowhere", "", 404, b"one of the pages"),
        ("/api/trail", "", 405, b"Method Not Allowed"),
    ],
)
def test_an_answer_arrives_although_the_body_is_still_under_way(
    used_bench: Bench, path: str, origin: str, status: int, words: bytes
) -> None:
    lines = [f"POST {path} HTTP/1.1", f"host: 127.0.0.1:{used_bench.port}", f"origin: {origin or used_bench.origin}"]
    lines += ["connection: close", "content-length: 10", "", ""]
    with socket.create_connection(("127.0.0.1", used_bench.port), timeout=60.0) as connection:
        connection.sendall("\r\n".join(lines).encode())
        answer = connection.recv(4096)
        for part in (b"peaks", b"=43 1"):
            connection.sendall(part)
        while more := connection.recv(4096):  # a reset connection raises here
            answer += more
    assert answer.startswith(f"HTTP/1.1 {status} ".encode()) and words in answer


def test_a_zip_bomb_costs_a_message(bench: Bench) -> None:
    bomb = io.BytesIO()
    with zipfile.ZipFile(bomb, "w", zipfile.ZIP_DEFLATED) as archive:
        with archive.open("zeros.txt", "w", force_zip64=True) as member:
            for _ in range(120):
                member.write(bytes(2**20))
        archive.writestr("endless.csv", "43 100\n" * 600_000)
    assert len(bomb.getvalue()) < 2**20
    (job,) = bench.upload(("bomb.zip", bomb.getvalue()))
    assert job["state"] in ("done", "failed")
    told = bench.client.get(f"/api/jobs/{job['id']}").json()
    assert told["rejected"] or job["state"] == "failed"
    assert bench.paste() > 0, "the workbench goes on"


def test_the_reading_process_has_limits_of_time_and_memory(tmp_path: Path) -> None:
    path = tmp_path / "x"
    path.write_text("NAME: a\nNum Peaks: 1\n43 100\n\n" * 400_000)
    orders = {"kind": "spectra", "path": str(path), "name": "long.msp"}
    with (
        IntakeProcess(orders, Limits(seconds=1)) as process,
        pytest.raises(InputError, match=r"more than 1 s of work|no end"),
    ):
        list(process.lines())
    with IntakeProcess(orders, Limits(mebibytes=60)) as process, pytest.raises(InputError):
        list(process.lines())


def test_the_reading_process_leaves_nothing_running(tmp_path: Path) -> None:
    path = tmp_path / "x"
    path.write_text("NAME: a\nNum Peaks: 1\n43 100\n\n" * 50_000)
    with IntakeProcess({"kind": "spectra", "path": str(path), "name": "x"}, Limits()) as process:
        next(process.lines())
        started = process._process
        assert started is not None
    assert started.returncode is not None
    with pytest.raises(ProcessLookupError):
        os.kill(started.pid, 0)


def test_a_netcdf_head_on_rubbish_is_a_message(bench: Bench) -> None:
    (job,) = bench.upload(("x.cdf", b"CDF\x01" + random.Random(7).randbytes(2000)))
    assert job["state"] == "failed"
    assert "x.cdf" in job["message"]
    assert "uploads" not in job["message"] and "bug" not in job["message"]


def test_a_network_address_needs_people(folder: Path) -> None:
    from identify.errors import UsageError
    from identify.settings import Settings
    from identify.workbench.server import Address, open_workbench

    address = Address("192.0.2.7", 80)
    with (
        pytest.raises(UsageError, match="nobody who may sign in"),
        open_workbench([folder / "lab.ionlib"], folder / "lab.ioncase", Settings(), address, local_user="Ada"),
    ):
        pass
    assert not address.is_loopback
    assert not Address("0.0.0.0", 80).is_loopback
    assert (
        Address("127.0.0.2", 80).is_loopback and Address("::1", 80).is_loopback and Address("localhost", 1).is_loopback
    )
