"""Block variances: values from the printed definitions, exact; slow forms; variants that are wrong."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyse.blocks import (
    MOST_SIZES,
    blocked_quadrat_variance,
    nested_blocks,
    paired_quadrat_variance,
    three_term_variance,
    two_term_variance,
)
from analyse.errors import TooFewQuadrats
from tests.analyse import published

ROW = published.student_grid()[0].tolist()  # "Student" (1907), first row of Table I
WAVE = ([5] * 4 + [0] * 4) * 4
lines = st.lists(st.integers(0, 30), min_size=2, max_size=24)
grids = st.integers(2, 7).flatmap(
    lambda columns: st.lists(
        st.lists(st.integers(0, 9), min_size=columns, max_size=columns), min_size=2, max_size=7
    )
)


def plain_two(x: list[int], b: int) -> Fraction:
    """TTLQV from its definition, in fractions (Hill 1973)."""
    n = len(x)
    squares = [
        (sum(x[i : i + b]) - sum(x[i + b : i + 2 * b])) ** 2 for i in range(n + 1 - 2 * b)
    ]  # fmt: skip
    return Fraction(sum(squares), 2 * b * (n + 1 - 2 * b))


def plain_three(x: list[int], b: int) -> Fraction:
    """3TLQV from its definition."""
    n, total = len(x), 0
    for i in range(n + 1 - 3 * b):
        one, two, three = (sum(x[i + k * b : i + (k + 1) * b]) for k in range(3))
        total += (one - 2 * two + three) ** 2
    return Fraction(total, 8 * b * (n + 1 - 3 * b))


def plain_paired(x: list[int], d: int) -> Fraction:
    """PQV from its definition (Ludwig and Goodall 1978)."""
    n = len(x)
    return Fraction(sum((x[i] - x[i + d]) ** 2 for i in range(n - d)), 2 * (n - d))


def plain_nested(x: list[list[int]]) -> list[tuple[int, Fraction, int]]:
    """Size, sum of squares and degrees of freedom, from totals of blocks (Greig-Smith 1952)."""
    rows, columns = len(x), len(x[0])
    shapes, shape = [(1, 1)], (1, 1)
    while shape != (rows, columns):
        wide = shape[1] < columns and (shape[1] <= shape[0] or shape[0] == rows)
        shape = (shape[0], 2 * shape[1]) if wide else (2 * shape[0], shape[1])
        shapes.append(shape)

    def mean_square_total(height: int, width: int) -> Fraction:
        totals = [
            sum(x[r + i][c + j] for i in range(height) for j in range(width))
            for r in range(0, rows, height)
            for c in range(0, columns, width)
        ]
        return Fraction(sum(t * t for t in totals), height * width)

    return [
        (
            a[0] * a[1],
            mean_square_total(*a) - mean_square_total(*b),
            rows * columns // (a[0] * a[1]) // 2,
        )
        for a, b in pairwise(shapes)
    ]


def test_first_row_of_students_map() -> None:
    """From the printed definitions, as exact fractions."""
    two = [Fraction(55, 19), Fraction(65, 17), Fraction(56, 15), Fraction(145, 52)]
    assert [plain_two(ROW, b) for b in range(1, 5)] == two
    assert two_term_variance(ROW).values[:5] == pytest.approx(
        [2.894737, 3.823529, 3.733333, 2.788462, 3.418182], abs=5e-7
    )
    assert three_term_variance(ROW).values[:5] == pytest.approx(
        [2.145833, 2.733333, 2.982639, 1.496528, 1.629167], abs=5e-7
    )
    assert paired_quadrat_variance(ROW).values[:5] == pytest.approx(
        [2.894737, 3.583333, 3.264706, 3.9375, 3.4], abs=5e-7
    )
    blocked = blocked_quadrat_variance(ROW)
    assert blocked.values.tolist() == [1.6875, 5.1875, 1.5625, 22.5625]
    assert (blocked.sizes.tolist(), blocked.used, blocked.left_out) == ([1, 2, 4, 8], 16, 4)


def test_square_wave() -> None:
    """Four quadrats of 5 and four of 0, four times: the scale is 4 in every method."""
    two, pairs = two_term_variance(WAVE), paired_quadrat_variance(WAVE)
    assert (two.peak, two.at(4), two.at(8)) == (4, 20.0, 0.0)
    assert pairs.at(4) == 12.5 == pairs.values.max()
    assert (pairs.at(8), pairs.peak) == (0.0, 4)
    assert three_term_variance(WAVE).at(4) == pytest.approx(20.2381, abs=5e-5)
    assert blocked_quadrat_variance(WAVE).values.tolist() == [0, 0, 50, 0, 0]


def test_nested_blocks_of_students_map() -> None:
    """First 16 x 16 squares; sums of squares, degrees of freedom and mean squares."""
    nested = nested_blocks(published.student_grid())
    assert nested.sizes.tolist() == [1, 2, 4, 8, 16, 32, 64, 128]
    assert nested.terms.tolist() == [128, 64, 32, 16, 8, 4, 2, 1]
    squares = [605, 333, 98.25, 70.125, 32.125, 33.71875, 22.203125, 0.5625]
    assert nested.sums.tolist() == squares
    assert nested.values == pytest.approx(
        [4.7266, 5.2031, 3.0703, 4.3828, 4.0156, 8.4297, 11.1016, 0.5625], abs=5e-5
    )
    assert (nested.used, nested.left_out, nested.peak) == (256, 144, 64)


@settings(deadline=None)
@given(lines)
def test_fast_forms_are_the_definitions(x: list[int]) -> None:
    for fast, plain, blocks in (
        (two_term_variance, plain_two, 2),
        (three_term_variance, plain_three, 3),
        (paired_quadrat_variance, plain_paired, 2),
    ):
        found = fast(x)
        assert found.sizes.tolist() == list(range(1, len(x) // blocks + 1))
        for size, value in zip(found.sizes.tolist(), found.values, strict=True):
            assert value == pytest.approx(float(plain(x, size)), rel=1e-12)


@settings(deadline=None)
@given(grids)
def test_in_a_grid_all_rows_and_columns_are_averaged(x: list[list[int]]) -> None:
    columns = [list(column) for column in zip(*x, strict=True)]
    found = two_term_variance(x)
    for b, value, terms in zip(found.sizes.tolist(), found.values, found.terms, strict=True):
        reach = [line for line in [*x, *columns] if len(line) >= 2 * b]
        weights = [len(line) + 1 - 2 * b for line in reach]
        total = sum(w * plain_two(line, b) for w, line in zip(weights, reach, strict=True))
        assert value == pytest.approx(float(total / sum(weights)), rel=1e-12)
        assert terms == sum(weights)


@settings(deadline=None)
@given(grids, st.booleans())
def test_nested_blocks_are_the_definition(x: list[list[int]], turned: bool) -> None:
    grid = np.array(x).T if turned else np.array(x)
    rows, columns = (1 << (k.bit_length() - 1) for k in grid.shape)
    part = grid[:rows, :columns].tolist()
    found = nested_blocks(grid)
    assert found.left_out == grid.size - rows * columns
    plain = plain_nested(part)
    assert found.sizes.tolist() == [size for size, _, _ in plain]
    assert found.terms.tolist() == [df for _, _, df in plain]
    assert found.sums == pytest.approx([float(ss) for _, ss, _ in plain], rel=1e-12, abs=1e-12)


@settings(deadline=None)
@given(grids)
def test_nested_sums_of_squares_are_the_whole_variation(x: list[list[int]]) -> None:
    grid = np.array(x)
    part = grid[:, : 1 << (grid.shape[1].bit_length() - 1)]
    part = part[: 1 << (grid.shape[0].bit_length() - 1)]
    found = nested_blocks(grid)
    assert found.terms.sum() == part.size - 1
    assert found.sums.sum() == pytest.approx(((part - part.mean()) ** 2).sum(), rel=1e-9, abs=1e-9)


@settings(deadline=None)
@given(lines)
def test_identities(x: list[int]) -> None:
    """PQV at distance 1 is TTLQV at block 1; along a line BQV is the nested mean square."""
    assert paired_quadrat_variance(x).at(1) == two_term_variance(x).at(1)
    assert blocked_quadrat_variance(x).values.tolist() == nested_blocks(x).values.tolist()


@settings(deadline=None)
@given(lines)
def test_a_line_read_backwards_or_as_a_column_is_the_same(x: list[int]) -> None:
    for fast in (two_term_variance, three_term_variance, paired_quadrat_variance):
        ahead = fast(x).values
        assert fast(x[::-1]).values == pytest.approx(ahead, rel=1e-12)
        assert fast(np.array(x)[:, None]).values.tolist() == ahead.tolist()
        assert fast(3 * np.array(x)).values == pytest.approx(9 * ahead, rel=1e-12)


def test_confused_variants_are_not_what_is_computed() -> None:
    """Some texts leave the block size out of the divisor, or average pairs that do not overlap."""
    n, b = len(ROW), 3
    right = two_term_variance(ROW).at(b)
    squares = right * 2 * b * (n + 1 - 2 * b)
    assert squares == pytest.approx(336)
    assert right != pytest.approx(squares / (2 * (n + 1 - 2 * b)))
    assert right != pytest.approx(squares / (2 * b * (n - 2 * b)))
    third = three_term_variance(ROW).at(2)
    squares = third * 8 * 2 * (n + 1 - 3 * 2)
    assert third != pytest.approx(squares / (8 * (n + 1 - 3 * 2)))
    assert third != pytest.approx(squares / (6 * 2 * (n + 1 - 3 * 2)))
    assert paired_quadrat_variance(ROW).at(2) != pytest.approx(two_term_variance(ROW).at(2))
    assert blocked_quadrat_variance(ROW).at(2) != pytest.approx(two_term_variance(ROW).at(2))
    pairs = paired_quadrat_variance(ROW).at(2)
    assert pairs != pytest.approx(pairs * 2)
    assert pairs * 2 * (n - 2) == pytest.approx(129)


def test_a_steady_gradient_adds_nothing_to_three_terms() -> None:
    gradient = np.arange(24)
    assert three_term_variance(gradient).values.tolist() == [0.0] * 8
    assert two_term_variance(gradient).at(4) == pytest.approx(16**2 / 8)


def test_at_random_all_are_about_the_mean_count() -> None:
    """Poisson counts of mean 4; three terms average three quarters of it."""
    x = np.random.default_rng(3).poisson(4.0, 100_000)
    for fast, expected in (
        (two_term_variance, 4.0),
        (three_term_variance, 3.0),
        (paired_quadrat_variance, 4.0),
    ):
        assert fast(x, largest=5).values == pytest.approx(np.full(5, expected), rel=0.03)
    assert len(two_term_variance(x)) == MOST_SIZES
    assert nested_blocks(x).values[:5] == pytest.approx(np.full(5, 4.0), rel=0.06)


def test_huge_counts_do_not_overflow() -> None:
    x = np.array([10**12, 0] * 4)
    assert nested_blocks(x).values.tolist() == [5e23, 0.0, 0.0]
    assert paired_quadrat_variance(x).at(1) == pytest.approx(5e23)


def test_short_lines() -> None:
    assert two_term_variance([3, 1]).values.tolist() == [2.0]
    assert len(three_term_variance([3, 1])) == 0
    assert repr(three_term_variance([3, 1])) == "<BlockVariance 3TLQV: no sizes>"
    assert repr(two_term_variance(WAVE)) == "<BlockVariance TTLQV: sizes 1 to 16, peak 20 at 4>"
    with pytest.raises(KeyError):
        two_term_variance([3, 1]).at(2)


def test_what_is_no_row_of_counts_is_refused() -> None:
    with pytest.raises(TooFewQuadrats, match="need at least 2 quadrats, not 1; count more"):
        two_term_variance([3])
    with pytest.raises(ValueError, match="2 x 2 quadrats are a grid, not a transect"):
        blocked_quadrat_variance([[1, 2], [3, 4]])
    with pytest.raises(ValueError, match="not an array of 3 axes"):
        nested_blocks(np.ones((2, 2, 2)))
    with pytest.raises(ValueError, match="whole numbers of 0 or more"):
        nested_blocks([1, -1])
    with pytest.raises(ValueError, match="read-only"):
        nested_blocks([1, 2]).values[0] = 3
