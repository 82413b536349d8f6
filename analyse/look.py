"""How our figures look: colours, sizes and limits, in one place.

White lines with a dark halo on photographs; blue and orange, which every kind of colour vision
tells apart, for fewer and more than expected; and beside each colour a second sign: a shape, a
number or an outline.
"""

from __future__ import annotations

from typing import Any

INK, SOFT, RULE, HALO = "#1b2429", "#55616a", "#c9d1d5", "#10181c"
COUNTED, DOUBTFUL_COLOUR, PLACED, STRUCK = "#00dec8", "#ffb428", "#ce92ff", "#dedede"
OBSERVED, EXPECTED, SPREAD = "#8fbcbb", "#8a3b0a", "#1d4f87"
BAND, BAND_EDGE = "#dfe7e9", "#9fb0b8"  # what chance alone gives
CLUMPED, EVEN = "#8a3b0a", "#1d4f87"  # a curve beyond its band, also drawn broad
RESIDUAL_LIMIT = 4.0  # the colours of the map end here, on every photograph alike
NOTABLE = 2.0  # quadrats whose residual is beyond this are outlined
MOST_SINGLE_COUNTS = 41  # beyond counts of 0 to 40 the picture of frequencies pools
MOST_BOXES = 600  # beyond this many quadrats their counts stand without a dark ground
MOST_COUNTS = 2500  # beyond this many quadrats no number or sign in them could be read
MOST_VECTOR_SPOTS = 3000  # beyond this many spots or quadrats they are drawn as pixels
SMALLEST_MARK = 2.25  # radius in points of the smallest sign of a spot
MOST_NUMBERS = 150  # with this many quadrats or more the map shows signs instead of numbers
RESIDUAL_STEPS = (
    "#174a7c", "#5e93c4", "#c3d9ec", "#fafafa", "#f6d3b4", "#dc8a44", "#8a3b0a",
)  # fmt: skip
UNKNOWN = "#e9edee"
STYLE: Any = {
    "font.family": "DejaVu Sans",
    "font.size": 9.0,
    "svg.fonttype": "none",
    "svg.hashsalt": "strewn",
    "axes.edgecolor": SOFT,
    "axes.labelcolor": INK,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "text.color": INK,
    "xtick.color": SOFT,
    "ytick.color": SOFT,
    "hatch.linewidth": 0.6,
}
