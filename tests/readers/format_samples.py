"""One invented spectrum, written by hand in every format the readers know: the contract suite runs over these."""

from __future__ import annotations

import base64
import zlib
from collections.abc import Callable, Sequence

import numpy as np

Pairs = Sequence[tuple[float, float]]
PAIRS: Pairs = ((42.0, 100.0), (55.0, 80.5), (70.0, 60.0))
NAME = "Inventol"


def massbank(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"  {mz:.10g} {height:.10g} 999" for mz, height in pairs)
    return f"""ACCESSION: INVNT-Invented-{name.upper()}1
RECORD_TITLE: {name}; GC-EI-Q; MS
LICENSE: CC0
CH$NAME: {name}
AC$INSTRUMENT_TYPE: GC-EI-Q
PK$NUM_PEAK: {len(pairs)}
PK$PEAK: m/z int. rel.int.
{rows}
//
"""


def msp(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"{mz:.10g} {height:.10g}" for mz, height in pairs)
    return f"Name: {name}\nNum Peaks: {len(pairs)}\n{rows}\n\n"


def jcamp(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"{mz:.10g},{height:.10g}" for mz, height in pairs)
    head = f"##TITLE= {name}\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n##XUNITS= M/Z\n##NPOINTS= {len(pairs)}\n"
    return f"{head}##PEAK TABLE= (XY..XY)\n{rows}\n##END=\n"


def table(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"{mz:.10g},{height:.10g}" for mz, height in pairs)
    return f"name: {name}\nm/z,intensity\n{rows}\n\n"


def mgf(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"{mz:.10g} {height:.10g}" for mz, height in pairs)
    return f"BEGIN IONS\nNAME={name}\n{rows}\nEND IONS\n\n"


def mzspeclib(pairs: Pairs, name: str = NAME) -> str:
    rows = "\n".join(f"{mz:.10g}\t{height:.10g}" for mz, height in pairs)
    attributes = (
        f"MS:1003061|library spectrum name={name}\nMS:1000511|ms level=1\nMS:1003059|number of peaks={len(pairs)}"
    )
    return f"<Spectrum=1>\n{attributes}\n<Peaks>\n{rows}\n"


def mzml(pairs: Pairs, name: str = NAME) -> str:
    arrays = ""
    columns = np.array(pairs, dtype="<f8").T
    labels = (("MS:1000514", "m/z array"), ("MS:1000515", "intensity array"))
    for column, (accession, label) in zip(columns, labels, strict=True):
        values = np.ascontiguousarray(column).tobytes()
        text = base64.b64encode(zlib.compress(values)).decode()
        arrays += (
            f'<binaryDataArray encodedLength="{len(text)}">'
            '<cvParam cvRef="MS" accession="MS:1000523" name="64-bit float" value=""/>'
            '<cvParam cvRef="MS" accession="MS:1000574" name="zlib compression" value=""/>'
            f'<cvParam cvRef="MS" accession="{accession}" name="{label}" value=""/><binary>{text}</binary></binaryDataArray>'
        )
    return (
        f'<spectrum index="0" id="scan=1" defaultArrayLength="{len(pairs)}">'
        '<cvParam cvRef="MS" accession="MS:1000511" name="ms level" value="1"/>'
        f'<userParam name="name" value="{name}"/>'
        f'<binaryDataArrayList count="2">{arrays}</binaryDataArrayList></spectrum>\n'
    )


MZML_HEAD = '<?xml version="1.0"?>\n<mzML xmlns="http://psi.hupo.org/ms/mzml"><run id="r"><spectrumList count="1">\n'
Writer = Callable[..., str]
FORMATS: dict[str, tuple[Writer, str, str]] = {
    "massbank": (massbank, "", ""),
    "msp": (msp, "", ""),
    "jcamp": (jcamp, "", ""),
    "table": (table, "", ""),
    "mgf": (mgf, "", ""),
    "mzspeclib": (mzspeclib, "<mzSpecLib>\nMS:1003186|library format version=1.0\n", ""),
    "mzml": (mzml, MZML_HEAD, "</spectrumList></run></mzML>\n"),
}
"""Format → (writer of one spectrum, head of a file, tail of a file)."""
TEXT_FORMATS = tuple(name for name in FORMATS if name != "mzml")


def document(name: str, *spectra: Pairs, names: Sequence[str] = ()) -> str:
    """A whole file of format `name` with these spectra."""
    write, head, tail = FORMATS[name]
    titles = names or [NAME] * len(spectra)
    return head + "".join(write(pairs, title) for pairs, title in zip(spectra, titles, strict=True)) + tail
