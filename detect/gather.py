"""Which files are meant: photographs and sheets, named one by one or by their folder."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

from detect.amendments import SHEET_SUFFIX
from detect.errors import RequestWrong
from detect.photograph import find_photographs
from detect.photograph import natural_order as natural_order


def gather_photographs(paths: Sequence[Path]) -> list[Path]:
    """List the photographs that are meant, each once.

    Parameters
    ----------
    paths : sequence of Path
        Files, or folders whose photographs are taken in natural order.

    Returns
    -------
    list of Path

    Raises
    ------
    RequestWrong
        If a path does not exist, a folder holds no photograph, or the results of two photographs
        would overwrite each other.
    """
    found = _gather(paths, find_photographs)
    _check_names(found)
    return found


def gather_sheets(paths: Sequence[Path]) -> list[Path]:
    """List the sheets that are meant, each once.

    Parameters
    ----------
    paths : sequence of Path
        Sheets, or folders whose sheets are taken in natural order.

    Returns
    -------
    list of Path

    Raises
    ------
    RequestWrong
        If a path does not exist, is no sheet, or a folder holds none.
    """
    found = _gather(paths, _find_sheets)
    for path in found:
        if not path.name.endswith(SHEET_SUFFIX):
            raise RequestWrong(
                f"{path} is no sheet; name a file that ends in {SHEET_SUFFIX}, or its folder."
            )
    return found


def _gather(paths: Sequence[Path], within: Callable[[Path], list[Path]]) -> list[Path]:
    """List files, and what is found within folders, each once and in order."""
    found: dict[Path, Path] = {}
    for path in paths:
        if not path.exists():
            raise RequestWrong(f"{path} does not exist; check the path.")
        for file in within(path) if path.is_dir() else [path]:
            found.setdefault(file.resolve(), file)
    return list(found.values())


def _find_sheets(folder: Path) -> list[Path]:
    """List the sheets of a folder in natural order."""
    sheets = [file for file in folder.iterdir() if file.name.endswith(SHEET_SUFFIX)]
    if not sheets:
        raise RequestWrong(
            f"The folder {folder} holds no sheets (*{SHEET_SUFFIX}); run strewn detect first."
        )
    return sorted(sheets, key=lambda file: (natural_order(file.name), file.name))


def _check_names(paths: Sequence[Path]) -> None:
    """Refuse photographs whose names differ only in suffix, folder or capitals."""
    seen: dict[str, Path] = {}
    for path in paths:
        other = seen.setdefault(path.stem.casefold(), path)
        if other != path:
            raise RequestWrong(
                f"{other} and {path} would write their results under one name ({path.stem});"
                " rename one, or do them one at a time with different folders for --out."
            )
