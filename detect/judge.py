"""Contrast, candidates and their doubt for one view of a photograph, on the right side of the ground."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.candidates import find_candidates
from detect.choice import choose
from detect.contrast import Colour, Contrast, contrast_map
from detect.doubt import DoubtModel, doubt_of, features
from detect.plants import fused, leaf_axes, rosette_features
from detect.regions import Candidates, join
from detect.view import View
from detect.wanted import DetectOptions, Kind

_USUAL_COLOUR: dict[Kind, Colour] = {"seedlings": "green"}
# A leaf's gloss and veins vary in lightness: lesions are told by hue rather.
_CALMING: dict[Kind, float] = {"lesions": 1.0}
# Candidates are looked for a little beyond the range: too small a range costs more than too wide.
_BELOW, _ABOVE = 0.7, 1.4
# Below this evidence for one side, both are tried.
_SURE = 0.6
# A region whose mean contrast is less than this many times the noise is noise.
LEAST_CONTRAST = 3.5


@dataclass(frozen=True, slots=True, eq=False)
class Judgement:
    """Candidates of one view with their doubt, a probability per row.

    Parameters
    ----------
    contrast : Contrast
        The map as it is, before leaves are fused to plants.
    candidates : Candidates
    measured : ndarray of shape (n, 9) or (n, 11)
        Features of the doubt model; for plants also how the leaves are arranged.
    doubt : ndarray of shape (n,)
    """

    contrast: Contrast
    candidates: Candidates
    measured: NDArray[np.float64]
    doubt: NDArray[np.float64]


def judged(
    view: View,
    smallest_px: float,
    largest_px: float,
    options: DetectOptions,
    model: DoubtModel,
    *,
    direction: NDArray[np.float64] | None = None,
) -> Judgement:
    """Contrast, candidates and their doubt; both sides are tried when the picture is unclear.

    Parameters
    ----------
    view : View
    smallest_px, largest_px : float
        Expected diameters in working pixels; candidates down to 0.7 and up to 1.4 times the range
        are looked at.
    options : DetectOptions
    model : DoubtModel
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known.

    Returns
    -------
    Judgement
    """
    first = judge_side(
        view, smallest_px, largest_px, options, model, flipped=False, direction=direction
    )
    if first.contrast.sureness > _SURE:
        return first
    other = judge_side(view, smallest_px, largest_px, options, model, flipped=True)
    return max(first, other, key=_worth)


def judge_side(
    view: View,
    smallest_px: float,
    largest_px: float,
    options: DetectOptions,
    model: DoubtModel,
    *,
    flipped: bool,
    direction: NDArray[np.float64] | None = None,
) -> Judgement:
    """Contrast, candidates and their doubt for one side.

    Parameters
    ----------
    view : View
    smallest_px, largest_px : float
        Expected diameters in working pixels.
    options : DetectOptions
    model : DoubtModel
    flipped : bool
        Look at the side that the picture speaks against.
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known: it has but one side.

    Returns
    -------
    Judgement
        Without the regions whose mean contrast is below `LEAST_CONTRAST` times the noise.
    """
    colour = options.colour
    if colour == "auto":
        colour = _USUAL_COLOUR.get(options.kind, "auto")
    contrast = contrast_map(
        view.lab,
        view.inside,
        smallest_px=smallest_px,
        largest_px=largest_px,
        colour=colour,
        polarity=options.polarity,
        flipped=flipped,
        calming=_CALMING.get(options.kind, 0.5),
        many_colours=options.kind == "colonies",
        direction=direction,
    )
    plants = options.kind == "seedlings"
    maps = fused(contrast, smallest_px) if plants else (contrast,)
    candidates = join(
        [
            find_candidates(
                looked_at,
                view.inside,
                smallest_px=_BELOW * smallest_px,
                largest_px=_ABOVE * largest_px,
            )
            for looked_at in maps
        ]
    )
    candidates = candidates.where(candidates.contrast >= _least_contrast(contrast, colour))
    measured = features(
        candidates, noise=contrast.noise, smallest_px=smallest_px, largest_px=largest_px
    )
    if plants:
        rosettes = rosette_features(candidates, leaf_axes(contrast, smallest_px))
        measured = np.column_stack([measured, rosettes])
    return Judgement(contrast, candidates, measured, doubt_of(measured, model))


def _least_contrast(contrast: Contrast, colour: Colour) -> float:
    """Mean contrast below which a region is noise.

    Where a colour is named, the ground's spread is other things of that hue, and grain alone noise.
    """
    noise = contrast.noise if colour in ("auto", "grey") else contrast.grain
    return LEAST_CONTRAST * noise


def _worth(judgement: Judgement) -> float:
    """How much of the picture is explained by plausible objects."""
    rows = choose(judgement.candidates, judgement.doubt, highest_doubt=0.6)
    return float(((0.6 - judgement.doubt[rows]) * judgement.candidates.area[rows]).sum())
