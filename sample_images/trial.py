"""The thirteen photographs of the invented trial, as data."""

from __future__ import annotations

import math

import numpy as np
from blade import Leaf
from camera import Camera, Points
from dish_clutter import Clutter
from dishes import Dish
from leaves import LeafShot
from light import Exposure, Sun
from patterns import Plan
from plots import Plot
from soil import Soil
from straw import Litter

TITLE = "Straw on the seed bed: rinse-water plates, emergence and leaf spots"
SEED = 20260101


def sizes(seed: int, n: int, *, median: float, spread: float, least: float, most: float) -> Points:
    """Draw `n` log-normal radii in mm, kept between `least` and `most`."""
    drawn = np.exp(np.random.default_rng([SEED, seed]).normal(math.log(median), spread, n))
    radii = np.clip(drawn, least, most)
    radii.flags.writeable = False
    return radii


def _dish_camera(
    tilt: float, towards: float, roll: float, aim: tuple[float, float], *, scale: float = 16.4
) -> Camera:
    return Camera(
        width=1820, height=1660, px_per_mm=scale, distance_mm=420, tilt_deg=tilt, towards_deg=towards, roll_deg=roll,
        aim_x=aim[0], aim_y=aim[1],
    )  # fmt: skip


def _plot_camera(
    tilt: float, towards: float, roll: float, aim: tuple[float, float], *, scale: float = 1.5
) -> Camera:
    return Camera(
        width=1720, height=1320, px_per_mm=scale, distance_mm=1900, tilt_deg=tilt, towards_deg=towards, roll_deg=roll,
        aim_x=aim[0], aim_y=aim[1],
    )  # fmt: skip


def _leaf_camera(tilt: float, towards: float, roll: float) -> Camera:
    return Camera(
        width=1900, height=1440, px_per_mm=10, distance_mm=450, tilt_deg=tilt, towards_deg=towards, roll_deg=roll
    )  # fmt: skip


def dishes() -> dict[str, Dish]:
    """Give the six dishes by name."""
    return {
        "dish_01": Dish(
            seed=101, bench="dark cloth", camera=_dish_camera(4.0, 70, 3, (20, -4)),
            sun=Sun(from_deg=215, elevation_deg=50), exposure=Exposure(gain=1.5, tint=(1.03, 1.0, 0.95)),
            agar=(0.215, 0.130, 0.045), clutter=Clutter(label="A4", glare="window", glare_at=(-14, -13), glare_level=0.2, bubbles=5, fibres=4),
            plan=Plan(kind="even", radii_mm=sizes(1, 84, median=1.25, spread=0.3, least=0.7, most=2.3)),
        ),
        "dish_02": Dish(
            seed=102, bench="slate", camera=_dish_camera(2.5, 200, -5, (-34, 5)),
            sun=Sun(from_deg=320, elevation_deg=46), exposure=Exposure(gain=1.55, slant_deg=330),
            clutter=Clutter(label="A2", second="10-2", glare="lamp", glare_at=(17, -16), glare_level=0.2, bubbles=3),
            plan=Plan(kind="random", radii_mm=sizes(2, 296, median=0.76, spread=0.16, least=0.62, most=1.15)),
            sorts=(0.84, 0.08, 0.06, 0.01, 0.01), agar=(0.175, 0.098, 0.040), clear=(0.5, 0.4, 0.2), lid=False,
        ),
        "dish_03": Dish(
            seed=103, bench="pale cloth", camera=_dish_camera(5.5, 95, 2, (8, -4)),
            sun=Sun(from_deg=250, elevation_deg=52), exposure=Exposure(gain=1.12, tint=(1.0, 1.0, 1.02)),
            clutter=Clutter(label="A5", second="14/6", glare="tubes", glare_at=(10, 8), glare_level=0.24, drops=60),
            plan=Plan(kind="few", radii_mm=sizes(3, 9, median=1.7, spread=0.3, least=0.9, most=2.5)),
            agar=(0.095, 0.052, 0.014), clear=(0.62, 0.37, 0.10),
        ),
        "dish_04": Dish(
            seed=104, bench="green mat", camera=_dish_camera(3.0, 310, -2, (-12, 3)),
            sun=Sun(from_deg=200, elevation_deg=44), exposure=Exposure(gain=1.5, slant_deg=190),
            clutter=Clutter(label="A1", ink=(0.02, 0.03, 0.10), glare="window", glare_at=(15, -15), glare_level=0.26,
                            bubbles=6, fibres=3, scratches=6),
            plan=Plan(kind="clumped", clumps=9, clump_mm=5.2,
                      radii_mm=sizes(4, 112, median=1.1, spread=0.28, least=0.66, most=2.2)),
            agar=(0.20, 0.165, 0.085), sorts=(0.2, 0.5, 0.28, 0.02, 0.0), lid=False,
        ),
        "dish_05": Dish(
            seed=105, bench="wood", camera=_dish_camera(6.0, 60, 6, (10, 0)),
            sun=Sun(from_deg=235, elevation_deg=48), exposure=Exposure(gain=1.35, tint=(1.04, 1.0, 0.93)),
            clutter=Clutter(label="A6", second="0", glare="window", glare_at=(-10, 10), glare_level=0.24, drops=90,
                            bubbles=9, fibres=8, scratches=7),
            plan=Plan(kind="none", radii_mm=np.empty(0)),
        ),
        "dish_06": Dish(
            seed=106, bench="dark cloth", camera=_dish_camera(1.5, 20, -8, (25, 2)),
            sun=Sun(from_deg=290, elevation_deg=50), exposure=Exposure(gain=1.5, slant_deg=280, tint=(0.98, 1.0, 1.02)),
            clutter=Clutter(label="A3", second="M2", ink=(0.10, 0.015, 0.015), glare="tubes", glare_at=(-9, -6),
                            glare_level=0.22, sector_lines=2, bubbles=4, drops=35),
            plan=Plan(kind="random", radii_mm=sizes(6, 72, median=1.3, spread=0.33, least=0.7, most=2.5)),
            agar=(0.19, 0.075, 0.055), clear=(0.6, 0.3, 0.25),
        ),
    }  # fmt: skip


def plots() -> dict[str, Plot]:
    """Give the four plots by name."""
    return {
        "plot_01": Plot(
            seed=201, camera=_plot_camera(9, 70, 2, (0, 14)), sun=Sun(from_deg=235, elevation_deg=40),
            exposure=Exposure(gain=1.75), soil=Soil(mossy=0.8, cloddy=0.6), sky=0.28, litter=Litter(straws=70),
            plan=Plan(kind="clumped", clumps=9, clump_mm=62, nearest=2.1,
                      radii_mm=sizes(21, 92, median=9.5, spread=0.22, least=6.5, most=15)),
        ),
        "plot_02": Plot(
            seed=202, camera=_plot_camera(5, 250, -3, (0, 0), scale=1.46), sun=Sun(from_deg=310, elevation_deg=50),
            exposure=Exposure(gain=1.7, slant_deg=300, tint=(0.98, 1.0, 1.03)),
            soil=Soil(colour=(0.105, 0.078, 0.056), cloddy=0.9, stony=0.5, damp=0.7), litter=Litter(straws=25),
            plan=Plan(kind="random", nearest=2.0, radii_mm=sizes(22, 66, median=11, spread=0.24, least=7, most=17)),
            leaves=(2, 6), sky=0.5,
        ),
        "plot_03": Plot(
            seed=203, camera=_plot_camera(11.5, 95, 1, (0, 20)), sun=Sun(from_deg=200, elevation_deg=36),
            exposure=Exposure(gain=1.75, tint=(1.03, 1.0, 0.96)),
            soil=Soil(colour=(0.185, 0.138, 0.092), cloddy=0.25, cracked=1.0, damp=0.15, stony=0.2),
            litter=Litter(straws=40, dead_leaves=2), sky=0.26,
            plan=Plan(kind="even", radii_mm=sizes(23, 78, median=10.5, spread=0.2, least=7, most=15)),
        ),
        "plot_04": Plot(
            seed=204, camera=_plot_camera(3, 10, 4, (0, 0), scale=1.44), sun=Sun(from_deg=260, elevation_deg=56),
            exposure=Exposure(gain=1.6), soil=Soil(cloddy=0.35, damp=0.5, mossy=0.5),
            litter=Litter(straws=260, long_mm=60),
            plan=Plan(kind="random", nearest=2.3, radii_mm=sizes(24, 116, median=8.2, spread=0.2, least=6, most=12)),
            leaves=(2, 4), weed=False,
        ),
    }  # fmt: skip


def leaves() -> dict[str, LeafShot]:
    """Give the three leaves by name."""
    return {
        "leaf_01": LeafShot(
            seed=311, camera=_leaf_camera(3, 70, 1), sun=Sun(from_deg=225, elevation_deg=48),
            exposure=Exposure(gain=1.25), leaf=Leaf(seed=4, turn_deg=7),
            plan=Plan(kind="random", radii_mm=sizes(31, 64, median=1.25, spread=0.3, least=0.75, most=2.4)),
        ),
        "leaf_02": LeafShot(
            seed=302, camera=_leaf_camera(2, 180, -1), sun=Sun(from_deg=300, elevation_deg=44), board="grey board",
            exposure=Exposure(gain=1.35, tint=(1.0, 1.0, 1.03), slant_deg=290),
            leaf=Leaf(seed=9, turn_deg=-9, length=158, half_width=38, bend=-0.035, lobes=0.08, side_veins=10,
                      green=(0.048, 0.118, 0.030), yellowing=0.15, taper=(0.85, 0.85), at=(2, -12)),
            plan=Plan(kind="even", radii_mm=sizes(32, 60, median=1.3, spread=0.26, least=0.8, most=2.3)),
            bar_at=(38.0, 49.0, -2.0), drop_at=(0.4, -12.0, 3.0),
        ),
        "leaf_03": LeafShot(
            seed=303, camera=_leaf_camera(4, 110, 2), sun=Sun(from_deg=200, elevation_deg=50), board="buff card",
            exposure=Exposure(gain=1.3, tint=(1.03, 1.0, 0.95)),
            leaf=Leaf(seed=15, turn_deg=4, length=148, half_width=46, bend=0.02, lobes=0.07, teeth_mm=1.6, side_veins=7,
                      green=(0.085, 0.170, 0.035), yellowing=0.5, holes=4, taper=(0.62, 1.05), at=(0, -10)),
            plan=Plan(kind="clumped", clumps=8, clump_mm=7.5,
                      radii_mm=sizes(33, 76, median=1.2, spread=0.3, least=0.75, most=2.3)),
            bar_at=(-40.0, 53.0, 3.0), drop_at=(0.7, 9.0, 2.8),
        ),
    }  # fmt: skip
