"""Hand-marked photographs of other people, where they lie beside the checkout; told only a diameter.

The bounds are the best of five general-purpose methods (scale-space Laplacian, difference of
Gaussians, multi-threshold blobs, watershed of a distance transform, threshold with deblending),
each tuned on these very images.
"""

from __future__ import annotations

import importlib.util
from pathlib import Path
from types import ModuleType

import pytest

from tests.benchmarks.hand_marked import ROOT, SETS, MarkedSet
from tests.benchmarks.marked_scores import detect_set, found_in, score_set, size_of

BOUNDS = {"chula": 0.969, "dsb_fluo": 0.795, "coins": 1.0}
MARKED = [marked for marked in SETS if marked.name in BOUNDS]

pytestmark = pytest.mark.skipif(
    not ROOT.is_dir(), reason="the hand-marked photographs do not lie beside the checkout"
)


@pytest.fixture(scope="module")
def plain_rule() -> ModuleType | None:
    """The scoring rule as it came with the photographs, if it did."""
    if not (ROOT / "score.py").is_file():
        return None
    spec = importlib.util.spec_from_file_location("plain_rule", ROOT / "score.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def plain_f1(rule: ModuleType, marked: MarkedSet, folder: Path) -> float:
    usual, margin = rule.FALLBACK_R.get(marked.name, 6.0), rule.MARGIN.get(marked.name, 0.0)
    rows = [
        rule.score(
            found_in(folder, image.stem),
            *marked.truth(image.stem),
            usual,
            margin,
            size_of(folder, image.stem)[::-1],
        )
        for image in marked.images
    ]
    return float(rule.summary(rows)["f1"])


@pytest.mark.parametrize("marked", MARKED, ids=lambda marked: marked.name)
def test_one_command_finds_what_people_marked(
    marked: MarkedSet, plain_rule: ModuleType | None, tmp_path: Path
) -> None:
    detect_set(marked, tmp_path)
    f1 = score_set(marked, tmp_path).f1
    assert f1 >= BOUNDS[marked.name]
    if plain_rule is not None:
        assert plain_f1(plain_rule, marked, tmp_path) == pytest.approx(f1, abs=1e-12)


def test_all_bounds_are_tried() -> None:
    assert {marked.name for marked in MARKED} == set(BOUNDS)
