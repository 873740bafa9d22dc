"""A spectrum record as JSON and back: how records leave the process that reads files, and how the case file keeps them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

from identify.errors import FormatError
from identify.records import Acquisition, Identity, Rejection, Retention, Source, SpectrumRecord


def record_to_dict(record: SpectrumRecord) -> dict[str, Any]:
    """JSON values of a record, complete.

    Parameters
    ----------
    record : SpectrumRecord

    Returns
    -------
    dict
    """
    return {
        "source": asdict(record.source),
        "mz": record.mz.tolist(),
        "intensity": record.intensity.tolist(),
        "accession": record.accession,
        "title": record.title,
        "identity": asdict(record.identity),
        "acquisition": asdict(record.acquisition),
        "retention": asdict(record.retention),
        "derivative": record.derivative,
        "licence": record.licence,
        "authors": record.authors,
        "splash": record.splash,
        "comments": list(record.comments),
        "is_profile": record.is_profile,
        "extra": dict(record.extra),
    }


def record_from_dict(values: Mapping[str, Any]) -> SpectrumRecord:
    """The record that `record_to_dict` wrote.

    Parameters
    ----------
    values : mapping

    Returns
    -------
    SpectrumRecord

    Raises
    ------
    FormatError
        If the values are not those of a record.

    Examples
    --------
    >>> record = SpectrumRecord(Source("a.txt", 3), [43.0, 58.0], [100.0, 30.0], title="acetone?")
    >>> again = record_from_dict(record_to_dict(record))
    >>> (again.source, again.mz.tolist(), again.title)
    (Source(path='a.txt', line=3, number=None), [43.0, 58.0], 'acetone?')
    """
    try:
        identity = {**values["identity"], "other_names": tuple(values["identity"]["other_names"])}
        return SpectrumRecord(
            **{
                **values,
                "source": Source(**values["source"]),
                "identity": Identity(**identity),
                "acquisition": Acquisition(**values["acquisition"]),
                "retention": Retention(**values["retention"]),
                "comments": tuple(values["comments"]),
            }
        )
    except (KeyError, TypeError, ValueError) as error:
        raise FormatError("stored spectrum", found=repr(error), expected="the fields of a spectrum record") from None


def rejection_to_dict(item: Rejection) -> dict[str, Any]:
    """JSON values of a rejection.

    Parameters
    ----------
    item : Rejection

    Returns
    -------
    dict
    """
    return asdict(item)


def rejection_from_dict(values: Mapping[str, Any]) -> Rejection:
    """The rejection that `rejection_to_dict` wrote.

    Parameters
    ----------
    values : mapping

    Returns
    -------
    Rejection

    Raises
    ------
    FormatError
        If the values are not those of a rejection.
    """
    try:
        return Rejection(**values)
    except TypeError as error:
        raise FormatError("stored rejection", found=repr(error), expected="the fields of a rejection") from None
