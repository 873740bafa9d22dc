"""How near are the starter entries to measured spectra of the same compounds?

    python tests/benchmarks/starter.py [--all] [--show NAME]

Compares each entry of `libraries/starter` with the open records of the same compound (connectivity block of the InChIKey,
same derivative, not isotope-labelled, 60–80 eV or energy not stated) by weighted cosine (m/z^1.3 I^0.53) over the m/z range
both cover. Several records of one compound: the median and the best. Prints the median over all compounds (goal ≥ 0.75), and
the worst entries.

The entries are written from memory. What this script is for: finding an entry with a wrong base peak or a missing fragment,
which is then mended from chemistry. `--show NAME` therefore names the m/z that cost most, and on which side they stand;
it prints no measured intensity, so that none can find its way into the starter files.
"""

from __future__ import annotations

import argparse
import re
import statistics
import sys
from collections import defaultdict
from collections.abc import Iterator
from pathlib import Path
from zipfile import ZipFile

ROOT = Path(__file__).resolve().parent.parent.parent
sys.path.insert(0, str(ROOT))

from identify.library.drafts import Chemistry, read_chemistry  # noqa: E402
from identify.library.starter import starter_records  # noqa: E402
from identify.readers import read_pasted  # noqa: E402
from identify.records import AlignedPeaks, CleanSpectrum, SpectrumRecord  # noqa: E402
from identify.settings import REFERENCE_CLEANING, Weighting  # noqa: E402
from identify.similarity.scores import cosine_score  # noqa: E402
from identify.spectra.align import align  # noqa: E402
from identify.spectra.cleaning import clean_spectrum  # noqa: E402
from identify.spectra.weights import peak_weights  # noqa: E402

DATA = ROOT.parent / "shared" / "data" / "massbank-2025.05.1-ei.zip"
GOAL = 0.75
Key = tuple[str, str]


def key_of(facts: Chemistry) -> Key:
    return facts.identity.inchikey[:14], facts.measured_as


def records_of(blocks: set[str]) -> Iterator[SpectrumRecord]:
    """Open records whose InChIKey begins with one of the blocks: only these are parsed, which saves most of the time."""
    with ZipFile(DATA) as archive:
        for name in archive.namelist():
            content = archive.read(name)
            key = re.search(rb"^CH\$LINK: INCHIKEY ([A-Z]{14})", content, re.MULTILINE)
            if key is not None and key[1].decode() in blocks:
                yield from read_pasted(content.decode(), name, lambda rejection: None)


def measured_spectra(wanted: set[Key]) -> dict[Key, list[tuple[str, CleanSpectrum]]]:
    found: dict[Key, list[tuple[str, CleanSpectrum]]] = defaultdict(list)
    for record in records_of({block for block, _ in wanted}):
        if record.acquisition.ionization not in ("", "EI") or record.acquisition.ms_level not in (None, 1):
            continue
        energy = record.acquisition.energy_ev
        if energy is not None and not 60 <= energy <= 80:
            continue
        facts = read_chemistry(record)
        if not facts.label and key_of(facts) in wanted:
            found[key_of(facts)].append((record.accession, clean_spectrum(record, REFERENCE_CLEANING)))
    return found


def costly_mz(aligned: AlignedPeaks, weighting: Weighting, limit: int = 14) -> str:
    """m/z where the unit vectors differ most: `+` the entry has too little there, `-` too much."""
    measured = peak_weights(aligned.mz, aligned.query, weighting)
    written = peak_weights(aligned.mz, aligned.entry, weighting)
    gap = measured / (measured @ measured) ** 0.5 - written / (written @ written) ** 0.5
    worst = sorted(range(gap.size), key=lambda position: -abs(gap[position]))[:limit]
    return " ".join(f"{'+' if gap[position] > 0 else '-'}{aligned.mz[position]:.0f}" for position in worst)


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--all", action="store_true", help="list every entry, not the worst 25")
    parser.add_argument("--show", action="append", default=[], help="name the m/z that cost most (part of a name)")
    options = parser.parse_args()
    if not DATA.is_file():
        print(f"open data not found at {DATA}: nothing compared")
        return 0
    weighting = Weighting()
    entries = [(record, read_chemistry(record)) for record in starter_records()]
    measured = measured_spectra({key_of(facts) for _, facts in entries})
    rows = []
    for record, facts in entries:
        entry = clean_spectrum(record, REFERENCE_CLEANING)
        pairs = [(name, align(spectrum, entry)) for name, spectrum in measured.get(key_of(facts), [])]
        scores = [cosine_score(pair, weighting) for _, pair in pairs]
        if scores:
            rows.append((statistics.median(scores), max(scores), len(scores), record.accession))
            if any(text.lower() in record.accession.lower() for text in options.show):
                best = pairs[scores.index(max(scores))][1]
                print(
                    f"{record.accession}: {' '.join(f'{score:.2f}' for score in scores)}  {costly_mz(best, weighting)}"
                )
    rows.sort()
    print(f"{len(entries)} starter entries, {len(rows)} with an open record of the same compound and derivative")
    median, best = statistics.median(row[0] for row in rows), statistics.median(row[1] for row in rows)
    low = sum(row[0] < GOAL for row in rows)
    print(f"weighted cosine, median over compounds: {median:.3f} (goal ≥ {GOAL}); to the best record: {best:.3f}")
    print(f"below {GOAL}: {low} of {len(rows)}")
    for score, top, n, name in rows if options.all else rows[:25]:
        print(f"  {score:.3f}  best {top:.3f}  of {n:3d}  {name.removeprefix('starter: ')}")
    return 0 if median >= GOAL else 1


if __name__ == "__main__":
    sys.exit(main())
