"""How accurate detections are: precision, recall, count and places against the truth."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from detect.matching import Match as Match
from detect.matching import MatchOptions as MatchOptions
from detect.matching import match_spots as match_spots
from detect.truth import Truth as Truth
from detect.truth import read_truth as read_truth

SCORE_COLUMNS = (
    "photograph",
    "truth",
    "found",
    "matched",
    "precision",
    "recall",
    "f1",
    "count_error",
    "rmse_px",
    "rmse_mm",
)


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How the spots of one photograph, or of many together, compare with the truth.

    Parameters
    ----------
    name : str
        Photograph, or what the row sums up.
    truth, found, matched : int
        Numbers of true objects, of counted spots, and of pairs.
    squares_px, squares_mm : float
        Sums of squared distances of the pairs; NaN in millimetres where no scale is known.
    """

    name: str
    truth: int
    found: int
    matched: int
    squares_px: float = 0.0
    squares_mm: float = math.nan

    def __post_init__(self) -> None:
        if not 0 <= self.matched <= min(self.truth, self.found):
            raise ValueError(
                f"{self.matched} pairs of {self.found} spots and {self.truth} true objects"
            )

    @property
    def precision(self) -> float:
        """Share of the spots that are real objects; NaN without spots."""
        return self.matched / self.found if self.found else math.nan

    @property
    def recall(self) -> float:
        """Share of the real objects that were found; NaN without objects."""
        return self.matched / self.truth if self.truth else math.nan

    @property
    def f1(self) -> float:
        """Harmonic mean of precision and recall; NaN with neither spots nor objects."""
        total = self.found + self.truth
        return 2 * self.matched / total if total else math.nan

    @property
    def count_error(self) -> int:
        """Spots found beyond the true number; negative where too few."""
        return self.found - self.truth

    @property
    def rmse_px(self) -> float:
        """Root mean squared distance of the pairs in pixels; NaN without pairs."""
        return math.sqrt(self.squares_px / self.matched) if self.matched else math.nan

    @property
    def rmse_mm(self) -> float:
        """Root mean squared distance of the pairs in millimetres; NaN where not known."""
        return math.sqrt(self.squares_mm / self.matched) if self.matched else math.nan

    def row(self) -> tuple[str | int | float, ...]:
        """Return the cells of its row, in the order of `SCORE_COLUMNS`."""
        return (
            self.name,
            self.truth,
            self.found,
            self.matched,
            self.precision,
            self.recall,
            self.f1,
            self.count_error,
            self.rmse_px,
            self.rmse_mm,
        )


def pooled(scores: Sequence[Accuracy]) -> Accuracy:
    """Sum up the scores of several photographs, every object weighing the same."""
    return Accuracy(
        "all",
        sum(score.truth for score in scores),
        sum(score.found for score in scores),
        sum(score.matched for score in scores),
        math.fsum(score.squares_px for score in scores),
        math.fsum(score.squares_mm for score in scores),
    )
