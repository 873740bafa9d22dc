"""All evidence on one candidate: run every check, weigh every finding."""

from __future__ import annotations

from functools import lru_cache

from identify.evidence.accurate_check import check_accurate_mass
from identify.evidence.composition import check_explained, check_formula_rules
from identify.evidence.facts import FormulaFacts, QueryFacts, build_query_facts, entry_formula
from identify.evidence.finding import Finding, weigh
from identify.evidence.fragment_isotopes import check_fragment_halogens
from identify.evidence.fragments import check_extra_ions, check_missing_ions
from identify.evidence.high_mass import check_ions_above, check_losses, check_molecular_ion
from identify.evidence.isotopes import check_carbon_count, check_isotope_pattern
from identify.evidence.retention_check import check_retention
from identify.records import AlignedPeaks, Entry, EvidenceItem, Query
from identify.settings import Settings


def gather_evidence(
    query: Query, entry: Entry, aligned: AlignedPeaks, settings: Settings, facts: QueryFacts | None = None
) -> tuple[EvidenceItem, ...]:
    """All evidence on one candidate that does not come from the fragment match.

    Parameters
    ----------
    query : Query
    entry : Entry
        Best entry of the candidate.
    aligned : AlignedPeaks
        Query and entry on one axis.
    settings : Settings
    facts : QueryFacts, optional
        `build_query_facts(query)`; pass it when many candidates of one query are checked.

    Returns
    -------
    tuple of EvidenceItem
        One per check, always in the same order.
    """
    return tuple([weigh(finding) for finding in examine(query, entry, aligned, settings, facts)])


def examine(
    query: Query, entry: Entry, aligned: AlignedPeaks, settings: Settings, facts: QueryFacts | None = None
) -> tuple[Finding, ...]:
    """Findings of all checks, before they are weighed (see `gather_evidence`)."""
    facts = facts or build_query_facts(query)
    formula, n_groups = entry_formula(entry, facts)
    pattern, halogens, carbons, rules, explained, accurate = _examine_formula(facts, formula, settings)
    return (
        check_molecular_ion(facts, formula, entry, n_groups),
        pattern,
        halogens,
        carbons,
        check_losses(facts, formula, entry),
        check_ions_above(facts, formula, entry),
        rules,
        explained,
        check_missing_ions(facts, aligned),
        check_extra_ions(facts, aligned, formula),
        accurate,
        check_retention(query, entry),
    )


@lru_cache(maxsize=64)  # many candidates of a query are isomers of each other
def _examine_formula(facts: QueryFacts, formula: FormulaFacts | None, settings: Settings) -> tuple[Finding, ...]:
    """Findings of the checks that look at the formula of a candidate only, not at its spectrum."""
    return (
        check_isotope_pattern(facts, formula),
        check_fragment_halogens(facts, formula),
        check_carbon_count(facts, formula),
        check_formula_rules(facts, formula),
        check_explained(facts, formula),
        check_accurate_mass(facts, formula, settings),
    )
