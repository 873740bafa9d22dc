"""How fast is the exact search, and how far is it from what the machine can do?

    python tests/benchmarks/search.py --entries 350000 [--queries 60] [--json result.json]

Builds a library of N entries from the open records: the records themselves, then copies with seeded jitter (intensities by a
factor exp(N(0, 0.3)), small peaks lost, for three in five copies everything above a random m/z moved by up to 14), so that
number of peaks, crowded m/z and lower limits are those of real spectra. Queries are other records' copies with noise of
their own. Everything is timed in one run, per query, on one core; medians. Checks exactness on a sample first: a wrong
answer ends the run with an error.

Baselines get the easier job: the same weights as float32 with norms over the whole spectrum, cosine and reverse match of
every entry and the best 100 by each, but no range rule and no exact rescoring.

Run it alone on the machine.
"""

from __future__ import annotations

import argparse
import inspect
import json
import os
import statistics
import sys
import tempfile
import time
import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import numpy as np  # noqa: E402

ROOT = Path(__file__).resolve().parent.parent.parent
sys.path.insert(0, str(ROOT))

from identify.errors import SpectrumError  # noqa: E402
from identify.index import SearchIndex, score_all, search_index, search_many  # noqa: E402
from identify.index.build import FlatRows, lay_out  # noqa: E402
from identify.index.query import weigh_query  # noqa: E402
from identify.index.scan import find_candidates  # noqa: E402
from identify.index.search import choose_best  # noqa: E402
from identify.library.cache import read_index, write_index  # noqa: E402
from identify.readers import read_spectra  # noqa: E402
from identify.records import CleanSpectrum, Peaks  # noqa: E402
from identify.settings import Settings, Weighting  # noqa: E402
from identify.similarity.scores import cosine_score, reverse_score  # noqa: E402
from identify.spectra.align import align  # noqa: E402
from identify.spectra.cleaning import clean_spectrum  # noqa: E402
from identify.spectra.weights import peak_weights  # noqa: E402

DATA = ROOT.parent / "shared" / "data" / "massbank-2025.05.1-ei.zip"
K = 100
N_BATCH = 500
MATCHMS_ENTRIES = 12_000
DENSE_LIMIT_BYTES = 4 * 2**30
WEIGHTING = Weighting()


@dataclass
class Library:
    """Peaks of all entries, one after the other."""

    start: np.ndarray
    mz: np.ndarray
    intensity: np.ndarray
    lowest: np.ndarray

    @property
    def n(self) -> int:
        return self.lowest.size

    def spectrum(self, row: int) -> CleanSpectrum:
        part = slice(self.start[row], self.start[row + 1])
        return CleanSpectrum(Peaks(self.mz[part], self.intensity[part]), None, int(self.lowest[row]))

    def take(self, rows: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Owner (position in `rows`), m/z and intensity of all peaks of some rows."""
        counts = self.start[rows + 1] - self.start[rows]
        owner = np.repeat(np.arange(rows.size), counts)
        at = np.arange(owner.size) + (self.start[rows] - (np.cumsum(counts) - counts))[owner]
        return owner, self.mz[at], self.intensity[at]


def read_records() -> Library:
    """The open EI records, cleaned as library entries are."""
    settings = Settings().cleaning
    spectra = []
    for record in read_spectra(DATA, lambda rejection: None):
        if record.acquisition.ionization not in ("", "EI"):
            continue
        try:
            spectra.append(clean_spectrum(record, settings))
        except SpectrumError:
            continue
    start = np.cumsum([0, *(len(s.nominal) for s in spectra)])
    mz = np.concatenate([s.nominal.mz for s in spectra])
    intensity = np.concatenate([s.nominal.relative for s in spectra])
    return Library(start, mz, intensity, np.array([s.lowest_mz for s in spectra]))


def jitter(records: Library, rows: np.ndarray, rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    owner, mz, intensity = records.take(rows)
    intensity = intensity * np.exp(rng.normal(0, 0.3, mz.size))
    highest, lowest = records.mz[records.start[rows + 1] - 1], records.lowest[rows]
    cut = lowest + (highest - lowest) * rng.random(rows.size)
    shift = rng.integers(0, 15, rows.size) * (rng.random(rows.size) < 0.6)
    mz = mz + shift[owner] * (mz > cut[owner])
    kept = (rng.random(mz.size) > 0.05) | (intensity > 5)
    return owner[kept], mz[kept], intensity[kept]


def grow(records: Library, n: int, seed: int = 1) -> Library:
    """Library of `n` entries: records, then jittered copies of records."""
    rng = np.random.default_rng(seed)
    first = np.arange(min(n, records.n))
    parts, counts, lowest = [records.take(first)], [np.diff(records.start)[first]], [records.lowest[first]]
    done = first.size
    while done < n:
        rows = rng.permutation(records.n)[: n - done]
        part = jitter(records, rows, rng)
        parts.append(part)
        counts.append(np.bincount(part[0], minlength=rows.size))
        lowest.append(records.lowest[rows])
        done += rows.size
    start = np.concatenate([[0], np.cumsum(np.concatenate(counts))])
    return Library(
        start, np.concatenate([p[1] for p in parts]), np.concatenate([p[2] for p in parts]), np.concatenate(lowest)
    )


def make_queries(records: Library, n: int, seed: int = 2) -> list[CleanSpectrum]:
    rng = np.random.default_rng(seed)
    made = []
    for row in rng.integers(0, records.n, n):
        spectrum = records.spectrum(int(row))
        heights = spectrum.nominal.intensity * np.exp(rng.normal(0, 0.15, len(spectrum.nominal)))
        made.append(CleanSpectrum(Peaks(spectrum.nominal.mz, heights), None, spectrum.lowest_mz))
    return made


def weigh(library: Library) -> FlatRows:
    weight = peak_weights(library.mz, library.intensity, WEIGHTING)
    owner = np.repeat(np.arange(library.n), np.diff(library.start))
    norm = np.sqrt(np.bincount(owner, weights=weight * weight, minlength=library.n))
    ids = np.arange(1, library.n + 1)
    lowest = library.lowest.astype(np.uint16)
    return FlatRows(ids, lowest, library.start, library.mz.astype(np.uint16), (weight / norm[owner]).astype(np.float32))


def check_exactness(index: SearchIndex, library: Library, queries: Sequence[CleanSpectrum]) -> dict[str, float]:
    """Largest deviation from the plain definition; raises when an answer is not the true one."""
    rng = np.random.default_rng(3)
    worst = 0.0
    for query in queries:
        ids, cosine, reverse = score_all(index, query)
        best = choose_best(ids, cosine, reverse, K)
        expected = list(zip(ids[best].tolist(), cosine[best].tolist(), reverse[best].tolist(), strict=True))
        found = [(hit.entry_id, hit.cosine, hit.reverse) for hit in search_index(index, query, K)]
        assert found == expected, "a search that is not exact"
        for entry_id in {*ids[best].tolist(), *rng.integers(1, library.n + 1, 200).tolist()}:
            pair = align(query, library.spectrum(entry_id - 1))
            plain = cosine_score(pair, WEIGHTING), reverse_score(pair, WEIGHTING)
            worst = max(worst, abs(cosine[entry_id - 1] - plain[0]), abs(reverse[entry_id - 1] - plain[1]))
    assert worst < 1e-6, f"scores off by {worst}"
    return {"queries checked against all entries": len(queries), "largest deviation": worst}


def time_each(work: Callable[[Any], object], items: Sequence[Any], repeats: int = 3) -> list[float]:
    """Milliseconds per item, the best of some repeats."""
    taken = []
    for item in items:
        best = float("inf")
        for _ in range(repeats):
            begin = time.perf_counter()
            work(item)
            best = min(best, time.perf_counter() - begin)
        taken.append(best * 1e3)
    return taken


def top(dot: np.ndarray, matched: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Best 100 by cosine and by reverse match from the two products (entries of length 1)."""
    reverse = dot / np.sqrt(np.maximum(matched, 1e-12))
    return np.argpartition(-dot, K)[:K], np.argpartition(-reverse, K)[:K]


def scipy_times(flat: FlatRows, queries: Sequence[CleanSpectrum]) -> dict[str, float]:
    """Both scores by sparse products: all rows times the query, or the query's columns only."""
    from scipy.sparse import csr_matrix

    n, width = flat.ids.size, int(flat.mz.max()) + 1
    weights = csr_matrix((flat.weight, flat.mz.astype(np.int32), flat.row_start), shape=(n, width))
    there = csr_matrix((np.ones_like(flat.weight), weights.indices, weights.indptr), shape=(n, width))
    by_mz, there_by_mz = weights.T.tocsr(), there.T.tocsr()

    def vector(query: CleanSpectrum) -> np.ndarray:
        q = weigh_query(query, WEIGHTING)
        dense = np.zeros(width, dtype=np.float32)
        dense[q.mz[q.mz < width]] = q.weight[q.mz < width]
        return dense

    def rows(query: CleanSpectrum) -> object:
        q = vector(query)
        return top(weights @ q, there @ (q * q))

    def columns(query: CleanSpectrum) -> object:
        q = csr_matrix(vector(query)[None, :])
        return top((q @ by_mz).toarray()[0], (q.multiply(q).tocsr() @ there_by_mz).toarray()[0])

    return {
        "scipy sparse product, all rows": statistics.median(time_each(rows, queries, 2)),
        "scipy sparse product, query's columns": statistics.median(time_each(columns, queries, 2)),
    }


def dense_times(flat: FlatRows, queries: Sequence[CleanSpectrum]) -> dict[str, float]:
    """Both scores by dense float32 products, one query at a time."""
    width = int(np.quantile(flat.mz, 0.9999)) + 1  # the last columns hold one peak in ten thousand
    n = flat.ids.size
    if 2 * 4 * n * width > DENSE_LIMIT_BYTES:
        return {}
    weights = np.zeros((n, width), dtype=np.float32)
    owner = np.repeat(np.arange(n), np.diff(flat.row_start))
    inside = flat.mz < width
    weights[owner[inside], flat.mz[inside]] = flat.weight[inside]
    there = (weights > 0).astype(np.float32)

    def both(query: CleanSpectrum) -> object:
        q = weigh_query(query, WEIGHTING)
        dense = np.zeros(width, dtype=np.float32)
        dense[q.mz[q.mz < width]] = q.weight[q.mz < width]
        return top(weights @ dense, there @ (dense * dense))

    return {"dense float32 product": statistics.median(time_each(both, queries, 2))}


def matchms_times(library: Library, queries: Sequence[CleanSpectrum]) -> dict[str, float]:
    """Cosine only, by the batch classes of matchms (no reverse match there), first call outside the clock."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        import matchms
        from matchms.similarity import BlinkCosine, CosineGreedy, CosineLinear, FlashSimilarity

        def convert(spectrum: CleanSpectrum) -> Any:
            return matchms.Spectrum(
                mz=spectrum.nominal.mz, intensities=spectrum.nominal.relative, metadata={}, metadata_harmonization=False
            )

        entries = [convert(library.spectrum(row)) for row in range(library.n)]
        asked = [convert(query) for query in queries[:10]]
        powers = {"mz_power": WEIGHTING.mz_power, "intensity_power": WEIGHTING.intensity_power}
        measures = {
            "CosineGreedy": CosineGreedy(tolerance=0.1, **powers),
            "CosineLinear": CosineLinear(tolerance=0.1, **powers),
            "BlinkCosine": BlinkCosine(tolerance=0.1, bin_width=0.2, prefilter=False, **powers),
            "FlashSimilarity (cosine)": FlashSimilarity(score_type="cosine", tolerance=0.1, noise_cutoff=0.0),
        }
        times = {}
        for name, measure in measures.items():
            accepts = inspect.signature(measure.matrix).parameters
            quiet = {"progress_bar": False} if "progress_bar" in accepts else {}
            measure.matrix(entries[:50], asked[:2], **quiet)
            begin = time.perf_counter()
            measure.matrix(entries, asked, **quiet)
            times[f"matchms {name}, batch of 10"] = (time.perf_counter() - begin) * 1e3 / len(asked)
        return times


def bandwidth_gb_s() -> dict[str, float]:
    """What one core moves from memory: reading (sum of 8-byte integers) and copying (read + write)."""
    block = np.ones(2**26, dtype=np.int64)  # 512 MB: far beyond any cache
    other = np.empty_like(block)
    read = min(time_each(lambda a: np.add.reduce(a), [block], 5))
    copy = min(time_each(lambda a: np.copyto(other, a), [block], 5))
    return {"read": block.nbytes / read / 1e6, "copy": 2 * block.nbytes / copy / 1e6}


def touched(index: SearchIndex, queries: Sequence[CleanSpectrum]) -> tuple[np.ndarray, np.ndarray]:
    """Per query: postings (peaks of entries at the query's m/z), and bytes of codes the scan reads."""
    segment = index.segments[0]
    per_mz = np.bincount(segment.mz, minlength=70_000)
    size = np.where(segment.column_count == 0, 4096, 3 * segment.column_count)
    bytes_per_mz = np.bincount(segment.column_mz, weights=size, minlength=70_000)
    below = np.cumsum(bytes_per_mz) - bytes_per_mz
    asked = [weigh_query(query, WEIGHTING) for query in queries]
    postings = np.array([per_mz[q.mz].sum() for q in asked])
    return postings, np.array([bytes_per_mz[q.mz].sum() + below[q.lowest_mz] for q in asked])


def measure_file(index: SearchIndex) -> dict[str, float]:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "index"
        begin = time.perf_counter()
        write_index(path, index, "benchmark", "event")
        written = time.perf_counter() - begin
        begin = time.perf_counter()
        read_index(path, "benchmark", WEIGHTING)
        opened = time.perf_counter() - begin
        return {
            "bytes per entry": path.stat().st_size / index.n_entries, "write s": written, "open s (all sums checked)": opened,
        }  # fmt: skip


def measure_search(index: SearchIndex, records: Library, queries: Sequence[CleanSpectrum]) -> dict[str, Any]:
    search_index(index, queries[0], K)  # loads or compiles the scan
    both = time_each(lambda query: search_index(index, query, K), queries)
    scan = time_each(lambda query: find_candidates(index.segments[0], weigh_query(query, WEIGHTING), K), queries)
    candidates = [find_candidates(index.segments[0], weigh_query(q, WEIGHTING), K).size for q in queries]
    postings, n_bytes = touched(index, queries)
    ns = np.array(scan) * 1e6
    slope, fixed = np.polyfit(n_bytes, ns, 1)
    batch = make_queries(records, N_BATCH, seed=5)
    rates = {}
    for n_threads in (1, 2):
        begin = time.perf_counter()
        n_done = sum(1 for _ in search_many(index, batch, K, n_threads))
        rates[f"batch of {N_BATCH}, {n_threads} threads, queries/s"] = n_done / (time.perf_counter() - begin)
    return {
        "both scores and top 100, ms": statistics.median(both), "mean, ms": statistics.mean(both),
        "95th percentile, ms": float(np.quantile(both, 0.95)), "of which scan, ms": statistics.median(scan),
        "candidates rescored, median": statistics.median(candidates), "candidates rescored, most": max(candidates),
        "postings touched, median": float(np.median(postings)), "ns per posting": float(np.median(ns / postings)),
        "code bytes read, median": float(np.median(n_bytes)), "ns per code byte": float(slope),
        "fixed ms": float(fixed) / 1e6, "correlation of time and code bytes": float(np.corrcoef(n_bytes, ns)[0, 1]),
        "code bytes read, GB/s": float(np.median(n_bytes / ns)), **rates,
    }  # fmt: skip


def main() -> None:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--entries", type=int, required=True)
    parser.add_argument("--queries", type=int, default=60)
    parser.add_argument("--json", type=Path)
    asked = parser.parse_args()
    records = read_records()
    library = grow(records, asked.entries)
    queries = make_queries(records, asked.queries)
    begin = time.perf_counter()
    flat = weigh(library)
    index = SearchIndex(WEIGHTING, (lay_out(flat, WEIGHTING),))
    built = time.perf_counter() - begin
    result: dict[str, Any] = {
        "entries": library.n, "peaks per entry": library.mz.size / library.n, "peaks per query": statistics.mean(
            len(query.nominal) for query in queries), "build s": built, "load average": os.getloadavg()[0],
    }  # fmt: skip
    result["exactness"] = check_exactness(index, library, queries[:5])
    result["file"] = measure_file(index)
    result["search"] = measure_search(index, records, queries)
    few = queries[:20]
    result["baselines, ms"] = {**scipy_times(flat, few), **dense_times(flat, few)}
    if library.n <= MATCHMS_ENTRIES:
        result["baselines, ms"] |= matchms_times(library, queries)
    ours = result["search"]["both scores and top 100, ms"]
    result["times slower than the index"] = {key: value / ours for key, value in result["baselines, ms"].items()}
    result["memory bandwidth of one core, GB/s"] = bandwidth_gb_s()
    show(result)
    if asked.json:
        asked.json.write_text(json.dumps(result, indent=1) + "\n", encoding="utf-8")


def show(result: dict[str, Any], indent: str = "") -> None:
    for key, value in result.items():
        if isinstance(value, dict):
            print(f"{indent}{key}")
            show(value, indent + "  ")
        else:
            print(
                f"{indent}{key:<48} {value:>14,.4g}" if isinstance(value, float) else f"{indent}{key:<48} {value:>14,}"
            )


if __name__ == "__main__":
    main()
