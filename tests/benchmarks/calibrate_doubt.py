"""Fit what doubt is worth, and say how well it means what it says.

    python tests/benchmarks/calibrate_doubt.py [--fit FOLDER ...] [--measure FOLDER ...]
        [--out FOLDER]

Prints the constants of `detect/picture_doubt.py`, and the reliability of doubt on hand-marked
photographs (weights and constants fitted without the set being measured, and the constants on
doubts whose weights saw neither that set nor their own), after thirty reviewed spots of the set, and
on drawn scenes (folders made by `own_scenes.py`: seeds 1000-1099 to fit, 2000-2999 to measure). With
`--out` the reliability diagrams and their tables are written. Alone on a machine it takes three
minutes. A spot is false when no mark lies within half a radius (at least 3 px) of it that no other
spot is paired with. Errors are given with ten bins of equal count (the one quoted), with ten of
equal width, and what chance alone would give to a perfect doubt of these spots.
"""

from __future__ import annotations

import argparse
import csv
import sys
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.special import expit, logit

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.accuracy import match_spots
from detect.area import StudyArea
from detect.calibration import CalibrationOptions, fit_calibration
from detect.doubt import DoubtModel
from detect.find import Found, find_spots
from detect.lengths import Length, parse_pair
from detect.photograph import read_photograph
from detect.picture_doubt import Evidence, PictureCalibration
from detect.reliability import area_under_curve, reliability, reliability_csv
from detect.reliability_chart import figure_png, reliability_figure
from detect.scale import Scale
from detect.wanted import DetectOptions, Kind
from tests.benchmarks.fit_doubt import DIAMETERS, fit, marked_scenes, true_area
from tests.benchmarks.hand_marked import SETS, MarkedSet

RAW = PictureCalibration()  # leaves the model's doubt as it is
REVIEWED = 30
SEEDS = 200
# Ridge on the constants in units of one spot's log likelihood, per 1,000 spots of a set or kind.
RIDGE, KIND_RIDGE = np.array([0.0, 0.5, 0.5]), np.array([0.0, 3.0, 10.0])
SPREADS = [(a, b) for a in (0.2, 0.3, 0.5, 0.75) for b in (0.1, 0.2, 0.3)]

Answers = tuple[NDArray[np.float64], NDArray[np.bool_]]  # doubts, and which spots are false


@dataclass(frozen=True)
class Picture:
    """What the model doubted in one picture, and which of it was false."""

    doubt: NDArray[np.float64]
    false: NDArray[np.bool_]
    evidence: Evidence

    @property
    def rows(self) -> NDArray[np.float64]:
        """The terms of the calibration, a row per spot."""
        n = self.doubt.size
        at = logit(np.clip(self.doubt, 1e-6, 1 - 1e-6))
        return np.column_stack([np.ones(n), at, np.full(n, self.evidence.spread)])


def picture(
    found: Found, truth: NDArray[np.float64], radius: NDArray[np.float64], area: StudyArea
) -> Picture:
    """Compare what was found with marks; spots at marks beyond the area have no say."""
    match = match_spots(found.spots.centres, truth, radius)
    false = np.ones(len(found.spots), dtype=bool)
    false[match.found] = False
    use = np.ones(len(found.spots), dtype=bool)
    use[match.found[~area.contains(truth[match.truth])]] = False
    return Picture(found.spots.doubt[use], false[use], found.evidence)


def marked_pictures(marked: MarkedSet, model: DoubtModel) -> list[Picture]:
    low, high = (Length(v, "px") for v in marked.diameter)
    options = DetectOptions(diameter=(low, high), colour=marked.colour)
    pictures = []
    for path in marked.images:
        photograph = read_photograph(path)
        right, bottom = photograph.width - 0.5, photograph.height - 0.5
        area = StudyArea(shapely.box(-0.5, -0.5, right, bottom), "frame", "")
        found = find_spots(photograph, area, options, model=model, calibration=RAW)
        truth, radius = marked.truth(path.stem)
        made = picture(found, truth, np.where(np.isnan(radius), marked.usual_radius, radius), area)
        x, y = found.spots.x, found.spots.y
        far = np.minimum.reduce([x, y, photograph.width - 1 - x, photograph.height - 1 - y])
        use = ~made.false | (far >= marked.margin)
        pictures.append(Picture(made.doubt[use], made.false[use], made.evidence))
    return pictures


def drawn_pictures(folder: Path) -> dict[Kind, list[Picture]]:
    pictures: dict[Kind, list[Picture]] = {kind: [] for kind in DIAMETERS}
    with (folder / "truth" / "trial.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    for row in rows:
        kind: Kind = row["kind"]  # type: ignore[assignment]
        photograph = read_photograph(folder / row["photograph"])
        area = true_area(row, folder, photograph)
        diameter = parse_pair(DIAMETERS[kind], name="diameter", separator="-")
        options = DetectOptions(kind=kind, diameter=diameter)
        scale = Scale.from_mm_per_pixel(float(row["mm_per_px"]))
        found = find_spots(photograph, area, options, scale=scale, calibration=RAW)
        with (folder / "truth" / f"{Path(row['photograph']).stem}.csv").open(newline="") as file:
            marks = [[float(r[c]) for c in ("x", "y", "r")] for r in csv.DictReader(file)]
        truth = np.array(marks).reshape(-1, 3)
        pictures[kind].append(picture(found, truth[:, :2], truth[:, 2], area))
    return pictures


def fit_picture_calibration(
    sets: Sequence[Sequence[Picture]],
    *,
    around: PictureCalibration = RAW,
    ridge: NDArray[np.float64] = RIDGE,
) -> PictureCalibration:
    """Logistic regression with a ridge around given constants; each set weighs the same."""
    x = np.vstack([p.rows for pictures in sets for p in pictures])
    y = np.concatenate([p.false for pictures in sets for p in pictures]).astype(float)
    sizes = [sum(p.doubt.size for p in pictures) for pictures in sets]
    w = np.concatenate([np.full(n, 1000 / n) for n in sizes])
    centre = np.array([around.intercept, around.slope, around.spread])
    strength = ridge * len(sets)

    def loss(at: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        eta, away = x @ at, at - centre
        value = (w * (np.logaddexp(0, eta) - y * eta)).sum() + 0.5 * (strength * away**2).sum()
        return float(value), x.T @ (w * (expit(eta) - y)) + strength * away

    bounds = [(None, None), (0.05, None), (None, None)]
    best = minimize(loss, centre, jac=True, method="L-BFGS-B", bounds=bounds).x
    return PictureCalibration(*(round(float(v), 3) for v in best))


def calibrated(pictures: Sequence[Picture], constants: PictureCalibration) -> Answers:
    """Doubts of all spots together, and which are false."""
    doubt = [constants.of(p.evidence).applied(p.doubt) for p in pictures]
    return np.concatenate(doubt), np.concatenate([p.false for p in pictures])


def by_chance(doubt: NDArray[np.float64]) -> float:
    """Error that a perfect doubt of these sizes has on average."""
    rng = np.random.default_rng(1)
    return float(
        np.mean([reliability(doubt, rng.random(doubt.size) < doubt).error for _ in range(50)])
    )


def line(name: str, doubt: NDArray[np.float64], false: NDArray[np.bool_]) -> str:
    equal, wide = reliability(doubt, false), reliability(doubt, false, binning="width")
    return (
        f"{name:22s} {doubt.size:5d} spots, {100 * false.mean():4.1f} % false (doubt"
        f" {100 * doubt.mean():4.1f} %), error {equal.error:.3f} (equal width {wide.error:.3f},"
        f" by chance {by_chance(doubt):.3f}), area {area_under_curve(doubt, false):.3f}"
    )


def reviewed(
    doubt: NDArray[np.float64], false: NDArray[np.bool_], options: CalibrationOptions
) -> tuple[float, float, float]:
    """Error (equal count, equal width) and log loss of the rest after thirty spots, over seeds."""
    results = []
    for seed in range(SEEDS):
        order = np.random.default_rng(seed).permutation(doubt.size)
        seen, rest = order[:REVIEWED], order[REVIEWED:]
        new = fit_calibration(doubt[seen], false[seen], options=options).applied(doubt[rest])
        truth = false[rest]
        loss = -np.log(np.where(truth, new, 1 - new)).mean()
        wide = reliability(new, truth, binning="width").error
        results.append((reliability(new, truth).error, wide, loss))
    first, second, third = np.mean(results, axis=0)
    return float(first), float(second), float(third)


def together(parts: Iterable[Answers]) -> Answers:
    """All spots of several parts."""
    doubt, false = zip(*parts, strict=True)
    return np.concatenate(doubt), np.concatenate(false)


def draw(out: Path | None, name: str, answers: Answers) -> None:
    """Write the reliability diagram and its table."""
    if out is None:
        return
    out.mkdir(parents=True, exist_ok=True)
    equal, wide = reliability(*answers), reliability(*answers, binning="width")
    figure = reliability_figure(equal, wide, *answers, area_under_curve(*answers))
    (out / f"{name}.png").write_bytes(figure_png(figure))
    (out / f"{name}.csv").write_text(reliability_csv(*answers), newline="")


def marked_report(out: Path | None) -> PictureCalibration:
    """Hand-marked sets: as they come, each left out, then after thirty reviewed spots."""
    sets = {marked.name: marked for marked in SETS if marked.name != "coins"}
    scenes = {name: marked_scenes(marked) for name, marked in sets.items()}

    def judged_without(name: str, *others: str) -> list[Picture]:
        """Pictures of a set, doubted by weights that saw neither it nor others."""
        seen = [each for key, each in scenes.items() if key not in (name, *others)]
        return marked_pictures(sets[name], fit(seen))

    unseen = {name: judged_without(name) for name in sets}
    left: dict[str, Answers] = {}
    for name, pictures in unseen.items():
        print(line(f"{name}, the model's", *calibrated(pictures, RAW)))
        rest = [judged_without(other, name) for other in sets if other != name]
        left[name] = calibrated(pictures, fit_picture_calibration(rest))
        print(line(f"{name}, left out", *left[name]), flush=True)
        draw(out, name, left[name])
    draw(out, "sets", together(left.values()))
    reviewed_report(left)
    return fit_picture_calibration(list(unseen.values()))


def reviewed_report(left: dict[str, Answers]) -> None:
    """What thirty reviewed spots of each set make of the others' doubt, for several priors."""
    print(f"after {REVIEWED} reviewed spots, mean of {SEEDS} draws: error (equal width)")
    for spreads in (None, *SPREADS):
        options = CalibrationOptions() if spreads is None else CalibrationOptions(*spreads)
        results = {name: reviewed(*each, options) for name, each in left.items()}
        shown = ", ".join(f"{n} {a:.3f} ({b:.3f})" for n, (a, b, _) in results.items())
        loss = np.mean([r[2] for r in results.values()])
        print(f"  {f'spreads {spreads}' if spreads else 'as it is'}: log loss {loss:.4f}, {shown}")


def drawn_report(
    general: PictureCalibration,
    fitting: Sequence[Path],
    measuring: Sequence[Path],
    out: Path | None,
) -> dict[Kind, PictureCalibration]:
    """Drawn scenes: constants from the ones to fit on, figures from the ones to measure."""
    first = [drawn_pictures(folder) for folder in fitting]
    second = [drawn_pictures(folder) for folder in measuring]
    constants: dict[Kind, PictureCalibration] = {}
    answers = []
    for kind in DIAMETERS:
        pictures = [p for folder in first for p in folder[kind]]
        constants[kind] = fit_picture_calibration([pictures], around=general, ridge=KIND_RIDGE)
        measured = [p for folder in second for p in folder[kind]]
        if measured:
            print(line(f"{kind}, the model's", *calibrated(measured, RAW)))
            answers.append(calibrated(measured, constants[kind]))
            print(line(kind, *answers[-1]))
    if answers:
        print(line("own scenes together", *together(answers)))
        draw(out, "own_scenes", together(answers))
    return constants


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--fit", type=Path, nargs="*", default=[])
    parser.add_argument("--measure", type=Path, nargs="*", default=[])
    parser.add_argument("--out", type=Path)
    asked = parser.parse_args()
    constants: dict[Kind, PictureCalibration] = {"spots": marked_report(asked.out)}
    if asked.fit:
        constants |= drawn_report(constants["spots"], asked.fit, asked.measure, asked.out)
    for kind, each in constants.items():
        print(f'    "{kind}": {each},')


if __name__ == "__main__":
    main()
