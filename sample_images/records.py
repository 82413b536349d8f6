"""What is known about the drawn photographs, as files: true objects, true scale, and the recipe."""

from __future__ import annotations

import csv
from pathlib import Path

import dishes
import leaves
import numpy as np
import plots
from blade import edge_line
from camera import Points
from dishes import Dish
from leaves import LeafShot
from plots import Plot
from trial import SEED, TITLE

Shot = Dish | Plot | LeafShot
COLUMNS = [
    "photograph",
    "kind",
    "pattern",
    "objects",
    "known_length_mm",
    "known_length_px",
    "mm_per_px",
    "width_mm",
    "height_mm",
    "note",
    "cx",
    "cy",
    "semi_a",
    "semi_b",
    "angle_deg",
    "x1",
    "y1",
    "x2",
    "y2",
    "x3",
    "y3",
    "x4",
    "y4",
    "bar_x1",
    "bar_y1",
    "bar_x2",
    "bar_y2",
]


def true_objects(shot: Shot) -> Points:
    """Give x, y, r in pixels of every object that counts, from top to bottom, (n, 3)."""
    if isinstance(shot, Dish):
        found = dishes.truth(shot)
    elif isinstance(shot, Plot):
        found = plots.truth(shot)
    else:
        found = leaves.truth(shot)
    return np.asarray(found[np.lexsort((found[:, 0], found[:, 1]))])


def corners_px(plot: Plot) -> Points:
    """Give the four true corners in the photograph, (4, 2)."""
    return plot.camera.to_pixels(plots.corners_mm())


def bar_px(shot: LeafShot) -> Points:
    """Give the two true ends of the reference bar in the photograph, (2, 2)."""
    return shot.camera.to_pixels(leaves.bar_mm(shot))


def trial_row(name: str, shot: Shot, objects: int, note: str) -> dict[str, str]:
    """Give the row of one photograph in `trial.csv`."""
    row = {
        "photograph": f"{name}.jpg",
        "pattern": shot.plan.kind,
        "objects": str(objects),
        "note": note,
    }
    if isinstance(shot, Dish):
        ring = shot.camera.circle(dishes.INNER_MM, z_mm=dishes.AGAR_MM)
        across = 2 * float(np.sqrt(ring.semi_a * ring.semi_b))
        row |= {
            "kind": "colonies",
            **_scale(2 * dishes.INNER_MM, across),
            "width_mm": "86",
            "height_mm": "86",
        }
        row |= {k: f"{getattr(ring, k):.4f}" for k in ("cx", "cy", "semi_a", "semi_b", "angle_deg")}
    elif isinstance(shot, Plot):
        there = float(shot.camera.px_per_mm_at(np.zeros((1, 2)))[0])
        row |= {
            "kind": "seedlings",
            **_scale(plots.WIDTH_MM, plots.WIDTH_MM * there),
            "width_mm": "1000",
            "height_mm": "750",
        }
        for k, (x, y) in enumerate(corners_px(shot), start=1):
            row |= {f"x{k}": f"{x:.4f}", f"y{k}": f"{y:.4f}"}
    else:
        ends = bar_px(shot)
        row |= {"kind": "lesions", **_scale(leaves.BAR_MM, float(np.hypot(*(ends[1] - ends[0]))))}
        row |= {"width_mm": f"{shot.leaf.length:g}", "height_mm": f"{2 * shot.leaf.half_width:g}"}
        for k, (x, y) in enumerate(ends, start=1):
            row |= {f"bar_x{k}": f"{x:.4f}", f"bar_y{k}": f"{y:.4f}"}
    return row


def _scale(length_mm: float, length_px: float) -> dict[str, str]:
    return {
        "known_length_mm": f"{length_mm:g}",
        "known_length_px": f"{length_px:.4f}",
        "mm_per_px": f"{length_mm / length_px:.8f}",
    }


def write_objects(path: Path, objects: Points) -> None:
    """Write `x,y,r`, one row per object."""
    lines = ["x,y,r", *(f"{x:.3f},{y:.3f},{r:.3f}" for x, y, r in objects)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def write_outline(path: Path, shot: LeafShot) -> None:
    """Write the true outline of a leaf in pixels, `x,y`."""
    lines = ["x,y", *(f"{x:.3f},{y:.3f}" for x, y in shot.camera.to_pixels(edge_line(shot.leaf)))]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def write_trial(path: Path, rows: list[dict[str, str]]) -> None:
    """Write `trial.csv`; cells that do not apply to a photograph stay empty."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, COLUMNS, restval="", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


CROWDED = "dish_02"
RECIPE_HEAD = f"""\
# How to treat the photographs of this folder. Lengths carry their unit; pixel positions are x (right),
# y (down) from the centre of the top left pixel.

[trial]
title = "{TITLE}"
seed = {SEED}

# Plates of rinse water. The dish's inner diameter gives the scale; its outermost millimetre is left out.
[[set]]
match = "dish_*.jpg"
kind = "colonies"
area = "dish"
dish = "86mm"            # known inner diameter
inset = "1mm"
diameter = "1.2-6mm"
factors = {{ batch = "A" }}

# Seed beds. The black squares of four plates mark a rectangle of known sides, so a tilted photograph is no
# harm. They are found by themselves; where one is covered, give a photograph's corners as below.
[[set]]
match = "plot_*.jpg"
kind = "seedlings"
area = "plot"
corners = "plates"
plot = "1000x750mm"
diameter = "12-36mm"

# Single leaves on a board. The banded bar beside each gives the scale; any other line of known length can
# be given by its ends, as below.
[[set]]
match = "leaf_*.jpg"
kind = "lesions"
area = "leaf"
ruler = "50mm"           # from end to end
diameter = "1.4-5mm"
"""


READ_OFF = ("plot_03", "leaf_01")  # whose positions stand in the recipe; marks tell the others


def write_recipe(path: Path, shots: dict[str, Shot]) -> None:
    """Write `survey.toml`: the sets, and what a careful person would read off each photograph."""
    parts = [RECIPE_HEAD]
    for name, shot in shots.items():
        if name not in (*READ_OFF, CROWDED):
            continue
        if isinstance(shot, Plot):
            listed = ", ".join(f"[{x:.1f}, {y:.1f}]" for x, y in corners_px(shot))
            parts.append(
                f'[photographs."{name}.jpg"]\n# centres of the black squares: top left, top right, bottom right, bottom left\n'
                f"corners = [{listed}]\n"
            )
        elif isinstance(shot, LeafShot):
            listed = ", ".join(f"{value:.1f}" for value in bar_px(shot).ravel())
            parts.append(
                f'[photographs."{name}.jpg"]\n# the two ends of the banded bar\nline = [{listed}]\n'
                f'line_length = "{leaves.BAR_MM:g}mm"\n'
            )
        elif name == CROWDED:
            parts.append(
                f'[photographs."{name}.jpg"]\n# the crowded dish: copies of its spots are set into it, to measure what is missed\n'
                "planted = true\n"
            )
    path.write_text("\n".join(parts), encoding="utf-8", newline="\n")
