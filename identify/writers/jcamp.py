"""Spectrum record → JCAMP-DX for mass spectra (Lampen et al. 1994; standards 5.1 of the project's reference notes)."""

from __future__ import annotations

import re

from identify.records import SpectrumRecord
from identify.writers.named_values import display_name, named_values, one_line, peak_rows

_LABELS = {
    "Formula": "MOLFORM",
    "CAS": "CAS REGISTRY NO",
    "Instrument": "SPECTROMETER/DATA SYSTEM",
    "Ionization": ".IONIZATION MODE",
    "Ionization energy": ".IONIZATION ENERGY",
    "Inlet": ".INLET",
    "Retention time": ".RETENTION TIME",
}
"""Our names → labels of the format; the others become private labels ``##$NAME=``."""
NOT_STATED = "not stated"


def render_jcamp(record: SpectrumRecord) -> str:
    """Text of one block, from ``##TITLE=`` to ``##END=``.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    str
        A complete block; peaks as ``##PEAK TABLE= (XY..XY)``, one pair per line, profile data as ``##XYPOINTS=``.

    Notes
    -----
    ``##ORIGIN`` and ``##OWNER`` are required: they hold authors and licence, which also stand under private labels of
    their own, since the format has none for them. ``$$`` would start a comment, so it is written ``$ $``.
    """
    data_class = "XYPOINTS" if record.is_profile else "PEAK TABLE"
    lines = [
        f"##TITLE= {_safe(record.title) or display_name(record)}",
        "##JCAMP-DX= 5.01",
        "##DATA TYPE= MASS SPECTRUM",
    ]
    lines += [f"##DATA CLASS= {data_class}"]
    lines += [f"##ORIGIN= {_safe(record.authors) or NOT_STATED}", f"##OWNER= {_safe(record.licence) or NOT_STATED}"]
    if record.identity.other_names:
        lines.append("##NAMES= " + "\n".join(filter(None, (_safe(name) for name in record.identity.other_names))))
    for name, value in named_values(record):
        if name not in ("Title", "Synonym"):
            lines.append(f"##{_LABELS.get(name) or '$' + _safe(name)}= {_value(name, _safe(value), record)}")
    lines += [
        "##XUNITS= M/Z",
        "##YUNITS= RELATIVE ABUNDANCE",
        "##XFACTOR= 1",
        "##YFACTOR= 1",
        f"##NPOINTS= {record.mz.size}",
    ]
    rows = peak_rows(record, ", ")
    return "\n".join([*lines, f"##{data_class}= (XY..XY)", *rows, "##END=", ""])


def render_link(title: str, blocks: list[str]) -> str:
    """Text of a LINK block around complete blocks, the format's way to hold several spectra in one file."""
    head = f"##TITLE= {_safe(title)}\n##JCAMP-DX= 5.01\n##DATA TYPE= LINK\n##BLOCKS= {len(blocks) + 1}\n"
    return head + "".join(blocks) + "##END=\n"


def _safe(text: str) -> str:
    """Text on one line in which no comment can start."""
    return one_line(re.sub(r"\$(?=\$)", "$ ", text))


def _value(name: str, value: str, record: SpectrumRecord) -> str:
    if name == "Formula":
        return " ".join(re.findall(r"\[[^\]]*\]\d*|[A-Z][a-z]?\d*|.", value))
    if name == "Ionization":
        return value + {"positive": "+", "negative": "-"}.get(record.acquisition.polarity, "")
    return value
