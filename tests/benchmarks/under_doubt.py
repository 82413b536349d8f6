"""Print how often the intervals of count and density hold the truth, with and without detection error.

    python tests/benchmarks/small_scenes.py --out FIT --first 1040 --dishes 18 --plots 5 --leaves 4
    python tests/benchmarks/small_scenes.py --out DIR --first 2400 --dishes 180 --plots 24 --leaves 16
    python tests/benchmarks/under_doubt.py --fit FIT
    python tests/benchmarks/under_doubt.py DIR

--fit prints the log likelihood of the spreads that `analyse.draws.DrawOptions` holds: how far the
doubts of one photograph err together, how far the recall that planted objects give errs beyond its
own standard error, and the recall where none was measured. Scenes with fewer than 10 true objects
are left out, as everywhere in these scripts.
"""

from __future__ import annotations

import argparse
import dataclasses
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from scipy import special, stats
from small_scenes import Scene, kept

from analyse.breaking_point import Judge
from analyse.density import garwood_limits
from analyse.draws import UnderDoubt, under_doubt
from analyse.findings import stream
from analyse.pattern import Pattern, pattern_from_sheet
from analyse.quick import QuickTest, quick_test
from analyse.recalls import DrawOptions

POINTS = 20_000  # drawn by the simulations of one test, to save time: 99 or a few more of them
SPREADS = (0.0, 0.3, 0.5, 0.7, 0.85, 1.0, 1.2, 1.4, 1.7, 2.0)


def doubts_together(scenes: list[Scene], spread: float) -> float:
    """Log likelihood of what was real, doubts shifted by one normal step a scene."""
    nodes, weights = np.polynomial.hermite_e.hermegauss(41)
    total = 0.0
    for scene in scenes:
        doubt = np.clip(scene.sheet.spots.doubt, 1e-6, 1 - 1e-6)
        logit = special.logit(doubt)[None] + spread * nodes[:, None]
        false = ~scene.real[None]
        each = np.where(false, special.log_expit(logit), special.log_expit(-logit)).sum(axis=1)
        total += float(special.logsumexp(each, b=weights / weights.sum()))
    return total


def recalls_together(scenes: list[Scene], spread: float, assumed: float | None = None) -> float:
    """Log likelihood of how many objects were found, the recall shifted by one step a scene."""
    rng, total = np.random.default_rng(1), 0.0
    for scene in scenes:
        planted, there = scene.sheet.planted, len(scene.objects)
        seen = None if planted is None else planted.recall
        found = min(int(scene.real.sum()), there)
        if assumed is not None:
            chance = np.full(4000, assumed)
        elif seen is None:
            continue
        else:
            trials = float(planted.copies)
            if seen.standard_error > 0:
                trials = min(trials, seen.value * (1 - seen.value) / seen.standard_error**2)
            trials = max(trials, 1.0)
            chance = rng.beta(trials * seen.value + 0.5, trials * (1 - seen.value) + 0.5, 4000)
        logit = special.logit(np.clip(chance, 1e-6, 1 - 1e-6)) + spread * rng.normal(size=4000)
        total += float(np.log(stats.binom.pmf(found, there, special.expit(logit)).mean()))
    return total


def fit(scenes: list[Scene]) -> None:
    print(f"{len(scenes)} scenes; log likelihoods")
    for name, of in (("doubts", doubts_together), ("recall, planted", recalls_together)):
        print(name, *(f"{spread:g}: {of(scenes, spread):.2f}" for spread in SPREADS))
    for assumed in (0.93, 0.94, 0.95, 0.96, 0.97):
        each = (
            f"{spread:g}: {recalls_together(scenes, spread, assumed):.2f}" for spread in SPREADS
        )
        print(f"recall assumed {assumed}:", *each)


def drawn(scene: Scene, options: DrawOptions) -> tuple[Pattern, QuickTest, UnderDoubt]:
    """The draws of one scene."""
    pattern = pattern_from_sheet(scene.sheet)
    test = quick_test(pattern, points_at_most=POINTS)
    judge = Judge.of(test.counts.counts, test.counts.area, test.simulated)
    rng = stream(1, f"{pattern.name}, draws")
    return (
        pattern,
        test,
        under_doubt(pattern, test.counts, judge, verdict=test.verdict, rng=rng, options=options),
    )


def without_planted(scene: Scene) -> Scene:
    return dataclasses.replace(scene, sheet=dataclasses.replace(scene.sheet, planted=None))


def ways() -> Iterator[tuple[str, bool, DrawOptions]]:
    full = DrawOptions()
    yield "with detection error (as it is)", True, full
    yield "the same, recall assumed, not planted", False, full
    yield (
        "errors of spots and copies independent",
        True,
        dataclasses.replace(full, shared_doubt=0.0, shared_recall=0.0),
    )


def truly(scene: Scene) -> str:
    """The verdict on the true objects, in the study area as it was found."""
    pattern = pattern_from_sheet(scene.sheet)
    points = scene.sheet.scale.to_mm(scene.objects) if scene.sheet.scale else scene.objects
    true = Pattern.of(points, pattern.area, name=pattern.name, unit=pattern.unit)
    return quick_test(true, points_at_most=POINTS).verdict


def measure(scenes: list[Scene]) -> None:
    true = np.array([len(scene.objects) for scene in scenes])
    counted = np.array([len(pattern_from_sheet(scene.sheet)) for scene in scenes])
    kinds = {kind: sum(scene.kind == kind for scene in scenes) for kind in ("dish", "plot", "leaf")}
    print(f"{len(scenes)} scenes {kinds}, {true.sum()} objects, {counted.sum()} spots")
    print(f"the count alone is the true count: {np.mean(true == counted):.3f}")
    for name, planted, options in ways():
        results = [drawn(scene if planted else without_planted(scene), options) for scene in scenes]
        limits = [each[2].count for each in results]
        low, high = (np.array([getattr(each, end) for each in limits]) for end in ("low", "high"))
        holds = (low <= true) & (true <= high)
        by_kind = " ".join(
            f"{kind} {np.mean([h for h, s in zip(holds, scenes, strict=True) if s.kind == kind]):.3f}"
            for kind, many in kinds.items()
            if many
        )
        print(f"{name}: count held {holds.mean():.3f} ({by_kind}),", end=" ")
        print(f"below {np.mean(true < low):.3f}, above {np.mean(true > high):.3f},", end=" ")
        print(f"median width {np.median((high - low) / true):.3f} of the count")
        if options == DrawOptions() and planted:
            verdicts(scenes, results)
    poisson = [garwood_limits(int(n)) for n in counted]
    width = np.median([(p.high - p.low) / n for p, n in zip(poisson, true, strict=True)])
    held = np.mean([p.low <= n <= p.high for p, n in zip(poisson, true, strict=True)])
    print("Poisson limits of the count, which answer another question (the mean of many such")
    print(f"photographs): hold the true count {held:.3f}, median width {width:.3f}")


def verdicts(scenes: list[Scene], results: list[tuple[Pattern, QuickTest, UnderDoubt]]) -> None:
    """Whether the share of draws says how often the verdict is that of the truth."""
    same = np.array(
        [each[1].verdict == truly(scene) for scene, each in zip(scenes, results, strict=True)]
    )
    stands = np.array([each[2].stands for each in results])
    print(
        f"verdict is that of the truth in {same.mean():.3f}, mean share of draws {stands.mean():.3f}"
    )
    for low, high in ((0.0, 0.6), (0.6, 0.8), (0.8, 0.95), (0.95, 1.01)):
        there = (stands >= low) & (stands < high)
        if there.any():
            print(f"  share {low:g} to {min(high, 1):g}: {there.sum()} scenes,", end=" ")
            print(f"mean share {stands[there].mean():.3f}, as the truth {same[there].mean():.3f}")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("folder", type=Path, nargs="?")
    parser.add_argument("--fit", type=Path)
    chosen = parser.parse_args()
    if chosen.fit:
        fit(list(kept(chosen.fit)))
    if chosen.folder:
        measure(list(kept(chosen.folder)))


if __name__ == "__main__":
    main()
