"""Spectrum records → mzSpecLib 1.0 text (HUPO-PSI; standards 5.5 of the project's reference notes).

The format takes spectra for second-level ones unless told otherwise, so level 1 and the ionization are stated with each. A
precursor m/z and a charge of the analyte, which its rules mention (as MAY and SHOULD in the validator of the `mzspeclib`
package), are not written: an electron-ionization spectrum has no precursor, and the analyte is the neutral molecule.
"""

from __future__ import annotations

from identify.records import SpectrumRecord
from identify.writers.named_values import display_name, exact_mass_text, named_values, one_line, peak_rows

_SPECTRUM_TERMS = {"SPLASH": "MS:1002599|splash key"}
_ANALYTE_TERMS = {
    "Formula": "MS:1000866|molecular formula",
    "SMILES": "MS:1000868|SMILES string",
    "InChI": "MS:1003403|InChI",
    "InChIKey": "MS:1002894|InChIKey",
}
_ANALYTE_NAMES = ("Name", "Synonym", "CAS")
_IONIZATION = {
    "EI": "MS:1000389|electron ionization",
    "CI": "MS:1000071|chemical ionization",
}
_POLARITY = {"positive": "MS:1000130|positive scan", "negative": "MS:1000129|negative scan"}


def render_mzspeclib_head(name: str) -> str:
    """First lines of a library file: format version and library name."""
    return (
        f"<mzSpecLib>\nMS:1003186|library format version=1.0\nMS:1003188|library name={one_line(name) or 'spectra'}\n"
    )


def render_mzspeclib(record: SpectrumRecord, number: int = 1) -> str:
    """Text of one library spectrum, without the head of the file.

    Parameters
    ----------
    record : SpectrumRecord
    number : int
        Key of the spectrum in its file, 1 or more, unique there.

    Returns
    -------
    str
        ``<Spectrum=N>``, ``<Analyte=1>`` and ``<Peaks>`` sections, and a blank line.
    """
    how = record.acquisition
    title = one_line(record.title) or display_name(record)
    lines = [
        f"<Spectrum={number}>",
        f"MS:1003061|library spectrum name={title}",
        f"MS:1000511|ms level={how.ms_level or 1}",
    ]
    lines += [
        f"MS:1003059|number of peaks={record.mz.size}",
        "MS:1003072|spectrum origin type=MS:1003073|observed spectrum",
    ]
    lines.append("MS:1003065|spectrum aggregation type=MS:1003066|singleton spectrum")
    analyte: list[str] = []
    group = 0
    for name, value in named_values(record):
        if name in ("Title", "MS level"):
            continue
        if name == "Ionization" and value in _IONIZATION:
            lines.append(f"MS:1000008|ionization type={_IONIZATION[value]}")
        elif name == "Polarity" and value in _POLARITY:
            lines.append(f"MS:1000465|scan polarity={_POLARITY[value]}")
        elif name in _SPECTRUM_TERMS:
            lines.append(f"{_SPECTRUM_TERMS[name]}={value}")
        elif name in _ANALYTE_TERMS:
            analyte.append(f"{_ANALYTE_TERMS[name]}={value}")
            mass = exact_mass_text(value) if name == "Formula" else ""
            analyte += [f"MS:1000224|molecular mass={mass}"] * bool(mass)
        else:
            group += 1
            target = analyte if name in _ANALYTE_NAMES else lines
            target += _grouped(group, name, value)
    rows = peak_rows(record, "\t")
    return "\n".join([*lines, "<Analyte=1>", *analyte, "<Peaks>", *rows, "", ""])


def _grouped(group: int, name: str, value: str) -> list[str]:
    if name == "Retention time":
        seconds = value.removesuffix(" s")
        return [f"[{group}]MS:1000894|retention time={seconds}", f"[{group}]UO:0000000|unit=UO:0000010|second"]
    return [f"[{group}]MS:1003275|other attribute name={name}", f"[{group}]MS:1003276|other attribute value={value}"]
