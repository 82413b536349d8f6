"""Where copies of spots are set into a photograph."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detect.area import StudyArea
from detect.spots import Spots
from detect.stamps import Stamp, altered, separations

# From this separation on a neighbour no longer matters: nothing is seen of it within a stamp.
ALONE = 2.0
# Pairs are set this far apart, in sums of radii.
CLOSEST, WIDEST = 0.3, 1.6
# Copies of a round: at most this many or this share of the count, and this share of the area.
_AT_LEAST, _OF_COUNT, _OF_AREA = 20, 0.1, 0.02
# Free way between two units of a round, in diameters of a spot larger than nine in ten.
_FREE = 2.0
_TRIES = 60
# How far a stamp may be enlarged, made smaller, and changed in contrast.
_SIZE, _STRENGTH = (0.75, 1.33), (0.4, 1.25)
# A copy is made of one of this many stamps that need the least change.
_NEAREST = 4


@dataclass(frozen=True, slots=True, eq=False)
class Copies:
    """Copies set into a photograph in one round, as columns of one length.

    Parameters
    ----------
    x, y, radius : ndarray of shape (k,)
        Centres and radii in pixels.
    contrast : ndarray of shape (k,)
        In units of noise.
    unit : ndarray of int, shape (k,)
        Copies of one unit stand together: one alone, or two as a pair.
    separation : ndarray of shape (k,)
        Distance to the other copy of a pair in sums of radii; NaN for one alone.
    stamps : tuple of Stamp
        What is pasted.
    """

    x: NDArray[np.float64]
    y: NDArray[np.float64]
    radius: NDArray[np.float64]
    contrast: NDArray[np.float64]
    unit: NDArray[np.intp]
    separation: NDArray[np.float64]
    stamps: tuple[Stamp, ...]

    def __len__(self) -> int:
        return self.x.size

    @property
    def centres(self) -> NDArray[np.float64]:
        """Centres as an (k, 2) array of x, y."""
        return np.column_stack([self.x, self.y])


@dataclass(frozen=True, slots=True)
class Wish:
    """One unit to be set: what it looks like, and how near its neighbour shall be.

    Parameters
    ----------
    stamps : tuple of Stamp
        One, or two for a pair.
    separation : float
        Of a pair, between both; of one alone, to the nearest spot (NaN: wherever it falls).
    """

    stamps: tuple[Stamp, ...]
    separation: float


def copies_per_round(spots: Spots, area: StudyArea) -> int:
    """Return how many copies one round may hold, so that the picture barely changes.

    Parameters
    ----------
    spots : Spots
    area : StudyArea

    Returns
    -------
    int
        A tenth of the count, or 20 if that is more, as long as they cover no more than a fiftieth
        of the area.
    """
    room = _OF_AREA * area.polygon.area / float(np.pi * np.mean(spots.radius**2))
    return int(min(max(_AT_LEAST, _OF_COUNT * len(spots)), room))


def wish_single(
    stamps: Sequence[Stamp], spots: Spots, *, faint: bool, crowded: bool, rng: np.random.Generator
) -> Wish:
    """Wish for one copy that stands for one of the spots: as large, as strong, as crowded.

    Parameters
    ----------
    stamps : sequence of Stamp
        To choose from.
    spots : Spots
        As found; one is drawn.
    faint : bool
        Make it smaller and fainter than the one drawn.
    crowded : bool
        Let it stand as near to a neighbour as the one drawn; else anywhere.
    rng : numpy.random.Generator

    Returns
    -------
    Wish
    """
    row = int(rng.integers(len(spots)))
    size, strength = rng.uniform((0.75, 0.5), (1.0, 1.0)) if faint else (1.0, 1.0)
    stamp = _like(stamps, size * spots.radius[row], strength * spots.contrast[row], rng)
    return Wish((stamp,), float(separations(spots)[row]) if crowded else np.nan)


def wish_pair(
    stamps: Sequence[Stamp], spots: Spots, separation: float, rng: np.random.Generator
) -> Wish:
    """Wish for two copies at a separation in sums of radii, each like one of the spots."""
    rows = rng.integers(len(spots), size=2)
    pair = tuple(_like(stamps, spots.radius[i], spots.contrast[i], rng) for i in rows)
    return Wish(pair, separation)


def place(
    wishes: Sequence[Wish],
    spots: Spots,
    area: StudyArea,
    size: tuple[int, int],
    rng: np.random.Generator,
) -> Copies:
    """Find places for the units of a round, far from each other; those without room are left out.

    Parameters
    ----------
    wishes : sequence of Wish
    spots : Spots
        As found before.
    area : StudyArea
    size : (width, height)
        Of the photograph.
    rng : numpy.random.Generator

    Returns
    -------
    Copies
        Pairs stand clear of all spots; single ones as near to one as wished.
    """
    rows: list[tuple[float, ...]] = []
    stamps: list[Stamp] = []
    taken = np.empty((0, 3))
    free = 2.0 * _FREE * float(np.quantile(spots.radius, 0.9))
    units = 0
    for wish in wishes:
        for _ in range(_TRIES):
            put = _proposed(wish, spots, area, rng)
            if put is not None and _fits(put, wish, spots, size, taken, free):
                apart = wish.separation if len(put) == 2 else np.nan
                rows += [
                    (*c, s.contrast, units, apart) for c, s in zip(put, wish.stamps, strict=True)
                ]
                stamps += wish.stamps
                taken = np.vstack([taken, put])
                units += 1
                break
    x, y, radius, contrast, unit, separation = np.array(rows).reshape(-1, 6).T
    return Copies(x, y, radius, contrast, unit.astype(np.intp), separation, tuple(stamps))


def _like(
    stamps: Sequence[Stamp], radius: float, contrast: float, rng: np.random.Generator
) -> Stamp:
    """Return a stamp of about this radius and contrast, from one that needs little change."""
    sizes = np.array([stamp.radius for stamp in stamps])
    strengths = np.array([stamp.contrast for stamp in stamps])
    change = np.abs(np.log(radius / sizes)) + 0.5 * np.abs(np.log(contrast / strengths))
    nearest = np.argsort(change, kind="stable")[:_NEAREST]
    stamp = stamps[int(rng.choice(nearest))]
    return altered(
        stamp,
        size=float(np.clip(radius / stamp.radius, *_SIZE)),
        strength=float(np.clip(contrast / stamp.contrast, *_STRENGTH)),
        turns=int(rng.integers(4)),
        mirrored=bool(rng.integers(2)),
    )


def _proposed(
    wish: Wish, spots: Spots, area: StudyArea, rng: np.random.Generator
) -> NDArray[np.float64] | None:
    """Propose a place: rows of x, y, radius; None where the draw falls outside the area."""
    radius = np.array([stamp.radius for stamp in wish.stamps])
    turn = rng.uniform(0.0, 2 * np.pi)
    way = np.array([np.cos(turn), np.sin(turn)])
    if len(radius) == 1 and wish.separation < ALONE:
        j = int(rng.integers(len(spots)))
        middle = spots.centres[j] + way * wish.separation * (radius[0] + spots.radius[j])
    else:
        x0, y0, x1, y1 = area.polygon.bounds
        middle = rng.uniform((x0, y0), (x1, y1))
    if len(radius) == 1:
        centres = middle[None, :]
    else:
        step = way * wish.separation * radius.sum() / 2
        centres = np.stack([middle - step, middle + step])
    # Stamps are set on whole pixels.
    offset = np.array([[stamp.x, stamp.y] for stamp in wish.stamps])
    centres = np.round(centres - offset) + offset
    if not area.contains(centres).all():
        return None
    return np.column_stack([centres, radius])


def _fits(
    put: NDArray[np.float64],
    wish: Wish,
    spots: Spots,
    size: tuple[int, int],
    taken: NDArray[np.float64],
    free: float,
) -> bool:
    """Tell whether a unit lies in the picture, apart from other copies, and as near as wished."""
    inside = (put[:, :2] >= 0).all() and (put[:, :2] <= np.array(size) - 1).all()
    if not inside:
        return False
    if len(taken):
        apart = np.hypot(*(put[:, None, :2] - taken[None, :, :2]).transpose(2, 0, 1))
        if (apart - put[:, None, 2] - taken[None, :, 2]).min() < free:
            return False
    nearest = nearest_separation(put, spots).min()
    if len(put) == 2:
        return bool(nearest >= ALONE)
    if np.isnan(wish.separation):
        return True
    # Rounding to whole pixels moves a copy by half a pixel each way.
    slack = 0.75 / (put[0, 2] + spots.radius.min())
    return bool(nearest >= min(wish.separation, ALONE) - slack)


def nearest_separation(put: NDArray[np.float64], spots: Spots) -> NDArray[np.float64]:
    """Separation of each row (x, y, radius) from the nearest spot, in sums of radii."""
    apart = np.hypot(np.subtract.outer(put[:, 0], spots.x), np.subtract.outer(put[:, 1], spots.y))
    return np.asarray((apart / np.add.outer(put[:, 2], spots.radius)).min(axis=1))
