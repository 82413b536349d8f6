"""Draw the sample trial: photographs, their truth and the recipe, all from one seed.

Run ``python sample_images/draw.py``; it writes into its own folder unless ``--out`` says otherwise.
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

import dishes
import leaves
import plots
import records
import trial
from light import Picture, jpeg
from records import Shot

NOTES = {
    "dish_01": "evenly spread colonies; window glare, writing, bubbles",
    "dish_02": "crowded; some colonies touch; lamp glare",
    "dish_03": "sparse, on pale cloth; tube light, condensation",
    "dish_04": "splashed in patches; no lid; window glare on the agar",
    "dish_05": "nothing grew; glare, bubbles, condensation, fibres, scratches, writing",
    "dish_06": "chance alone; sector lines in red pen",
    "plot_01": "in patches; moss-like film, straw, shadow of a weed",
    "plot_02": "chance alone; damp cloddy soil with stones",
    "plot_03": "sown evenly; dry cracked soil; strongest tilt",
    "plot_04": "chance alone; much straw, young plants",
    "leaf_01": "chance alone; white paper",
    "leaf_02": "evenly spread; grey board",
    "leaf_03": "in patches; buff card",
}


def shots() -> dict[str, Shot]:
    """Give all photographs of the trial by name, as data."""
    return {**trial.dishes(), **trial.plots(), **trial.leaves()}


def draw(shot: Shot, *, shrink: float = 1.0) -> Picture:
    """Draw one photograph in memory (rows, columns, 3), red first; `shrink` below 1 for a quick look."""
    if isinstance(shot, dishes.Dish):
        return dishes.draw(shot, shrink=shrink)
    if isinstance(shot, plots.Plot):
        return plots.draw(shot, shrink=shrink)
    return leaves.draw(shot, shrink=shrink)


def write_all(out: Path, wanted: list[str]) -> None:
    """Write the wanted photographs with their truth, and the trial table and recipe in full."""
    truth = out / "truth"
    (truth / "outlines").mkdir(parents=True, exist_ok=True)
    rows = []
    for name, shot in shots().items():
        objects = records.true_objects(shot)
        rows.append(records.trial_row(name, shot, len(objects), NOTES[name]))
        if name not in wanted:
            continue
        (out / f"{name}.jpg").write_bytes(jpeg(draw(shot), shot.exposure.quality))
        records.write_objects(truth / f"{name}.csv", objects)
        if isinstance(shot, leaves.LeafShot):
            records.write_outline(truth / "outlines" / f"{name}.csv", shot)
        sys.stderr.write(f"{name}: {len(objects)} objects\n")
    records.write_trial(truth / "trial.csv", rows)
    records.write_recipe(out / "survey.toml", shots())


def main(arguments: list[str] | None = None) -> int:
    """Read the command line and draw."""
    known = list(shots())
    parser = argparse.ArgumentParser(description="Draw the sample trial from its seed.")
    parser.add_argument(
        "--out",
        type=Path,
        default=Path(__file__).resolve().parent,
        metavar="DIR",
        help="where to write",
    )
    parser.add_argument("--only", choices=known, metavar="NAME", help=f"one of {', '.join(known)}")
    chosen = parser.parse_args(arguments)
    write_all(chosen.out, [chosen.only] if chosen.only else known)
    return 0


if __name__ == "__main__":
    raise SystemExit(main())
