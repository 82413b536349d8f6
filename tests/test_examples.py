"""Every example in a docstring is run."""

from __future__ import annotations

import doctest
import importlib
import pkgutil

import pytest

import analyse
import detect

FLAGS = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE
MODULES = sorted(
    module.name
    for package in (analyse, detect)
    for module in pkgutil.walk_packages(package.__path__, f"{package.__name__}.")
    if not module.name.endswith("__main__")
)


@pytest.mark.parametrize("name", MODULES)
def test_examples_give_what_they_show(name: str) -> None:
    failed, _ = doctest.testmod(importlib.import_module(name), optionflags=FLAGS)
    assert failed == 0


def test_examples_are_there_to_be_run() -> None:
    """A run that finds no example at all would prove nothing."""
    tried = [
        doctest.testmod(importlib.import_module(name), optionflags=FLAGS).attempted
        for name in ("analyse.findings", "analyse.dispersion", "analyse.quadrats", "detect.lengths")
    ]
    assert min(tried) > 0
