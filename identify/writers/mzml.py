"""Spectrum records → mzML 1.1, written directly: the few elements that centroided or profile scans with metadata need.

Names and accession numbers of terms were checked in psi-ms.obo 4.1.258 (as vendored by psims 1.4.0). What the controlled
vocabulary has no term for (retention index, energy, derivative, licence …) goes into user parameters.
"""

from __future__ import annotations

import base64
import zlib
from collections.abc import Sequence
from xml.sax.saxutils import quoteattr

import numpy as np

from identify.records import FloatArray, SpectrumRecord
from identify.writers.named_values import named_values, number_text

_IONIZATION = {"EI": ("MS:1000389", "electron ionization"), "CI": ("MS:1000071", "chemical ionization")}
_TERMS = {
    "Title": ("MS:1000796", "spectrum title"),
    "Formula": ("MS:1000866", "molecular formula"),
    "SMILES": ("MS:1000868", "SMILES string"),
    "InChI": ("MS:1003403", "InChI"),
    "InChIKey": ("MS:1002894", "InChIKey"),
    "SPLASH": ("MS:1002599", "splash key"),
}
_ELSEWHERE = frozenset({"MS level", "Polarity", "Retention time", "Profile"})
_HEAD = """<?xml version="1.0" encoding="utf-8"?>
<mzML xmlns="http://psi.hupo.org/ms/mzml" xmlns:xsi="http://www.w3.org/2001/XMLSchema-instance" version="1.1.0"
 xsi:schemaLocation="http://psi.hupo.org/ms/mzml http://psidev.info/files/ms/mzML/xsd/mzML1.1.0.xsd">
<cvList count="2">
<cv id="MS" fullName="Proteomics Standards Initiative Mass Spectrometry Ontology" URI="psi-ms.obo"/>
<cv id="UO" fullName="Unit Ontology" URI="unit.obo"/>
</cvList>
<fileDescription><fileContent>
<cvParam cvRef="MS" accession="MS:1000294" name="mass spectrum" value=""/>
</fileContent></fileDescription>
"""


def render_mzml(records: Sequence[SpectrumRecord], version: str = "") -> str:
    """Text of a complete mzML file.

    Parameters
    ----------
    records : sequence of SpectrumRecord
        In the order of the file; at least one, as the format wants.
    version : str
        Version of the program, for the list of software.

    Returns
    -------
    str
        XML without an index; arrays as 64-bit numbers, zlib-compressed.
    """
    kinds = sorted({record.acquisition.ionization for record in records})
    configurations = "".join(_configuration(kind) for kind in kinds)
    spectra = "".join(_spectrum(record, number) for number, record in enumerate(records))
    default = quoteattr(_configuration_id(kinds[0] if kinds else ""))
    return (
        f"{_HEAD}"
        f'<softwareList count="1"><software id="ionwitness" version={quoteattr(version or "0")}>'
        '<cvParam cvRef="MS" accession="MS:1000799" name="custom unreleased software tool" value="ionwitness"/>'
        "</software></softwareList>\n"
        f'<instrumentConfigurationList count="{len(kinds)}">\n{configurations}</instrumentConfigurationList>\n'
        '<dataProcessingList count="1"><dataProcessing id="export"><processingMethod order="1" softwareRef="ionwitness">'
        '<cvParam cvRef="MS" accession="MS:1000544" name="Conversion to mzML" value=""/>'
        "</processingMethod></dataProcessing></dataProcessingList>\n"
        f'<run id="spectra" defaultInstrumentConfigurationRef={default}>\n'
        f'<spectrumList count="{len(records)}" defaultDataProcessingRef="export">\n{spectra}</spectrumList>\n</run>\n</mzML>\n'
    )


def _configuration_id(ionization: str) -> str:
    return f"IC-{ionization}" if ionization in _IONIZATION else "IC"


def _configuration(ionization: str) -> str:
    components = ""
    if ionization in _IONIZATION:
        components = (
            f'<componentList count="1"><source order="1">{_cv(*_IONIZATION[ionization])}</source></componentList>'
        )
    model = _cv("MS:1000031", "instrument model")
    return (
        f'<instrumentConfiguration id="{_configuration_id(ionization)}">{model}{components}</instrumentConfiguration>\n'
    )


def _spectrum(record: SpectrumRecord, number: int) -> str:
    how = record.acquisition
    level = how.ms_level or 1
    terms = [_cv("MS:1000511", "ms level", str(level))]
    if level == 1:
        terms.append(_cv("MS:1000579", "MS1 spectrum"))
    if how.polarity in ("positive", "negative"):
        terms.append(_cv("MS:1000130" if how.polarity == "positive" else "MS:1000129", f"{how.polarity} scan"))
    terms.append(_cv("MS:1000128", "profile spectrum") if record.is_profile else _cv("MS:1000127", "centroid spectrum"))
    values: dict[str, list[str]] = {}
    for name, value in named_values(record):
        if name not in _ELSEWHERE:
            values.setdefault(name, []).append(value)
    terms += [_cv(*_TERMS[name], parts[0]) for name, parts in values.items() if name in _TERMS]
    terms += [_user(name, "\n".join(parts)) for name, parts in values.items() if name not in _TERMS]
    arrays = _array(record.mz, "MS:1000514", "m/z array", ' unitCvRef="MS" unitAccession="MS:1000040" unitName="m/z"')
    arrays += _array(record.intensity, "MS:1000515", "intensity array", "")
    return (
        f'<spectrum index="{number}" id="index={number}" defaultArrayLength="{record.mz.size}">\n'
        + "\n".join(terms)
        + f"\n{_scan(record)}\n"
        + f'<binaryDataArrayList count="2">\n{arrays}</binaryDataArrayList>\n</spectrum>\n'
    )


def _scan(record: SpectrumRecord) -> str:
    time = ""
    if record.retention.time_s is not None:
        unit = ' unitCvRef="UO" unitAccession="UO:0000010" unitName="second"'
        time = _cv("MS:1000016", "scan start time", number_text(record.retention.time_s), unit)
    reference = quoteattr(_configuration_id(record.acquisition.ionization))
    no_combination = _cv("MS:1000795", "no combination")
    scan = f"<scan instrumentConfigurationRef={reference}>{time}</scan>"
    return f'<scanList count="1">{no_combination}{scan}</scanList>'


def _array(values: FloatArray, accession: str, name: str, unit: str) -> str:
    text = base64.b64encode(zlib.compress(np.asarray(values, dtype="<f8").tobytes())).decode("ascii")
    kind = _cv("MS:1000523", "64-bit float") + _cv("MS:1000574", "zlib compression") + _cv(accession, name, "", unit)
    return f'<binaryDataArray encodedLength="{len(text)}">{kind}<binary>{text}</binary></binaryDataArray>\n'


def _cv(accession: str, name: str, value: str = "", unit: str = "") -> str:
    return f'<cvParam cvRef="MS" accession="{accession}" name="{name}" value={_attribute(value)}{unit}/>'


def _user(name: str, value: str) -> str:
    return f'<userParam name={_attribute(name)} type="xsd:string" value={_attribute(value)}/>'


def _attribute(text: str) -> str:
    """Quoted attribute; characters that XML 1.0 does not allow become question marks."""
    allowed = "".join(letter if _is_xml(letter) else "?" for letter in text)
    return quoteattr(allowed, {"\n": "&#10;"})


def _is_xml(letter: str) -> bool:
    code = ord(letter)
    return letter in "\t\n\r" or 0x20 <= code <= 0xD7FF or 0xE000 <= code <= 0xFFFD or code >= 0x10000
