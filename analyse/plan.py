"""What is to be done with one photograph: how spots are found, and how quadrats are laid."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from analyse.chance import SEED, SIMULATIONS, check_seed, check_simulations
from analyse.errors import GridWrong
from analyse.grid_options import GridOptions
from detect.lengths import Length, parse_length
from detect.requests import DetectRequest, parse_request

RECIPE_NAME = "survey.toml"


@dataclass(frozen=True, slots=True)
class Trial:
    """What holds for all photographs and tables that are analysed together.

    Parameters
    ----------
    title : str
        Heading of the report.
    seed : int
        Seed of all simulations, 0 or more.
    simulations : int
        Simulated patterns per photograph, 99 to a million.

    Raises
    ------
    OptionWrong
        If the seed or the number of simulations is out of range.
    """

    title: str = "Dispersion of spots"
    seed: int = SEED
    simulations: int = SIMULATIONS

    def __post_init__(self) -> None:
        check_seed(self.seed)
        check_simulations(self.simulations)


@dataclass(frozen=True, slots=True)
class Plan:
    """What is done with one photograph.

    Parameters
    ----------
    request : DetectRequest
        What to find, at which scale, and where.
    grid : GridOptions
        How to lay the quadrats.
    factors : dict of str
        Treatment, block, dilution: free words for the tables.
    """

    request: DetectRequest = field(default_factory=DetectRequest)
    grid: GridOptions = field(default_factory=GridOptions)
    factors: dict[str, str] = field(default_factory=dict)


def plan_from(
    values: Mapping[str, Any],
    *,
    named: Callable[[str], str] = str,
    folder: Path | None = None,
) -> Plan:
    """Return what is done with a photograph, from the keys of a recipe.

    Parameters
    ----------
    values : mapping
        Keys of a set with a photograph's own; None counts as not given.
    named : callable
        Turns a key into the name the reader knows it by, for messages.
    folder : Path, optional
        Where the file of an area lies if its path is relative.

    Returns
    -------
    Plan

    Raises
    ------
    RequestWrong, GridWrong
        If a value is impossible or does not apply.
    """
    factors = values.get("factors") or {}
    rest = {key: value for key, value in values.items() if key not in (*GRID_READERS, "factors")}
    return Plan(
        parse_request(rest, named=named, folder=folder),
        grid_from(values, named=named),
        {name: str(value) for name, value in factors.items()},
    )


def grid_from(values: Mapping[str, Any], *, named: Callable[[str], str] = str) -> GridOptions:
    """Return how quadrats are laid, from the keys quadrat, grid and rings.

    Parameters
    ----------
    values : mapping
        Texts, such as "10mm" for quadrat and "5x5" for grid and rings; None or missing where not
        given. Other keys are left aside.
    named : callable
        Turns a key into the name the reader knows it by, for messages.

    Returns
    -------
    GridOptions

    Raises
    ------
    OptionWrong, GridWrong
        If a value is impossible, or two ways are chosen at once.
    """
    read = {
        field_name: reader(values[key], named(key))
        for key, (field_name, reader) in GRID_READERS.items()
        if values.get(key) is not None
    }
    return GridOptions(**read)


def _side(value: Any, name: str) -> Length:
    """Read the side of a quadrat."""
    return parse_length(value if isinstance(value, str) else repr(value), name=name)


def _two(value: Any, name: str) -> tuple[int, int]:
    """Read two whole numbers such as 5x5."""
    match = re.fullmatch(
        r"\s*(\d{1,6})\s*x\s*(\d{1,6})\s*", value if isinstance(value, str) else ""
    )
    if match is None:
        raise GridWrong(f"{name} must be two whole numbers such as 5x5, not {value!r}.")
    return int(match[1]), int(match[2])


GRID_READERS: dict[str, tuple[str, Callable[[Any, str], Any]]] = {
    "quadrat": ("side", _side),
    "grid": ("shape", _two),
    "rings": ("rings", _two),
}
