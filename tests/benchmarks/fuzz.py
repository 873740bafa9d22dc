"""Coverage-guided fuzzing (atheris) of everything that takes bytes from outside.

``python tests/benchmarks/fuzz.py TARGET [--seconds 200] [--corpus DIR]`` with TARGET one of those in `TARGETS`; `http` sends
requests to the workbench in this process, as `tests/workbench/http_surface.py` makes them of choices.

Needs atheris, which no dependency list of this package names: it is a tool for contributors. Seeds are the files of
`fixtures/broken` and the demo case; what is found is kept by libFuzzer as ``crash-*`` in the working folder and becomes a
file of `fixtures/broken`. More than 2 s of processor time for one input is a find, and so is a process of more than 768 MB,
120 to 200 of which are the program and what it imports.
"""

from __future__ import annotations

import argparse
import copy
import json
import shutil
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import atheris

ROOT = Path(__file__).resolve().parent.parent.parent
with atheris.instrument_imports(include=["identify"]):
    from identify.chem.formula import parse_formula
    from identify.errors import IonwitnessError
    from identify.library.store import open_library
    from identify.library.verify import verify_library
    from identify.pipeline.compare import compare_results, read_result
    from identify.readers.jcamp import parse_jcamp
    from identify.readers.massbank import parse_massbank
    from identify.readers.msp import parse_msp
    from identify.readers.mzspeclib import parse_mzspeclib
    from identify.readers.opening import read_pasted, read_spectra
    from identify.readers.runs import read_run
    from identify.readers.table import parse_table
    from identify.records import Rejection
    from identify.retention import parse_ladder
    from identify.settings import resolve
    from identify.spectra.cleaning import clean_spectrum

FOLDER = Path(tempfile.mkdtemp(prefix="fuzz-"))
PARSERS = (parse_massbank, parse_msp, parse_jcamp, parse_mzspeclib, parse_table)
SETTINGS = resolve()


def _file(data: bytes, name: str = "input.dat") -> Path:
    path = FOLDER / name
    path.write_bytes(data)
    return path


def fuzz_lines(data: bytes) -> None:
    """One parser of a text format, chosen by the first byte, on the lines of the rest."""
    rejected: list[Rejection] = []
    lines = data[1:].decode("utf-8", "replace").split("\n")
    for record in PARSERS[data[0] % len(PARSERS) if data else 0](iter(lines), "fuzz", rejected.append):
        clean_spectrum(record, SETTINGS.cleaning)
    assert all(item.message for item in rejected)


def fuzz_files(data: bytes) -> None:
    """A file of any kind, told by its content: archives, compressed files, encodings, every format."""
    rejected: list[Rejection] = []
    for record in read_spectra(_file(data), rejected.append):
        clean_spectrum(record, SETTINGS.cleaning)
    assert all(item.message for item in rejected)


def fuzz_pasted(data: bytes) -> None:
    """A pasted peak list."""
    list(read_pasted(data.decode("utf-8", "replace"), "pasted", lambda _: None))


def fuzz_runs(data: bytes) -> None:
    """A run: ANDI netCDF or mzML."""
    read_run(_file(data, "input.cdf"))


def fuzz_settings(data: bytes) -> None:
    """A settings file, a ladder and a formula."""
    text = data[1:].decode("utf-8", "replace")
    (resolve, parse_ladder, parse_formula)[data[0] % 3 if data else 0](text)


ODD = (None, True, -1, 0, 1e308, "", "x", "nan", [], {}, [None], {"a": 1}, "\ud800", 10**30, [[]], -0.0)


def fuzz_results(data: bytes) -> None:
    """A result file with values replaced or taken out, and as raw bytes; compared with a good one."""
    text = (FOLDER / "good.json").read_bytes()
    if data[:1] == b"\0":
        other = _file(data[1:], "input.json")
    else:
        document = json.loads(text)
        for start in range(0, len(data) - 5, 6):
            _change(document, data[start : start + 6])
        other = _file(json.dumps(document).encode(), "input.json")
    good = read_result(FOLDER / "good.json")
    compare_results(good, read_result(other), ("a", "b"))


def _change(value: Any, steps: bytes) -> None:
    """Walk down by the first bytes, then put something odd there, or nothing."""
    for step in steps[:4]:
        keys = list(value) if isinstance(value, dict) else list(range(len(value)))
        if not keys:
            return
        key = keys[step % len(keys)]
        if not isinstance(value[key], dict | list) or step >= 200:
            break
        value = value[key]
    else:
        keys = list(value) if isinstance(value, dict) else list(range(len(value)))
        if not keys:
            return
        key = keys[steps[4] % len(keys)]
    if steps[5] % 17 == 16:
        del value[key]
    else:
        value[key] = copy.deepcopy(ODD[steps[5] % 17])


def fuzz_library(data: bytes) -> None:
    """A library file with bytes changed: pairs of place and value are written into a good one."""
    content = bytearray((FOLDER / "good.ionlib").read_bytes())
    for start in range(0, len(data) - 3, 4):
        content[int.from_bytes(data[start : start + 3], "big") % len(content)] = data[start + 3]
    path = _file(bytes(content), "input.ionlib")
    for left in ("-wal", "-shm", "-journal"):
        (FOLDER / f"input.ionlib{left}").unlink(missing_ok=True)
    verify_library(path)
    with open_library(path) as library:
        library.state()
        for _ in library.iter_entries():
            pass


class Chosen:
    """Choices of the fuzzer: the bytes of one input, zeros after their end."""

    def __init__(self, data: bytes) -> None:
        self._provider = atheris.FuzzedDataProvider(data)

    def below(self, limit: int) -> int:
        return int(self._provider.ConsumeIntInRange(0, limit - 1))

    def text(self) -> str:
        return str(self._provider.ConsumeUnicode(20))

    def data(self) -> bytes:
        return bytes(self._provider.ConsumeBytes(60))


SURFACES: list[Any] = []
N_ON_ONE_SURFACE = 500
"""Requests after which the library and the case are those of the start again."""


def fuzz_http(data: bytes) -> None:
    """A request to the workbench."""
    from http_surface import check_answer, choose_request, fresh_surface

    if not SURFACES or SURFACES[2] == 0:
        if SURFACES:
            SURFACES[1].__exit__(None, None, None)
        opened = fresh_surface(FOLDER / "made", FOLDER / "attacked")
        SURFACES[:] = [opened.__enter__(), opened, N_ON_ONE_SURFACE]
    SURFACES[2] -= 1
    surface = SURFACES[0]
    asked = choose_request(surface, Chosen(data))
    check_answer(surface, asked, surface.ask(asked))


TARGETS: dict[str, Callable[[bytes], None]] = {
    "lines": fuzz_lines, "files": fuzz_files, "pasted": fuzz_pasted, "runs": fuzz_runs, "settings": fuzz_settings,
    "results": fuzz_results, "library": fuzz_library, "http": fuzz_http,
}  # fmt: skip
MAX_SECONDS = 2.0


def seed(target: str, corpus: Path) -> None:
    """Files to start from."""
    sources = [path for path in (ROOT / "fixtures/broken").iterdir() if not path.name.endswith(".expected.txt")]
    sources += list((ROOT / "fixtures/demo/unknowns").iterdir())
    for path in sources:
        content = path.read_bytes()
        if target == "lines":
            for number in range(len(PARSERS)):
                (corpus / f"{number}-{path.name}").write_bytes(bytes([number]) + content[:20_000])
        elif target in ("files", "pasted", "runs"):
            (corpus / path.name).write_bytes(content[:20_000])
    if target == "settings":
        from identify.workbench.stored import settings_to_text

        (corpus / "all").write_bytes(b"\0" + settings_to_text(SETTINGS.as_dict()).encode())
        (corpus / "ladder").write_bytes(b"\1C10 8.00\nC11 9.5\nC12 10.9\n")
        for text in ("C8H10", "[13C]C5H12O6", "C2D6OS", "C10H8+"):
            (corpus / text).write_bytes(b"\2" + text.encode())
    if target == "runs":
        (corpus / "made.cdf").write_bytes(_small_run())
    if target == "results":
        _make_result(corpus)
    if target == "http":
        _make_surface(corpus)
    if target == "library":
        _make_small_library()
        size = (FOLDER / "good.ionlib").stat().st_size
        for place in (16, 18, 40, 60, 100, *range(4096, size, 997)):
            (corpus / str(place)).write_bytes(b"".join((place + n).to_bytes(3, "big") + b"\xff" for n in range(3)))


def _small_run() -> bytes:
    sys.path.insert(0, str(ROOT / "tests" / "readers"))
    from run_files import write_andi

    path = FOLDER / "seed.cdf"
    write_andi(path)
    return path.read_bytes()


def _make_surface(corpus: Path) -> None:
    import random

    sys.path[:0] = [str(ROOT), str(ROOT / "tests" / "workbench")]
    with atheris.instrument_imports(include=["identify", "fastapi", "starlette", "multipart", "python_multipart"]):
        from http_surface import make_folder
    make_folder(FOLDER / "made")
    chance = random.Random(5)
    for number in range(200):
        (corpus / str(number)).write_bytes(chance.randbytes(chance.randint(1, 80)))


def _make_library() -> None:
    from datetime import UTC, datetime

    from identify.library.starter import build_starter

    build_starter(FOLDER / "good.ionlib", "fuzz", datetime(2026, 1, 5, tzinfo=UTC), replace=True)


def _make_small_library() -> None:
    from datetime import UTC, datetime

    from identify.library.build import build_from_records
    from identify.library.starter import starter_records

    few = starter_records()[:6]
    build_from_records(FOLDER / "good.ionlib", few, origin="fuzz", who="fuzz", when=datetime(2026, 1, 5, tzinfo=UTC))


def _make_result(corpus: Path) -> None:
    from identify.pipeline.files import search_pasted
    from identify.writers.results_json import report_to_dict

    _make_library()
    report = search_pasted("43 100, 58 30, 15 20", [FOLDER / "good.ionlib"], replace(SETTINGS, top=3))
    text = json.dumps(report_to_dict(report)).encode()
    (FOLDER / "good.json").write_bytes(text)
    for number in range(60):
        (corpus / str(number)).write_bytes(
            bytes([number + 1, number * 7 % 256, number * 3 % 256, number, number * 5 % 256, number])
        )
    (corpus / "raw").write_bytes(b"\0" + text[:2000])


def main() -> None:
    """Fuzz one target; libFuzzer prints executions, coverage and finds."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("target", choices=TARGETS)
    parser.add_argument("--seconds", type=int, default=200)
    parser.add_argument("--corpus", type=Path)
    options = parser.parse_args()
    corpus = options.corpus or FOLDER / "corpus"
    corpus.mkdir(parents=True, exist_ok=True)
    seed(options.target, corpus)
    target = TARGETS[options.target]

    @atheris.instrument_func
    def one(data: bytes) -> None:
        started = time.process_time()
        try:
            target(data)
        except IonwitnessError as error:
            assert error.message and len(error.message) < 5000, error
        assert time.process_time() - started < MAX_SECONDS, "a hang"

    import matchms  # noqa: F401  (its first import takes seconds that no input is to blame for)

    # A hang is judged by processor time above; by the clock only what never ends.
    flags = [
        f"-max_total_time={options.seconds}",
        "-timeout=60",
        "-rss_limit_mb=768",
        "-max_len=20000",
        "-print_final_stats=1",
    ]
    atheris.Setup([sys.argv[0], str(corpus), *flags], one)
    try:
        atheris.Fuzz()
    finally:
        shutil.rmtree(FOLDER, ignore_errors=True)


if __name__ == "__main__":
    main()
