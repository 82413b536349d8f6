"""What learning from corrections gains on the photographs that were not corrected.

    python tests/benchmarks/learning.py [--seeds N] [--reviewed N ...] [--own-weights] [SET ...]

The truth stands in for the reviewer: on some photographs of a set it strikes what is false and
places what was missed; the others are then detected without and with what was learned. The weights
to start from are fitted without the set (leave one set out), unless --own-weights takes the tool's.
Two columns: with the set's hint given again (it wins over a learned range or direction), and not.
Then drawn scenes in which colour matters.
"""

from __future__ import annotations

import argparse
import sys
import tempfile
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

ROOT = Path(__file__).resolve().parents[2]
sys.path.insert(0, str(ROOT))

from detect.accuracy import match_spots
from detect.doubt import MODELS, DoubtModel
from detect.errors import NothingLearned
from detect.learning import learn
from detect.requests import DetectRequest, detect_photograph, parse_request
from detect.reviewed import gather_reviewed
from detect.sheet import Sheet
from detect.taught import Taught
from tests.benchmarks.hand_marked import SETS, MarkedSet
from tests.reviewer import review
from tests.scenes import cloud

Told = dict[str, str]


def told_of(marked: MarkedSet) -> Told:
    return dict(zip((key.lstrip("-") for key in marked.told[::2]), marked.told[1::2], strict=True))


def left_out_weights() -> dict[str, DoubtModel]:
    """For each set the weights fitted on the other sets."""
    from tests.benchmarks.fit_doubt import fit, marked_scenes

    data = {marked.name: marked_scenes(marked) for marked in SETS if marked.name != "coins"}
    return {name: fit([data[other] for other in data if other != name]) for name in data}


def counts(marked: MarkedSet, path: Path, sheet: Sheet) -> tuple[int, int, int]:
    """True, found and paired objects of one photograph, by the rule of the sets."""
    xy, r = marked.truth(path.stem)
    spots = sheet.spots.centres
    pairs = match_spots(spots, xy, np.where(np.isnan(r), marked.usual_radius, r))
    alone = np.delete(spots, pairs.found, axis=0)
    size = np.array([sheet.photograph.width, sheet.photograph.height])
    if marked.margin:
        alone = alone[np.minimum(alone, size - 1 - alone).min(axis=1) >= marked.margin]
    return len(xy), len(pairs) + len(alone), len(pairs)


def f1(rows: list[tuple[int, int, int]]) -> float:
    truth, found, matched = np.sum(rows, axis=0)
    return 2 * matched / max(1, truth + found)


def with_taught(told: Told, taught: Taught) -> DetectRequest:
    return replace(parse_request(told | {"kind": taught.kind}), taught=taught)


def learned_from(
    marked: MarkedSet, paths: list[Path], before: dict[Path, Sheet], folder: Path
) -> Taught:
    for path in paths:
        review(
            before[path], path, *marked.truth(path.stem), folder,
            usual_radius=marked.usual_radius, margin=marked.margin,
        )  # fmt: skip
    return learn(gather_reviewed(folder)[0], tool_version="benchmark")


def set_gains(
    marked: MarkedSet, numbers: list[int], seeds: int, *, hint: bool
) -> dict[int, list[list[float]]]:
    """For each number reviewed, a row per choice: F1 before, hint given again, not given again."""
    told = (
        told_of(marked) if hint else {k: v for k, v in told_of(marked).items() if k != "diameter"}
    )
    images = marked.images
    before = {path: detect_photograph(path, parse_request(told))[1] for path in images}
    results: dict[int, list[list[float]]] = {number: [] for number in numbers}
    for number in numbers:
        for seed in range(seeds):
            rng = np.random.default_rng([seed, number])
            chosen = [images[k] for k in sorted(rng.choice(len(images), number, replace=False))]
            others = [path for path in images if path not in chosen]
            try:
                with tempfile.TemporaryDirectory() as name:
                    taught = learned_from(marked, chosen, before, Path(name))
            except NothingLearned as trouble:
                print(f"  {marked.name} {[p.stem for p in chosen]}: {trouble}", flush=True)
                continue
            row = [f1([counts(marked, path, before[path]) for path in others])]
            for say in (told, {}):
                request = with_taught(say, taught)
                row.append(
                    f1([counts(marked, p, detect_photograph(p, request)[1]) for p in others])
                )
            results[number].append(row)
            learned = "+".join(
                word
                for word, there in (
                    ("weights", taught.own_colour is not None),
                    ("sizes", taught.sized),
                    ("direction", taught.direction is not None),
                )
                if there
            )
            print(
                f"  {marked.name:10} {number} reviewed ({taught.lessons.spots} spots), choice {seed}:"
                f" {row[0]:.3f} -> {row[1]:.3f} / {row[2]:.3f}  [{learned or 'nothing'}]",
                flush=True,
            )
    return results


def show_sets(chosen: list[MarkedSet], asked: argparse.Namespace, *, hint: bool) -> None:
    weights = {} if asked.own_weights else left_out_weights()
    usual = MODELS["spots"]
    print(f"{'with' if hint else 'without'} the hint of sizes when the sheets were made")
    gains: dict[int, list[list[float]]] = {number: [] for number in asked.reviewed}
    for marked in chosen:
        MODELS["spots"] = weights.get(marked.name, usual)
        for number, rows in set_gains(marked, asked.reviewed, asked.seeds, hint=hint).items():
            if rows:
                gains[number].append(np.mean(rows, axis=0).tolist())
                before, again, plain = gains[number][-1]
                print(
                    f"{marked.name:10} {number} reviewed: {before:.3f}, hint again"
                    f" {again - before:+.3f}, not again {plain - before:+.3f}",
                    flush=True,
                )
    MODELS["spots"] = usual
    for number, means in gains.items():
        if means:
            before, again, plain = np.mean(means, axis=0)
            print(
                f"mean of {len(means)} sets, {number} reviewed: {before:.3f}, hint again"
                f" {again - before:+.3f}, not again {plain - before:+.3f}"
            )


def coloured_scene(
    seed: int, *, ground: str, kept: str, others: str | None, shape: tuple[int, int] = (480, 640)
) -> tuple[NDArray[np.uint8], NDArray[np.float64]]:
    """Discs of named colours (L*, a*, b*) on a ground; the truth is those of the kept colour."""
    rng = np.random.default_rng([seed, 77])
    lab = np.empty((*shape, 3), np.float32)
    lab[:] = COLOURS[ground]
    lab += cv2.GaussianBlur(rng.normal(0, 12, lab.shape).astype(np.float32), (0, 0), 25)
    if ground == "mottled":
        lab[..., 0] += 9 * cloud(shape, rng, size=7)
    rows: list[list[float]] = []
    for k in range(80):
        r = float(rng.uniform(7, 11))
        for _ in range(200):
            x, y = rng.uniform([14, 14], [shape[1] - 14, shape[0] - 14])
            if all(np.hypot(x - row[0], y - row[1]) > r + row[2] + 3 for row in rows):
                rows.append([float(x), float(y), r, float(others is None or k % 2 == 0)])
                break
    yy, xx = np.mgrid[: shape[0], : shape[1]].astype(np.float32)
    for x, y, r, is_kept in rows:
        cover = np.clip(r + 0.5 - np.hypot(xx - x, yy - y), 0, 1)[..., None]
        colour = np.array(COLOURS[kept if is_kept else str(others)]) + rng.normal(0, 2.5, 3)
        lab += cover * (colour.astype(np.float32) - lab)
    rgb = cv2.cvtColor(cv2.GaussianBlur(lab, (0, 0), 0.8), cv2.COLOR_Lab2RGB)
    rgb += rng.normal(0, 0.012, rgb.shape).astype(np.float32)
    truth = np.array([row[:3] for row in rows if row[3]])
    return np.clip(np.round(rgb * 255), 0, 255).astype(np.uint8), truth


COLOURS = {
    "grey": (62.0, 0.0, 2.0),
    "green": (50.0, -28.0, 26.0),
    "mottled": (50.0, -28.0, 26.0),
    "red": (50.0, 38.0, 24.0),
    "blue": (50.0, 6.0, -36.0),
    "pale red": (66.0, 20.0, 12.0),
    "yellow": (76.0, 2.0, 52.0),
}
CASES = (
    ("red on green of the same lightness", "green", "red", None),
    ("red on mottled green of the same lightness", "mottled", "red", None),
    ("red kept, blue struck, on grey", "grey", "red", "blue"),
    ("red kept, yellow struck, on grey", "grey", "red", "yellow"),
    ("deep red kept, pale red struck, on grey", "grey", "red", "pale red"),
)


def show_colours(seeds: int) -> None:
    print("drawn scenes, two reviewed, four others; sizes 12-24px told when the sheets were made")
    for name, ground, kept, others in CASES:
        rows = []
        for seed in range(seeds):
            with tempfile.TemporaryDirectory() as folder:
                rows.append(coloured_case(Path(folder), seed, ground, kept, others))
        before, after = np.mean(rows, axis=0)
        print(f"{name:42} F1 {before:.3f} -> {after:.3f}", flush=True)


def coloured_case(
    folder: Path, seed: int, ground: str, kept: str, others: str | None
) -> tuple[float, float]:
    """F1 on four scenes before and after two others of the same sort were reviewed."""
    told = {"diameter": "12-24px"}
    (folder / "sheets").mkdir()
    scenes = []
    for k in range(6):
        picture, truth = coloured_scene(100 * seed + k, ground=ground, kept=kept, others=others)
        path = folder / f"scene_{k}.png"
        cv2.imwrite(str(path), picture[..., ::-1])
        scenes.append((path, truth, detect_photograph(path, parse_request(told))[1]))
    for path, truth, sheet in scenes[:2]:
        review(sheet, path, truth[:, :2], truth[:, 2], folder / "sheets")
    reviewed, _ = gather_reviewed(folder / "sheets", unchanged=True)
    taught = learn(reviewed, tool_version="benchmark")
    after = [detect_photograph(path, with_taught({}, taught))[1] for path, _, _ in scenes[2:]]
    return tuple(
        f1(
            [
                (
                    len(truth),
                    len(sheet.spots),
                    len(match_spots(sheet.spots.centres, truth[:, :2], truth[:, 2])),
                )
                for (_, truth, _), sheet in zip(scenes[2:], sheets, strict=True)
            ]
        )
        for sheets in ([sheet for _, _, sheet in scenes[2:]], after)
    )  # type: ignore[return-value]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("sets", nargs="*", help="only these; 'colours' for the drawn scenes alone")
    parser.add_argument("--seeds", type=int, default=3)
    parser.add_argument("--reviewed", type=int, nargs="+", default=[1, 3, 6])
    parser.add_argument("--own-weights", action="store_true")
    parser.add_argument(
        "--no-hint", action="store_true", help="sheets made without a range of sizes"
    )
    asked = parser.parse_args()
    chosen = [m for m in SETS if m.name != "coins" and (not asked.sets or m.name in asked.sets)]
    if chosen and chosen[0].images:
        show_sets(chosen, asked, hint=not asked.no_hint)
    if not asked.sets or "colours" in asked.sets:
        show_colours(asked.seeds)


if __name__ == "__main__":
    main()
