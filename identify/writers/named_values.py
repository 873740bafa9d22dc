"""A spectrum record as name/value pairs: the metadata that every open format carries, under one set of names.

The names are spellings that `identify.readers.named_fields` knows, so that what is written is read back into the same
fields; a format replaces those it has labels of its own for.
"""

from __future__ import annotations

import numpy as np

from identify.chem.formula import parse_formula
from identify.errors import FormulaError
from identify.records import SpectrumRecord

_INDEX_NAMES = {"kovats": "Kovats index", "linear": "Linear index", "lee": "Lee index"}
MAX_NAME_CHARS = 60


def number_text(value: float) -> str:
    """Shortest decimal text that reads back as `value`, without an exponent.

    Examples
    --------
    >>> number_text(43.0), number_text(1e-7), number_text(100.25)
    ('43', '0.0000001', '100.25')
    """
    return np.format_float_positional(float(value), trim="-")


def peak_rows(record: SpectrumRecord, separator: str) -> list[str]:
    """One row ``m/z<separator>intensity`` per peak, in the order of the record, without loss (see `number_text`)."""
    pairs = zip(record.mz.tolist(), record.intensity.tolist(), strict=True)
    return [f"{number_text(mz)}{separator}{number_text(height)}" for mz, height in pairs]


def one_line(text: str) -> str:
    """`text` with line breaks and other control characters as blanks, and none of them at its ends.

    Examples
    --------
    >>> one_line(" two\\nlines ")
    'two lines'
    """
    return "".join(letter if letter.isprintable() else " " for letter in text).strip()


def field_name(text: str) -> str:
    """`text` as a name in front of a colon or equals sign: it starts with a letter and holds neither sign.

    Examples
    --------
    >>> field_name("CH$LINK KEGG"), field_name("1: odd")
    ('CH$LINK KEGG', 'x 1  odd')
    """
    name = one_line(text.replace(":", " ").replace("=", " "))[:MAX_NAME_CHARS].strip()
    return name if name[:1].isascii() and name[:1].isalpha() else f"x {name}".strip()


def display_name(record: SpectrumRecord) -> str:
    """Name of the compound, else the title, else the accession; ``not named`` without any."""
    return one_line(record.identity.name or record.title or record.accession) or "not named"


def exact_mass_text(formula: str) -> str:
    """Monoisotopic mass of a formula in Da with five decimals; empty where it cannot be read.

    Examples
    --------
    >>> exact_mass_text("C5H12O"), exact_mass_text("?")
    ('88.08882', '')
    """
    try:
        return f"{parse_formula(formula).monoisotopic_mass:.5f}" if formula else ""
    except FormulaError:
        return ""


def named_values(record: SpectrumRecord) -> list[tuple[str, str]]:
    """Metadata of a record as (name, value) pairs on one line each; what the record does not state is left out.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    list of (str, str)
        In a fixed order, ``Name`` first; what repeats (synonyms, comments, lines of an extra value) repeats its name.
    """
    identity, how, retention = record.identity, record.acquisition, record.retention
    pairs = [("Name", identity.name), ("Title", record.title), *[("Synonym", name) for name in identity.other_names]]
    pairs += [("Formula", identity.formula), ("SMILES", identity.smiles), ("InChI", identity.inchi)]
    pairs += [("InChIKey", identity.inchikey), ("CAS", identity.cas), ("Accession", record.accession)]
    pairs += [("Instrument", how.instrument), ("Instrument type", how.instrument_type), ("Ionization", how.ionization)]
    pairs += [("Ionization energy", _quantity(how.energy_ev, " eV")), ("Polarity", how.polarity), ("Inlet", how.inlet)]
    pairs += [("MS level", "" if how.ms_level is None else str(how.ms_level))]
    pairs += [("Lowest m/z", _quantity(how.lowest_mz)), ("Highest m/z", _quantity(how.highest_mz))]
    pairs += [("Retention time", _quantity(retention.time_s, " s"))]
    pairs += [(_INDEX_NAMES.get(retention.index_kind, "Retention index"), _quantity(retention.index))]
    pairs += [("Column", retention.column), ("Column phase", retention.phase), ("Derivative", record.derivative)]
    pairs += [("Licence", record.licence), ("Authors", record.authors), ("SPLASH", record.splash)]
    pairs += [("Profile", "yes" if record.is_profile else "")]
    pairs += [("Comment", comment) for comment in record.comments]
    pairs += [(field_name(name), line) for name, value in record.extra.items() for line in value.split("\n")]
    tidy = [(name, one_line(value)) for name, value in pairs]
    return [(name, value) for name, value in tidy if value]


def _quantity(value: float | None, unit: str = "") -> str:
    return "" if value is None else f"{number_text(value)}{unit}"
