"""Does a tune spectrum (DFTPP, BFB, PFTBA) meet the limits of a method?"""

from __future__ import annotations

from dataclasses import dataclass

from identify.evidence.criteria_files import InstrumentCheck, IonRule
from identify.records import CleanSpectrum, Verdict


@dataclass(frozen=True, slots=True)
class TuneVerdict:
    """One ion of a tune spectrum: what was seen, what the method wants, and the verdict."""

    mz: int
    observed: str
    expected: str
    verdict: Verdict


def check_instrument(spectrum: CleanSpectrum, check: InstrumentCheck) -> tuple[TuneVerdict, ...]:
    """Verdict for every ion that the method names.

    Parameters
    ----------
    spectrum : CleanSpectrum
        Spectrum of the tune compound; clean it without the noise floor, so that traces are kept.
    check : InstrumentCheck
        From `load_instrument_check`.

    Returns
    -------
    tuple of TuneVerdict
        In the order of the method. The spectrum passes when all agree. A ratio to an ion that is missing is `not assessed`.
    """
    return tuple(_judge(spectrum, rule) for rule in check.rules)


def passes(verdicts: tuple[TuneVerdict, ...]) -> bool:
    """Whether every ion agrees."""
    return all(verdict.verdict is Verdict.AGREES for verdict in verdicts)


def _judge(spectrum: CleanSpectrum, rule: IonRule) -> TuneVerdict:
    peaks = spectrum.nominal
    seen = peaks.intensity_at(rule.mz)
    expected = describe_rule(rule)
    if rule.base_peak:
        is_base = len(peaks) > 0 and int(peaks.base_peak_mz) == rule.mz
        percent = _percent(seen, spectrum, rule.or_of)
        second = percent is not None and rule.or_above is not None and percent > rule.or_above
        observed = "base peak" if is_base else f"{_percent(seen, spectrum, 0) or 0.0:.1f} % of the base peak"
        return TuneVerdict(rule.mz, observed, expected, Verdict.AGREES if is_base or second else Verdict.CONFLICTS)
    if rule.present and seen <= 0:
        return TuneVerdict(rule.mz, "missing", expected, Verdict.CONFLICTS)
    if rule.of is None:
        return TuneVerdict(rule.mz, "present", expected, Verdict.AGREES)
    percent = _percent(seen, spectrum, rule.of)
    if percent is None:
        return TuneVerdict(rule.mz, f"m/z {rule.of} is missing", expected, Verdict.NOT_ASSESSED)
    inside = _above(percent, rule) and _below(percent, rule)
    return TuneVerdict(rule.mz, f"{percent:.2f} %", expected, Verdict.AGREES if inside else Verdict.CONFLICTS)


def _percent(seen: float, spectrum: CleanSpectrum, of: int | None) -> float | None:
    """`seen` in % of the ion `of` (0: of the base peak); None when there is no such ion."""
    peaks = spectrum.nominal
    if of is None or not len(peaks):
        return None
    whole = float(peaks.intensity.max()) if of == 0 else peaks.intensity_at(of)
    return 100.0 * seen / whole if whole > 0 else None


def _above(percent: float, rule: IonRule) -> bool:
    return rule.low is None or percent > rule.low or (rule.low_included and percent == rule.low)


def _below(percent: float, rule: IonRule) -> bool:
    return rule.high is None or percent < rule.high or (rule.high_included and percent == rule.high)


def describe_rule(rule: IonRule) -> str:
    """The limits of one ion in words.

    Examples
    --------
    >>> describe_rule(IonRule(197, of=198, high=1.0, high_included=False))
    'below 1 % of m/z 198'
    """
    if rule.base_peak:
        other = f", or above {rule.or_above:g} % of m/z {rule.or_of}" if rule.or_of is not None else ""
        return f"base peak{other}"
    if rule.of is None:
        return "present"
    whole = "the base peak" if rule.of == 0 else f"m/z {rule.of}"
    present = "present, " if rule.present else ""
    if rule.low is not None and rule.high is not None:
        joint = "–" if rule.low_included and rule.high_included else " to "
        return f"{present}{rule.low:g}{joint}{rule.high:g} % of {whole}"
    if rule.low is not None:
        return f"{present}above {rule.low:g} % of {whole}"
    return f"{present}below {rule.high:g} % of {whole}"
