"""An invented record with every field filled, and what "comes back equal" means for each format."""

from __future__ import annotations

import dataclasses

import numpy as np

from identify.records import Acquisition, Identity, Retention, Source, SpectrumRecord


def build_record(number: int = 1, **changes: object) -> SpectrumRecord:
    record = SpectrumRecord(
        source=Source("invented.txt", 1, number),
        mz=np.array([42.0, 55.0542, 70.0777]),
        intensity=np.array([100.0, 80.5, 0.0625]),
        accession=f"INVNT-Invented-IN{number:06}",
        title="Inventol β; GC-EI-TOF; MS; 2 TMS",
        identity=Identity(
            name="Inventol β",
            formula="C5H12O",
            smiles="CCCCCO",
            inchi="InChI=1S/C5H12O/c1-2-3-4-5-6/h6H,2-5H2,1H3",
            inchikey="AAAAAAAAAAAAAA-BBBBBBBBBB-N",
            cas="00-00-0",
            other_names=("Fictional alcohol", "1,5-seco: a (nonsense) name; with = signs"),
        ),
        acquisition=Acquisition(
            instrument="Invented instrument, model 3",
            instrument_type="GC-EI-TOF",
            ionization="EI",
            energy_ev=70.0,
            inlet="GC",
            ms_level=1,
            polarity="positive",
            lowest_mz=35.0,
            highest_mz=500.5,
        ),
        retention=Retention(time_s=450.25, index=1234.5, index_kind="kovats", column="Invented-5, 30 m x 0.25 mm"),
        derivative="2 TMS",
        licence="CC BY",
        authors="Nobody A, Invented Laboratory",
        splash="",
        comments=("first $$ comment", 'second "quoted" comment'),
        extra={"DATE": "2026.01.01", "CH$LINK KEGG": "X00000", "AC$CHROMATOGRAPHY SOLVENT": "one\ntwo"},
    )
    return dataclasses.replace(record, **changes)  # type: ignore[arg-type]


ADDED_BY_MASSBANK = frozenset({"DATE", "CH$COMPOUND_CLASS", "CH$EXACT_MASS"})


def assert_equal(found: SpectrumRecord, written: SpectrumRecord, file_format: str) -> None:
    order = np.argsort(written.mz, kind="stable") if file_format == "massbank" else slice(None)
    np.testing.assert_array_equal(found.mz, written.mz[order])
    np.testing.assert_array_equal(found.intensity, written.intensity[order])
    for name in ("identity", "acquisition", "retention", "accession", "derivative", "licence", "authors", "is_profile"):
        assert getattr(found, name) == getattr(written, name), name
    assert found.title == (written.title or found.title)
    comments = [comment.replace("$$", "$ $") if file_format == "jcamp" else comment for comment in written.comments]
    extra = dict(written.extra)
    if file_format == "massbank":
        # Fields of the format itself, and a key computed from the peaks, are added; what has no tag becomes a comment.
        assert list(found.comments[: len(comments)]) == comments
        own = {key: text for key, text in extra.items() if "$" in key or key.isupper()}
        assert {key: text for key, text in found.extra.items() if key in own or key not in ADDED_BY_MASSBANK} == own
    else:
        assert list(found.comments) == comments
        assert found.splash == written.splash
        assert dict(found.extra) == extra
