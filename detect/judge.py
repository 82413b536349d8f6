"""Contrast, candidates and their doubt for one view of a photograph, on the right side of the ground."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.candidates import SURROUNDINGS, cut_levels, find_candidates
from detect.choice import choose
from detect.constants import Constants
from detect.contrast import Colour, Contrast, Mask, Sought, contrast_maps
from detect.doubt import FEATURES, DoubtModel, doubt_of, features, shows_itself, usual_step
from detect.gathering import Gathered, gather
from detect.leaves import find_blades
from detect.plants import (
    agreement,
    fused,
    leaf_axes,
    plant_regions,
    rosette_features,
)
from detect.regions import Candidates, join, measure_regions
from detect.view import View
from detect.wanted import DetectOptions, Kind

_USUAL_COLOUR: dict[Kind, Colour] = {"seedlings": "green"}
# A leaf's gloss and veins vary in lightness: lesions are told by hue rather.
_CALMING: dict[Kind, float] = {"lesions": 1.0}
# Candidates are looked for a little beyond the range: too small a range costs more than too wide.
_BELOW, _ABOVE = 0.7, 1.4
# Kinds whose objects are cut out against their surroundings too.
_LOCALLY: tuple[Kind, ...] = ("spots",)
# How deep the relief between two peaks must dip to part them: glare on a dish dips a little.
_TOGETHER: dict[Kind, float] = {"colonies": 0.95, "seedlings": 0.95, "lesions": 0.97, "spots": 0.97}
# Below this evidence for one side, both are tried.
_SURE = 0.6
# A region whose mean contrast is less than this many times the noise is noise.
LEAST_CONTRAST = 3.5
# A plant put together from leaves stands out, at its edge, by this many times the noise at least.
_LEAST_STEP = 0.8
# What says nothing about leaves that lie apart.
_OF_ONE_PIECE = [FEATURES.index(name) for name in ("rough", "texture", "long", "cut", "misfit")]


@dataclass(frozen=True, slots=True, eq=False)
class Judgement:
    """Candidates of one view with their doubt, a probability per row.

    Parameters
    ----------
    contrast : Contrast
        The map as it is, before leaves are fused to plants.
    candidates : Candidates
    measured : ndarray of shape (n, 14) or (n, 19)
        Features of the doubt model; for plants also how the leaves are arranged.
    doubt : ndarray of shape (n,)
    """

    contrast: Contrast
    candidates: Candidates
    measured: NDArray[np.float64]
    doubt: NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Yardstick:
    """What all parts of one picture are judged by, learned once.

    Parameters
    ----------
    flipped : bool
        Whether the side is looked at that the picture speaks against.
    constants : Constants
        What the contrast is measured with.
    cuts : tuple of ndarray
        Levels at which each map is cut: the contrast, or for plants the maps of fused leaves.
    step : float
        Usual edge step of objects.
    """

    flipped: bool
    constants: Constants
    cuts: tuple[NDArray[np.float64], ...]
    step: float


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
    return judged_together([view], smallest_px, largest_px, options, model, direction=direction)[0][
        0
    ]


def judged_together(
    views: Sequence[View],
    smallest_px: float,
    largest_px: float,
    options: DetectOptions,
    model: DoubtModel,
    *,
    direction: NDArray[np.float64] | None = None,
) -> tuple[list[Judgement], Yardstick]:
    """Judge views of one picture by what they teach together; both sides when it is unclear.

    Parameters
    ----------
    views : sequence of View
        The whole, or windows spread over it, all equally reduced.
    smallest_px, largest_px, options, model, direction
        As in `judged`.

    Returns
    -------
    list of Judgement
        One for each view.
    Yardstick
        What they were judged by, and what further views of the picture can be judged by.
    """
    first = _judge(views, smallest_px, largest_px, options, model, direction=direction)
    if first[1].constants.sureness > _SURE:
        return first
    other = _judge(views, smallest_px, largest_px, options, model, flipped=True)
    return max(first, other, key=lambda side: sum(_worth(judgement) for judgement in side[0]))


def judge_by(
    view: View,
    smallest_px: float,
    largest_px: float,
    options: DetectOptions,
    model: DoubtModel,
    yardstick: Yardstick,
) -> Judgement:
    """Judge one view of a picture by what was learned of the picture before.

    Parameters
    ----------
    view : View
    smallest_px, largest_px, options, model
        As in `judged`, and as they were when the yardstick was learned.
    yardstick : Yardstick

    Returns
    -------
    Judgement
    """
    return _judge([view], smallest_px, largest_px, options, model, known=yardstick)[0][0]


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
        Without the regions whose mean contrast is below `LEAST_CONTRAST` times the noise, and those
        the picture's edge cuts off that show too little of an outline.
    """
    judgements, _ = _judge(
        [view], smallest_px, largest_px, options, model, flipped=flipped, direction=direction
    )
    return judgements[0]


def _judge(
    views: Sequence[View],
    smallest_px: float,
    largest_px: float,
    options: DetectOptions,
    model: DoubtModel,
    *,
    flipped: bool = False,
    direction: NDArray[np.float64] | None = None,
    known: Yardstick | None = None,
) -> tuple[list[Judgement], Yardstick]:
    """Judge views on one side, by what is known or by what they teach together."""
    insides = [view.inside for view in views]
    contrasts, constants = contrast_maps(
        [view.lab for view in views],
        insides,
        _sought(options, smallest_px, largest_px, known.flipped if known else flipped, direction),
        known.constants if known else None,
    )
    plants = options.kind == "seedlings"
    maps = [fused(each, smallest_px) if plants else (each,) for each in contrasts]
    cuts = (
        known.cuts
        if known
        else tuple(cut_levels(same, insides) for same in zip(*maps, strict=True))
    )
    candidates = [
        _candidates(looked_at, inside, cuts, smallest_px, largest_px, options.kind)
        for looked_at, inside in zip(maps, insides, strict=True)
    ]
    least = _least_contrast(contrasts[0], _colour(options))
    candidates = [each.where((each.contrast >= least) & shows_itself(each)) for each in candidates]
    cut = [len(each) for each in candidates]
    gathered: list[Gathered | None] = [None] * len(views)
    if plants:
        for k, view in enumerate(views):
            gathered[k], regions = _gathered(view, contrasts[k], maps[k], smallest_px, largest_px)
            candidates[k] = join([candidates[k], regions])
    step = known.step if known else usual_step(join(candidates))
    judgements = []
    for contrast, each, by_leaf, n in zip(contrasts, candidates, gathered, cut, strict=True):
        measured = features(
            each,
            noise=contrast.noise,
            smallest_px=smallest_px,
            largest_px=largest_px,
            step=step,
        )
        if by_leaf is not None:
            rosettes = rosette_features(each, leaf_axes(contrast, smallest_px))
            apart = np.arange(len(each)) >= n
            measured = np.column_stack([measured, rosettes, agreement(each, by_leaf), apart])
            measured[n:, _OF_ONE_PIECE] = 0.0
        judgements.append(Judgement(contrast, each, measured, doubt_of(measured, model)))
    return judgements, known or Yardstick(flipped, constants, cuts, step)


def _colour(options: DetectOptions) -> Colour:
    """Return the colour looked for: as asked, or usual for the kind."""
    if options.colour == "auto":
        return _USUAL_COLOUR.get(options.kind, "auto")
    return options.colour


def _sought(
    options: DetectOptions,
    smallest_px: float,
    largest_px: float,
    flipped: bool,
    direction: NDArray[np.float64] | None,
) -> Sought:
    """Say what is to stand out, for the kind that is looked for."""
    return Sought(
        smallest_px,
        largest_px,
        colour=_colour(options),
        polarity=options.polarity,
        flipped=flipped,
        calming=_CALMING.get(options.kind, 0.5),
        many_colours=options.kind == "colonies",
        direction=direction,
    )


def _candidates(
    maps: Sequence[Contrast],
    inside: Mask,
    cuts: Sequence[NDArray[np.float64]],
    smallest_px: float,
    largest_px: float,
    kind: Kind,
) -> Candidates:
    """Collect the candidates of all maps of one view."""
    return join(
        [
            find_candidates(
                looked_at,
                inside,
                smallest_px=_BELOW * smallest_px,
                largest_px=_ABOVE * largest_px,
                cuts=levels,
                surroundings=SURROUNDINGS if kind in _LOCALLY else (),
                together=_TOGETHER[kind],
            )
            for looked_at, levels in zip(maps, cuts, strict=True)
        ]
    )


def _gathered(
    view: View,
    contrast: Contrast,
    fused_maps: Sequence[Contrast],
    smallest_px: float,
    largest_px: float,
) -> tuple[Gathered, Candidates]:
    """Give the leaves to plants, and measure these like the other candidates."""
    blades = find_blades(contrast, view.lab, view.inside, smallest_px)
    plants = gather(blades, smallest_px, largest_px)
    regions = measure_regions(
        plant_regions(blades, plants, view.inside, smallest_px),
        len(plants) + 1,
        fused_maps[0].map,
        neck=np.zeros(len(plants) + 1),
        level=contrast.threshold,
        smallest_px=_BELOW * smallest_px,
        largest_px=_ABOVE * largest_px,
    )
    # A fused map is smoother than the noise was measured on; coarse grain stays below this.
    return plants, regions.where(regions.step >= _LEAST_STEP * contrast.noise)


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
