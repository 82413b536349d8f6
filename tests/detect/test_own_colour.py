"""A candidate's own colour, and what it does to its doubt."""

from __future__ import annotations

from dataclasses import fields

import numpy as np
import pytest

from detect.own_colour import OwnColour, own_colours
from detect.regions import Candidates


def ellipse(x: float, y: float, long: float, short: float, turn: float) -> Candidates:
    """An ellipse with these semi-axes; its moments are a quarter of their squares."""
    c, s = np.cos(turn), np.sin(turn)
    sxx = 0.25 * ((long * c) ** 2 + (short * s) ** 2)
    syy = 0.25 * ((long * s) ** 2 + (short * c) ** 2)
    sxy = 0.25 * (long**2 - short**2) * c * s
    known = {"x": x, "y": y, "area": np.pi * long * short, "sxx": sxx, "syy": syy, "sxy": sxy}
    return Candidates(
        **{each.name: np.array([known.get(each.name, 1.0)]) for each in fields(Candidates)}
    )


def test_a_linear_picture_gives_its_value_at_the_centre() -> None:
    y, x = np.mgrid[:60, :80].astype(np.float32)
    lab = np.dstack([0.5 * x + y, 20 - 0.25 * x, 0.5 * y])
    colours = own_colours(lab, ellipse(40, 30, 14, 8, 0.6))
    assert colours == pytest.approx(np.array([[50.0, 10.0, 15.0]]), abs=0.5)


@pytest.mark.parametrize("turn", [0.0, 0.7, 1.5, 2.6])
def test_only_what_lies_within_has_a_say(turn: float) -> None:
    y, x = np.mgrid[:60, :80].astype(np.float32)
    u = (x - 40) * np.cos(turn) + (y - 30) * np.sin(turn)
    v = -(x - 40) * np.sin(turn) + (y - 30) * np.cos(turn)
    within = (u / 16) ** 2 + (v / 6) ** 2 <= 1
    lab = np.where(within[..., None], np.float32([60, 30, -20]), np.float32([10, 0, 0]))
    assert own_colours(lab, ellipse(40, 30, 16, 6, turn)).tolist() == [[60, 30, -20]]


def test_at_the_edge_of_the_picture_and_without_candidates() -> None:
    lab = np.full((20, 20, 3), 7.0, np.float32)
    assert own_colours(lab, ellipse(0, 0, 9, 9, 0)).tolist() == [[7, 7, 7]]
    none = ellipse(0, 0, 9, 9, 0).where(np.zeros(0, dtype=np.intp))
    assert own_colours(lab, none).shape == (0, 3)


def test_the_logit_moves_by_weight_times_difference() -> None:
    own = OwnColour((50.0, 0.0, 0.0), (0.1, -0.2, 0.0))
    eased = own.eased(np.array([0.5, 0.5, 0.0, 1.0]), np.array([[60.0, 0, 9], [50, 10, 9]] * 2))
    assert eased[:2] == pytest.approx([1 / (1 + np.e), 1 / (1 + np.e**-2)])
    assert eased[2] == pytest.approx(0, abs=1e-20)
    assert eased[3] == pytest.approx(1)


@pytest.mark.parametrize("values", [(1.0, 2.0), (1.0, 2.0, np.nan)])
def test_three_finite_numbers_are_needed(values: tuple[float, ...]) -> None:
    with pytest.raises(ValueError, match="is not three and three"):
        OwnColour(values, (0.0, 0.0, 0.0))  # type: ignore[arg-type]
