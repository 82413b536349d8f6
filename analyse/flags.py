"""Reasons for care that go with doubtful but usable results: one table, shown in every output."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

FEW_QUADRATS = 10  # below this only strong departures can be seen: our own limit
LOW_EXPECTED = 1.0  # mean expected count below which the chi-square p is rough (common practice)
ROUGH_POINTS = (
    30  # up to this many, X2 takes so few values that its chi-square p errs; see DEVELOPERS.md
)
ROUGH_QUADRATS = 6  # below this many quadrats likewise
FEW_WHOLE = 6  # whole quadrats below which their VMR says little, as for any test
LARGE_CLIPPED = 0.5  # share of the study area in quadrats that are not whole: our own limit

FLAGS: dict[str, str] = {
    "uncalibrated": "No scale is known: lengths are in pixels, and no density is given.",
    "dish_unsure": "Of the dish: {dish_notes}.",
    "exact_scale": "The scale was given without its uncertainty: the limits of the density count it as"
    " exact.",
    "unreviewed": "No person has checked these spots: everything here rests on the detector alone.",
    "in_review": "These spots are in review: a person has changed or seen them, but they are not marked as"
    " checked as they stand.",
    "doubtful": "Counted spots that are more likely false than real: {doubtful} of {n};"
    " check them (orange in the pictures).",
    "recall_assumed": "Nobody has measured what the detector misses here: behind the share of draws and the"
    " limits with detection error stands what it misses on drawn scenes. Detect with --planted.",
    "outside": "Points outside the study area, which were left out: {outside}.",
    "duplicates": "Points at the very place of another: {duplicates}; check for double entries.",
    "touching": "Nearer than {touching} there are too few neighbours, and a spot is usually {width}"
    " wide: touching spots counted as one make any pattern look more even than it is.",
    "crowded": "Spots lie so close that some hide others: by how many lie just beside each other, the"
    " {counted} counted are rather {corrected} (95 % limits {corrected_low} to {corrected_high});"
    " where objects cannot overlap, none are hidden.",
    "too_crowded": "The spots lie so close that the count cannot be corrected for those seen as one;"
    " dilute, or count a part of the area by eye.",
    "usual_blind": "How near two may lie to be seen as one was not measured in this photograph: the usual"
    " {blind:.2f} of their radii's sum was taken; --planted measures it.",
    "person_blind": "A person has checked these spots and told near ones apart: two nearer than"
    " {blind:.2f} of their radii's sum are taken to be seen as one even so, which is assumed, not measured.",
    "contact": "Spots that cannot overlap keep a distance by contact alone: more even counts than plain"
    " chance gives are no even spacing here.",
    "crowded_null": "So many spots of these sizes can hardly be told apart at random: the test takes them as"
    " points, and may take that for even spacing.",
    "no_area": "A table of counts tells no study area, so no density is given.",
    "like_frequencies": "Counts that run 0, 1, 2, ... were each taken for one of {q} quadrats; if the"
    " column beside them says how many quadrats held each, name the two columns count and frequency.",
    "few_quadrats": "With only {q} quadrats, only a strong departure from random could be seen.",
    "low_expected": "A quadrat expects only {mean_expected:.2g} points on average:"
    " the chi-square p and the stated power are rough there; the simulated p holds.",
    "rough_chi_square": "With {n} points in {q} quadrats the chi-square p is rough;"
    " the simulated p holds.",
    "few_whole": "Whole quadrats: {whole} of {q}. Their VMR says little; the verdict uses all.",
    "clipped_large": "Of the study area, {clipped_percent:.0f} % lies in clipped quadrats;"
    " the verdict takes their areas into account, the VMR of whole quadrats leaves them out.",
}


def flag_sentences(flags: Sequence[str], values: Mapping[str, Any]) -> tuple[str, ...]:
    """Return flags as sentences, with their numbers filled in.

    Parameters
    ----------
    flags : sequence of str
        Names in `FLAGS`.
    values : mapping
        The numbers the sentences quote.

    Returns
    -------
    tuple of str

    Examples
    --------
    >>> flag_sentences(["outside"], {"outside": 3})
    ('Points outside the study area, which were left out: 3.',)
    """
    return tuple(FLAGS[flag].format_map(values) for flag in flags)


def count_flags(values: Mapping[str, Any]) -> tuple[str, ...]:
    """Return the flags that counts in quadrats give rise to; none without points.

    Parameters
    ----------
    values : mapping
        ``n`` points in ``q`` quadrats of which ``whole`` are whole, ``mean_expected`` points in each, and
        ``clipped_percent`` of the study area in the others.

    Returns
    -------
    tuple of str
        Names in `FLAGS`.

    Examples
    --------
    >>> count_flags({"n": 12, "q": 6, "whole": 6, "mean_expected": 2.0, "clipped_percent": 0})
    ('few_quadrats', 'rough_chi_square')
    """
    known = {
        "few_quadrats": values["q"] < FEW_QUADRATS,
        "low_expected": values["mean_expected"] < LOW_EXPECTED,
        "rough_chi_square": values["mean_expected"] >= LOW_EXPECTED
        and (values["n"] <= ROUGH_POINTS or values["q"] < ROUGH_QUADRATS),
        "few_whole": values["whole"] < min(FEW_WHOLE, values["q"]),
        "clipped_large": values["clipped_percent"] > 100 * LARGE_CLIPPED,
    }
    return tuple(name for name, raised in known.items() if raised and values["n"] > 0)
