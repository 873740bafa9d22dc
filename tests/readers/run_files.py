"""Small run files made on the spot: ANDI-MS netCDF and mzML, with any fault wanted."""

from __future__ import annotations

import base64
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

SCANS = ([(43.0, 100.0), (57.1, 50.0)], [(57.1, 80.0), (43.0, 200.0), (71.0, 20.0)], [(43.0, 90.0)])


def write_andi(path: Path, scans: Sequence[Sequence[tuple[float, float]]] = SCANS, **changes: Any) -> Path:
    """An ANDI-MS file; `changes` replace attributes (str), variables (arrays) or set ``mass_scale``, ``intensity_scale``."""
    from scipy.io import netcdf_file

    attributes = {
        "dataset_completeness": "C1+C2", "experiment_type": "Centroided Mass Spectrum",
        "test_ionization_mode": "Electron Impact", "test_ionization_polarity": "Positive Polarity",
        "test_scan_function": "Mass Scan", "experiment_title": "invented",
    }  # fmt: skip
    points = [point for scan in scans for point in scan]
    counts = [len(scan) for scan in scans]
    variables: dict[str, Any] = {
        "scan_acquisition_time": np.arange(1.0, len(scans) + 1.0),
        "scan_index": np.concatenate([[0], np.cumsum(counts)[:-1]]).astype(np.int32),
        "point_count": np.array(counts, dtype=np.int32),
        "mass_values": np.array([mz for mz, _ in points], dtype=np.float32),
        "intensity_values": np.array([intensity for _, intensity in points], dtype=np.float32),
    }
    scales = {"mass_values": changes.pop("mass_scale", None), "intensity_values": changes.pop("intensity_scale", None)}
    for name, value in changes.items():
        (attributes if isinstance(value, str) else variables)[name] = value
    with netcdf_file(str(path), "w") as file:
        for name, value in attributes.items():
            setattr(file, name, value)
        for name, values in variables.items():
            if values is None:
                continue
            values = np.asarray(values)
            file.createDimension(f"n_{name}", max(1, values.size))
            variable = file.createVariable(name, values.dtype.newbyteorder(">"), (f"n_{name}",))
            variable[:] = values if values.size else np.full(1, -9999, dtype=values.dtype)
            if scales.get(name) is not None:
                variable.scale_factor = np.float64(scales[name])
    return path


def mzml_text(scans: Sequence[Mapping[str, Any]], *, source_term: str = "electron ionization") -> str:
    """An mzML text; each scan has mz, intensity, minutes, and maybe level, profile, terms."""
    spectra = "".join(_spectrum(place, scan) for place, scan in enumerate(scans))
    return (
        '<?xml version="1.0" encoding="utf-8"?><mzML xmlns="http://psi.hupo.org/ms/mzml" version="1.1.0">'
        '<instrumentConfigurationList count="1"><instrumentConfiguration id="IC1"><componentList count="1">'
        f'<source order="1"><cvParam cvRef="MS" accession="MS:1000389" name="{source_term}" value=""/></source>'
        "</componentList></instrumentConfiguration></instrumentConfigurationList>"
        f'<run id="r" defaultInstrumentConfigurationRef="IC1"><spectrumList count="{len(scans)}">{spectra}'
        "</spectrumList></run></mzML>"
    )


def _spectrum(place: int, scan: Mapping[str, Any]) -> str:
    def term(name: str, value: object = "", extra: str = "") -> str:
        return f'<cvParam cvRef="MS" accession="MS:1" name="{name}" value="{value}"{extra}/>'

    def array(values: Any, name: str) -> str:
        text = base64.b64encode(np.asarray(values, dtype="<f8").tobytes()).decode()
        return (
            f'<binaryDataArray encodedLength="{len(text)}">{term("64-bit float")}{term("no compression")}{term(name)}'
            f"<binary>{text}</binary></binaryDataArray>"
        )

    unit = ' unitCvRef="UO" unitAccession="UO:0000031" unitName="minute"'
    kind = term("profile spectrum" if scan.get("profile") else "centroid spectrum")
    return (
        f'<spectrum index="{place}" id="scan={place + 1}" defaultArrayLength="{len(scan["mz"])}">'
        f"{term('ms level', scan.get('level', 1))}{kind}{''.join(term(name) for name in scan.get('terms', ()))}"
        f'<scanList count="1"><scan>{term("scan start time", scan["minutes"], unit)}</scan></scanList>'
        f'<binaryDataArrayList count="2">{array(scan["mz"], "m/z array")}{array(scan["intensity"], "intensity array")}'
        "</binaryDataArrayList></spectrum>"
    )
