"""Records for tests, built from a few words: invented spectra, rounded, written from general chemical knowledge.

`build_report` gives a small, complete report: one query answered by a compound, one by an isomer group (a derivative among the
candidates), one without claim. Nothing here is reference data, and nothing is computed by the code under test.
"""

from __future__ import annotations

import random
import time
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import replace
from types import MappingProxyType

import numpy as np

from identify.records import (
    Acquisition,
    AlignedPeaks,
    Analogue,
    Candidate,
    Claim,
    ClaimLevel,
    ClassEvidence,
    CleaningStep,
    CleanSpectrum,
    Entry,
    EntryStatus,
    EvidenceItem,
    Explanation,
    FollowUp,
    Identification,
    Identity,
    LibraryState,
    MassEstimate,
    MolecularIonEstimate,
    Part,
    Peaks,
    Purity,
    Query,
    Rejection,
    Report,
    Retention,
    Source,
    SpectrumRecord,
    Verdict,
)
from identify.settings import Settings

ACETOPHENONE = {39: 7, 43: 20, 50: 18, 51: 32, 74: 4, 77: 85, 78: 8, 91: 1, 105: 100, 106: 8, 120: 30, 121: 2.7}
TOLUALDEHYDE = {39: 14, 51: 9, 63: 12, 65: 26, 89: 11, 91: 90, 92: 9, 119: 100, 120: 75, 121: 7}
PHENYLACETALDEHYDE = {39: 10, 51: 7, 63: 9, 65: 17, 91: 100, 92: 24, 103: 2, 120: 22, 121: 2}
TRIMETHYLBENZENE = {39: 9, 51: 7, 63: 4, 77: 12, 79: 7, 91: 9, 103: 5, 105: 100, 106: 9, 115: 4, 119: 14, 120: 52,
                    121: 5}  # fmt: skip
CUMENE = {39: 6, 51: 10, 77: 12, 79: 11, 91: 6, 103: 6, 105: 100, 106: 9, 115: 4, 120: 26, 121: 2.5}
SUGAR_TMS = {45: 5, 55: 4, 59: 6, 73: 100, 74: 9, 75: 13, 89: 6, 103: 17, 117: 12, 129: 14, 147: 31, 148: 5, 191: 8, 204: 9,
             205: 18, 217: 24, 218: 5, 243: 3, 305: 2, 319: 21, 320: 6, 345: 1}  # fmt: skip
CHLORO_UNKNOWN = {36: 4, 50: 9, 51: 6, 62: 5, 63: 9, 74: 12, 75: 22, 85: 5, 99: 8, 109: 18, 110: 6, 111: 12, 125: 5, 145: 16,
                  147: 10, 173: 42, 175: 27, 177: 4.5, 188: 3, 201: 100, 202: 9, 203: 64, 204: 6, 205: 10, 216: 34, 217: 4,
                  218: 22, 220: 3.5}  # fmt: skip
BACKGROUND = {55: 3, 69: 2, 73: 6, 147: 2, 207: 9, 208: 2, 281: 3}


@contextmanager
def at_most(seconds: float) -> Iterator[None]:
    """A block that takes no more processor time than this, however busy the machine is with other work."""
    before = time.process_time()
    try:
        yield
    finally:
        took = time.process_time() - before
        assert took < seconds


def build_peaks(peaks: Mapping[float, float]) -> Peaks:
    """Peaks from ``{m/z: intensity}``."""
    rows = sorted(peaks.items())
    return Peaks(np.array([mz for mz, _ in rows], float), np.array([height for _, height in rows], float))


def build_spectrum(
    peaks: Mapping[float, float], lowest_mz: int = 35, steps: Sequence[CleaningStep] = ()
) -> CleanSpectrum:
    """Nominal-mass spectrum from ``{m/z: intensity}``."""
    return CleanSpectrum(build_peaks(peaks), None, lowest_mz, tuple(steps))


def build_query(
    peaks: Mapping[float, float],
    name: str = "Unknown 1",
    *,
    query_id: str = "q1",
    source: str = "unknowns.jdx",
    line: int | None = 12,
    time_s: float | None = 399.0,
    index: float | None = 1068.0,
    steps: Sequence[CleaningStep] = (),
) -> Query:
    """Query whose record holds the peaks that cleaning kept and those it removed."""
    removed = [pair for step in steps for pair in step.removed]
    everything = sorted([*peaks.items(), *removed])
    record = SpectrumRecord(
        source=Source(source, line, 1),
        mz=np.array([mz for mz, _ in everything], float),
        intensity=np.array([height for _, height in everything], float),
        title=name,
        acquisition=Acquisition(instrument="quadrupole", instrument_type="GC-EI-Q", ionization="EI", energy_ev=70.0),
        retention=Retention(time_s=time_s, index=index, index_kind="linear" if index else "", phase="semi-polar"),
    )
    return Query(query_id, record, build_spectrum(peaks, steps=steps))


def build_entry(
    name: str,
    peaks: Mapping[float, float],
    *,
    entry_id: int = 1,
    formula: str = "C8H8O",
    smiles: str = "CC(=O)c1ccccc1",
    inchikey: str = "KWOLFJPFCHCOCG-UHFFFAOYSA-N",
    measured_as: str = "",
    formula_as_measured: str | None = None,
    licence: str = "CC BY",
    authors: str = "A. Muster, Example University",
    status: EntryStatus = EntryStatus.REFERENCE,
    index: float | None = None,
) -> Entry:
    """Library entry with an invented accession."""
    return Entry(
        id=entry_id,
        compound_id=entry_id,
        accession=f"EXAMPLE-{entry_id:05d}",
        identity=Identity(name=name, formula=formula, smiles=smiles, inchikey=inchikey),
        spectrum=build_spectrum(peaks, lowest_mz=38),
        acquisition=Acquisition(instrument_type="EI-B", ionization="EI", energy_ev=70.0),
        retention=Retention(index=index, index_kind="linear" if index else "", phase="semi-polar" if index else ""),
        measured_as=measured_as,
        formula_as_measured=formula if formula_as_measured is None else formula_as_measured,
        is_labelled=False,
        status=status,
        licence=licence,
        authors=authors,
        source="example-records.zip::folder/record.txt",
    )


def build_aligned(query: CleanSpectrum, entry: CleanSpectrum) -> AlignedPeaks:
    """Plain alignment over the common range, peak by peak."""
    lowest = max(query.lowest_mz, entry.lowest_mz)
    mine = {int(mz): value for mz, value in zip(query.nominal.mz, query.nominal.relative, strict=True) if mz >= lowest}
    theirs = {
        int(mz): value for mz, value in zip(entry.nominal.mz, entry.nominal.relative, strict=True) if mz >= lowest
    }
    axis = sorted({*mine, *theirs})
    return AlignedPeaks(
        np.array(axis, float),
        np.array([mine.get(mz, 0.0) for mz in axis]),
        np.array([theirs.get(mz, 0.0) for mz in axis]),
        lowest,
    )


def build_evidence(
    kind: str = "molecular ion", verdict: Verdict = Verdict.AGREES, log_odds: float = 1.62
) -> EvidenceItem:
    """One evidence item with words in every field."""
    speaks = verdict in (Verdict.AGREES, Verdict.CONFLICTS)
    reasons = {
        Verdict.AGREES: "The query shows a peak where this formula puts the molecular ion.",
        Verdict.CONFLICTS: "The query has no peak where this formula puts the molecular ion, and its entry shows one.",
        Verdict.INCONCLUSIVE: "The peak is too small to judge.",
        Verdict.NOT_ASSESSED: "The query states no value.",
    }
    return EvidenceItem(
        kind,
        verdict,
        reasons[verdict],
        observed="m/z 120, 30 % of the base peak" if speaks else "",
        expected="m/z 120" if speaks else "",
        uncertainty="± 1" if speaks else "",
        log_odds=log_odds if speaks else 0.0,
        source="counted on open records (invented for this test)" if speaks else "",
    )


def build_evidence_list(conflicts: bool = False) -> tuple[EvidenceItem, ...]:
    """Seven items with all four verdicts, as a real candidate has them."""
    mass = build_evidence() if not conflicts else build_evidence(verdict=Verdict.CONFLICTS, log_odds=-2.35)
    return (
        mass,
        EvidenceItem(
            "isotope pattern", Verdict.AGREES, "M+1 and M+2 fit the formula.", "M+1 9.0 %, M+2 below the floor",
            "M+1 8.8 %, M+2 0.5 %", "± 1.4 % (absolute)", 0.48, "binomial pattern; error model of this library",
        ),
        EvidenceItem(
            "carbon count", Verdict.INCONCLUSIVE if conflicts else Verdict.AGREES,
            "The 90 % interval of the carbon count holds the formula's eight." if not conflicts
            else "M+1 is too weak for a carbon count that would tell these formulas apart.",
            "7–9 carbons", "8 carbons", "90 % interval", 0.0 if conflicts else 0.31, "(M+1)/M, 1.08 % per carbon",
        ),
        EvidenceItem(
            "logical losses", Verdict.AGREES, "The losses from the molecular ion are common for this class.",
            "M−15 (105), M−43 (77)", "M−15, M−43", "", 0.22, "common practice",
        ),
        EvidenceItem(
            "retention index", Verdict.CONFLICTS if conflicts else Verdict.AGREES,
            "The index is far outside the window for a semi-polar phase." if conflicts
            else "The index lies within 20 units of the entry's on the same phase class.",
            "1068 (semi-polar)", "1126 (semi-polar)" if conflicts else "1065 (semi-polar)", "± 20", -1.9 if conflicts else 1.04,
            "published window",
        ),
        EvidenceItem("accurate mass", Verdict.NOT_ASSESSED, "The query has nominal masses only."),
        EvidenceItem("purity", Verdict.INCONCLUSIVE, "A minor second component is possible: m/z 207 is left over.", "207 (9 %)"),
    )  # fmt: skip


def build_explanation(evidence: Sequence[EvidenceItem] = (), match: float = 3.27) -> Explanation:
    """Log-odds as a sum of the match and of the evidence that speaks."""
    similar = (
        Explanation("cosine similarity", 0.62 * match, "0.981: typical of the right compound"),
        Explanation("reverse-match similarity", 0.21 * match, "0.985"),
        Explanation("distance to the next candidate", match - 0.83 * match, "0.19 in cosine"),
    )
    parts = tuple(Explanation(item.kind, item.log_odds, item.reason) for item in evidence if item.log_odds)
    first = Explanation("fragment match", sum(part.value for part in similar), parts=similar)
    second = Explanation("evidence", sum(part.value for part in parts), parts=parts)
    return Explanation("log-odds", first.value + second.value, "1.00 or more favours the candidate", (first, second))


def build_candidate(
    rank: int = 1,
    name: str = "Acetophenone",
    *,
    query: Query | None = None,
    peaks: Mapping[float, float] = MappingProxyType(ACETOPHENONE),
    cosine: float = 0.981,
    reverse: float = 0.985,
    probability: float = 0.963,
    conflicts: bool = False,
    evidence: tuple[EvidenceItem, ...] | None = None,
    library: str = "lab.ionlib",
    notes: tuple[str, ...] = (),
    **entry: object,
) -> Candidate:
    """Candidate; remaining words go to `build_entry`."""
    built = build_entry(name, peaks, entry_id=rank, **entry)  # type: ignore[arg-type]
    asked = query or build_query(ACETOPHENONE)
    items = build_evidence_list(conflicts) if evidence is None else evidence
    return Candidate(
        rank=rank,
        entry=built,
        library=library,
        aligned=build_aligned(asked.spectrum, built.spectrum),
        cosine=cosine,
        reverse=reverse,
        evidence=items,
        probability=probability,
        explanation=build_explanation(items, match=4.0 * cosine),
        n_entries=2 if rank == 1 else 1,
        notes=notes,
    )


def build_mass_estimate(mass: int = 120) -> MolecularIonEstimate:
    """Distribution over three masses and "not observed"."""
    return MolecularIonEstimate(
        (
            MassEstimate(mass, 0.91, ("highest cluster of the spectrum", "mass differences of 8 neighbours")),
            MassEstimate(mass + 15, 0.04, ("a loss of 15 would lead to the highest cluster",)),
            MassEstimate(mass + 28, 0.02, ("a loss of 28 would lead to the highest cluster",)),
        ),
        0.05,
        "Peak logic and neighbours agree.",
    )


def build_identification(query_id: str = "q1") -> Identification:
    """A query answered by one compound: claim `supported`, four candidates."""
    steps = (
        CleaningStep("duplicate m/z", "no m/z occurs twice", 15, 15),
        CleaningStep(
            "air and water", "m/z 28 and 32 stand in the ratio of air", 15, 13, ((28.0, 4120.0), (32.0, 1015.0)),
        ),
        CleaningStep("noise floor", "below 0.05 % of the base peak", 13, 12, ((64.0, 3.1),)),
    )  # fmt: skip
    query = build_query(ACETOPHENONE, query_id=query_id, steps=steps)
    methyl = {mz: value for mz, value in ACETOPHENONE.items() if mz not in (43, 91)} | {107: 2, 119: 6}
    return Identification(
        query,
        build_mass_estimate(),
        0.988,
        Claim(
            ClaimLevel.SUPPORTED,
            "Acetophenone, supported by the library match, its molecular ion and its retention index.",
            0.963,
            ("Acetophenone",),
            0.963,
            0.9715,
            0.997,
            unlisted_isomers=3,
            msi_2007="2",
            schymanski_2014="2a",
        ),
        (
            build_candidate(1, query=query, index=1065.0),
            build_candidate(2, "Benzoyl analogue with a name long enough to need a second line in any table", query=query,
                            peaks=methyl, cosine=0.874, reverse=0.902, probability=0.014, conflicts=True,
                            smiles="O=Cc1ccccc1C", licence="CC BY-SA", authors="B. Beispiel, Sample Institute",
                            inchikey="BTFQKIATRPGRBS-UHFFFAOYSA-N"),
            build_candidate(3, "4-Methylbenzaldehyde", query=query, peaks=TOLUALDEHYDE, cosine=0.512, reverse=0.588,
                            probability=0.004, conflicts=True, smiles="Cc1ccc(C=O)cc1",
                            inchikey="FXLOVSHXALFLKQ-UHFFFAOYSA-N", licence="CC0"),
            build_candidate(4, "Phenylacetaldehyde", query=query, peaks=PHENYLACETALDEHYDE, cosine=0.407, reverse=0.455,
                            probability=0.002, evidence=(), smiles="O=CCc1ccccc1",
                            inchikey="DTUQWGWMVIHBKE-UHFFFAOYSA-N"),
        ),
        (
            FollowUp("measure an authentic standard of acetophenone", "It is one step short of confirmed.", ("Acetophenone",),
                     "The same retention time and spectrum confirm it; a difference excludes it.", 0.16),
        ),
    )  # fmt: skip


def build_isomer_identification(query_id: str = "q2") -> Identification:
    """A query that isomers answer equally well; five candidates of one formula and a derivative far behind."""
    steps = (
        CleaningStep(
            "column bleed", "siloxane pattern 207, 208, 281 at 9 : 2 : 3", 19, 13,
            ((73.0, 310.0), (147.0, 96.0), (207.0, 472.0), (208.0, 95.0), (281.0, 140.0), (282.0, 41.0)),
        ),
    )  # fmt: skip
    query = build_query(
        TRIMETHYLBENZENE, "Unknown 2", query_id=query_id, line=31, time_s=431.4, index=None, steps=steps
    )
    isomers = (
        ("1,2,4-Trimethylbenzene", "Cc1ccc(C)c(C)c1", "GWHJZXXIDMPWGX-UHFFFAOYSA-N", 0.978, 0.36),
        ("1,3,5-Trimethylbenzene", "Cc1cc(C)cc(C)c1", "AUHZEENZYGFFBQ-UHFFFAOYSA-N", 0.974, 0.31),
        ("1,2,3-Trimethylbenzene", "Cc1cccc(C)c1C", "FYGHSUNMUKGBRK-UHFFFAOYSA-N", 0.971, 0.20),
        ("4-Ethyltoluene", "CCc1ccc(C)cc1", "JRLPEMVDPFPYPJ-UHFFFAOYSA-N", 0.931, 0.09),
    )
    random_source = random.Random(7)
    candidates = [
        build_candidate(
            place, name, query=query, formula="C9H12", smiles=smiles, inchikey=key, cosine=cosine, reverse=cosine + 0.006,
            probability=probability,
            peaks={mz: max(0.5, value * random_source.uniform(0.8, 1.2)) for mz, value in TRIMETHYLBENZENE.items()},
        )
        for place, (name, smiles, key, cosine, probability) in enumerate(isomers, start=1)
    ]  # fmt: skip
    candidates.append(
        build_candidate(5, "Cumene", query=query, formula="C9H12", smiles="CC(C)c1ccccc1", peaks=CUMENE, cosine=0.883,
                        reverse=0.894, probability=0.012, inchikey="RWGFKTVRMDUZSP-UHFFFAOYSA-N", conflicts=True),
    )  # fmt: skip
    candidates.append(
        build_candidate(6, "Glucose", query=query, formula="C6H12O6", measured_as="1 MEOX 5 TMS",
                        formula_as_measured="C22H55NO6Si5", smiles="OCC(O)C(O)C(O)C(O)C=O", peaks=SUGAR_TMS, cosine=0.061,
                        reverse=0.07, probability=0.0001, evidence=(), inchikey="GZCGUPFRVQAUEE-UHFFFAOYSA-N",
                        status=EntryStatus.OWN_STANDARD, licence="own", authors="Own laboratory"),
    )  # fmt: skip
    return Identification(
        query,
        build_mass_estimate(),
        0.996,
        Claim(
            ClaimLevel.ISOMER_GROUP,
            "One of the isomers of C9H12 that these data cannot tell apart: 1,2,4-, 1,3,5- or 1,2,3-trimethylbenzene or "
            "4-ethyltoluene; two more isomers have no entry.",
            0.972,
            tuple(row[0] for row in isomers),
            0.36,
            0.972,
            0.999,
            unlisted_isomers=2,
            msi_2007="2",
            schymanski_2014="3",
        ),
        tuple(candidates),
        (
            FollowUp("retention index on a semi-polar phase", "The isomers' indices differ by 15 units or more there.",
                     tuple(row[0] for row in isomers), "Each isomer has a value of its own; the nearest one within 5 units is "
                     "supported.", 1.21),
            FollowUp("measure an authentic standard of 1,2,4-trimethylbenzene", "It is the most probable of the group.",
                     ("1,2,4-Trimethylbenzene",), "The same retention time confirms it.", 0.65),
        ),
    )  # fmt: skip


def build_open_identification(query_id: str = "q3") -> Identification:
    """A query whose compound has no entry: no claim, two poor candidates, background ions left over."""
    query = build_query(
        {**CHLORO_UNKNOWN, **BACKGROUND}, "Unknown 3", query_id=query_id, line=58, time_s=None, index=None
    )
    neighbour = {mz + (14 if mz > 140 else 0): value for mz, value in CHLORO_UNKNOWN.items()}
    return Identification(
        query,
        build_mass_estimate(216),
        0.07,
        Claim(
            ClaimLevel.NO_CLAIM,
            "No claim: nothing in the library fits; two chlorine atoms and a molecular mass of 216 are likely.",
            0.93,
            (),
            0.02,
            0.05,
            0.31,
            msi_2007="4",
            schymanski_2014="5",
        ),
        (
            build_candidate(1, "Dichloroanisole analogue", query=query, peaks=neighbour, formula="C10H10Cl2O",
                            smiles="COc1c(Cl)cccc1Cl", cosine=0.587, reverse=0.741, probability=0.02, conflicts=True,
                            inchikey="KZLMCDNAVVJKPX-UHFFFAOYSA-N",
                            notes=("Its spectrum is like the query's shifted by 14 (CH2).",)),
            build_candidate(2, "Structure not given", query=query, peaks=SUGAR_TMS, formula="", smiles="", inchikey="",
                            formula_as_measured="", measured_as="n TMS", cosine=0.204, reverse=0.21, probability=0.0,
                            evidence=(build_evidence(verdict=Verdict.NOT_ASSESSED),), licence="", authors=""),
        ),
        (
            FollowUp("soft ionization", "The molecular ion is likely but not sure.", (), "The molecular mass.", 0.4),
            FollowUp("blank run", "m/z 207 and 281 may be background.", (), "Ions found in the blank are not the compound's.",
                     0.2),
        ),
        ("The query may hold column bleed (m/z 207, 281) that its pattern was too weak to remove.",),
        Purity(
            Verdict.CONFLICTS,
            "Two entries together explain the query far better than one.",
            (Part("Ethyl hexanoate", "T002", 0.64), Part("Phenol", "T003", 0.36)),
            0.81,
            (0.4, 0.05),
            Peaks([94.0, 105.0, 120.0], [8.0, 40.0, 5.5]),
            ("siloxane",),
        ),
        (ClassEvidence("ester", 0.71, ("Ethyl hexanoate",), ("rearrangement ion 88 with 101 (common practice)",)),),
        (Analogue("Ethyl hexanoate", "T002", 14, "plus CH2", 0.83),),
    )  # fmt: skip


def build_report(*identifications: Identification, rejected: bool = True) -> Report:
    """Report of three queries (or of those given) and two rejected inputs."""
    shown = identifications or (build_identification(), build_isomer_identification(), build_open_identification())
    rejections = (
        Rejection(
            "unknowns.jdx", 77, "peak count does not match", "43 peaks", "44 peaks (##NPOINTS)", "Mend the block."
        ),
        Rejection("old.csv", None, "empty file", "0 bytes", "a table of m/z and intensity"),
    )
    return Report(
        program="ionwitness",
        version="0.1.0",
        settings=Settings().as_dict(),
        libraries=(LibraryState("lab.ionlib", "5f0c9a7e41d28b63" * 4, 12084, 9310),),
        identifications=tuple(shown),
        rejected=rejections if rejected else (),
    )


def build_large_report(n_queries: int = 200, n_candidates: int = 25, n_peaks: int = 90) -> Report:
    """Report as big as a busy run's: many queries, full candidate lists, full spectra (seeded)."""
    source = random.Random(11)
    found = []
    for number in range(n_queries):
        peaks = {mz: source.expovariate(0.2) + 0.2 for mz in source.sample(range(40, 420), n_peaks)}
        query = build_query(peaks, f"Unknown {number + 1}", query_id=f"q{number + 1}", line=number + 1)
        candidates = tuple(
            build_candidate(
                place, f"Compound {number}-{place}", query=query, cosine=0.95 - 0.02 * place, reverse=0.96 - 0.02 * place,
                probability=0.8 / place**3, smiles="C" * (1 + (number * 7 + place) % 30),
                peaks={mz: value * source.uniform(0.4, 1.6) for mz, value in peaks.items() if source.random() < 0.8},
            )
            for place in range(1, n_candidates + 1)
        )  # fmt: skip
        found.append(replace(build_identification(), query=query, candidates=candidates))
    return build_report(*found)


PUBLISHED_ACETOPHENONE = {
    39: 8.0, 43: 21.9, 50: 20.2, 51: 41.9, 63: 3.8, 77: 100.0, 78: 10.4, 105: 80.8, 106: 6.0, 120: 23.1, 121: 2.0,
}  # fmt: skip
"""Public-domain JCAMP-DX spectrum, standards.md 5.1 [F]: M+1/M is 8.66 %, theory 8.78 %."""
