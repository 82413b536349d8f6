"""Troubles of the second half, each named for what went wrong.

    AnalyseError
    ├── TableWrong          a points or counts table cannot be read as one
    ├── GridWrong           the quadrats asked for do not fit the study area
    ├── TooFewQuadrats      a test needs more quadrats than there are
    ├── AreaUnfit           a method is not made for an area of this shape
    ├── TooCrowded          so many spots can hardly be told apart, or find no room, at random
    ├── TrendNotFound       no slope of the density fits, or it cannot be judged
    └── RecipeWrong         the recipe of a survey cannot be followed

All of them are wrong requests (exit 2). A message says what is wrong, the value seen, and what to do.
"""

from __future__ import annotations


class AnalyseError(Exception):
    """Anything a user can cause in the second half; catch this for all of it."""


class TableWrong(AnalyseError):
    """A points or counts table has a missing column, text in a cell, or an impossible value."""


class GridWrong(AnalyseError):
    """The quadrats asked for do not fit the study area."""


class TooFewQuadrats(AnalyseError):
    """A test needs more quadrats than there are."""


class AreaUnfit(AnalyseError):
    """A method is not made for an area of this shape; the message names one that is."""


class TooCrowded(AnalyseError):
    """So many spots can hardly be told apart, or find no room, if they are placed at random."""


class TrendNotFound(AnalyseError):
    """No slope of the density fits the points, or too few quadrats are there to judge it."""


class RecipeWrong(AnalyseError):
    """The recipe of a survey names an unknown key or an impossible value."""
