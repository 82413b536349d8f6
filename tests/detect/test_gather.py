"""Which files are meant when files and folders are named."""

from __future__ import annotations

from pathlib import Path

import pytest

from detect.errors import RequestWrong
from detect.gather import gather_photographs, gather_sheets, natural_order


def touch(folder: Path, *names: str) -> list[Path]:
    folder.mkdir(exist_ok=True)
    for name in names:
        (folder / name).write_bytes(b"")
    return [folder / name for name in names]


def test_folders_are_opened_and_order_is_kept(tmp_path: Path) -> None:
    touch(tmp_path / "b", "dish_10.jpg", "dish_2.jpg", "notes.txt")
    single = touch(tmp_path / "a", "plot.png")
    found = gather_photographs([*single, tmp_path / "b"])
    assert [path.name for path in found] == ["plot.png", "dish_2.jpg", "dish_10.jpg"]


def test_a_photograph_named_twice_is_done_once(tmp_path: Path) -> None:
    (photo,) = touch(tmp_path, "a.jpg")
    assert gather_photographs([photo, tmp_path, tmp_path / ".." / tmp_path.name / "a.jpg"]) == [
        photo
    ]


def test_our_own_overlays_are_no_photographs(tmp_path: Path) -> None:
    touch(tmp_path, "a.jpg", "a.overlay.jpg")
    assert [path.name for path in gather_photographs([tmp_path])] == ["a.jpg"]


@pytest.mark.parametrize("names", [("a.jpg", "a.png"), ("Dish.jpg", "dish.tif")])
def test_results_that_would_overwrite_each_other_are_refused(
    tmp_path: Path, names: tuple[str, str]
) -> None:
    touch(tmp_path, *names)
    with pytest.raises(RequestWrong, match=r"would write their results under one name .*; rename"):
        gather_photographs([tmp_path])


def test_a_path_that_does_not_exist_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RequestWrong, match=r"none\.jpg does not exist; check the path"):
        gather_photographs([tmp_path / "none.jpg"])


def test_a_folder_without_photographs_is_refused(tmp_path: Path) -> None:
    touch(tmp_path, "notes.txt")
    with pytest.raises(RequestWrong, match="holds no photograph"):
        gather_photographs([tmp_path])


def test_sheets_of_a_folder_come_in_natural_order(tmp_path: Path) -> None:
    touch(tmp_path, "d10.sheet.json", "d9.sheet.json", "d9.points.csv", "d9.amendments.jsonl")
    assert [path.name for path in gather_sheets([tmp_path])] == ["d9.sheet.json", "d10.sheet.json"]


def test_a_folder_without_sheets_says_what_to_do(tmp_path: Path) -> None:
    with pytest.raises(
        RequestWrong, match=r"holds no sheets \(\*\.sheet\.json\); run strewn detect"
    ):
        gather_sheets([tmp_path])


def test_what_is_no_sheet_is_refused(tmp_path: Path) -> None:
    (photo,) = touch(tmp_path, "a.jpg")
    with pytest.raises(RequestWrong, match=r"a\.jpg is no sheet; name a file that ends in"):
        gather_sheets([photo])


def test_numbers_in_names_count_by_value() -> None:
    names = ["b1", "a10", "a9", "a09b", "A2"]
    assert sorted(names, key=natural_order) == ["A2", "a9", "a09b", "a10", "b1"]
