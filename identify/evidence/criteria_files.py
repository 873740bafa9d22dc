"""The named criteria that ship with the package, read and checked."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from importlib.resources import files
from typing import Any

from identify.errors import UsageError, quote

ION_CRITERIA = ("eu-2002-657", "eu-2021-808", "sante-11312", "wada-2003", "epa-tic", "iso-22892")
INSTRUMENT_CHECKS = ("dftpp", "bfb", "pftba")


@dataclass(frozen=True, slots=True)
class Window:
    """How far a relative intensity may lie from the standard's, for standards above `above` % of the base peak.

    The half-width in percentage points is ``absolute_points + relative_percent · reference / 100``.
    """

    above: float
    relative_percent: float = 0.0
    absolute_points: float = 0.0


@dataclass(frozen=True, slots=True)
class RetentionRule:
    """How far a retention time may lie from the standard's.

    `kind` is `time` or `relative time` (to an internal standard); `combine` says which limit holds when there are two.
    """

    kind: str
    absolute_min: float | None = None
    relative_percent: float | None = None
    combine: str = "smaller"
    early_below_min: float = 0.0
    early_relative_percent: float | None = None


@dataclass(frozen=True, slots=True)
class PointRule:
    """Identification points: per separation, per ion within its window, and how many are needed."""

    separation: float
    per_ion: float
    needed: float
    needed_text: str


@dataclass(frozen=True, slots=True)
class Criteria:
    """One document's identification criteria.

    Attributes
    ----------
    name, title, edition, source, provenance, paraphrase : str
        What it is, where the numbers come from, and whether the original was read (`provenance`).
    windows : tuple of Window
        By falling `above`; the first whose `above` is below the reference holds.
    minimum_ions : int
        Ions that must lie inside their windows.
    considered_from_percent : float
        Smallest relative intensity in the standard of an ion that is judged.
    present_above_percent : float or None
        Ions above this in the standard must be present at all.
    all_must_meet : bool
        Whether every judged ion must lie inside its window, not only `minimum_ions`.
    molecular_ion_from_percent : float or None
        The molecular ion must be judged when the standard shows it at this or more.
    retention : RetentionRule or None
    points : PointRule or None
    """

    name: str
    title: str
    edition: str
    source: str
    provenance: str
    paraphrase: str
    windows: tuple[Window, ...]
    minimum_ions: int
    considered_from_percent: float
    present_above_percent: float | None
    all_must_meet: bool
    molecular_ion_from_percent: float | None
    retention: RetentionRule | None
    points: PointRule | None

    def window(self, reference_percent: float) -> tuple[float, float]:
        """Lower and upper end, in % of the base peak, of the window for an ion of `reference_percent` in the standard.

        Parameters
        ----------
        reference_percent : float
            Relative intensity in the standard, > 0.

        Returns
        -------
        low, high : float
            The lower end is never below 0.

        Notes
        -----
        The rule is chosen on the reference value, so the width jumps there: at 10 % ± 5, at 10.1 % ± 2.02 (eu-2002-657).
        """
        rule = next(window for window in self.windows if reference_percent > window.above)
        half = rule.absolute_points + rule.relative_percent * reference_percent / 100.0
        return max(reference_percent - half, 0.0), reference_percent + half


@dataclass(frozen=True, slots=True)
class IonRule:
    """What one ion of a tune spectrum must show; percentages of the ion `of` (0: of the base peak)."""

    mz: int
    of: int | None = None
    low: float | None = None
    high: float | None = None
    low_included: bool = True
    high_included: bool = True
    base_peak: bool = False
    or_of: int | None = None
    or_above: float | None = None
    present: bool = False


@dataclass(frozen=True, slots=True)
class InstrumentCheck:
    """Limits for a tune compound, in one edition of its method."""

    name: str
    edition: str
    title: str
    compound: str
    source: str
    provenance: str
    rules: tuple[IonRule, ...]


@cache
def _table(name: str) -> Mapping[str, Any]:
    text = files("identify.evidence.criteria").joinpath(f"{name}.toml").read_text(encoding="utf-8")
    return tomllib.loads(text)


@cache
def load_criteria(name: str) -> Criteria:
    """Criteria of a document.

    Parameters
    ----------
    name : str
        One of `ION_CRITERIA`.

    Returns
    -------
    Criteria

    Raises
    ------
    UsageError
        For a name that does not ship.

    Examples
    --------
    >>> load_criteria("eu-2002-657").window(60.0)
    (54.0, 66.0)
    """
    if name not in ION_CRITERIA:
        raise UsageError("criteria", found=quote(name), expected=f"one of {', '.join(ION_CRITERIA)}")
    table = _table(name)
    ions = table["ions"]
    windows = sorted((Window(**row) for row in ions["window"]), key=lambda window: -window.above)
    return Criteria(
        name=table["name"],
        title=table["title"],
        edition=table["edition"],
        source=table["source"],
        provenance=table["provenance"],
        paraphrase=" ".join(table["paraphrase"].split()),
        windows=tuple(windows),
        minimum_ions=ions["minimum"],
        considered_from_percent=ions["considered_from_percent"],
        present_above_percent=ions.get("present_above_percent"),
        all_must_meet=ions["all_must_meet"],
        molecular_ion_from_percent=ions.get("molecular_ion_from_percent"),
        retention=RetentionRule(**table["retention"]) if "retention" in table else None,
        points=PointRule(**table["points"]) if "points" in table else None,
    )


def list_editions(name: str) -> tuple[str, ...]:
    """Editions of an instrument check, the default first.

    Parameters
    ----------
    name : str
        One of `INSTRUMENT_CHECKS`.

    Returns
    -------
    tuple of str

    Raises
    ------
    UsageError
        For a name that does not ship.
    """
    if name not in INSTRUMENT_CHECKS:
        raise UsageError("instrument check", found=quote(name), expected=f"one of {', '.join(INSTRUMENT_CHECKS)}")
    table = _table(name)
    return (table["default"], *(edition for edition in table["editions"] if edition != table["default"]))


@cache
def load_instrument_check(name: str, edition: str = "") -> InstrumentCheck:
    """Limits for a tune compound.

    Parameters
    ----------
    name : str
        One of `INSTRUMENT_CHECKS`.
    edition : str
        One of `list_editions(name)`; empty for the default.

    Returns
    -------
    InstrumentCheck

    Raises
    ------
    UsageError
        For a name or an edition that does not ship.
    """
    editions = list_editions(name)
    chosen = edition or editions[0]
    if chosen not in editions:
        raise UsageError(f"edition of '{name}'", found=quote(edition), expected=f"one of {', '.join(editions)}")
    table = _table(name)
    content = table["editions"][chosen]
    rules = tuple(_ion_rule(row) for row in content["rules"])
    return InstrumentCheck(
        table["name"], chosen, content["title"], table["compound"], table["source"], table["provenance"], rules
    )


def _ion_rule(row: Mapping[str, Any]) -> IonRule:
    return IonRule(
        mz=row["mz"],
        of=row.get("of"),
        low=row.get("from", row.get("above")),
        high=row.get("to", row.get("below")),
        low_included="from" in row,
        high_included="to" in row,
        base_peak=row.get("base_peak", False),
        or_of=row.get("or_of"),
        or_above=row.get("or_above"),
        present=row.get("present", False),
    )
