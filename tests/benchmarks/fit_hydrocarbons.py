"""Fit and judge `identify.runs.hydrocarbons`: is a spectrum a hydrocarbon's, from its ions alone?

    python tests/benchmarks/fit_hydrocarbons.py LIB [--write]

LIB is built of the open records (`ionwitness library build all.ionlib ../shared/data/massbank-2025.05.1-ei.zip --licence all`).
Every compound counts once, however often it was measured. Judged by five-fold cross-validation over compounds, first as such,
then in simulated runs of 80 components: hydrocarbons and others drawn from the held-out compounds in a stated share, the share
estimated by `identify.pipeline.run_classes.estimate_share`, claims from probability 0.95. ``--write`` fits on all and stores.
"""

from __future__ import annotations

import argparse
import json
import sys
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parent.parent.parent
sys.path.insert(0, str(ROOT))

from identify.chem.structures import compound_classes  # noqa: E402
from identify.errors import StructureError  # noqa: E402
from identify.library.store import open_library  # noqa: E402
from identify.pipeline.run_classes import estimate_share, shift_probability  # noqa: E402
from identify.runs.hydrocarbons import LOWEST, ion_features  # noqa: E402

MODEL = ROOT / "identify" / "runs" / "hydrocarbon_model.json"
N_TREES, LEAST_LEAF, FEATURES_TRIED = 60, 5, 0.3
FIRST_MZ = 41
"""Records that start above are left out: the model looks at ions from m/z 39."""


def read_rows(path: Path) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Features, whether a hydrocarbon, and the compound's number, for every record the model applies to."""
    rows, answers, compounds = [], [], []
    with open_library(path) as library:
        for entry in library.iter_entries():
            peaks = entry.spectrum.nominal
            if not entry.identity.smiles or entry.measured_as or entry.is_labelled or peaks.mz[0] > FIRST_MZ:
                continue
            features = ion_features(peaks) if peaks.mz[-1] >= LOWEST else None
            if features is None or len(peaks) < 6:
                continue
            try:
                classes = compound_classes(entry.identity.smiles)
            except StructureError:
                continue
            rows.append(features)
            answers.append("hydrocarbon" in classes)
            compounds.append(entry.identity.inchikey[:14] or entry.identity.name)
    return np.array(rows), np.array(answers), np.unique(compounds, return_inverse=True)[1]


def fit(rows: np.ndarray, answers: np.ndarray, weights: np.ndarray):
    from sklearn.ensemble import ExtraTreesClassifier

    model = ExtraTreesClassifier(
        N_TREES, min_samples_leaf=LEAST_LEAF, max_features=FEATURES_TRIED, n_jobs=1, random_state=0
    )
    return model.fit(rows, answers, sample_weight=weights)


def held_out_probabilities(
    rows: np.ndarray, answers: np.ndarray, compounds: np.ndarray, weights: np.ndarray
) -> np.ndarray:
    from sklearn.model_selection import GroupKFold

    found = np.zeros(answers.size)
    for train, test in GroupKFold(5).split(rows, answers, compounds):
        found[test] = fit(rows[train], answers[train], weights[train]).predict_proba(rows[test])[:, 1]
    return found


def judge_runs(found: np.ndarray, answers: np.ndarray, compounds: np.ndarray, library_share: float) -> None:
    rng = np.random.default_rng(3)
    first = np.unique(compounds, return_index=True)[1]
    yes, no = first[answers[first]], first[~answers[first]]
    for share in (0.98, 0.9, 0.7, 0.5, 0.25, 0.04):
        claimed = right = there = 0
        estimates = []
        for _ in range(200):
            n_yes = round(80 * share)
            chosen = np.concatenate([rng.choice(yes, n_yes, replace=True), rng.choice(no, 80 - n_yes, replace=False)])
            estimate = estimate_share(found[chosen].tolist(), library_share)
            estimates.append(estimate)
            shifted = np.array([shift_probability(float(p), estimate, library_share) for p in found[chosen]])
            claimed += int((shifted >= 0.95).sum())
            right += int(((shifted >= 0.95) & answers[chosen]).sum())
            there += n_yes
        precision = right / claimed if claimed else float("nan")
        print(
            f"  share {share:4.0%}: estimated {np.mean(estimates):4.0%}  claimed {claimed:6}  right {precision:.4f}  "
            f"of hydrocarbons claimed {right / there:.2f}"
        )


def store(model, library_share: float, n_records: int, n_compounds: int) -> None:
    roots: list[int] = []
    feature: list[int] = []
    right: list[int] = []
    value: list[float] = []
    for estimator in model.estimators_:
        tree, base = estimator.tree_, len(feature)
        roots.append(base)
        place = {node: base + number for number, node in enumerate(_preorder(tree))}
        for node in _preorder(tree):
            is_leaf = tree.children_left[node] < 0
            counts = tree.value[node][0]
            feature.append(0 if is_leaf else int(tree.feature[node]))
            right.append(0 if is_leaf else place[int(tree.children_right[node])])
            value.append(round(float(counts[1] / counts.sum() if is_leaf else tree.threshold[node]), 4))
    provenance = (
        f"tests/benchmarks/fit_hydrocarbons.py on {n_records} records of {n_compounds} compounds of the open MassBank release "
        "2025.05.1 (the part named in ../shared/data/README.md)"
    )
    stored = {
        "provenance": provenance, "library_share": round(library_share, 4), "roots": roots, "feature": feature,
        "right": right, "value": value,
    }  # fmt: skip
    MODEL.write_text(json.dumps(stored, separators=(",", ":")) + "\n", encoding="ascii")
    print(f"stored {len(feature)} nodes, {MODEL.stat().st_size / 1000:.0f} kB")


def _preorder(tree) -> list[int]:
    order, waiting = [], [0]
    while waiting:
        node = waiting.pop()
        order.append(node)
        if tree.children_left[node] >= 0:
            waiting += [int(tree.children_right[node]), int(tree.children_left[node])]
    return order


def main() -> None:
    from sklearn.metrics import average_precision_score

    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("library", type=Path)
    parser.add_argument("--write", action="store_true")
    asked = parser.parse_args()
    rows, answers, compounds = read_rows(asked.library)
    weights = 1.0 / np.bincount(compounds)[compounds]
    library_share = float((weights * answers).sum() / weights.sum())
    n_compounds = int(compounds.max()) + 1
    print(f"{answers.size} records of {n_compounds} compounds, {library_share:.3f} of them hydrocarbons")
    found = held_out_probabilities(rows, answers, compounds, weights)
    print(f"average precision {average_precision_score(answers, found, sample_weight=weights):.3f}")
    for low, high in ((0, 0.02), (0.02, 0.05), (0.05, 0.1), (0.1, 0.2), (0.2, 0.5), (0.5, 0.8), (0.8, 1.01)):
        inside = (found >= low) & (found < high)
        if inside.any():
            real = float(np.average(answers[inside], weights=weights[inside]))
            stated = float(np.average(found[inside], weights=weights[inside]))
            print(f"  {low:.2f} to {high:.2f}: n {inside.sum():5}  stated {stated:.3f}  real {real:.3f}")
    print("simulated runs of 80 components, claims from 0.95:")
    judge_runs(found, answers, compounds, library_share)
    if asked.write:
        store(fit(rows, answers, weights), library_share, answers.size, n_compounds)


if __name__ == "__main__":
    main()
