"""The recipe of a survey: how each photograph of a folder is to be treated."""

from __future__ import annotations

import tomllib
from collections.abc import Iterable
from dataclasses import dataclass
from fnmatch import fnmatchcase
from pathlib import Path
from typing import Any

from analyse.chance import FEWEST_SIMULATIONS, MOST_SIMULATIONS
from analyse.errors import GridWrong, RecipeWrong
from analyse.plan import GRID_READERS, Plan, Trial, plan_from
from analyse.tables import SUMMARY_COLUMNS
from detect.batch import Failure
from detect.errors import RequestWrong
from detect.readers import READERS

KEYS = (*READERS, *GRID_READERS, "factors")
_MOST = 2**63 - 1
_BOUNDS = {"seed": (0, _MOST), "simulations": (FEWEST_SIMULATIONS, MOST_SIMULATIONS)}
# A photograph's own keys replace those of its set; a new source of the scale, or another way to
# lay quadrats, replaces the set's as a whole.
_RIVALS = (
    (
        ("mm_per_pixel",),
        ("dish",),
        ("line", "line_length"),
        ("ruler",),
        ("corners", "plot"),
        ("height", "focal_length", "sensor_width"),
    ),
    (("quadrat",), ("grid",), ("rings",)),
)


@dataclass(frozen=True, slots=True)
class RecipeSet:
    """The keys of one [[set]], and the names of photographs it is for."""

    match: str
    values: dict[str, Any]


@dataclass(frozen=True, slots=True)
class Recipe:
    """A recipe that has been read.

    Parameters
    ----------
    trial : Trial
        What holds for all photographs.
    sets : tuple of RecipeSet
        How kinds of photographs are treated.
    photographs : dict
        Keys of single photographs, by file name.
    folder : Path
        Where the recipe lies, and the files it names.
    """

    trial: Trial
    sets: tuple[RecipeSet, ...]
    photographs: dict[str, dict[str, Any]]
    folder: Path

    def plans(self, names: Iterable[str]) -> dict[str, Plan | Failure]:
        """Plan each photograph of a folder.

        Parameters
        ----------
        names : iterable of str
            File names.

        Returns
        -------
        dict
            A plan for each name, or the failure of a photograph that the recipe does not treat
            or whose keys contradict each other.

        Raises
        ------
        RecipeWrong
            If a set matches no photograph, a section names an absent one, or two sets match one.
        """
        names = list(names)
        matching = {name: [s for s in self.sets if fnmatchcase(name, s.match)] for name in names}
        for each in self.sets:
            if not any(each in sets for sets in matching.values()):
                raise RecipeWrong(
                    f"The [[set]] with match = {each.match!r} matches no photograph;"
                    " correct the pattern or remove the set."
                )
        for name in self.photographs:
            if name not in matching:
                raise RecipeWrong(
                    f'[photographs."{name}"] names a photograph that is not in the folder;'
                    " correct the name or remove the section."
                )
        for name, sets in matching.items():
            if len(sets) > 1:
                raise RecipeWrong(
                    f"{name} is matched by two sets ({sets[0].match!r} and {sets[1].match!r});"
                    " narrow one of the patterns."
                )
        return {name: self._plan(name, sets) for name, sets in matching.items()}

    def _plan(self, name: str, sets: list[RecipeSet]) -> Plan | Failure:
        """Plan one photograph."""
        own = self.photographs.get(name)
        if not sets and own is None:
            reason = "No [[set]] of the recipe matches it; add one, or move the photograph away."
            return Failure(name, reason, request_wrong=True)
        values = _overridden(sets[0].values if sets else {}, own or {})
        try:
            return plan_from(values, folder=self.folder)
        except (RequestWrong, GridWrong) as trouble:
            return Failure.of(name, trouble)


def read_recipe(path: Path) -> Recipe:
    """Read a recipe.

    Parameters
    ----------
    path : Path
        A TOML file with [trial], one [[set]] per kind of photograph, and sections such as
        [photographs."plot_01.jpg"] for what differs in one.

    Returns
    -------
    Recipe

    Raises
    ------
    RecipeWrong
        If the file cannot be read, a key is unknown, or a value is impossible.
    """
    try:
        values = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except OSError as trouble:
        reason = (trouble.strerror or str(trouble)).lower()
        raise RecipeWrong(
            f"The recipe {path} cannot be read ({reason}); check its path."
        ) from trouble
    except ValueError as trouble:
        raise RecipeWrong(f"The recipe {path.name} is no proper TOML: {trouble}.") from trouble
    _check_keys(values, ("trial", "set", "photographs"), "the recipe")
    trial = _trial(_table(values.get("trial", {}), "[trial]"))
    sets = _list_of_tables(values.get("set", []))
    photographs = _table(values.get("photographs", {}), "[photographs]")
    if not sets and not photographs:
        raise RecipeWrong(
            f'The recipe {path.name} treats no photographs; add a [[set]] with match = "*.jpg".'
        )
    return Recipe(
        trial,
        tuple(_set(table, number) for number, table in enumerate(sets, start=1)),
        {name: _own(name, table) for name, table in photographs.items()},
        path.parent,
    )


def _trial(values: dict[str, Any]) -> Trial:
    """Read [trial]."""
    _check_keys(values, ("title", "seed", "simulations"), "[trial]")
    title = values.get("title", Trial().title)
    if not isinstance(title, str):
        raise RecipeWrong(f"title in [trial] must be a text in quotes, not {title!r}.")
    for key, (least, most) in _BOUNDS.items():
        value = values.get(key, least)
        if isinstance(value, bool) or not isinstance(value, int) or not least <= value <= most:
            upper = "or more" if most == _MOST else f"to {most:,}"
            raise RecipeWrong(
                f"{key} in [trial] must be a whole number of {least} {upper}, not {value!r}."
            )
    return Trial(**values)


def _set(values: dict[str, Any], number: int) -> RecipeSet:
    """Read one [[set]]."""
    where = f"[[set]] {number}"
    match = values.get("match")
    if not isinstance(match, str) or not match:
        raise RecipeWrong(
            f'{where} needs match = "a pattern" of file names such as "dish_*.jpg", not {match!r}.'
        )
    rest = {key: value for key, value in values.items() if key != "match"}
    return RecipeSet(match, _checked(rest, where))


def _own(name: str, values: Any) -> dict[str, Any]:
    """Read the section of one photograph."""
    where = f'[photographs."{name}"]'
    return _checked(_table(values, where), where)


def _checked(values: dict[str, Any], where: str) -> dict[str, Any]:
    """Refuse unknown keys and impossible values, each on its own."""
    _check_keys(values, KEYS, where)
    for key, value in values.items():
        name = f"{key} in {where}"
        try:
            if key in READERS:
                READERS[key](value, name)
            elif key in GRID_READERS:
                GRID_READERS[key][1](value, name)
            else:
                _check_factors(value, name)
        except (RequestWrong, GridWrong) as trouble:
            raise RecipeWrong(str(trouble)) from trouble
    return values


def _check_factors(value: Any, name: str) -> None:
    """Refuse factors that are no table of words, or take the name of a column."""
    for factor, word in _table(value, name).items():
        if not isinstance(word, str | int | float):
            raise RecipeWrong(f"{factor} of {name} must be a word or a number, not {word!r}.")
        if factor in SUMMARY_COLUMNS:
            raise RecipeWrong(
                f"{factor} of {name} is a column of summary.csv already; choose another name."
            )


def _overridden(values: dict[str, Any], own: dict[str, Any]) -> dict[str, Any]:
    """Replace keys of a set by those of a photograph, with what they rule out."""
    kept = dict(values)
    for rivals in _RIVALS:
        chosen = [group for group in rivals if any(key in own for key in group)]
        if chosen:
            dropped = {key for group in rivals if group not in chosen for key in group}
            kept = {key: value for key, value in kept.items() if key not in dropped}
    factors = {**kept.get("factors", {}), **own.get("factors", {})}
    return {**kept, **own, **({"factors": factors} if factors else {})}


def _check_keys(values: dict[str, Any], known: Iterable[str], where: str) -> None:
    """Refuse keys that nothing would read."""
    known = tuple(known)
    for key in values:
        if key not in known:
            raise RecipeWrong(f"{key!r} in {where} is not known; use {', '.join(known)}.")


def _table(value: Any, where: str) -> dict[str, Any]:
    """Refuse what should be a table and is none."""
    if not isinstance(value, dict):
        raise RecipeWrong(f"{where} must be a table of keys and values, not {value!r}.")
    return value


def _list_of_tables(value: Any) -> list[dict[str, Any]]:
    """Refuse a set written with single brackets."""
    if not isinstance(value, list) or not all(isinstance(entry, dict) for entry in value):
        raise RecipeWrong("Each set must be headed [[set]], with two brackets on either side.")
    return value
