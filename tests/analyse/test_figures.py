"""Figures draw what the findings hold: coordinates and values are compared with the artists."""

from __future__ import annotations

import os
import subprocess
import sys
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from pathlib import Path

import cv2
import numpy as np
import pytest
import shapely
from matplotlib.colors import to_rgba
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch
from scipy import stats

from analyse.embedding import data_uri, photograph_jpeg, svg_bytes
from analyse.figures import (
    RESIDUAL_COLOURS,
    draw_frequencies,
    draw_photograph,
    draw_points,
    draw_residuals,
    photograph_figure,
    plain_figure,
    points_figure,
    residual_figure,
)
from analyse.findings import analyse_counts, analyse_pattern, analyse_points
from analyse.look import COUNTED, DOUBTFUL_COLOUR, PLACED, RESIDUAL_LIMIT, STRUCK
from analyse.marks import CIRCLE, cells, label_place, middle, photograph_inches, stamped
from analyse.pattern import Circle, CountTable, Pattern
from analyse.quadrats import GridOptions
from tests.analyse.finished import (
    HEIGHT,
    TILT,
    WIDTH,
    amended,
    findings_of,
    photograph,
    scattered,
    sheet_of,
)


def _axes():
    return Figure((6, 4.5)).add_axes((0, 0, 1, 1))


def _texts(axes):
    return [(*text.get_position(), text.get_text()) for text in axes.texts]


def test_the_photograph_shows_every_spot_by_its_standing_in_its_place():
    sheet = amended(sheet_of(scattered(40), matrix=TILT))
    axes = _axes()
    drawn = draw_photograph(axes, findings_of(sheet), sheet)
    centres = sheet.spots.centres
    np.testing.assert_array_equal(drawn.spots["struck"], centres[:1])
    np.testing.assert_array_equal(drawn.spots["placed"], centres[1:2])
    np.testing.assert_array_equal(drawn.spots["doubtful"], centres[2:3])
    np.testing.assert_array_equal(drawn.spots["counted"], centres[3:])
    patches = {patch.get_label(): patch for patch in axes.patches if isinstance(patch, PathPatch)}
    outline = patches["counted"].get_path().vertices.reshape(37, 13, 2)
    np.testing.assert_allclose(outline[:, :12:3].mean(axis=1), centres[3:], atol=1e-9)
    reach = np.linalg.norm(outline[:, ::3] - centres[3:, None], axis=2)
    np.testing.assert_allclose(reach, 5.0)
    colours = {name: patch.get_edgecolor() for name, patch in patches.items()}
    wanted = {"counted": COUNTED, "doubtful": DOUBTFUL_COLOUR, "placed": PLACED, "struck": STRUCK}
    assert colours == {name: to_rgba(colour) for name, colour in wanted.items()}
    shapes = {len(patch.get_path().vertices) // len(drawn.spots[n]) for n, patch in patches.items()}
    assert shapes == {13, 5, 4}  # circle, diamond and cross: not colour alone
    assert len(axes.lines[0].get_xdata()) == 1  # the square beside the doubtful one


def test_the_grid_of_a_tilted_plot_is_mapped_back_onto_the_photograph():
    sheet = sheet_of(scattered(60), matrix=TILT)
    findings = findings_of(sheet)
    drawn = draw_photograph(_axes(), findings, sheet)
    grid = findings.counts.grid
    assert grid is not None
    assert sheet.scale is not None
    assert len(drawn.quadrats) == len(grid)
    for outline, polygon in zip(drawn.quadrats, grid.polygons, strict=True):
        np.testing.assert_allclose(
            sheet.scale.to_mm(outline), shapely.get_coordinates(polygon), atol=1e-9
        )
    inside = shapely.union_all([shapely.Polygon(outline) for outline in drawn.quadrats])
    assert inside.symmetric_difference(sheet.area.polygon).area < 1e-6 * inside.area


@pytest.mark.parametrize("matrix", [None, TILT])
def test_every_quadrat_carries_its_count_inside_it(matrix):
    sheet = sheet_of(scattered(60), matrix=matrix)
    findings = findings_of(sheet)
    axes = _axes()
    drawn = draw_photograph(axes, findings, sheet)
    assert [int(text) for *_, text in drawn.labels] == findings.counts.counts.tolist()
    assert _texts(axes) == list(drawn.labels)
    for (x, y, text), outline in zip(drawn.labels, drawn.quadrats, strict=True):
        quadrat = shapely.Polygon(outline)
        assert quadrat.contains(shapely.Point(x, y))
        within = shapely.contains_xy(quadrat.buffer(1e-6), *sheet.spots.centres.T)
        assert within.sum() == int(text)


def test_the_photograph_lies_where_its_pixels_are():
    sheet = sheet_of(scattered(20))
    axes = _axes()
    draw_photograph(axes, findings_of(sheet), sheet, pixels=photograph().pixels(shrink=0.5))
    assert axes.images[0].get_extent() == [-0.5, WIDTH - 0.5, HEIGHT - 0.5, -0.5]
    assert axes.get_ylim() == (HEIGHT - 0.5, -0.5)
    assert photograph_inches(400, 200) == (10.5, 5.25)
    assert photograph_inches(200, 400) == (4.1, 8.2)


def test_points_of_a_table_are_drawn_with_their_counts():
    points = np.random.default_rng(1).uniform(0, 50, (60, 2))
    findings = analyse_points(points, (0, 0, 50, 50), name="points.csv", simulations=99)
    axes = _axes()
    drawn = draw_points(axes, findings)
    np.testing.assert_array_equal(np.column_stack(axes.lines[0].get_data()), points)
    assert [int(text) for *_, text in drawn.labels] == findings.counts.counts.tolist()
    assert axes.get_ylim()[0] > axes.get_ylim()[1]  # y runs downwards
    assert axes.get_xlabel() == "x (mm)"


def test_the_map_colours_each_quadrat_by_its_residual():
    sheet = sheet_of(np.vstack([scattered(40), np.full((30, 2), 60.0)]), matrix=TILT)
    findings = findings_of(sheet)
    axes = _axes()
    drawn = draw_residuals(axes, findings)
    filled, rim = axes.collections
    np.testing.assert_array_equal(filled.get_array(), findings.residuals)
    assert filled.get_clim() == (-RESIDUAL_LIMIT, RESIDUAL_LIMIT)
    assert len(rim.get_paths()) == int((np.abs(findings.residuals) >= 2).sum()) > 0
    np.testing.assert_array_equal(drawn.outlined, np.abs(findings.residuals) >= 2)
    written = [float(text.replace("\u2212", "-")) for *_, text in drawn.labels]
    np.testing.assert_allclose(written, findings.residuals, atol=0.0501)
    for (x, y, _), polygon in zip(drawn.labels, cells(findings), strict=True):
        assert polygon.contains(shapely.Point(x, y))


def test_many_quadrats_carry_a_sign_where_they_are_notable():
    points = np.vstack([scattered(300), np.random.default_rng(2).normal(100, 6, (60, 2))])
    findings = findings_of(sheet_of(points), side="20px")
    assert len(findings.counts) >= 150
    drawn = draw_residuals(_axes(), findings)
    signs = [text for *_, text in drawn.labels]
    expected = ["+" if v > 0 else "\u2212" for v in findings.residuals if abs(v) >= 2]
    assert signs == expected
    assert "+" in signs


def test_the_map_of_a_table_of_counts_has_its_rows_and_columns():
    table = CountTable("bed.csv", np.array([0, 3, 1, 9, 2, 2]), 2, 3)
    findings = analyse_counts(table, simulations=99)
    axes = _axes()
    draw_residuals(axes, findings)
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("column", "row")
    assert [middle(cell) for cell in cells(findings)] == [
        (1, 1), (2, 1), (3, 1), (1, 2), (2, 2), (3, 2),
    ]  # fmt: skip


def test_the_frequencies_are_those_of_the_fit():
    findings = findings_of(sheet_of(scattered(150)), side="30px")
    fit = findings.poisson
    assert fit is not None
    axes = _axes()
    drawn = draw_frequencies(axes, findings)
    assert [bar.get_height() for bar in axes.patches] == fit.frequencies.tolist()
    np.testing.assert_array_equal(axes.lines[0].get_ydata(), fit.poisson)
    assert sum(bar.get_height() for bar in axes.patches) == findings.counts.whole.sum()
    assert drawn.classes == tuple(str(k) for k in range(len(fit.frequencies)))


def test_both_laws_are_drawn_where_they_differ_and_told_apart_without_colour():
    rng = np.random.default_rng(1)
    clumped = analyse_counts(CountTable("bed", rng.negative_binomial(1.0, 0.3, 80)), simulations=99)
    axes = _axes()
    drawn = draw_frequencies(axes, clumped)
    np.testing.assert_array_equal(axes.lines[1].get_ydata(), clumped.negative_binomial.law)
    np.testing.assert_array_equal(drawn.clumped, clumped.negative_binomial.law)
    styles = {(line.get_linestyle(), line.get_marker()) for line in axes.lines}
    assert styles == {("-", "o"), ("--", "s")}
    legend = [text.get_text() for text in axes.figure.legends[0].get_texts()]
    assert legend == ["seen", "Poisson (random)", "negative binomial"]
    for law in (drawn.expected, drawn.clumped):
        assert axes.get_ylim()[1] > max(law.max(), drawn.observed.max())


def test_no_second_law_is_drawn_at_the_poisson_limit():
    even = analyse_counts(CountTable("bed", np.tile([3, 4, 4, 5], 10)), simulations=99)
    assert even.negative_binomial.poisson_limit
    axes = _axes()
    assert draw_frequencies(axes, even).clumped is None
    assert len(axes.lines) == 1


def test_both_laws_are_drawn_in_pooled_classes_too():
    rng = np.random.default_rng(1)
    wide = analyse_counts(CountTable("bed", rng.negative_binomial(2.0, 0.05, 200)), simulations=99)
    drawn = draw_frequencies(_axes(), wide)
    assert drawn.classes == wide.poisson.labels
    np.testing.assert_allclose(drawn.clumped.sum(), 200)
    low, high = wide.poisson.classes[0]
    within = stats.nbinom.cdf(high, wide.negative_binomial.k, _share(wide)) if low == 0 else np.nan
    assert drawn.clumped[0] == pytest.approx(200 * within, rel=1e-6)


def _share(findings):
    """scipy's second parameter of the law."""
    fit = findings.negative_binomial
    return fit.k / (fit.k + fit.mean)


def test_high_counts_are_drawn_in_the_pooled_classes():
    counts = np.random.default_rng(8).poisson(90, 60)
    findings = analyse_counts(CountTable("plates.csv", counts), simulations=99)
    fit = findings.poisson
    assert fit is not None
    axes = _axes()
    drawn = draw_frequencies(axes, findings)
    assert drawn.classes == fit.labels
    assert [bar.get_height() for bar in axes.patches] == fit.observed.tolist()
    np.testing.assert_array_equal(axes.lines[0].get_ydata(), fit.expected)


def test_what_cannot_be_drawn_is_refused():
    findings = analyse_counts(CountTable("bed.csv", np.array([4, 3, 1, 9])), simulations=99)
    with pytest.raises(ValueError, match=r"bed\.csv has no points to draw"):
        draw_points(_axes(), findings)
    with pytest.raises(ValueError, match=r"bed\.csv does not tell where its quadrats lie"):
        draw_residuals(_axes(), findings)
    with pytest.raises(ValueError, match=r"bed\.csv has no frequencies to draw"):
        draw_frequencies(_axes(), replace(findings, poisson=None))


def test_the_residual_colours_are_told_apart_without_red_and_green():
    # Machado, Oliveira and Fernandes (2009), IEEE TVCG 15:1291, table 1, severity 1.0 (from
    # memory): deuteranopia and protanopia, in linear light.
    deuteranopia = [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.01182, 0.04294, 0.968881],
    ]
    protanopia = [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ]
    ends = np.array([RESIDUAL_COLOURS(v)[:3] for v in (0.0, 0.5, 1.0)])
    linear = np.where(ends <= 0.04045, ends / 12.92, ((ends + 0.055) / 1.055) ** 2.4)
    for matrix in (np.eye(3), np.array(deuteranopia), np.array(protanopia)):
        seen = np.clip(linear @ np.array(matrix).T, 0, 1)
        srgb = np.where(seen <= 0.0031308, seen * 12.92, 1.055 * seen ** (1 / 2.4) - 0.055)
        lab = cv2.cvtColor(srgb[None].astype(np.float32), cv2.COLOR_RGB2LAB)[0]
        for i, j in ((0, 1), (0, 2), (1, 2)):
            assert np.linalg.norm(lab[i] - lab[j]) > 30  # far beyond a just visible difference


def test_a_stamp_is_a_circle():
    vertices, codes = stamped(CIRCLE, np.array([[10.0, 20.0]]), np.array([3.0]))
    assert len(vertices) == len(codes) == 13
    # The middle of each cubic lies on the circle too.
    for k in range(0, 12, 3):
        a, b, c, d = vertices[k : k + 4]
        assert np.linalg.norm((a + 3 * b + 3 * c + d) / 8 - [10, 20]) == pytest.approx(3, rel=3e-4)


def test_a_label_avoids_spots_while_a_corner_is_free():
    cell = shapely.box(0, 0, 100, 100)
    assert label_place(cell, 20, 10) == (14, 9)
    upper_left = np.array([[14.0, 9.0, 5.0]])
    assert label_place(cell, 20, 10, spots=upper_left) == (86, 9)
    everywhere = np.array([[50.0, 50.0, 100.0]])
    assert label_place(cell, 20, 10, spots=everywhere) == (14, 9)
    assert label_place(cell, 300, 10) == (50, 50)


def test_the_middle_of_a_bent_cell_lies_inside_it():
    bent = shapely.Polygon([(0, 0), (10, 0), (10, 1), (1, 1), (1, 10), (0, 10)])
    assert bent.contains(shapely.Point(middle(bent)))


def test_svg_is_the_same_every_time_and_says_nothing_of_the_day():
    sheet = sheet_of(scattered(50), matrix=TILT)
    findings = findings_of(sheet)
    for draw in (
        lambda: photograph_figure(findings, sheet),
        lambda: residual_figure(findings),
        lambda: plain_figure(draw_frequencies, findings, width=5, height=4),
    ):
        first = svg_bytes(draw())
        assert first == svg_bytes(draw())
        assert ElementTree.fromstring(first).tag == "{http://www.w3.org/2000/svg}svg"
        for told in (b"DOCTYPE", b"atplotlib v", b"dc:date", b"DejaVu", b"<!--"):
            assert told not in first


def test_svg_is_the_same_from_another_process():
    script = (
        "import sys; sys.path.insert(0, '.')\n"
        "from tests.analyse.finished import *\n"
        "from analyse.embedding import svg_bytes\n"
        "from analyse.figures import residual_figure\n"
        "import hashlib\n"
        "svg = svg_bytes(residual_figure(findings_of(sheet_of(scattered(50), matrix=TILT))))\n"
        "print(hashlib.sha256(svg).hexdigest())\n"
    )
    runs = [
        subprocess.run(
            [sys.executable, "-c", script], capture_output=True, text=True, check=True,
            cwd=Path(__file__).parents[2], env=os.environ | {"PYTHONHASHSEED": seed},
        ).stdout
        for seed in ("1", "2")
    ]  # fmt: skip
    assert runs[0] == runs[1]


def test_a_photograph_is_made_smaller_and_stays_in_its_budget():
    noisy = np.random.default_rng(4).integers(0, 255, (2100, 2800, 3), dtype=np.uint8)
    data = photograph_jpeg(replace(photograph(), stored=noisy))
    decoded = cv2.imdecode(np.frombuffer(data, np.uint8), cv2.IMREAD_COLOR)
    assert decoded.shape == (1050, 1400, 3)
    small = photograph()
    decoded = cv2.imdecode(np.frombuffer(photograph_jpeg(small), np.uint8), cv2.IMREAD_COLOR)
    assert decoded.shape == (HEIGHT, WIDTH, 3)
    assert np.abs(decoded[..., ::-1].astype(float) - small.stored).mean() < 12


def test_an_encoder_that_refuses_is_a_bug(monkeypatch):
    monkeypatch.setattr(cv2, "imencode", lambda *args: (False, None))
    with pytest.raises(RuntimeError, match="the JPEG encoder refused an ordinary picture"):
        photograph_jpeg(photograph())


def test_pictures_become_addresses_of_themselves():
    assert data_uri(b"\xff\xd8\xff") == "data:image/jpeg;base64,/9j/"
    assert data_uri(b"<svg/>") == "data:image/svg+xml;base64,PHN2Zy8+"


def test_a_spot_too_small_to_see_gets_a_mark_that_shows():
    sheet = sheet_of(scattered(20))
    sheet = replace(sheet, spots=replace(sheet.spots, radius=np.full(20, 0.01)))
    axes = _axes()
    draw_photograph(axes, findings_of(sheet), sheet)
    outline = axes.patches[0].get_path().vertices[:13]
    across = float(np.ptp(outline[:, 0])) * axes.bbox.width / WIDTH * 72 / axes.figure.dpi
    assert across == pytest.approx(4.5)  # points


def test_thousands_of_spots_stay_small():
    sheet = sheet_of(scattered(8000))
    spots = sheet.spots
    sheet = replace(sheet, spots=replace(spots, radius=np.full(len(spots), 0.5)))
    findings = findings_of(sheet, side="60px")
    assert len(svg_bytes(photograph_figure(findings, sheet))) < 1_300_000


def test_sectors_of_a_dish_are_drawn():
    area = shapely.Point(0, 0).buffer(40, quad_segs=60)
    points = np.random.default_rng(6).normal(0, 12, (80, 2))

    pattern = replace(Pattern.of(points, area), dish=Circle(0, 0, 40), area_kind="dish")
    findings = analyse_pattern(pattern, GridOptions(rings=(2, 6)), simulations=99)
    drawn = draw_residuals(_axes(), findings)
    assert len(drawn.values) == 12
    assert len(cells(findings)) == 12


def test_tens_of_thousands_of_quadrats_stay_small_and_bear_no_unreadable_numbers():
    points = np.random.default_rng(1).uniform(0, 100, (8000, 2))
    found = analyse_points(
        points, (0, 0, 100, 100), grid=GridOptions(shape=(60, 60)), simulations=99
    )
    axes = _axes()
    drawn = draw_points(axes, found)
    assert (len(drawn.quadrats), drawn.labels) == (3600, ())
    assert draw_residuals(_axes(), found).labels == ()
    assert len(svg_bytes(points_figure(found))) < 700_000
    assert len(svg_bytes(residual_figure(found))) < 400_000
