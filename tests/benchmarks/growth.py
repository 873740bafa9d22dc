"""How do time and memory grow with entries, with peaks and with queries? Log-log slopes: 1 is linear, 0 is constant.

    python tests/benchmarks/growth.py LIB

LIB is built of the open records (`ionwitness library build LIB ../shared/data/massbank-2025.05.1-ei.zip --licence all`). The
search alone is measured with `search.py`'s libraries of up to 200,000 entries, the whole identification on LIB. Processor time.
"""

from __future__ import annotations

import argparse
import os
import random
import statistics
import subprocess
import sys
import time
from collections.abc import Callable, Sequence
from dataclasses import replace
from itertools import islice
from pathlib import Path

import numpy as np
from search import DATA, WEIGHTING, K, grow, make_queries, read_records, weigh

from identify.index import SearchIndex, search_index
from identify.index.build import lay_out
from identify.pipeline.search import identify_records, open_libraries
from identify.readers import read_spectra
from identify.records import SpectrumRecord
from identify.settings import Settings

ENTRIES = (12_000, 25_000, 50_000, 100_000, 200_000)
PEAKS = (10, 20, 40, 80)
QUERIES = (50, 100, 200, 400)


def busy_ms(work: Callable[[], object]) -> float:
    """Milliseconds of processor time."""
    begin = time.process_time()
    work()
    return 1e3 * (time.process_time() - begin)


def show(what: str, sizes: Sequence[int], values: Sequence[float], unit: str) -> None:
    """One line: the values and the slope of their logarithms over those of the sizes."""
    slope = np.polyfit(np.log(sizes), np.log(values), 1)[0]
    told = " ".join(f"{size:,}: {value:.3g}" for size, value in zip(sizes, values, strict=True))
    print(f"{what:42s} slope {slope:5.2f}   {unit}   {told}", flush=True)


def grow_entries() -> None:
    records = read_records()
    queries = make_queries(records, 40)
    built, searched, sizes = [], [], []
    for n in ENTRIES:
        flat = weigh(grow(records, n))
        made: list[SearchIndex] = []
        built.append(
            busy_ms(lambda flat=flat, made=made: made.append(SearchIndex(WEIGHTING, (lay_out(flat, WEIGHTING),))))
        )
        search_index(made[0], queries[0], K, many=True)
        times = [busy_ms(lambda q=q, index=made[0]: search_index(index, q, K, many=True)) for q in queries]
        searched.append(statistics.median(times))
        sizes.append(float(made[0].segments[0].n_bytes))
    show("entries: building the index", ENTRIES, built, "ms")
    show("entries: one search, compiled", ENTRIES, searched, "ms")
    show("entries: bytes of the index", ENTRIES, sizes, "bytes")


def thin(record: SpectrumRecord, n_peaks: int) -> SpectrumRecord:
    """The record with its `n_peaks` strongest peaks."""
    kept = np.sort(np.argsort(-record.intensity, kind="stable")[:n_peaks])
    return replace(record, mz=record.mz[kept], intensity=record.intensity[kept], splash="")


def read_queries(n: int) -> list[SpectrumRecord]:
    """Some of the open records with many peaks, read as a stream: whole, they would hide what the queries need."""
    chance = random.Random(7)
    stream = (
        r for r in read_spectra(DATA, lambda _: None) if r.acquisition.ionization == "EI" and r.mz.size >= max(PEAKS)
    )
    return list(islice((record for record in stream if chance.random() < 0.12), n))


def grow_peaks(path: Path) -> None:
    records, settings, values = read_queries(60), Settings(), []
    with open_libraries([path], settings) as libraries:
        for n_peaks in (max(PEAKS), *PEAKS):  # the first round fills the caches
            thinned = [thin(record, n_peaks) for record in records]
            values.append(busy_ms(lambda chosen=thinned: list(identify_records(chosen, libraries, settings, []))) / 60)
    show("peaks of a query: one identification", PEAKS, values[1:], "ms")


def identify_so_many(path: Path, n: int) -> None:
    """Run by a process of its own: its peak memory cannot be taken back."""
    records, settings = read_queries(n), Settings()
    with open_libraries([path], settings) as libraries:
        taken = busy_ms(lambda: sum(1 for _ in identify_records(records, libraries, settings, [])))
    print(taken, peak_memory_mb())


def peak_memory_mb() -> float:
    """Of this process alone: `getrusage` also counts what the parent held when it started it."""
    status = Path("/proc/self/status").read_text(encoding="ascii", errors="replace")
    return int(next(line for line in status.splitlines() if line.startswith("VmHWM")).split()[1]) / 1024


def grow_queries(path: Path) -> None:
    times, memory = [], []
    for n in QUERIES:
        command = [sys.executable, __file__, str(path), "--so-many", str(n)]
        done = subprocess.run(
            command, check=True, capture_output=True, text=True, env={**os.environ, "PYTHONPATH": "."}
        )
        taken, peak = done.stdout.split()
        times.append(float(taken))
        memory.append(float(peak))
    show("queries: all identifications", QUERIES, times, "ms")
    show("queries: peak memory of the process", QUERIES, memory, "MB")


def main() -> None:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("library", type=Path)
    parser.add_argument("--so-many", type=int, help=argparse.SUPPRESS)
    asked = parser.parse_args()
    if asked.so_many:
        identify_so_many(asked.library, asked.so_many)
        return
    grow_entries()
    grow_peaks(asked.library)
    grow_queries(asked.library)
    print(f"load average {os.getloadavg()[0]:.1f}")


if __name__ == "__main__":
    main()
