"""Spectrum record → MassBank record, format 2.6.0 (13 May 2022; standards 5.4 of the project's reference notes).

Validating: what the format requires must be there in the form it wants, or an error lists everything that is missing.
"""

from __future__ import annotations

import re

from identify.errors import FormatError, quote
from identify.records import SpectrumRecord
from identify.spectra.splash import compute_splash
from identify.writers.named_values import exact_mass_text, number_text, one_line

_ACCESSION = re.compile(r"[A-Za-z0-9]+-[A-Za-z0-9_]{1,32}-[A-Z0-9_]{1,64}")
_CONTRIBUTOR = re.compile(r"[A-Za-z0-9_]{1,32}")
_DATE = re.compile(r"\d{4}\.\d{2}\.\d{2}(?: \(.*\))?")
_LICENCE = re.compile(r"CC0|CC BY(?:-NC)?(?:-SA)?|dl-de/by-2-0")
"""The format document's list, and the one further licence met in the open release 2025.05.1."""
_INSTRUMENT_TYPE = re.compile(r"(?:[A-Z]+-)?(?:EI|CI|FI|FD|ESI|APCI|APPI|MALDI|FAB|LDI|SI|DART|DESI|LIT|TSP)-[A-Z0-9]+")
_TAGS = (
    *("ACCESSION", "RECORD_TITLE", "DATE", "AUTHORS", "LICENSE", "COPYRIGHT", "PUBLICATION", "PROJECT", "COMMENT"),
    *("CH$NAME", "CH$COMPOUND_CLASS", "CH$FORMULA", "CH$EXACT_MASS", "CH$SMILES", "CH$IUPAC", "CH$LINK"),
    *("SP$SCIENTIFIC_NAME", "SP$LINEAGE", "SP$LINK", "SP$SAMPLE", "AC$INSTRUMENT", "AC$INSTRUMENT_TYPE"),
    *("AC$MASS_SPECTROMETRY", "AC$CHROMATOGRAPHY", "AC$GENERAL", "AC$ION_MOBILITY", "MS$FOCUSED_ION"),
    *("MS$DATA_PROCESSING",),
)
"""Tags before the peaks, in the order that the format fixes."""
_SORTED = frozenset({"CH$LINK", "AC$MASS_SPECTROMETRY", "AC$CHROMATOGRAPHY", "MS$FOCUSED_ION"})
_LEADING = ("MS_TYPE", "ION_MODE")
_INDEX_SUBTAGS = {"kovats": "KOVATS_RTI", "lee": "LEE_RTI"}
NOTHING = "N/A"


def render_massbank(record: SpectrumRecord, *, date: str = "", contributor: str = "") -> str:
    """Text of one record, from ``ACCESSION`` to ``//``.

    Parameters
    ----------
    record : SpectrumRecord
        Its `extra` may hold further tags under the names the reader gives them (``DATE``, ``CH$LINK KEGG``); other extra
        values become comments.
    date : str
        ``YYYY.MM.DD``, for a record that does not hold its own.
    contributor : str
        Contributor part of the accession for a record whose accession does not have the form of the format; its own one is
        then kept in a comment.

    Returns
    -------
    str
        Peaks sorted by m/z, relative intensities 1–999, SPLASH computed.

    Raises
    ------
    FormatError
        Naming everything that the format requires and the record does not have: accession, date, authors, licence, name,
        formula, instrument type; positive peaks.

    Notes
    -----
    What may be unknown is written ``N/A`` (structure, class, instrument). An electron-ionization record that states no
    polarity or level is written as positive and MS, which is what the method gives.
    """
    values = _collect(record, date, contributor)
    faults = _find_faults(record, values)
    if faults:
        raise FormatError(
            "record for the MassBank format",
            where=str(record.source),
            found="; ".join(faults),
            expected="what format 2.6.0 requires",
            hint="Complete the entry, or export it in another format.",
        )
    lines = [f"{tag}: {line}" for tag in _TAGS for line in _ordered(tag, values)]
    lines.append(f"PK$SPLASH: {compute_splash(record.mz, record.intensity)}")
    annotation = record.extra.get("PK$ANNOTATION", "")
    if annotation and not annotation.endswith("(cut)"):
        header, *rows = annotation.split("\n")
        lines += [f"PK$ANNOTATION: {one_line(header)}", *[f"  {one_line(row)}" for row in rows]]
    return "\n".join([*lines, *_peak_lines(record), "//", ""])


def _collect(record: SpectrumRecord, date: str, contributor: str) -> dict[str, list[str]]:
    identity, how = record.identity, record.acquisition
    values: dict[str, list[str]] = {tag: [] for tag in _TAGS}
    comments = list(record.comments)
    accession = one_line(record.accession)
    if not _ACCESSION.fullmatch(accession) and _CONTRIBUTOR.fullmatch(contributor):
        comments.append(f"accession of the source: {accession or 'none'}")
        accession = f"MSBNK-{contributor}-{re.sub('[^A-Z0-9_]', '_', accession.upper())[:64] or 'UNNAMED'}"
    values["ACCESSION"] = [accession]
    values["RECORD_TITLE"] = [record.title or f"{identity.name}; {how.instrument_type}; MS"]
    values["AUTHORS"], values["LICENSE"] = [record.authors], [record.licence]
    values["CH$NAME"] = [identity.name, *identity.other_names]
    values["CH$FORMULA"] = [identity.formula]
    values["CH$SMILES"], values["CH$IUPAC"] = [identity.smiles or NOTHING], [identity.inchi or NOTHING]
    if "CH$LINK CAS" not in record.extra:
        values["CH$LINK"] += [f"CAS {identity.cas}"] * bool(identity.cas)
    values["CH$LINK"] += [f"INCHIKEY {identity.inchikey}"] * bool(identity.inchikey)
    values["AC$INSTRUMENT"], values["AC$INSTRUMENT_TYPE"] = [how.instrument or NOTHING], [how.instrument_type]
    values["AC$MASS_SPECTROMETRY"] = _spectrometry(record)
    values["AC$CHROMATOGRAPHY"] = _chromatography(record)
    values["MS$FOCUSED_ION"] = [f"DERIVATIVE_TYPE {record.derivative}"] * bool(record.derivative)
    for name, text in record.extra.items():
        tag, _, subtag = name.partition(" ")
        for line in text.split("\n"):
            if tag == "PK$ANNOTATION":
                continue
            if tag in values:
                values[tag].append(f"{subtag} {line}".strip())
            else:
                comments.append(f"{name}: {line}")
    values["COMMENT"] = comments + values["COMMENT"]
    values["DATE"] = values["DATE"] or [date]
    values["CH$COMPOUND_CLASS"] = values["CH$COMPOUND_CLASS"] or [NOTHING]
    values["CH$EXACT_MASS"] = values["CH$EXACT_MASS"] or [exact_mass_text(identity.formula)]
    return {tag: [text for text in map(one_line, texts) if text] for tag, texts in values.items()}


def _spectrometry(record: SpectrumRecord) -> list[str]:
    how = record.acquisition
    is_electron = how.ionization == "EI"
    level = how.ms_level or (1 if is_electron else None)
    mode = how.polarity.upper() or ("POSITIVE" if is_electron else "")
    lines = [] if level is None else ["MS_TYPE MS" if level == 1 else f"MS_TYPE MS{level}"]
    lines += [f"ION_MODE {mode}"] * bool(mode)
    if how.ionization and how.ionization not in how.instrument_type.upper().split("-"):
        lines.append(f"IONIZATION {how.ionization}")
    if how.energy_ev is not None:
        lines.append(f"IONIZATION_ENERGY {number_text(how.energy_ev)} eV")
    if how.lowest_mz is not None and how.highest_mz is not None:
        lines.append(f"MASS_RANGE_M/Z {number_text(how.lowest_mz)}-{number_text(how.highest_mz)}")
    return lines


def _chromatography(record: SpectrumRecord) -> list[str]:
    retention = record.retention
    lines = [f"COLUMN_NAME {retention.column}"] * bool(retention.column)
    if record.acquisition.inlet and record.acquisition.inlet != record.acquisition.instrument_type.partition("-")[0]:
        lines.append(f"INLET_TYPE {record.acquisition.inlet}")
    if retention.index is not None:
        subtag = _INDEX_SUBTAGS.get(retention.index_kind, "RETENTION_INDEX")
        linear = " (linear)" if retention.index_kind == "linear" else ""
        lines.append(f"{subtag} {number_text(retention.index)}{linear}")
    if retention.time_s is not None:
        lines.append(f"RETENTION_TIME {number_text(retention.time_s)} sec")
    return lines


def _find_faults(record: SpectrumRecord, values: dict[str, list[str]]) -> list[str]:
    faults = []
    wanted = {
        "ACCESSION": (_ACCESSION, "ID-contributor-NUMBER"),
        "DATE": (_DATE, "YYYY.MM.DD"),
        "AUTHORS": (re.compile(r".+"), "at least one"),
        "LICENSE": (_LICENCE, "a licence that the format names"),
        "CH$NAME": (re.compile(r".+"), "a name"),
        "CH$FORMULA": (re.compile(r"\S+"), "a formula"),
        "CH$EXACT_MASS": (re.compile(r"\d+(?:\.\d+)?"), "a mass, or a formula to compute it from"),
        "AC$INSTRUMENT_TYPE": (_INSTRUMENT_TYPE, "separation-ionization-analyser"),
    }
    for tag, (pattern, form) in wanted.items():
        text = values[tag][0] if values[tag] else ""
        if not pattern.fullmatch(text):
            faults.append(f"{tag} {quote(text) if text else 'missing'} ({form})")
    for subtag in _LEADING:
        if not any(line.startswith(f"{subtag} ") for line in values["AC$MASS_SPECTROMETRY"]):
            faults.append(f"AC$MASS_SPECTROMETRY {subtag} missing")
    if not record.mz.size or record.mz.min() <= 0 or record.intensity.min() <= 0:
        faults.append("peaks that are not all positive")
    return faults


def _ordered(tag: str, values: dict[str, list[str]]) -> list[str]:
    lines = values[tag]
    if tag not in _SORTED:
        return lines
    # By subtag only: several values of one subtag keep their order.
    return sorted(lines, key=_subtag_rank)


def _subtag_rank(line: str) -> tuple[int, str]:
    subtag = line.partition(" ")[0]
    return (_LEADING.index(subtag), "") if subtag in _LEADING else (len(_LEADING), subtag.upper())


def _peak_lines(record: SpectrumRecord) -> list[str]:
    order = record.mz.argsort(kind="stable")
    mz, intensity = record.mz[order], record.intensity[order]
    relative = (intensity * (999.0 / intensity.max())).round().clip(1, 999).astype(int)
    rows = [
        f"  {number_text(mass)} {number_text(height)} {rank}"
        for mass, height, rank in zip(mz, intensity, relative.tolist(), strict=True)
    ]
    return [f"PK$NUM_PEAK: {len(rows)}", "PK$PEAK: m/z int. rel.int.", *rows]
