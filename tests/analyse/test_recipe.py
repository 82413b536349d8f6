"""Recipes: what they say is done, and what they cannot say is refused with its place."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from analyse.errors import GridWrong, RecipeWrong
from analyse.grid_options import GridOptions
from analyse.plan import Plan, Trial, grid_from, plan_from
from analyse.recipe import Recipe, read_recipe
from detect.batch import Failure
from detect.lengths import Length

SAMPLES = Path(__file__).parents[2] / "sample_images"
WHOLE = """
[trial]
title = "Rinse water"
seed = 7
simulations = 199

[[set]]
match = "dish_*.jpg"
kind = "colonies"
area = "dish"
dish = "86mm"
inset = "1mm"
diameter = "1.2-6mm"
rings = "3x8"
factors = { batch = "A", dilution = -3 }

[[set]]
match = "plot_?.jpg"
kind = "seedlings"
plot = "1000x750mm"
quadrat = "50mm"

[photographs."plot_1.jpg"]
corners = [[1, 2], [300, 2], [300, 200], [1, 200]]
grid = "4x6"
factors = { block = 2 }

[photographs."dish_2.jpg"]
mm_per_pixel = 0.05
factors = { batch = "B" }
"""
NAMES = ["dish_1.jpg", "dish_2.jpg", "plot_1.jpg"]


def a_recipe(folder: Path, text: str = WHOLE) -> Recipe:
    path = folder / "survey.toml"
    path.write_text(text, encoding="utf-8")
    return read_recipe(path)


def plan(recipe: Recipe, name: str) -> Plan:
    found = recipe.plans(NAMES)[name]
    assert isinstance(found, Plan)
    return found


def test_the_trial_holds_for_all(tmp_path: Path) -> None:
    assert a_recipe(tmp_path).trial == Trial("Rinse water", 7, 199)
    assert a_recipe(tmp_path, '[[set]]\nmatch = "*"').trial == Trial()


def test_a_set_says_how_its_photographs_are_treated(tmp_path: Path) -> None:
    one = plan(a_recipe(tmp_path), "dish_1.jpg")
    assert one.request.options.kind == "colonies"
    assert one.request.scale.dish == Length(86, "mm")
    assert one.request.area.inset == Length(1, "mm")
    assert one.grid == GridOptions(rings=(3, 8))
    assert one.factors == {"batch": "A", "dilution": "-3"}


def test_a_photographs_own_keys_win(tmp_path: Path) -> None:
    one = plan(a_recipe(tmp_path), "plot_1.jpg")
    assert one.request.scale.corners == ((1, 2), (300, 2), (300, 200), (1, 200))
    assert one.request.where == "plot"
    assert one.grid == GridOptions(shape=(4, 6))
    assert one.factors == {"block": "2"}


def test_another_source_of_the_scale_replaces_the_sets(tmp_path: Path) -> None:
    one = plan(a_recipe(tmp_path), "dish_2.jpg")
    assert one.request.scale.mm_per_pixel == 0.05
    assert one.request.scale.dish is None
    assert one.request.where == "dish"
    assert one.factors == {"batch": "B", "dilution": "-3"}


def test_a_photograph_that_nothing_matches_is_a_failure_of_its_own(tmp_path: Path) -> None:
    plans = a_recipe(tmp_path).plans([*NAMES, "leaf_1.jpg"])
    assert plans["leaf_1.jpg"] == Failure(
        "leaf_1.jpg",
        "No [[set]] of the recipe matches it; add one, or move the photograph away.",
        request_wrong=True,
    )
    assert isinstance(plans["dish_1.jpg"], Plan)


def test_keys_that_contradict_each_other_fail_their_photograph_alone(tmp_path: Path) -> None:
    plans = a_recipe(tmp_path).plans([*NAMES, "plot_2.jpg"])
    failure = plans["plot_2.jpg"]
    assert isinstance(failure, Failure)
    assert failure.reason.startswith("plot needs corners beside it; give both")
    assert isinstance(plans["plot_1.jpg"], Plan)


def test_a_photographs_own_section_is_enough(tmp_path: Path) -> None:
    recipe = a_recipe(tmp_path, '[photographs."dish_1.jpg"]\nkind = "colonies"')
    found = recipe.plans(["dish_1.jpg"])["dish_1.jpg"]
    assert isinstance(found, Plan)
    assert found.request.options.kind == "colonies"


def test_files_lie_beside_the_recipe(tmp_path: Path) -> None:
    (tmp_path / "a.geojson").write_text("{}")
    recipe = a_recipe(tmp_path, '[[set]]\nmatch = "*"\narea = "a.geojson"')
    assert plan(recipe, "dish_1.jpg").request.where == tmp_path / "a.geojson"


@pytest.mark.parametrize(
    ("extra", "message"),
    [
        ('[[set]]\nmatch = "x*"', r"The \[\[set\]\] with match = 'x\*' matches no photograph"),
        ('[photographs."x.jpg"]', r'\[photographs\."x\.jpg"\] names a photograph that is not in'),
        (
            '[[set]]\nmatch = "*_1.jpg"',
            r"dish_1\.jpg is matched by two sets \('dish_\*\.jpg' and '\*_1\.jpg'\); narrow",
        ),
    ],
)
def test_a_recipe_that_does_not_fit_the_folder_is_refused(
    tmp_path: Path, extra: str, message: str
) -> None:
    recipe = a_recipe(tmp_path, f"{WHOLE}\n{extra}\n")
    with pytest.raises(RecipeWrong, match=message):
        recipe.plans(NAMES)


SET = '[[set]]\nmatch = "*"\n'


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[trial", r"The recipe survey\.toml is no proper TOML: "),
        ("", r'survey\.toml treats no photographs; add a \[\[set\]\] with match = "\*\.jpg"'),
        ("[sets]", "'sets' in the recipe is not known; use trial, set, photographs"),
        ("trial = 5", r"\[trial\] must be a table of keys and values, not 5"),
        ("photographs = 5", r"\[photographs\] must be a table"),
        ('[photographs]\n"a.jpg" = 5', r'\[photographs\."a\.jpg"\] must be a table'),
        ('[set]\nmatch = "*"', r"Each set must be headed \[\[set\]\], with two brackets"),
        (SET + "[trial]\nsed = 5", r"'sed' in \[trial\] is not known; use title, seed, simul"),
        (SET + "[trial]\ntitle = 5", r"title in \[trial\] must be a text in quotes, not 5"),
        (SET + "[trial]\nseed = -1", r"seed in \[trial\] must be a whole number of 0 or more"),
        (SET + "[trial]\nseed = 1.5", r"seed in \[trial\] must be a whole number"),
        (SET + "[trial]\nseed = true", r"seed in \[trial\] must be a whole number"),
        (
            SET + "[trial]\nsimulations = 0",
            r"simulations in \[trial\] must be a whole number of 99 to 1,000,000",
        ),
        ('[[set]]\nkind = "spots"', r'\[\[set\]\] 1 needs match = "a pattern" of file names'),
        ("[[set]]\nmatch = 5", r"\[\[set\]\] 1 needs match"),
        (SET + 'colour = "pink"', r"colour in \[\[set\]\] 1 must be one of auto, .*, not 'pink'"),
        (SET + "color = 'red'", r"'color' in \[\[set\]\] 1 is not known; use kind, diameter"),
        (SET + "diameter = '5mm'", r"diameter in \[\[set\]\] 1 must be two lengths"),
        (SET + "dish = 86", r"dish in \[\[set\]\] 1 needs a unit"),
        (SET + "quadrat = '-5mm'", r"quadrat in \[\[set\]\] 1 must be positive"),
        (SET + "grid = '5by5'", r"grid in \[\[set\]\] 1 must be two whole numbers such as 5x5"),
        (SET + "rings = [3, 8]", r"rings in \[\[set\]\] 1 must be two whole numbers"),
        (SET + "factors = 'A'", r"factors in \[\[set\]\] 1 must be a table"),
        (
            SET + "factors = { a = [1] }",
            r"a of factors in \[\[set\]\] 1 must be a word or a number",
        ),
        (SET + "factors = { vmr = 1 }", r"vmr of factors .* is a column of summary\.csv already"),
        (
            SET + '[photographs."a.jpg"]\nline = [1, 2, 3]',
            r'line in \[photographs\."a\.jpg"\] must be 4 numbers',
        ),
        (SET + "match = 'a'", "no proper TOML"),
    ],
)
def test_a_bad_recipe_says_where(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(RecipeWrong, match=message):
        a_recipe(tmp_path, text)


def test_a_missing_recipe_says_so(tmp_path: Path) -> None:
    with pytest.raises(RecipeWrong, match=r"The recipe .*no\.toml cannot be read \(no such file"):
        read_recipe(tmp_path / "no.toml")


def test_a_recipe_that_is_no_text_says_so(tmp_path: Path) -> None:
    (tmp_path / "a.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(RecipeWrong, match=r"a\.toml is no proper TOML"):
        read_recipe(tmp_path / "a.toml")


@pytest.mark.parametrize(
    ("values", "options"),
    [
        ({}, GridOptions()),
        ({"quadrat": "1cm", "grid": None}, GridOptions(side=Length(1, "cm"))),
        ({"grid": "4 x 6"}, GridOptions(shape=(4, 6))),
        ({"rings": "3x8", "kind": "spots"}, GridOptions(rings=(3, 8))),
    ],
)
def test_quadrats_are_laid_one_way(values: dict[str, Any], options: GridOptions) -> None:
    assert grid_from(values) == options


def test_two_ways_to_lay_quadrats_are_refused() -> None:
    with pytest.raises(GridWrong, match="Only one of"):
        plan_from({"grid": "4x6", "rings": "3x8"})


def test_the_sample_recipe_is_read() -> None:
    recipe = read_recipe(SAMPLES / "survey.toml")
    names = [path.name for path in SAMPLES.glob("*.jpg")]
    plans = recipe.plans(names)
    assert len(plans) == len(names) >= 13
    assert all(isinstance(plan, Plan) for plan in plans.values())
