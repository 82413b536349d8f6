"""Fit the weights of the doubt model on hand-marked photographs, and say what they are worth.

    python tests/benchmarks/fit_doubt.py [FOLDER OF DRAWN SCENES ...]
    python tests/benchmarks/fit_doubt.py --seedlings FOLDER OF DRAWN SCENES ...

For every set the weights are fitted on the other sets and scored on it (leave one set out); the
weights printed are fitted on all of them. Folders drawn by `own_scenes.py` give the kinds' weights;
`--seedlings` fits those of seedlings alone, near the general weights as they are. A candidate is right when its centre lies within
half a radius (at least 3 px) of a mark, its size within a factor 1.5 of the mark's where that is
known, and no second mark lies well inside it. Each set has the same say.
"""

from __future__ import annotations

import csv
import sys
from dataclasses import dataclass, replace
from pathlib import Path

import cv2
import numpy as np
import shapely
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.spatial import cKDTree

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from detect.accuracy import match_spots
from detect.area import StudyArea, frame_area, leaf_area
from detect.choice import choose
from detect.doubt import FEATURES, GENERAL, DoubtModel, doubt_of
from detect.find import look_at
from detect.judge import judge_side
from detect.lengths import Length, parse_pair
from detect.photograph import Photograph, read_photograph
from detect.regions import Candidates
from detect.wanted import DetectOptions, Kind
from tests.benchmarks.hand_marked import SETS, MarkedSet
from tests.benchmarks.other_plants import DIAMETER_PX, FORMS, other_plot
from tests.scenes import cloud, developed, lay, photograph_of, rosette

RIDGE = 30.0  # against standardised weights; each set weighs 5,000
KIND_RIDGE = 20.0
CARRIED = (
    *("size", "open", "faint", "slope", "rough", "texture", "neck", "cut", "local"),
    *("misfit", "freed"),
)
# Candidates that win over those they overlap weigh so much more: these are what is shown. Fitted in
# rounds, as the weights decide who wins. Of plants only; of the others it was not tried.
WINNERS_WEIGH, WINNERS_ROUNDS = 40.0, 3
OTHER_SEEDS, OTHER_SHARE = range(1000, 1004), 0.2
BARE_SEEDS, BARE_SHARE = range(1000, 1012), 0.1
BESIDE_SEEDS, BESIDE_SHARE = range(1000, 1016), 0.2
NOT_OF_PLANTS = ("cut", "frame", "local", "misfit", "freed")
DIAMETERS: dict[Kind, str] = {"colonies": "1.2-6mm", "seedlings": "12-36mm", "lesions": "1.4-5mm"}


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


@dataclass(frozen=True)
class Scene:
    """Candidates of one photograph, what was measured, and which of them are right."""

    candidates: Candidates
    xy: NDArray[np.float64]
    measured: NDArray[np.float64]
    good: NDArray[np.bool_]
    edge: NDArray[np.bool_]
    truth: NDArray[np.float64]
    radius: NDArray[np.float64]

    @property
    def use(self) -> NDArray[np.bool_]:
        return self.good | ~self.edge


def scene(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    truth: NDArray[np.float64],
    radius: NDArray[np.float64],
    *,
    mm_per_px: float | None = None,
    usual: float = 6.0,
    match_size: bool = True,
    other_side: bool = False,
) -> Scene:
    low, high = (length.to_px(mm_per_px) for length in options.diameter)
    view, found = look_at(photograph, area, options, (low, high), model=GENERAL)
    if other_side:
        small, large = low * view.shrink, high * view.shrink
        found = judge_side(view, small, large, options, GENERAL, flipped=True)
    xy = np.column_stack(view.to_photograph(found.candidates.x, found.candidates.y))
    size = radius if match_size else np.full_like(radius, np.nan)
    good = right(xy, found.candidates.diameter / view.shrink, truth, size, usual)
    return Scene(found.candidates, xy, found.measured, good, ~area.contains(xy), truth, radius)


def marked_scenes(marked: MarkedSet) -> list[Scene]:
    options = DetectOptions(
        diameter=tuple(Length(v, "px") for v in marked.diameter), colour=marked.colour
    )
    scenes = []
    for path in marked.images:
        photograph = read_photograph(path)
        whole = shapely.box(-0.5, -0.5, photograph.width - 0.5, photograph.height - 0.5)
        truth, radius = marked.truth(path.stem)
        made = scene(
            photograph,
            StudyArea(whole, "frame", ""),
            options,
            truth,
            radius,
            usual=marked.usual_radius,
        )
        inner = shapely.box(
            marked.margin,
            marked.margin,
            photograph.width - 1 - marked.margin,
            photograph.height - 1 - marked.margin,
        )
        edge = ~shapely.intersects_xy(inner, made.xy[:, 0], made.xy[:, 1])
        scenes.append(
            replace(made, edge=edge, radius=np.where(np.isnan(radius), marked.usual_radius, radius))
        )
    return scenes


def counter_examples(folder: Path, kind: Kind) -> list[Scene]:
    """The same photographs looked at from the side on which no object lies: all of it is false."""
    scenes = drawn_scenes(folder, kind, other_side=True)
    empty = [s for s in scenes if s.good.sum() < 0.3 * len(s.truth) + 1]
    return [
        replace(s, good=np.zeros_like(s.good), truth=s.truth[:0], radius=s.radius[:0])
        for s in empty
    ]


def drawn_scenes(folder: Path, kind: Kind, *, other_side: bool = False) -> list[Scene]:
    """Scenes of one kind that `own_scenes.py` drew, with their true areas."""
    with (folder / "truth" / "trial.csv").open(newline="") as file:
        rows = [row for row in csv.DictReader(file) if row["kind"] == kind]
    options = DetectOptions(
        kind=kind, diameter=parse_pair(DIAMETERS[kind], name="d", separator="-")
    )
    scenes = []
    for row in rows:
        stem = Path(row["photograph"]).stem
        photograph = read_photograph(folder / f"{stem}.jpg")
        area = true_area(row, folder, photograph)
        with (folder / "truth" / f"{stem}.csv").open(newline="") as file:
            marks = np.array(
                [[float(r[c]) for c in ("x", "y", "r")] for r in csv.DictReader(file)]
            ).reshape(-1, 3)
        marks = marks[area.contains(marks[:, :2])]
        mm_per_px = float(row["mm_per_px"])
        scenes.append(
            scene(
                photograph, area, options, marks[:, :2], marks[:, 2],
                mm_per_px=mm_per_px, usual=9.0 / mm_per_px, match_size=kind != "seedlings",
                other_side=other_side,
            )
        )  # fmt: skip
    return scenes


def true_area(row: dict[str, str], folder: Path, photograph: Photograph) -> StudyArea:
    if row["kind"] == "colonies":
        inset = 1.0 / float(row["mm_per_px"])
        a, b = float(row["semi_a"]) - inset, float(row["semi_b"]) - inset
        turn, t = np.radians(float(row["angle_deg"])), np.linspace(0, 2 * np.pi, 361)[:-1]
        u, v = a * np.cos(t), b * np.sin(t)
        x = float(row["cx"]) + u * np.cos(turn) - v * np.sin(turn)
        y = float(row["cy"]) + u * np.sin(turn) + v * np.cos(turn)
        return StudyArea(shapely.Polygon(np.column_stack([x, y])), "dish", "true")
    if row["kind"] == "seedlings":
        corners = [(float(row[f"x{k}"]), float(row[f"y{k}"])) for k in (1, 2, 3, 4)]
        return StudyArea(shapely.Polygon(corners), "plot", "true")
    return leaf_area(photograph)


def fit(
    groups: list[list[Scene]],
    *,
    around: DoubtModel | None = None,
    ridge: float = RIDGE,
    shares: tuple[float, ...] | None = None,
    winners_of: DoubtModel | None = None,
    without: tuple[str, ...] = (),
) -> DoubtModel:
    """Logistic regression with a ridge around a model (zero unless given); each group weighs 5,000,
    or its share of that. Candidates that win under `winners_of` weigh more than the rest; features
    `without` which is fitted weigh nothing.

    Around nothing, only eleven features are fitted: the others do not carry over from one subject to
    the next (leave one set out).
    """
    chosen = CARRIED if around is None else FEATURES[: groups[0][0].measured.shape[1]]
    chosen = [name for name in chosen if name not in without]
    columns = [FEATURES.index(name) for name in chosen]
    x = np.vstack([s.measured[s.use][:, columns] for group in groups for s in group])
    y = np.concatenate([s.good[s.use] for group in groups for s in group]).astype(float)
    parts = []
    for group, share in zip(groups, shares or (1.0,) * len(groups), strict=True):
        weight = np.concatenate([heaviness(s, winners_of)[s.use] for s in group])
        parts.append(weight * 5000 * share / weight.sum())
    w = np.concatenate(parts)
    spread = np.maximum(x.std(axis=0), 1e-9)
    z = np.column_stack([np.ones(len(x)), x / spread])
    centre = np.zeros(z.shape[1])
    if around is not None:
        centre = np.r_[around.intercept, around.weights[columns] * spread]

    def loss(beta: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        eta = z @ beta
        pull = ridge * np.r_[0.0, (beta - centre)[1:]]
        value = (w * (np.logaddexp(0, eta) - y * eta)).sum() + 0.5 * pull @ (beta - centre)
        return float(value), z.T @ (w * (1 / (1 + np.exp(-eta)) - y)) + pull

    beta = minimize(loss, centre, jac=True, method="L-BFGS-B").x
    weights = dict.fromkeys(FEATURES, 0.0)
    weights |= {name: float(v) for name, v in zip(chosen, beta[1:] / spread, strict=True)}
    return DoubtModel(intercept=float(beta[0]), **weights)


def heaviness(scene: Scene, model: DoubtModel | None) -> NDArray[np.float64]:
    """1 for each candidate, more for those that win under a model."""
    weight = np.ones(len(scene.candidates))
    if model is not None:
        doubt = doubt_of(scene.measured, model)
        weight[choose(scene.candidates, doubt, highest_doubt=0.95)] = WINNERS_WEIGH
    return weight


def fit_plants(own: list[Scene], further: list[list[Scene]], general: DoubtModel) -> DoubtModel:
    """Fit on plots like the sample trial's and, with less say, on others and bare ground."""
    less = (OTHER_SHARE, BESIDE_SHARE, BARE_SHARE)
    shares = (1.0 - sum(less), *less)
    model = None
    for _ in range(WINNERS_ROUNDS + 1):
        model = fit(
            [own, *further],
            around=general,
            ridge=KIND_RIDGE,
            shares=shares,
            winners_of=model,
            without=NOT_OF_PLANTS,
        )
    return model


def other_plants() -> list[Scene]:
    """Plants of other forms than the sample trial's, drawn by `other_plants.py`."""
    options = DetectOptions(kind="seedlings", diameter=tuple(Length(v, "px") for v in DIAMETER_PX))
    scenes = []
    for form in FORMS:
        for seed in OTHER_SEEDS:
            made = other_plot(seed, form)
            area = frame_area(made.photograph.width, made.photograph.height)
            truth = made.truth
            scenes.append(
                scene(
                    made.photograph, area, options, truth[:, :2], truth[:, 2],
                    usual=float(np.median(truth[:, 2])), match_size=False,
                )
            )  # fmt: skip
    return scenes


def side_by_side() -> list[Scene]:
    """Pairs of rosettes whose leaves meet or nearly do, of radii from small to large."""
    scenes = []
    for seed in BESIDE_SEEDS:
        rng = np.random.default_rng(seed)
        image = np.ones((420, 420, 3), np.float32) * np.array([0.42, 0.33, 0.25], np.float32)
        image *= (1 + 0.06 * cloud((420, 420), rng, size=6))[..., None]
        radius, apart, leaves = rng.uniform(18, 27), rng.uniform(1.9, 2.6), int(rng.integers(4, 8))
        marks = []
        for middle in ((x, y) for x in (75, 210, 345) for y in (70, 210, 350)):
            turn = rng.uniform(0, np.pi)
            step = 0.5 * apart * radius * np.array([np.cos(turn), np.sin(turn)])
            for centre in (np.array(middle) - step, np.array(middle) + step):
                at = (float(centre[0]), float(centre[1]))
                plant = rosette(
                    (420, 420), at, radius, leaves=leaves, turn=float(rng.uniform(0, 6))
                )
                lay(image, (0.3, 0.5, 0.16), plant)
                marks.append([*at, radius])
        photograph = developed(image, rng, blur=0.7, noise=0.012)
        pair = Length(rng.uniform(0.9, 1.45) * radius, "px"), Length(2.8 * radius, "px")
        options = DetectOptions(kind="seedlings", diameter=pair)
        truth = np.array(marks)
        area = frame_area(photograph.width, photograph.height)
        scenes.append(scene(photograph, area, options, truth[:, :2], truth[:, 2], match_size=False))
    return scenes


def bare_ground() -> list[Scene]:
    """Grain from fine to coarse, on which nothing grows: all of it is false."""
    scenes = []
    for seed in BARE_SEEDS:
        rng = np.random.default_rng(seed)
        for blur in (0.0, rng.uniform(0.6, 1.2), rng.uniform(1.2, 4.0)):
            photograph = grain(rng, noise=rng.uniform(0.005, 0.06), blur=blur)
            area = frame_area(photograph.width, photograph.height)
            smallest = rng.uniform(8.0, 24.0)
            pair = Length(smallest, "px"), Length(smallest * rng.uniform(2.0, 3.0), "px")
            options = DetectOptions(kind="seedlings", diameter=pair)
            scenes.append(scene(photograph, area, options, np.zeros((0, 2)), np.zeros(0)))
    return scenes


def grain(rng: np.random.Generator, *, noise: float, blur: float) -> Photograph:
    """Ground of any tone with grain of a size, under uneven light."""
    shape = (360, 480)
    made = rng.normal(size=(*shape, 3)).astype(np.float32)
    if rng.random() < 0.4:
        made[:] = made.mean(axis=2, keepdims=True)
    if blur:
        made = cv2.GaussianBlur(made, (0, 0), blur)
    made /= made.std()
    tone = rng.uniform(0.25, 0.55) * rng.uniform(0.8, 1.2, 3).astype(np.float32)
    ramp = np.linspace(0.9, 1.1, shape[1], dtype=np.float32)[None, :, None]
    cloudy = 0.05 * rng.random() * cloud(shape, rng, size=12)[..., None]
    return photograph_of((tone + noise * made) * ramp + cloudy)


def score(scenes: list[Scene], model: DoubtModel, *, kind: Kind = "spots") -> tuple[float, float]:
    """F1 and count error at the doubt the tool keeps."""
    hits = spots = marks = 0
    for s in scenes:
        doubt = doubt_of(s.measured, model)
        rows = choose(s.candidates, doubt, highest_doubt=DetectOptions(kind=kind).most_doubt)
        match = match_spots(s.xy[rows], s.truth, s.radius)
        missed = np.ones(len(rows), dtype=bool)
        missed[match.found] = False
        hits += len(match)
        spots += len(rows) - int((missed & s.edge[rows]).sum())
        marks += len(s.truth)
    return 2 * hits / max(1, spots + marks), spots / max(1, marks) - 1


def show(name: str, model: DoubtModel) -> None:
    print(f"{name} = DoubtModel(")
    for weight in ("intercept", *FEATURES):
        print(f"    {weight}={getattr(model, weight):.3f},")
    print(")")


def main() -> None:
    if sys.argv[1:2] == ["--seedlings"]:
        fit_kind("seedlings", [Path(name) for name in sys.argv[2:]], GENERAL)
        return
    data = {marked.name: marked_scenes(marked) for marked in SETS}
    fitted = [name for name in data if name != "coins"]
    scores = []
    for name, scenes in data.items():
        f1, error = score(scenes, fit([data[other] for other in fitted if other != name]))
        scores.append(f1)
        print(f"{name:10s} left out: F1 {f1:.3f}, count error {100 * error:+.0f} %")
    print(f"mean without coins {np.mean(scores[:5]):.4f}")
    general = fit([data[name] for name in fitted])
    print("fitted on all:", " ".join(f"{n} {score(s, general)[0]:.3f}" for n, s in data.items()))
    show("GENERAL", general)
    folders = [Path(name) for name in sys.argv[1:]]
    for kind in DIAMETERS if folders else ():
        fit_kind(kind, folders, general)


def fit_kind(kind: Kind, folders: list[Path], general: DoubtModel) -> None:
    """Fit one kind on drawn scenes, near the general weights; leave one photograph out to score."""
    scenes = [s for folder in folders for s in drawn_scenes(folder, kind)]
    if kind == "seedlings":
        show_plants(scenes, general)
        return
    false = []
    if kind == "colonies":
        false = [s for folder in folders for s in counter_examples(folder, kind)]
    left = [
        score([s], fit([scenes[:k] + scenes[k + 1 :] + false], around=general, ridge=KIND_RIDGE))
        for k, s in enumerate(scenes)
    ]
    weight = [len(s.truth) for s in scenes]
    before, after = score(scenes, general)[0], np.average([f for f, _ in left], weights=weight)
    print(f"{kind}: {len(scenes)} photographs, F1 with GENERAL {before:.3f}, left out {after:.3f}")
    show(kind.upper(), fit([scenes + false], around=general, ridge=KIND_RIDGE))


def show_plants(own: list[Scene], general: DoubtModel) -> None:
    """Print the weights of seedlings, and what those fitted on two thirds of the plots are worth."""
    other, beside, bare = other_plants(), side_by_side(), bare_ground()
    further = [other, beside, bare]
    kept = [s for k, s in enumerate(own) if k % 3]
    f1, _ = score(own[::3], fit_plants(kept, further, general), kind="seedlings")
    print(f"seedlings: {len(own)} plots, F1 of every third, left out, {f1:.3f}")
    model = fit_plants(own, further, general)
    print(f"  of all, fitted on all {score(own, model, kind='seedlings')[0]:.3f}")
    for k, form in enumerate(FORMS):
        n = len(OTHER_SEEDS)
        f1, _ = score(other[k * n : (k + 1) * n], model, kind="seedlings")
        print(f"  of {form} {f1:.3f}")
    print(f"  of rosettes side by side {score(beside, model, kind='seedlings')[0]:.3f}")
    limit = DetectOptions(kind="seedlings").most_doubt
    spots = [
        len(choose(s.candidates, doubt_of(s.measured, model), highest_doubt=limit)) for s in bare
    ]
    print(f"  on bare ground {sum(spots)} on {len(bare)}, at most {max(spots)}")
    show("SEEDLINGS", model)


if __name__ == "__main__":
    main()
