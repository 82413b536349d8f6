"""Charts of curves draw what the test holds: the band, the curve, its mark, and words for directions."""

from __future__ import annotations

import re

import numpy as np
import pytest
from matplotlib.colors import to_rgba
from matplotlib.figure import Figure

from analyse import look
from analyse.curve_charts import LOOKS, curve_figure, draw_curve
from analyse.embedding import svg_bytes
from analyse.envelopes import global_envelope
from tests.analyse.curves import envelope


def _axes():
    return Figure((4.8, 3.0), layout="constrained").subplots()


@pytest.mark.parametrize("name", LOOKS)
def test_the_band_the_mean_and_the_curve_are_those_of_the_test(name):
    seen, axes = envelope(name), _axes()
    drawn = draw_curve(axes, seen, "mm")
    for column in ("x", "observed", "central", "low", "high"):
        np.testing.assert_array_equal(getattr(drawn, column), getattr(seen, column))
    lines = {line.get_label(): line for line in axes.lines}
    np.testing.assert_array_equal(lines["seen"].get_ydata(), seen.observed)
    np.testing.assert_array_equal(lines["mean of simulations"].get_ydata(), seen.central)
    assert lines["mean of simulations"].get_linestyle() == "--"  # told apart without colour
    outline = axes.collections[0].get_paths()[0].vertices
    k = len(seen.x)
    np.testing.assert_allclose(outline[1 : k + 1], np.column_stack([seen.x, seen.low]))
    np.testing.assert_allclose(
        outline[k + 2 : 2 * k + 2], np.column_stack([seen.x, seen.high])[::-1]
    )
    legend = [text.get_text() for text in axes.figure.legends[0].get_texts()]
    assert legend == ["seen", "mean of simulations", "global band, 95\u00a0%"]


@pytest.mark.parametrize(
    ("lift", "colour"), [(1.5, look.CLUMPED), (-1.5, look.EVEN)], ids=["above", "below"]
)
def test_what_leaves_the_band_is_broad_and_marked_where_it_is_farthest(lift, colour):
    seen, axes = envelope("l_function", lift=lift), _axes()
    drawn = draw_curve(axes, seen, "mm")
    assert seen.outside.any()
    np.testing.assert_array_equal(drawn.outside, seen.x[seen.outside])
    (broad,) = [line for line in axes.lines if line.get_linewidth() == 3.4]
    assert to_rgba(broad.get_color()) == to_rgba(colour)
    np.testing.assert_array_equal(np.isfinite(broad.get_ydata()), seen.outside)
    assert drawn.mark == (seen.at, seen.observed[seen.strongest])
    (ring,) = [line for line in axes.lines if line.get_marker() == "o"]
    assert (ring.get_xdata()[0], ring.get_ydata()[0]) == drawn.mark
    assert drawn.label == "4.00 mm"
    assert drawn.label in [text.get_text() for text in axes.texts]


def test_where_nothing_departs_nothing_is_broad_and_no_distance_is_written():
    seen, axes = envelope("pair_correlation"), _axes()
    drawn = draw_curve(axes, seen, "mm")
    assert not seen.outside.any()
    assert drawn.outside.size == 0
    assert drawn.label == ""
    assert max(line.get_linewidth() for line in axes.lines) < 2
    assert drawn.mark == (seen.at, seen.observed[seen.strongest])


@pytest.mark.parametrize("lift", [0.0, 6.0, -6.0])
def test_everything_drawn_lies_within_the_axes(lift):
    for name in LOOKS:
        seen, axes = envelope(name, lift=lift), _axes()
        draw_curve(axes, seen, "mm")
        low, high = axes.get_ylim()
        assert low < min(seen.observed.min(), seen.low.min())
        assert high > max(seen.observed.max(), seen.high.max())
        assert axes.get_xlim()[1] == seen.x[-1]
        assert axes.get_xlim()[0] <= seen.x[0]


def test_axes_are_named_with_their_unit_and_directions_in_words():
    for name, unit in (("l_function", "px"), ("vmr_by_side", "mm")):
        axes = _axes()
        draw_curve(axes, envelope(name), unit)
        assert axes.get_xlabel().endswith(f"({unit})")
        assert ("(px)" in axes.get_ylabel()) == (name == "l_function")
        (said,) = [text.get_text() for text in axes.texts if "clumped" in text.get_text()]
        assert re.fullmatch(r"even\s+\u2190\s+\u2192\s+clumped", said)  # even below, clumped above


def test_a_curve_nobody_knows_the_look_of_is_refused():
    with pytest.raises(KeyError, match="ridges"):
        draw_curve(_axes(), envelope("ridges"), "mm")


@pytest.mark.parametrize("name", LOOKS)
def test_a_curve_takes_little_room_in_the_report_and_the_same_bytes_again(name):
    one, two = (
        svg_bytes(curve_figure(envelope(name, lift=1.5), "mm")),
        svg_bytes(curve_figure(envelope(name, lift=1.5), "mm")),
    )
    assert one == two
    assert len(one) < 12_000


def test_long_curves_are_thinned_but_keep_their_ends_and_their_greatest_departure():
    rng = np.random.default_rng(1)
    x = np.linspace(0.1, 20, 300)
    simulated = 1 + rng.normal(0, 0.1, (199, 300))
    seen = global_envelope(1 + 2 * (x == x[137]), simulated, x, name="l_function")
    drawn = draw_curve(_axes(), seen, "mm")
    assert len(drawn.x) <= 82
    assert (drawn.x[0], drawn.x[-1]) == (x[0], x[-1])
    assert drawn.mark == (x[137], 3.0) == (seen.at, 3.0)
    kept = np.searchsorted(x, drawn.x)
    np.testing.assert_array_equal(drawn.low, seen.low[kept])
    np.testing.assert_array_equal(drawn.observed, seen.observed[kept])
