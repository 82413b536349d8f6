"""Plants of several leaves: kept as one, and told from the neighbours they touch."""

from __future__ import annotations

from dataclasses import dataclass, replace

import cv2
import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.spatial import cKDTree

from detect.contrast import Contrast, Map, Mask
from detect.gathering import Gathered
from detect.leaves import Blades
from detect.regions import Candidates, Labels
from detect.splitting import nearest_by_power

# Leaves of one plant are fused by blurs of these shares of the smallest diameter, after the
# contrast is cut at this multiple of the threshold so that a bright leaf does not outweigh the rest.
_FUSING_BLURS, _FUSING_CUT = (0.35, 0.5), 1.5
# Scales of the leaf directions, as shares of the smallest diameter.
_EDGE_BLUR, _LEAF_BLUR = 0.06, 0.15
_RAYS, _STEPS = 24, np.arange(0.2, 1.5, 0.1)
# How far leaves radiate, and what that counts for: a compact plant as much as a usual rosette.
_COMPACT = ([-0.6, -0.35, -0.2, 1.0], [0.15, -0.2, -0.2, 1.0])
_ROUNDS, _PLANT_REACH = 2, 1.6
# Ground this near to a plant's leaves, as a share of the smallest diameter, goes with them.
_GROWN = 0.3
# A plant so long over its width keeps its place when its pixels are gathered.
_LONG = 1.8


@dataclass(frozen=True, slots=True, eq=False)
class Leaves:
    """Where leaf is, and along which direction it runs.

    Parameters
    ----------
    leaf : ndarray of shape (height, width), float32
        1 on leaves, 0 elsewhere.
    cosine, sine : ndarray of shape (height, width), float32
        Cosine and sine of twice the angle of the leaf's axis, times how plain that axis is (0..1);
        0 off the leaves.
    """

    leaf: Map
    cosine: Map
    sine: Map


def fused(contrast: Contrast, smallest_px: float) -> tuple[Contrast, ...]:
    """Return contrast maps on which the leaves of a plant run together, more and more so.

    Parameters
    ----------
    contrast : Contrast
    smallest_px : float
        Smallest plant's diameter in pixels of the map.

    Returns
    -------
    tuple of Contrast
    """
    cut = np.minimum(contrast.map, np.float32(_FUSING_CUT * contrast.threshold))
    return tuple(
        replace(contrast, map=cv2.GaussianBlur(cut, (0, 0), blur * smallest_px))
        for blur in _FUSING_BLURS
    )


def leaf_axes(contrast: Contrast, smallest_px: float) -> Leaves:
    """Find the leaves and their axes by the structure tensor of the contrast.

    Parameters
    ----------
    contrast : Contrast
        The map before fusing.
    smallest_px : float
        Smallest plant's diameter in pixels of the map.

    Returns
    -------
    Leaves

    References
    ----------
    Bigun, J. and Granlund, G. H. (1987), Optimal orientation detection of linear symmetry,
    Proc. 1st Int. Conf. on Computer Vision, 433-438.
    """
    cut = np.clip(contrast.map, 0.0, 2.0 * contrast.threshold)
    smooth = cv2.GaussianBlur(cut, (0, 0), max(_EDGE_BLUR * smallest_px, 0.7))
    dx = cv2.Sobel(smooth, cv2.CV_32F, 1, 0, ksize=3)
    dy = cv2.Sobel(smooth, cv2.CV_32F, 0, 1, ksize=3)
    sigma = max(_LEAF_BLUR * smallest_px, 1.0)
    xx, yy, xy = (cv2.GaussianBlur(v, (0, 0), sigma) for v in (dx * dx, dy * dy, dx * dy))
    leaf = (contrast.map > contrast.threshold).astype(np.float32)
    strength = leaf / (xx + yy + 1e-6)
    # The axis runs across the gradient: twice the angle, turned by half a circle.
    return Leaves(leaf, (yy - xx) * strength, -2.0 * xy * strength)


def rosette_features(candidates: Candidates, leaves: Leaves) -> NDArray[np.float64]:
    """Measure how far the leaves of each candidate radiate from its centre, and how far around.

    Parameters
    ----------
    candidates : Candidates
    leaves : Leaves

    Returns
    -------
    ndarray of shape (n, 2)
        `star`: mean over the leaf within 1.4 radii of cos(2 x angle between the leaf's axis and the
        ray from the centre); where edges run round the centre, far below 0, the plant is compact
        and counts like one whose leaves radiate. `around`: share of the rays that meet leaf within
        a radius.
    """
    if len(candidates) == 0:
        return np.zeros((0, 2))
    turn = np.arange(_RAYS) * 2 * np.pi / _RAYS
    radius = 0.5 * candidates.diameter[:, None, None] * _STEPS
    at = np.stack(
        [
            candidates.y[:, None, None] + radius * np.sin(turn)[:, None],
            candidates.x[:, None, None] + radius * np.cos(turn)[:, None],
        ]
    )
    leaf, cosine, sine = (
        ndimage.map_coordinates(field, at, order=1, mode="nearest")
        for field in (leaves.leaf, leaves.cosine, leaves.sine)
    )
    aligned = cosine * np.cos(2 * turn)[:, None] + sine * np.sin(2 * turn)[:, None]
    star = np.interp(aligned.sum(axis=(1, 2)) / (leaf.sum(axis=(1, 2)) + 3.0), *_COMPACT)
    around = (leaf[:, :, 1:9].max(axis=2) > 0.5).mean(axis=1)
    return np.column_stack([star, around])


def plant_regions(blades: Blades, gathered: Gathered, inside: Mask, smallest_px: float) -> Labels:
    """Label each plant's leaves and the ground between and close around them.

    Parameters
    ----------
    blades : Blades
    gathered : Gathered
    inside : ndarray of bool
        The study area on the same map.
    smallest_px : float
        Smallest plant's diameter in pixels of the map.

    Returns
    -------
    ndarray of shape (height, width), int32
        0 for ground, k + 1 for plant k: the pixels nearer than 0.15 of the smallest diameter to one
        of its leaves, and to no other plant's; and what those enclose.
    """
    plant = np.r_[-1, gathered.owner].astype(np.int32) + 1
    leaf = plant[blades.labels]
    if len(gathered) == 0:
        return np.zeros_like(leaf)
    distance, nearest = cv2.distanceTransformWithLabels(
        (leaf == 0).astype(np.uint8), cv2.DIST_L2, 5, labelType=cv2.DIST_LABEL_PIXEL
    )
    reach = _GROWN * smallest_px
    close = (distance <= reach).astype(np.uint8)
    back = cv2.distanceTransform(close, cv2.DIST_L2, 5) > 0.5 * reach
    of_label = np.zeros(int(nearest.max()) + 1, dtype=np.int32)
    of_label[nearest[leaf > 0]] = leaf[leaf > 0]
    return np.where((leaf > 0) | (back & inside), of_label[nearest], 0).astype(np.int32)


def agreement(candidates: Candidates, gathered: Gathered) -> NDArray[np.float64]:
    """Compare candidates with the plants that leaves were given to.

    Parameters
    ----------
    candidates : Candidates
    gathered : Gathered

    Returns
    -------
    ndarray of shape (n, 2)
        `gathered`: how many leaves the plant explains whose centre is next to the candidate's, up
        to 3, less the further the centres lie apart; 0 from half a radius. `several`: how many
        further plants have their centre well inside the candidate, up to 2.
    """
    if len(candidates) == 0 or len(gathered) == 0:
        return np.zeros((len(candidates), 2))
    radius = 0.5 * candidates.diameter
    at = np.column_stack([candidates.x, candidates.y])
    tree = cKDTree(np.column_stack([gathered.x, gathered.y]))
    distance, nearest = tree.query(at)
    near = np.maximum(1.0 - (distance / (0.5 * radius)) ** 2, 0.0)
    within = tree.query_ball_point(at, 0.8 * radius, return_length=True)
    several = np.clip(within - 1, 0, 2)
    return np.column_stack(
        [near * np.sqrt(np.minimum(gathered.explained[nearest] / 3.0, 1.0)), several]
    )


def settle_plants(
    regions: Candidates, contrast: Map, threshold: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Centre and radius of each plant from the leaf pixels that are nearest to it.

    Parameters
    ----------
    regions : Candidates
        Chosen regions, found on a map on which leaves were fused.
    contrast : ndarray of shape (height, width), float32
        The signed contrast map as it was before.
    threshold : float
        Contrast above which a pixel is leaf.

    Returns
    -------
    centres : ndarray of shape (n, 2)
        Means of the leaf pixels, as x, y.
    radius : ndarray of shape (n,)
        Radius of the circle of equal leaf area.

    Notes
    -----
    Two rounds: each leaf pixel goes to the plant with least (distance^2 - radius^2), if that lies
    within 1.6 radii (of a long region, half lengths); then each plant moves to the mean
    of its pixels, but for long ones, whose tips lie among other plants' leaves.
    """
    centres = np.column_stack([regions.x, regions.y])
    reach = 0.5 * regions.diameter
    extent = reach * np.sqrt(regions.elongation)
    n = len(regions)
    if n == 0:
        return centres, reach
    row, column = np.nonzero(contrast > threshold)
    leaf = np.column_stack([column, row]).astype(np.float64)
    count = np.zeros(n)
    for _ in range(_ROUNDS if len(leaf) else 0):
        owner = nearest_by_power(leaf, centres, reach)
        near = np.hypot(*(leaf - centres[owner]).T) < _PLANT_REACH * extent[owner]
        count = np.bincount(owner[near], minlength=n).astype(np.float64)
        total = [np.bincount(owner[near], leaf[near, axis], n) for axis in (0, 1)]
        mean = np.column_stack(total) / np.maximum(count, 1.0)[:, None]
        moves = (count > 0) & (regions.elongation < _LONG)
        centres = np.where(moves[:, None], mean, centres)
    return centres, np.where(count > 0, np.sqrt(count / np.pi), reach)
