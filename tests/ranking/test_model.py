from __future__ import annotations

import numpy as np
import pytest

from identify.ranking.coefficients import COEFFICIENTS
from identify.ranking.ions import ION_NAMES, STATES
from identify.ranking.model import (
    HEADINGS,
    IONS_HEADING,
    SPECTRAL_NAMES,
    as_coefficients,
    build_model,
    default_model,
    explain_spectra,
    mass_log_odds,
)
from identify.records import MassEstimate, MolecularIonEstimate


def test_the_shipped_model_says_where_it_comes_from() -> None:
    provenance = default_model().provenance
    assert "fit_ranking.py" in provenance and "2025.05.1" in provenance


def test_a_model_survives_its_table() -> None:
    assert as_coefficients(build_model(as_coefficients(default_model()))) == as_coefficients(default_model())
    assert default_model().provenance == COEFFICIENTS["provenance"]


def test_a_table_that_lacks_a_feature_is_refused() -> None:
    broken = as_coefficients(default_model())
    broken["spectra"] = {"constant": 0.0, "features": {}}
    with pytest.raises(KeyError):
        build_model(broken)


def test_the_explanation_of_the_spectra_is_their_log_odds() -> None:
    model = default_model()
    rows = np.random.default_rng(4).uniform(0, 1, (3, len(SPECTRAL_NAMES)))
    assert [told.value for told in explain_spectra(model, rows)] == pytest.approx(model.spectra.value(rows).tolist())


def test_every_feature_is_shown_under_one_heading_and_no_name_counts_records() -> None:
    (explained,) = explain_spectra(default_model(), np.zeros((1, len(SPECTRAL_NAMES))))
    shown = {heading.label: [part.label for part in heading.parts] for heading in explained.parts}
    assert shown.pop(IONS_HEADING) == list(STATES)
    assert sorted(name for names in shown.values() for name in names) == sorted(set(SPECTRAL_NAMES) - set(ION_NAMES))
    assert set(HEADINGS) == set(shown)
    assert not [name for name in SPECTRAL_NAMES if "record" in name or "replicate" in name or "entries" in name]


def test_the_likelier_mass_weighs_more_and_an_unnamed_one_nothing() -> None:
    ion = MolecularIonEstimate((MassEstimate(106, 0.8, ()), MassEstimate(120, 0.1, ())), 0.1)
    assert mass_log_odds(106, ion) == pytest.approx(np.log(40.0))
    assert mass_log_odds(106, ion) > mass_log_odds(120, ion) > mass_log_odds(99, ion) == 0.0
