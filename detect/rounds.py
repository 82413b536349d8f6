"""The planted-object test from end to end: copy, plant, detect again, compare."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np

from detect.area import StudyArea
from detect.blind import blind_distance
from detect.find import Found, find_spots
from detect.lengths import Length
from detect.missed import Trials, by_separation, recall_of, thirds
from detect.pasting import paste
from detect.photograph import Photograph
from detect.planted import Planted, PlantedOptions
from detect.planting import (
    CLOSEST,
    WIDEST,
    Copies,
    Wish,
    copies_per_round,
    nearest_separation,
    place,
    wish_pair,
    wish_single,
)
from detect.refound import refound
from detect.scale import Scale
from detect.spots import Spots
from detect.stamps import FEWEST_CLEAR, Stamp, clear_spots, lift, smooth_ground
from detect.taught import Taught
from detect.wanted import DetectOptions

Progress = Callable[[int, int], None]
# Fewer single copies than this tell no recall.
FEWEST_COPIES = 10
# Share of the copies of a round that stand in pairs; of the single ones, how many are made smaller
# and fainter than the spot they stand for, and how many stand as near to a neighbour as it does.
_IN_PAIRS, _FAINT, _CROWDED = 0.5, 0.35, 0.5


@dataclass(slots=True)
class _Seen:
    """What became of the copies, row by row, while the rounds go on."""

    singles: list[tuple[int, float, float, float, bool]] = field(default_factory=list)
    pairs: list[tuple[float, bool]] = field(default_factory=list)


def measure_planted(
    photograph: Photograph,
    area: StudyArea,
    options: DetectOptions,
    found: Found,
    *,
    scale: Scale | None = None,
    taught: Taught | None = None,
    planted: PlantedOptions | None = None,
    progress: Progress | None = None,
) -> Planted:
    """Measure what share of its objects a photograph shows to the detector, without any truth.

    Parameters
    ----------
    photograph : Photograph
    area : StudyArea
    options : DetectOptions
        What was looked for.
    found : Found
        What was found with these options; its range of diameters is used again.
    scale : Scale or None
        The scale that was used.
    taught : Taught or None
        What corrections had taught.
    planted : PlantedOptions, optional
        Rounds and seed.
    progress : callable, optional
        Called with (done, total) after each round.

    Returns
    -------
    Planted
        With a note where there is too little to copy or no room for it.

    Notes
    -----
    This is the artificial-star test of astronomy [1]_, [2]_. In each round copies of the clear
    spots are set at random into the study area: half of them alone, anywhere or as near to a
    spot as spots are to each other, and half in pairs at separations of 0.3 to 1.6 sums of their
    radii, clear of all spots. A round holds few copies, far from each other (see
    `detect.planting.copies_per_round`), so that none disturbs another. The detector then runs on
    the whole photograph with the range of diameters it had; ground, colour and threshold are
    learned anew, for that is part of how it sees.

    References
    ----------
    .. [1] Stetson PB (1987). DAOPHOT: a computer program for crowded-field stellar photometry.
       Publications of the Astronomical Society of the Pacific 99, 191-222.
    .. [2] Stetson PB, Harris WE (1988). CCD photometry of the globular cluster M92. Astronomical
       Journal 96, 909-975.
    """
    planted = planted or PlantedOptions()
    spots = found.spots
    rows = clear_spots(spots, area)
    if rows.size < FEWEST_CLEAR:
        return Planted(planted.rounds, planted.seed, note=_too_few(rows.size))
    ground = smooth_ground(photograph, area, spots)
    lifted = [lift(photograph, ground, spots, int(row)) for row in rows]
    stamps = [stamp for stamp in lifted if stamp is not None]
    if len(stamps) < FEWEST_CLEAR:
        return Planted(planted.rounds, planted.seed, note=_too_few(len(stamps)))
    name = zlib.crc32(photograph.name.encode("utf-8"))
    rng = np.random.default_rng([planted.seed, name])
    smallest, largest = (Length(float(d), "px") for d in found.settings["diameter_px"])
    again = replace(options, diameter=(smallest, largest))
    size = photograph.width, photograph.height
    seen = _Seen()
    for k, wishes in enumerate(_all_wishes(stamps, spots, area, planted.rounds, rng)):
        copies = place(wishes, spots, area, size, rng)
        if len(copies):
            picture = paste(photograph, ground, copies, stacked=options.kind == "seedlings")
            after = find_spots(picture, area, again, scale=scale, taught=taught).spots
            _note(seen, k, copies, refound(spots, after, copies).found, spots)
        if progress is not None:
            progress(k + 1, planted.rounds)
    return _summary(seen, spots, planted)


def _too_few(clear: int) -> str:
    """Say that there is too little to copy."""
    are = "1 spot is" if clear == 1 else f"{clear or 'no'} spots are"
    return (
        f"Planted objects could not be set: {are} clear enough to be copied, and"
        f" {FEWEST_CLEAR} are needed."
    )


def _all_wishes(
    stamps: list[Stamp], spots: Spots, area: StudyArea, rounds: int, rng: np.random.Generator
) -> list[list[Wish]]:
    """Draw what is to be set in each round; the separations of all pairs are spread evenly."""
    many = copies_per_round(spots, area)
    pairs = int(_IN_PAIRS * many / 2)
    separation = rng.permutation(np.linspace(CLOSEST, WIDEST, pairs * rounds))
    wishes = []
    for k in range(rounds):
        alone = [
            wish_single(
                stamps,
                spots,
                faint=bool(rng.random() < _FAINT),
                crowded=bool(rng.random() < _CROWDED),
                rng=rng,
            )
            for _ in range(many - 2 * pairs)
        ]
        wishes.append(alone + [wish_pair(stamps, spots, s, rng) for s in separation[k::rounds]])
    return wishes


def _note(seen: _Seen, k: int, copies: Copies, found: np.ndarray, spots: Spots) -> None:
    """Take down what became of the copies of one round."""
    nearest = nearest_separation(np.column_stack([copies.x, copies.y, copies.radius]), spots)
    for unit in np.unique(copies.unit):
        rows = np.flatnonzero(copies.unit == unit)
        if rows.size == 2:
            seen.pairs.append((float(copies.separation[rows[0]]), bool(found[rows].all())))
        else:
            i = int(rows[0])
            measures = (float(copies.radius[i]), float(copies.contrast[i]), float(nearest[i]))
            seen.singles.append((k, *measures, bool(found[i])))


def _summary(seen: _Seen, spots: Spots, planted: PlantedOptions) -> Planted:
    """Put the record together."""
    columns = np.array(seen.singles, dtype=np.float64).reshape(-1, 5).T
    k, radius, contrast, nearest, found = columns
    trials = Trials(k.astype(np.intp), radius, contrast, nearest, found > 0)
    separation = np.array([s for s, _ in seen.pairs])
    both = np.array([b for _, b in seen.pairs], dtype=np.bool_)
    recall, blind, notes = None, blind_distance(separation, both), []
    if len(trials) >= FEWEST_COPIES and np.unique(trials.round).size > 1:
        recall = recall_of(trials, spots)
    else:
        notes.append(
            f"Only {len(trials)} copies found room in the study area, and {FEWEST_COPIES} are"
            " needed to say what share is found."
        )
    if blind is None:
        notes.append(
            f"Of {len(both)} pairs of copies {int(both.sum())} were seen as two, which tells no"
            " blind distance."
        )
    return Planted(
        planted.rounds,
        planted.seed,
        len(trials),
        int(trials.found.sum()),
        recall,
        thirds(trials.radius, trials.found),
        thirds(trials.contrast, trials.found),
        by_separation(trials),
        both.size,
        int(both.sum()),
        blind,
        2.0 * float(np.mean(spots.radius)),
        " ".join(notes),
    )
