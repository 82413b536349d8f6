"""Fit the weights of the doubt model on hand-marked photographs, and say what they are worth.

    python tests/benchmarks/fit_doubt.py

For every set the weights are fitted on the other sets and scored on it (leave one set out); the
weights printed last are fitted on all of them. A candidate is right when its centre lies within
half a radius (at least 3 px) of a mark, its size within a factor 1.5 of the mark's where that is
known, and no second mark lies well inside it. Each set has the same say.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.spatial import cKDTree

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.accuracy import match_spots
from detect.area import StudyArea
from detect.choice import choose
from detect.doubt import FEATURES, GENERAL, DoubtModel, doubt_of, features
from detect.judge import judged
from detect.lengths import Length
from detect.wanted import DetectOptions
from detect.photograph import read_photograph
from detect.view import view_of
from tests.benchmarks.hand_marked import SETS, MarkedSet

RIDGE = 1000.0  # against standardised weights; each set weighs 5,000


def right(
    xy: NDArray[np.float64],
    diameter: NDArray[np.float64],
    truth: NDArray[np.float64],
    radius: NDArray[np.float64],
    usual: float,
) -> NDArray[np.bool_]:
    if not len(truth) or not len(xy):
        return np.zeros(len(xy), dtype=bool)
    known = ~np.isnan(radius)
    size = np.where(known, radius, usual)
    distance, nearest = cKDTree(truth).query(xy)
    good = distance <= np.maximum(0.5 * size, 3.0)[nearest]
    good &= ~known[nearest] | (np.abs(np.log(diameter / 2 / size[nearest])) < 0.4)
    within = cKDTree(truth).query_ball_point(xy, 0.38 * diameter, return_length=True)
    return good & (within <= 1)


def collect(marked: MarkedSet) -> list[dict[str, object]]:
    low, high = marked.diameter
    options = DetectOptions(
        diameter=(Length(low, "px"), Length(high, "px")),
        colour=marked.colour,  # type: ignore[arg-type]
    )
    rows = []
    for path in marked.images:
        photograph = read_photograph(path)
        area = StudyArea(
            shapely.box(-0.5, -0.5, photograph.width - 0.5, photograph.height - 0.5), "frame", ""
        )
        view = view_of(photograph, area, shrink=min(1.0, 8.0 / low))
        found = judged(view, low * view.shrink, high * view.shrink, options, GENERAL)
        x, y = view.to_photograph(found.candidates.x, found.candidates.y)
        xy = np.column_stack([x, y])
        truth, radius = marked.truth(path.stem)
        measured = features(
            found.candidates, smallest_px=low * view.shrink, largest_px=high * view.shrink
        )
        good = right(
            xy, found.candidates.diameter / view.shrink, truth, radius, marked.usual_radius
        )
        m = marked.margin
        edge = (xy < m).any(axis=1) | (xy > [photograph.width - 1 - m, photograph.height - 1 - m]).any(axis=1)
        rows.append(
            {
                "candidates": found.candidates,
                "xy": xy,
                "X": measured,
                "good": good,
                "use": good | ~edge,
                "edge": edge,
                "truth": truth,
                "radius": radius,
            }
        )
    return rows


def fit(rows: list[list[dict[str, object]]]) -> DoubtModel:
    blocks, labels, weights = [], [], []
    for photographs in rows:
        x = np.vstack([r["X"][r["use"]] for r in photographs])
        y = np.concatenate([r["good"][r["use"]] for r in photographs])
        blocks.append(x)
        labels.append(y)
        weights.append(np.full(len(y), 5000 / len(y)))
    x = np.vstack(blocks)
    y = np.concatenate(labels).astype(float)
    w = np.concatenate(weights)
    spread = x.std(axis=0)
    z = np.column_stack([np.ones(len(x)), x / spread])

    def loss(beta: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        eta = z @ beta
        ridge = RIDGE * np.r_[0.0, beta[1:]]
        value = (w * (np.logaddexp(0, eta) - y * eta)).sum() + 0.5 * ridge @ beta
        return float(value), z.T @ (w * (1 / (1 + np.exp(-eta)) - y)) + ridge

    beta = minimize(loss, np.zeros(z.shape[1]), jac=True, method="L-BFGS-B").x
    values = [float(v) for v in np.r_[beta[0], beta[1:] / spread]]
    return DoubtModel(*values)


def score(marked: MarkedSet, photographs: list[dict[str, object]], model: DoubtModel, cut: float) -> tuple[float, float]:
    hits = spots = marks = 0
    for r in photographs:
        doubt = doubt_of(r["X"], model)
        rows = choose(r["candidates"], doubt, highest_doubt=cut)
        radius = np.where(np.isnan(r["radius"]), marked.usual_radius, r["radius"])
        match = match_spots(r["xy"][rows], r["truth"], radius)
        missed = np.ones(len(rows), dtype=bool)
        missed[match.found] = False
        hits += len(match)
        spots += len(rows) - int((missed & r["edge"][rows]).sum())
        marks += len(r["truth"])
    return 2 * hits / max(1, spots + marks), spots / marks - 1


def main() -> None:
    data = {marked.name: collect(marked) for marked in SETS}
    fitted = [marked.name for marked in SETS if marked.name != "coins"]
    scores = []
    for marked in SETS:
        model = fit([data[name] for name in fitted if name != marked.name])
        f1, error = score(marked, data[marked.name], model, 0.5)
        scores.append(f1)
        print(f"{marked.name:10s} left out: F1 {f1:.3f}, count error {100 * error:+.0f} %")
    print(f"mean without coins {np.mean(scores[:5]):.4f}")
    model = fit([data[name] for name in fitted])
    inside = [score(m, data[m.name], model, 0.5)[0] for m in SETS]
    print("fitted on all:", " ".join(f"{m.name} {f:.3f}" for m, f in zip(SETS, inside, strict=True)))
    for name in ("intercept", *FEATURES):
        print(f"    {name}={getattr(model, name):.3f},")


if __name__ == "__main__":
    main()
