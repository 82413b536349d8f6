"""Photograph -> one signed contrast map: how far each pixel stands out from its own ground.

The ground's colour is learned from the picture and followed across it, so gradients of light
drop out; the colour direction in which things stand out is learned too, unless it is named.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import cv2
import numpy as np
from numpy.typing import NDArray

from detect.constants import Constants, Settling, pooled
from detect.constants import Mask as Mask
from detect.direction import Colour as Colour
from detect.direction import Polarity as Polarity
from detect.direction import evidence, named_direction, principal_axis
from detect.ground import Map as Map
from detect.ground import followed_ground, local_mean
from detect.threshold import grain_of, noise_and_threshold


@dataclass(frozen=True, slots=True)
class Sought:
    """What is to stand out.

    Parameters
    ----------
    smallest_px, largest_px : float
        Range of object diameters in pixels of the map.
    colour : Colour
        "auto" learns the direction from the picture; "grey" uses lightness alone.
    polarity : Polarity
        Whether objects are darker or lighter than the ground; "auto" decides by the picture. A
        named colour has its own direction.
    flipped : bool
        Take the side that "auto" would not have taken.
    calming : float
        Power of a channel's spread on the ground by which it is divided before a direction is
        learned: 0 gives plain principal axes, 1 has no say for channels in which the ground varies.
    many_colours : bool
        Objects of several colours are looked for: departures across the direction count as well.
    direction : ndarray of shape (3,) or None
        Direction in L*, a*, b* from ground to object, where it is known; with it neither colour nor
        polarity is looked at, and objects are of one colour.
    """

    smallest_px: float
    largest_px: float
    colour: Colour = "auto"
    polarity: Polarity = "auto"
    flipped: bool = False
    calming: float = 0.5
    many_colours: bool = False
    direction: NDArray[np.float64] | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Contrast:
    """A signed contrast map; objects are positive.

    Parameters
    ----------
    map : ndarray of shape (height, width), float32
        Contrast with the local background along `direction`, 0 outside the study area.
    noise : float
        Robust standard deviation of the background, in the map's units.
    grain : float
        Robust standard deviation of what changes from pixel to pixel, in the map's units.
    threshold : float
        Contrast above which a pixel is more likely object than ground.
    direction : ndarray of shape (3,)
        Unit direction in L*, a*, b* that points from ground to object.
    sureness : float
        How plainly the picture tells objects from ground, 0 (a guess) to 1.5; infinite where the
        side was given.
    """

    map: Map
    noise: float
    grain: float
    threshold: float
    direction: NDArray[np.float64]
    sureness: float

    def __post_init__(self) -> None:
        self.map.setflags(write=False)
        self.direction.setflags(write=False)

    @classmethod
    def of(cls, signed: Map, known: Constants) -> Contrast:
        """Return a map with the constants it was measured with."""
        return cls(
            signed, known.noise, known.grain, known.threshold, known.direction, known.sureness
        )


def to_lab(pixels: Map) -> Map:
    """Turn red, green and blue into lightness and two axes of hue.

    Parameters
    ----------
    pixels : ndarray of shape (height, width, 3), float32
        sRGB values, 0..1.

    Returns
    -------
    ndarray of shape (height, width, 3), float32
        L* (0..100), a* and b* under white D65.

    References
    ----------
    CIE 15:2004, Colorimetry, 3rd edition, section 8.2.1 (CIELAB). IEC 61966-2-1:1999 (sRGB).
    """
    return np.asarray(cv2.cvtColor(pixels, cv2.COLOR_RGB2Lab), dtype=np.float32)


def contrast_map(
    lab: Map,
    inside: Mask,
    *,
    smallest_px: float,
    largest_px: float,
    colour: Colour = "auto",
    polarity: Polarity = "auto",
    flipped: bool = False,
    calming: float = 0.5,
    many_colours: bool = False,
    direction: NDArray[np.float64] | None = None,
) -> Contrast:
    """Measure how far each pixel stands out from the local ground, on a picture in one piece.

    Parameters
    ----------
    lab : ndarray of shape (height, width, 3), float32
        The photograph in L*, a*, b*.
    inside : ndarray of bool, shape (height, width)
        The study area; pixels outside it have no say and get contrast 0.
    smallest_px, largest_px, colour, polarity, flipped, calming, many_colours, \
    direction
        As in `Sought`.

    Returns
    -------
    Contrast
    """
    sought = Sought(
        smallest_px, largest_px, colour, polarity, flipped, calming, many_colours, direction
    )
    return contrast_maps([lab], [inside], sought)[0][0]


def contrast_maps(
    labs: Sequence[Map],
    insides: Sequence[Mask],
    sought: Sought,
    known: Constants | None = None,
) -> tuple[list[Contrast], Constants]:
    """Measure how far each pixel stands out from the local ground, on pieces of one picture.

    Parameters
    ----------
    labs : sequence of ndarray of shape (height, width, 3), float32
        Pieces of one photograph in L*, a*, b*: the whole, or windows spread over it.
    insides : sequence of ndarray of bool, shape (height, width)
        The study area on each; pixels outside it have no say and get contrast 0.
    sought : Sought
    known : Constants or None
        What was learned of this picture before; None learns it from these pieces together.

    Returns
    -------
    list of Contrast
        One map for each piece, all with the same constants.
    Constants
        `known`, or what was learned.

    Notes
    -----
    The ground is a local mean in which pixels far from the picture's commonest colour have next to
    no weight. The first threshold tells ground from objects well enough for a second, plain local
    mean of the ground alone; noise, grain and threshold are those of the map that follows.
    """
    settling = Settling(known)
    grounds = followed_ground(
        labs, insides, settling, smallest_px=sought.smallest_px, largest_px=sought.largest_px
    )
    deviations = [lab - ground for lab, ground in zip(labs, grounds, strict=True)]
    maps = _settle_direction(deviations, insides, sought, settling)
    first = settling.settle(
        "first_threshold", lambda: noise_and_threshold(pooled(maps, insides))[1]
    )
    masks = [inside & (signed < 0.5 * first) for inside, signed in zip(insides, maps, strict=True)]
    if settling.settle("second_look", lambda: _share(masks, insides) > 0.05):
        maps = _second_look(labs, masks, grounds, deviations, sought, settling)
    if sought.many_colours and sought.colour == "auto" and sought.direction is None:
        maps = _with_other_colours(maps, deviations, insides, settling)
    return _finished(labs, insides, maps, settling)


def _settle_direction(
    deviations: Sequence[Map], insides: Sequence[Mask], sought: Sought, settling: Settling
) -> list[Map]:
    """Settle the direction from ground to object, and measure along it."""
    direction, _ = settling.settle_both(
        "direction", "sureness", lambda: _learned_direction(deviations, insides, sought)
    )
    return [_along(deviation, direction, sought) for deviation in deviations]


def _learned_direction(
    deviations: Sequence[Map], insides: Sequence[Mask], sought: Sought
) -> tuple[NDArray[np.float64], float]:
    """Return the direction from ground to object, and how sure its side is."""
    given = named_direction(sought.colour)
    if sought.direction is not None:
        given = sought.direction / np.linalg.norm(sought.direction)
    if given is not None:
        return given, np.inf
    if sought.colour == "grey":
        axis = np.array([1.0, 0.0, 0.0])
    else:
        axis = principal_axis(pooled(deviations, insides), sought.calming)
    if sought.polarity == "auto":
        maps = [deviation @ axis.astype(np.float32) for deviation in deviations]
        weight = evidence(maps, insides, sought.largest_px) * (-1.0 if sought.flipped else 1.0)
    else:
        weight = np.inf * (axis[0] or 1.0) * (1.0 if sought.polarity == "bright" else -1.0)
    return axis * (1.0 if weight > 0 else -1.0), abs(float(weight))


def _along(deviation: Map, direction: NDArray[np.float64], sought: Sought) -> Map:
    """Deviation along the direction; of a named green, only where the hue itself departs."""
    signed: Map = deviation @ direction.astype(np.float32)
    if sought.colour != "green" or sought.direction is not None:
        return signed
    hue = deviation[..., 1:] @ direction[1:].astype(np.float32)
    return np.where(hue > 2.0, signed, np.minimum(signed, 0.0)).astype(np.float32)


def _share(masks: Sequence[Mask], insides: Sequence[Mask]) -> float:
    """Share of the study area that the masks cover."""
    return sum(int(m.sum()) for m in masks) / max(1, sum(int(i.sum()) for i in insides))


def _second_look(
    labs: Sequence[Map],
    masks: Sequence[Mask],
    grounds: Sequence[Map],
    deviations: list[Map],
    sought: Sought,
    settling: Settling,
) -> list[Map]:
    """Deviations anew, from the plain local mean of what is ground, and the maps along them."""
    direction = settling.settled("direction")
    for k, (lab, mask, ground) in enumerate(zip(labs, masks, grounds, strict=True)):
        weight = mask.astype(np.float32)
        deviations[k] = lab - local_mean(lab, weight, sought.smallest_px, sought.largest_px, ground)
    return [_along(deviation, direction, sought) for deviation in deviations]


def _with_other_colours(
    maps: Sequence[Map], deviations: Sequence[Map], insides: Sequence[Mask], settling: Settling
) -> list[Map]:
    """Contrast raised where the colour departs across the direction, four times further than is usual.

    An orange colony among cream ones hardly stands out along the axis of cream.
    """
    direction = settling.settled("direction")
    across = [_across(deviation, direction) for deviation in deviations]
    usual = settling.settle("across", lambda: float(np.median(pooled(across, insides))))
    return [
        _raised(signed, deviation[..., 0] * np.float32(np.sign(direction[0])), beyond - 4.0 * usual)
        for signed, deviation, beyond in zip(maps, deviations, across, strict=True)
    ]


def _across(deviation: Map, direction: NDArray[np.float64]) -> Map:
    """Length of the deviation across the direction."""
    along = deviation @ direction.astype(np.float32)
    return np.asarray(np.sqrt(np.maximum((deviation**2).sum(axis=2) - along**2, 0.0)))


def _raised(signed: Map, lightness: Map, beyond: Map) -> Map:
    """Contrast with what lies beyond the usual added to it, above the ground in lightness only."""
    extra = np.maximum(beyond, 0.0)
    # What lies on the other side in lightness (ink, shadow, where objects are light) stays out.
    raised = np.where(lightness > -0.5 * extra, np.maximum(signed, 0.0) + extra, signed)
    return np.asarray(np.where(extra > 0, raised, signed), dtype=np.float32)


def _finished(
    labs: Sequence[Map], insides: Sequence[Mask], maps: list[Map], settling: Settling
) -> tuple[list[Contrast], Constants]:
    """Settle noise, grain and threshold of the finished maps, and close them."""
    direction = settling.settled("direction")
    settling.settle_both("noise", "threshold", lambda: noise_and_threshold(pooled(maps, insides)))
    settling.settle(
        "grain",
        lambda: grain_of([lab @ direction.astype(np.float32) for lab in labs], insides),
    )
    constants = settling.constants()
    for signed, inside in zip(maps, insides, strict=True):
        signed[~inside] = 0.0
    return [Contrast.of(np.ascontiguousarray(signed), constants) for signed in maps], constants
