"""How the workbench holds under load: 20 people, 200 queries, nothing lost, and how long a page takes.

``python tests/benchmarks/workbench.py LIBRARY [--people 20] [--queries 10] [--think 1.0]``

Each person signs in by name, pastes queries (entries of the library with noise, seeded), looks at pages while the work goes
on, and decides every query of theirs. Times are taken at the client, whole answers. The server runs in its own process.
After the load one person alone asks for each page again, to see what processor time it takes (Linux: read from /proc).
"""

from __future__ import annotations

import argparse
import os
import random
import shutil
import statistics
import subprocess
import sys
import tempfile
import threading
import time
from collections import defaultdict
from datetime import UTC, datetime
from pathlib import Path

import httpx

from identify.library.events import format_time
from identify.library.store import open_library
from identify.workbench.case_file import open_case
from identify.workbench.decisions import find_fault, list_decisions
from identify.workbench.people import set_person

ROOT = Path(__file__).resolve().parent.parent.parent
PASSWORD = "a password for the benchmark"
N_ALONE = 24
VIEWS = ("/", "/queries/{query}", "/queries/{query}", "/library?name={name}", "/library?ion={ion}", "/library/1/entries/{entry}",
         "/follow-up", "/trail", "/standards", "/queries/{query}?why_not={name}")  # fmt: skip


def make_queries(library: Path, n_queries: int) -> list[str]:
    """Peak lists as text: entries with 10 % noise on every peak and the weakest tenth left out."""
    chance = random.Random(8)
    with open_library(library) as opened:
        ids = chance.sample(opened.entry_ids(), n_queries)
        entries = opened.get_entries(ids)
    texts = []
    for entry in entries:
        peaks = entry.spectrum.nominal
        pairs = sorted(zip(peaks.relative.tolist(), peaks.mz.tolist(), strict=True))
        kept = pairs[len(pairs) // 10 :]
        noisy = [(mz, value * chance.gauss(1.0, 0.1)) for value, mz in kept]
        texts.append("\n".join(f"{mz:.0f} {max(value, 0.05):.2f}" for mz, value in sorted(noisy)))
    return texts


class Person(threading.Thread):
    """Somebody at a browser."""

    def __init__(self, name: str, origin: str, texts: list[str], think_s: float, times: dict[str, list[float]]) -> None:
        super().__init__(name=name)
        self.texts, self.think_s, self.times = texts, think_s, times
        self.chance = random.Random(name)
        self.client = httpx.Client(base_url=origin, headers={"origin": origin}, timeout=120.0, trust_env=False)
        self.faults: list[str] = []

    def ask(self, view: str, **values: object) -> httpx.Response:
        started = time.perf_counter()
        answer = self.client.get(view.format(**values))
        self.times[view].append(time.perf_counter() - started)
        if answer.status_code != 200:
            self.faults.append(f"{view}: {answer.status_code}")
        return answer

    def run(self) -> None:
        self.client.post("/sign-in", data={"name": self.name, "password": PASSWORD})
        for number, text in enumerate(self.texts):
            answer = self.client.post("/pasted", data={"peaks": text, "name": f"{self.name} {number}"})
            if answer.status_code != 303:
                self.faults.append(f"pasting: {answer.status_code}")
            self.look()
        mine: dict[int, int] = {}
        while len(mine) < len(self.texts):
            told = self.client.get("/api/work-list", params={"text": f"{self.name} "}).json()
            mine = {row["id"]: row["result_id"] for row in told["queries"]}
            failed = [job for job in told["jobs"] if job["state"] == "failed"]
            if failed:
                self.faults.append(f"job: {failed[0]['message'][:200]}")
                return
            self.look()
        for query, result in mine.items():
            self.look(query)
            form = {"kind": "follow-up", "note": f"by {self.name}", "result": result, "seen": 0}
            answer = self.client.post(f"/api/queries/{query}/decisions", data=form)
            if answer.status_code != 201:
                self.faults.append(f"decision: {answer.status_code}")
        self.client.close()

    def look(self, query: int | None = None) -> None:
        time.sleep(self.chance.expovariate(1.0 / self.think_s) if self.think_s else 0.0)
        if query is not None:
            self.ask("/queries/{query}", query=query)
            return
        view = self.chance.choice(VIEWS)
        rows = self.client.get("/api/work-list").json()["queries"] if "{query}" in view else []
        if "{query}" in view and not rows:
            view = "/"
        chosen = self.chance.choice(rows)["id"] if rows else 0
        names = ("toluene", "phenol", "limon", "caffe", "acid")
        self.ask(view, query=chosen, name=self.chance.choice(names), ion=self.chance.choice((57, 91, 149)),
                 entry=self.chance.randint(1, 400))  # fmt: skip


def start_server(library: Path, case: Path) -> tuple[subprocess.Popen[str], str]:
    """The server process and its origin."""
    code = "import sys; from identify.cli.serve import serve; sys.exit(serve.main(sys.argv[1:], standalone_mode=False))"
    command = [sys.executable, "-c", code, "--library", str(library), "--case", str(case), "--port", "0"]
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONUNBUFFERED": "1", "OMP_NUM_THREADS": "1"}
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True, env=environment, cwd=ROOT)
    assert process.stdout is not None
    return process, process.stdout.readline().split("Workbench: ")[1].partition("/open/")[0]


def processor_seconds(pid: int) -> float:
    """User and system time of a process so far, without its children."""
    fields = Path(f"/proc/{pid}/stat").read_text("utf-8").rpartition(")")[2].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def measure_alone(origin: str, pid: int, name: str, n_queries: int) -> dict[str, tuple[float, float]]:
    """Median time and mean processor time of each page, in seconds, for one person with nothing else going on."""
    times: dict[str, list[float]] = defaultdict(list)
    person = Person(name, origin, [], 0.0, times)
    person.client.post("/sign-in", data={"name": name, "password": PASSWORD})
    costs = {}
    for view in dict.fromkeys(VIEWS):
        before = processor_seconds(pid)
        for number in range(N_ALONE):
            names = ("toluene", "phenol", "limon", "caffe", "acid")
            query = 1 + number * max(1, n_queries // N_ALONE) % n_queries
            person.ask(view, query=query, name=names[number % 5], ion=(57, 91, 149)[number % 3], entry=1 + 17 * number)
        costs[view] = (statistics.median(times[view]), (processor_seconds(pid) - before) / N_ALONE)
    person.client.close()
    return costs


def main() -> int:
    """Run the load and print what was measured."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("library", type=Path)
    parser.add_argument("--people", type=int, default=20)
    parser.add_argument("--queries", type=int, default=10)
    parser.add_argument("--think", type=float, default=1.0)
    options = parser.parse_args()
    times: dict[str, list[float]] = defaultdict(list)
    with tempfile.TemporaryDirectory() as folder:
        library, case_path = Path(folder) / "lab.ionlib", Path(folder) / "lab.ioncase"
        shutil.copy(options.library, library)
        texts = make_queries(library, options.people * options.queries)
        names = [f"Person{number:02d}" for number in range(options.people)]
        with open_case(case_path) as case:
            for name in names:
                set_person(case, name, "analyst", PASSWORD, format_time(datetime.now(UTC)))
        process, origin = start_server(library, case_path)
        people = [
            Person(name, origin, texts[n :: options.people], options.think, times) for n, name in enumerate(names)
        ]
        started = time.perf_counter()
        try:
            for person in people:
                person.start()
            for person in people:
                person.join()
            elapsed, used = time.perf_counter() - started, processor_seconds(process.pid)
            load = os.getloadavg()
            alone = measure_alone(origin, process.pid, names[0], len(texts))
        finally:
            process.terminate()
            process.wait(timeout=30)
        with open_case(case_path) as case:
            counts, fault, n_decisions = case.count_queries(), find_fault(case), len(list_decisions(case))
    faults = [fault for person in people for fault in person.faults]
    expected = options.people * options.queries
    print(f"{expected} queries, {options.people} people, think time {options.think:g} s: {elapsed:.1f} s")
    print(f"kept: {sum(counts.values())} queries, {n_decisions} decisions; chain {fault or 'intact'}")
    print(f"answers that were not as expected: {len(faults)} {sorted(set(faults))[:5]}")
    print(f"processor time of the server during the load {used:.1f} s; load average at its end {load[0]:.1f}")
    print(f"{'page':42} {'n':>5} {'median':>8} {'p95':>8} {'worst':>8}  ms   alone: median, processor ms")
    for view, taken in [*sorted(times.items()), ("all pages", [t for some in times.values() for t in some])]:
        p95 = statistics.quantiles(taken, n=20)[-1] if len(taken) > 1 else taken[0]
        told = "".join(f" {1e3 * value:8.1f}" for value in alone.get(view, ()))
        middle, worst = statistics.median(taken), max(taken)
        print(f"{view:42} {len(taken):5} {1e3 * middle:8.0f} {1e3 * p95:8.0f} {1e3 * worst:8.0f}     {told}")
    return 0 if (sum(counts.values()), n_decisions) == (expected, expected) and not faults and not fault else 1


if __name__ == "__main__":
    sys.exit(main())
