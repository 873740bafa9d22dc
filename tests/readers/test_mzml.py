"""mzML: what the adapter takes over, what it guards."""

from __future__ import annotations

import base64
import zlib
from pathlib import Path

import numpy as np
import pytest

from identify.errors import FormatError
from identify.readers import read_spectra
from identify.readers.limits import CHUNK_BYTES
from identify.records import Rejection, SpectrumRecord
from tests.readers.format_samples import MZML_HEAD, PAIRS, mzml

TAIL = "</spectrumList></run></mzML>\n"
SCAN = (
    '<scanList count="1"><scan><cvParam cvRef="MS" accession="MS:1000016" name="scan start time" value="5.25" '
    'unitCvRef="UO" unitAccession="UO:0000031" unitName="minute"/><scanWindowList count="1"><scanWindow>'
    '<cvParam cvRef="MS" accession="MS:1000501" name="scan window lower limit" value="35"/>'
    '<cvParam cvRef="MS" accession="MS:1000500" name="scan window upper limit" value="350"/>'
    "</scanWindow></scanWindowList></scan></scanList>"
)
GROUP = (
    '<referenceableParamGroupList count="1"><referenceableParamGroup id="ion-source">'
    '<cvParam cvRef="MS" accession="MS:1000071" name="chemical ionization" value=""/>'
    "</referenceableParamGroup></referenceableParamGroupList>"
)
CONFIGURATION = (
    '<instrumentConfigurationList count="1"><instrumentConfiguration id="IC"><componentList count="1"><source order="1">'
    "{}</source></componentList></instrumentConfiguration></instrumentConfigurationList>"
)


def read(tmp_path: Path, text: str) -> tuple[list[SpectrumRecord], list[Rejection]]:
    path = tmp_path / "a.dat"
    path.write_text(text)
    rejected: list[Rejection] = []
    return list(read_spectra(path, rejected.append)), rejected


def test_time_range_and_polarity_of_an_mzml_scan_are_read(tmp_path: Path) -> None:
    polarity = '<cvParam cvRef="MS" accession="MS:1000130" name="positive scan" value=""/>'
    spectrum = mzml(PAIRS).replace("<binaryDataArrayList", f"{polarity}{SCAN}<binaryDataArrayList")
    (record,), _ = read(tmp_path, MZML_HEAD + spectrum + TAIL)
    assert record.retention.time_s == 315.0
    acquisition = record.acquisition
    assert (acquisition.lowest_mz, acquisition.highest_mz) == (35.0, 350.0)
    assert (acquisition.polarity, acquisition.ms_level, acquisition.ionization) == ("positive", 1, "")


def test_a_profile_scan_is_marked(tmp_path: Path) -> None:
    term = '<cvParam cvRef="MS" accession="MS:1000128" name="profile spectrum" value=""/>'
    (record,), _ = read(tmp_path, MZML_HEAD + mzml(PAIRS).replace("<userParam", f"{term}<userParam") + TAIL)
    assert record.is_profile


@pytest.mark.parametrize("where", ["directly", "through a parameter group"])
def test_another_ionization_is_rejected_wherever_it_stands(where: str, tmp_path: Path) -> None:
    term = '<cvParam cvRef="MS" accession="MS:1000071" name="chemical ionization" value=""/>'
    reference = '<referenceableParamGroupRef ref="ion-source"/>'
    head = MZML_HEAD.replace("<run", GROUP + CONFIGURATION.format(term if where == "directly" else reference) + "<run")
    head = head.replace('<run id="r"', '<run id="r" defaultInstrumentConfigurationRef="IC"')
    records, rejected = read(tmp_path, head + mzml(PAIRS) + TAIL)
    assert not records
    assert [(item.reason, item.found) for item in rejected] == [("not electron ionization", "'CI' in spectrum 1")]


def test_32_bit_arrays_are_read(tmp_path: Path) -> None:
    packed = base64.b64encode(zlib.compress(np.array([42, 55, 70], dtype="<f4").tobytes())).decode()
    wide = base64.b64encode(zlib.compress(np.array([42, 55, 70], dtype="<f8").tobytes())).decode()
    text = mzml(PAIRS)
    first, second = text.split("</binaryDataArray>", 1)
    assert wide in first
    narrow = first.replace(wide, packed).replace('MS:1000523" name="64-bit float"', 'MS:1000521" name="32-bit float"')
    (record,), _ = read(tmp_path, MZML_HEAD + narrow + "</binaryDataArray>" + second + TAIL)
    assert record.mz.tolist() == [42.0, 55.0, 70.0]


def test_an_array_that_unpacks_without_end_costs_bounded_memory(tmp_path: Path) -> None:
    bomb = base64.b64encode(zlib.compress(bytes(50_000_000))).decode()
    good = mzml([(1.0, 1.0)])
    start = good.index("<binary>") + len("<binary>")
    spectrum = good[:start] + bomb + good[good.index("</binary>") :]
    records, rejected = read(tmp_path, MZML_HEAD + spectrum + mzml(PAIRS) + TAIL)
    assert len(records) == 1
    assert [item.reason for item in rejected] == ["too many peaks"]


def test_spectra_before_the_damage_of_an_mzml_file_are_kept(tmp_path: Path) -> None:
    path = tmp_path / "a.mzML"
    # Long enough that the parser hands out spectra before it meets the damage.
    path.write_text((MZML_HEAD + mzml(PAIRS) * 400 + TAIL)[:-300])
    records: list[SpectrumRecord] = []
    with pytest.raises(FormatError, match=r"mzML in .*expected well-formed mzML 1\.1"):
        records.extend(read_spectra(path, lambda _: None))
    assert len(records) > 300


@pytest.mark.parametrize("encoding", ["utf-8", "utf-16", "utf-7"])
def test_entities_are_refused_in_any_encoding(encoding: str, tmp_path: Path) -> None:
    doctype = '<!DOCTYPE mzML [<!ENTITY a "b">]>\n'
    start = f'<?xml version="1.0" encoding="{encoding}"?>\n'
    text = MZML_HEAD.replace('<?xml version="1.0"?>\n', start + doctype) + mzml(PAIRS) + TAIL
    path = tmp_path / "a.mzML"
    path.write_bytes(text.replace("<!", "+ADwAIQ-").encode() if encoding == "utf-7" else text.encode(encoding))
    with pytest.raises(FormatError, match="found a document type definition"):
        list(read_spectra(path, lambda _: None))


def test_entities_are_refused_even_across_the_borders_of_chunks(tmp_path: Path) -> None:
    start = '<?xml version="1.0"?>\n<!-- <mzML '
    # The mark begins five bytes before a chunk ends.
    filler = "x" * (CHUNK_BYTES - 5 - len(start) - len("-->"))
    doctype = '<!DOCTYPE mzML [<!ENTITY a SYSTEM "file:///etc/hostname">]>\n'
    text = MZML_HEAD.replace('<?xml version="1.0"?>\n', f"{start}{filler}-->{doctype}")
    assert text.index("<!DOCTYPE") == CHUNK_BYTES - 5
    with pytest.raises(FormatError, match="found a document type definition"):
        read(tmp_path, text + mzml(PAIRS) + TAIL)
