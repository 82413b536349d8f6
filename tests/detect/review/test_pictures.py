"""In which form a photograph reaches the browser, upright as the sheet's coordinates are."""

from __future__ import annotations

import hashlib
import io
from dataclasses import replace
from pathlib import Path
from typing import Any

import cv2
import numpy as np
import pytest
from PIL import Image

from detect.photograph import read_photograph
from detect.review.pictures import PhotographMissing, Pictures, shown_as_it_is
from detect.sheet import PhotographIdentity, read_sheet
from tests.reviewing import Page, review_of

TURNS = range(1, 9)


def a_scene() -> Any:
    """Red at the upper left, green at the upper right, blue below."""
    scene = np.zeros((48, 80, 3), np.uint8)
    scene[:24, :40], scene[:24, 40:], scene[24:] = (220, 30, 30), (30, 200, 30), (30, 30, 210)
    return scene


def jpeg(turn: int) -> bytes:
    data = io.BytesIO()
    exif = Image.Exif()
    exif[0x0112] = turn
    Image.fromarray(a_scene()).save(data, "JPEG", quality=95, exif=exif)
    return data.getvalue()


def sent(folder: Path, name: str, data: bytes) -> tuple[str, bytes, Any]:
    """What the browser gets of a file: type, bytes, and the pixels as the sheet sees them."""
    path = folder / name
    path.write_bytes(data)
    photograph = read_photograph(path)
    page = review_of(folder)
    identity = PhotographIdentity(name, photograph.sha256, photograph.width, photograph.height)
    sheet = replace(read_sheet(page.sheets[0]), photograph=identity)
    got = Pictures().whole(sheet, folder)
    return got.type, got.data, photograph.stored[:]


@pytest.mark.parametrize("turn", TURNS)
def test_a_turned_photograph_arrives_upright(tmp_path: Path, turn: int) -> None:
    kind, data, stored = sent(tmp_path, "t.jpg", jpeg(turn))
    assert kind == "image/jpeg"
    shown = Image.open(io.BytesIO(data))
    # Whatever a browser does with the tag, there is none left to do anything with.
    assert shown.getexif().get(0x0112, 1) == 1
    pixels = np.asarray(shown.convert("RGB")).astype(int)
    assert pixels.shape == stored.shape
    assert np.abs(pixels - stored).mean() < 3
    assert (data == jpeg(turn)) == (turn == 1)


def encoded(suffix: str, array: Any) -> bytes:
    return bytes(cv2.imencode(suffix, array)[1].tobytes())


def test_files_that_browsers_show_are_sent_as_they_are(tmp_path: Path) -> None:
    scene = a_scene()[..., ::-1]
    for suffix, kind in ((".jpg", "image/jpeg"), (".png", "image/png"), (".bmp", "image/bmp")):
        data = encoded(suffix, scene)
        got, same, _ = sent(tmp_path, f"p{suffix}", data)
        assert (got, same == data) == (kind, True)


def test_what_browsers_show_otherwise_or_not_at_all_is_converted(tmp_path: Path) -> None:
    scene = a_scene()[..., ::-1]
    deep = (scene.astype(np.uint16) * 257).astype(np.uint16)
    alpha = np.dstack([scene, np.full(scene.shape[:2], 0, np.uint8)])
    for name, data in (
        ("deep.png", encoded(".png", deep)),
        ("clear.png", encoded(".png", alpha)),
        ("p.tif", encoded(".tif", scene)),
        ("deep.tif", encoded(".tif", deep)),
    ):
        kind, got, stored = sent(tmp_path, name, data)
        assert kind == "image/jpeg", name
        shown = np.asarray(Image.open(io.BytesIO(got)).convert("RGB")).astype(int)
        scale = 257 if stored.dtype == np.uint16 else 1
        assert np.abs(shown - stored / scale).mean() < 3, name


def test_a_phone_picture_is_converted(tmp_path: Path) -> None:
    heif = pytest.importorskip("pillow_heif")
    data = io.BytesIO()
    heif.from_pillow(Image.fromarray(a_scene())).save(data, quality=90)
    kind, got, stored = sent(tmp_path, "p.heic", data.getvalue())
    assert kind == "image/jpeg"
    assert np.asarray(Image.open(io.BytesIO(got))).shape == stored.shape


def test_what_is_no_picture_is_not_sent_as_it_is() -> None:
    for data in (b"", b"<html>", b"\xff\xd8\xff", b"\x89PNG\r\n\x1a\n"):
        assert shown_as_it_is(data) is None


def test_the_picture_is_asked_for_once_and_then_only_confirmed(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    told = page.state()["picture"]
    assert told["kind"] == "whole"
    answer = page.get(told["url"])
    assert answer.headers["content-type"] == "image/png"
    assert answer.content == (tmp_path / "a.png").read_bytes()
    assert answer.headers["content-security-policy"]
    again = page.get(told["url"], headers={"if-none-match": answer.headers["etag"]})
    assert (again.status_code, again.content) == (304, b"")


def test_another_file_of_that_name_is_not_shown(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    (tmp_path / "a.png").write_bytes((tmp_path / "a.png").read_bytes() + b"x")
    answer = page.get(f"api/sheets/{page.sheet}/picture")
    assert (answer.status_code, answer.json()["error"]["code"]) == (404, "photograph_missing")
    assert page.state()["spots"]["id"]  # it can still be edited


def test_a_way_to_the_photograph_that_is_a_folder_or_no_name_finds_nothing(tmp_path: Path) -> None:
    page = review_of(tmp_path)
    sheet = read_sheet(page.sheets[0])
    (tmp_path / "a.png").unlink()
    for way in (".", "x\0y", "../" * 40 + "etc/passwd"):
        lost = replace(sheet, settings={"photograph_at": way})
        with pytest.raises(PhotographMissing, match=r"a.png is neither where it was detected nor"):
            Pictures().whole(lost, tmp_path)


def test_only_the_very_file_is_ever_read_out(tmp_path: Path) -> None:
    """A sheet that points at another file gets nothing of it, because its sha256 differs."""
    secret = tmp_path / "secret.txt"
    secret.write_text("not for the browser")
    page = review_of(tmp_path)
    sheet = read_sheet(page.sheets[0])
    (tmp_path / "a.png").unlink()
    pointing = replace(sheet, settings={"photograph_at": "secret.txt"})
    with pytest.raises(PhotographMissing):
        Pictures().whole(pointing, tmp_path)
    assert hashlib.sha256(secret.read_bytes()).hexdigest() != sheet.photograph.sha256


def test_each_is_decoded_once_however_many_ask(tmp_path: Path, monkeypatch: Any) -> None:
    import threading

    import detect.review.pictures

    calls: list[int] = []
    real = detect.review.pictures.photograph_of

    def counted(*given: Any) -> Any:
        calls.append(1)
        return real(*given)

    monkeypatch.setattr(detect.review.pictures, "photograph_of", counted)
    page, pictures = review_of(tmp_path), Pictures()
    sheet = read_sheet(page.sheets[0])
    threads = [
        threading.Thread(target=pictures.photograph, args=(sheet, tmp_path)) for _ in range(8)
    ]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert len(calls) == 1
    assert Page(tmp_path, page.sheets).get(f"api/sheets/{page.sheet}/picture").status_code == 200
