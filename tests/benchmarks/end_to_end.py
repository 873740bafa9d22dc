"""Times of the main job on the open records: build, cold search, many queries. Needs ../shared/data.

``python tests/benchmarks/end_to_end.py [--queries 400]`` prints one line per goal of the design (table in DEVELOPERS.md).
"""

from __future__ import annotations

import argparse
import compileall
import os
import resource
import subprocess
import sys
import tempfile
import time
import zipfile
from pathlib import Path

import identify
from identify.pipeline.batch import map_identifications
from identify.pipeline.search import identify_records, open_libraries
from identify.readers import read_spectra
from identify.records import Rejection
from identify.settings import Settings
from identify.writers.results_json import identification_to_json

DATA = Path(__file__).resolve().parents[3] / "shared" / "data" / "massbank-2025.05.1-ei.zip"
COMMAND = [sys.executable, "-c", "from identify.cli import main; main()"]


def timed(*arguments: object) -> float:
    """Wall time of one command in a fresh process, in seconds."""
    start = time.perf_counter()
    done = subprocess.run([*COMMAND, *map(str, arguments)], check=False, capture_output=True)
    if done.returncode not in (0, 1):  # 1: done, some records left out
        raise SystemExit(done.stderr.decode())
    return time.perf_counter() - start


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--queries", type=int, default=400)
    n_queries: int = parser.parse_args().queries
    compileall.compile_dir(Path(identify.__file__).parent, quiet=1)  # as an installation does
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        library = folder / "all.ionlib"
        print(f"--help                        {timed('--help'):8.2f} s      goal 0.3")
        print(
            f"library build (12,486 records) {timed('library', 'build', library, DATA, '--licence', 'all'):7.1f} s      goal 20"
        )
        peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
        print(f"  peak memory                 {peak:8.0f} MB     goal 1000")
        with zipfile.ZipFile(DATA) as archive:
            members = [n for n in archive.namelist() if n.endswith(".txt")][:: max(1, 14_155 // n_queries)]
            archive.extractall(folder / "queries", members)
        one = next((folder / "queries").rglob("*Osaka*.txt"))
        print(f"first search (index is made)  {timed('search', one, '--library', library):8.2f} s")
        cold = timed("search", one, "--library", library, "--json", folder / "one.json")
        print(f"one cold search with JSON     {cold:8.2f} s      goal 1.5")
        left_out: list[Rejection] = []
        records = [r for r in read_spectra(folder / "queries", left_out.append) if r.acquisition.ionization == "EI"]
        settings = Settings()
        with open_libraries([library], settings) as libraries:
            for name in ("first time", "everything known"):
                start, busy = time.perf_counter(), time.process_time()
                for found in identify_records(records[:100], libraries, settings, left_out):
                    identification_to_json(found)
                busy, wall = (time.process_time() - busy) / 100, (time.perf_counter() - start) / 100
                print(
                    f"one core, {name:19s} {1000 * busy:8.1f} ms of processor time a query ({1 / wall:.1f} queries/s)"
                )
            start, busy = time.perf_counter(), processor_time()
            texts = map_identifications(identification_to_json, records, libraries, settings, left_out)
            n_found = sum(1 for _ in texts)
            wall, busy = time.perf_counter() - start, processor_time() - busy
            print(f"all cores, start-up included  {n_found / wall:8.1f} queries/s goal 100 ({n_found} queries)")
            print(f"  processor time a query      {1000 * busy / n_found:8.1f} ms    goal 20 (two cores)")
    print(f"load average                  {os.getloadavg()[0]:8.1f}")


def processor_time() -> float:
    """Processor time of this process and of all workers that have ended, in seconds."""
    usages = [resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    return sum(usage.ru_utime + usage.ru_stime for usage in usages)


if __name__ == "__main__":
    main()
