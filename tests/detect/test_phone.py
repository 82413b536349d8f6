"""Phones' pictures: what is read, and what is said where they cannot be."""

from __future__ import annotations

import io
import sys
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from detect.errors import PhotographUnreadable
from detect.phone import decode_phone_picture, is_phone_picture
from detect.photograph import find_photographs, read_photograph

RNG = np.random.default_rng(4)
# Smooth, since HEIC keeps colours at half the resolution.
PICTURE = np.kron(RNG.integers(40, 215, (6, 8, 3)), np.ones((16, 16, 1))).astype(np.uint8)


def heic(picture: np.ndarray, **more: object) -> bytes:
    """A HEIC file, or a skip where the extra `heif` is missing."""
    library = pytest.importorskip("pillow_heif", reason="the extra heif is not installed")
    file = io.BytesIO()
    library.from_pillow(Image.fromarray(picture)).save(file, quality=95, **more)
    return file.getvalue()


def camera_notes(turn: int) -> bytes:
    exif = Image.Exif()
    exif[0x0112] = turn
    exif.get_ifd(0x8769)[0x9003] = "2026:05:01 10:11:12"
    return exif.tobytes()


def test_a_phones_picture_is_read_in_its_colours(tmp_path: Path) -> None:
    path = tmp_path / "a.heic"
    path.write_bytes(heic(PICTURE))
    photograph = read_photograph(path)
    assert (photograph.width, photograph.height) == (128, 96)
    middle = photograph.stored[8::16, 8::16].astype(int)
    assert np.abs(middle - PICTURE[8::16, 8::16]).max() <= 6


def test_a_grey_one_has_three_equal_channels() -> None:
    stored = decode_phone_picture(heic(PICTURE[..., 0]))
    assert stored.shape == (96, 128, 3)
    assert np.abs(stored[8::16, 8::16, 0].astype(int) - PICTURE[8::16, 8::16, 0]).max() <= 3
    assert (np.ptp(stored, axis=2) <= 1).all()


def test_the_decoder_turns_the_picture_and_exif_does_not_turn_it_again(tmp_path: Path) -> None:
    path = tmp_path / "a.heic"
    path.write_bytes(heic(PICTURE, exif=camera_notes(6)))
    photograph = read_photograph(path)
    assert photograph.taken == "2026-05-01T10:11:12"
    upright = np.rot90(PICTURE, -1)  # turn 6: to be turned to the right by a quarter
    assert photograph.stored.shape == upright.shape
    middle = photograph.stored[8::16, 8::16].astype(int)
    assert np.abs(middle - upright[8::16, 8::16]).max() <= 6


def test_what_is_left_aside_is_noted(tmp_path: Path) -> None:
    library = pytest.importorskip("pillow_heif", reason="the extra heif is not installed")
    deep = (PICTURE.astype(np.uint16) << 8).tobytes()
    file = io.BytesIO()
    library.from_bytes("RGB;16", (128, 96), deep).save(file, quality=95)
    path = tmp_path / "a.heif"
    path.write_bytes(file.getvalue())
    photograph = read_photograph(path)
    assert photograph.stored.dtype == np.uint8
    assert photograph.notes in (
        ("10 bits per channel read as 8",),
        ("12 bits per channel read as 8",),
    )


def test_a_profile_is_noted(tmp_path: Path) -> None:
    from PIL import ImageCms

    profile = ImageCms.ImageCmsProfile(ImageCms.createProfile("sRGB")).tobytes()
    picture = Image.fromarray(PICTURE)
    picture.info["icc_profile"] = profile
    library = pytest.importorskip("pillow_heif", reason="the extra heif is not installed")
    file = io.BytesIO()
    library.from_pillow(picture).save(file, quality=95)
    path = tmp_path / "a.heic"
    path.write_bytes(file.getvalue())
    assert read_photograph(path).notes == ("colour profile not applied",)


@pytest.mark.parametrize("keep", [60, 300, -200])
def test_a_damaged_one_is_told(keep: int, tmp_path: Path) -> None:
    path = tmp_path / "a.heic"
    path.write_bytes(heic(PICTURE)[:keep])
    with pytest.raises(
        PhotographUnreadable,
        match=r"^a\.heic: the phone's picture is damaged or cut short; copy it again from the camera"
        r" or card, or export it as an 8- or 16-bit RGB JPEG, PNG or TIFF\.$",
    ):
        read_photograph(path)


def test_without_the_extra_the_remedy_is_told(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "pillow_heif", None)
    path = tmp_path / "a.heic"
    path.write_bytes(b"\0\0\0\x18ftypheic" + bytes(99))
    with pytest.raises(
        PhotographUnreadable,
        match=r"^a\.heic: the file is a phone's HEIC picture; to have it read, install the extra heif"
        r" \(pip install pillow-heif\), or export the picture as JPEG\.$",
    ):
        read_photograph(path)


def test_phone_pictures_are_told_by_their_brand() -> None:
    assert is_phone_picture(b"\0\0\0\x18ftypmif1\0\0\0\0mif1heic")
    assert not is_phone_picture(b"\0\0\0\x18ftypmif1\0\0\0\0mif1avif")
    assert not is_phone_picture(b"\0\0\0\x18ftypisom" + bytes(20))


def test_a_phone_picture_beside_its_jpeg_is_passed_over(tmp_path: Path) -> None:
    for name in ("a.heic", "a.jpg", "b.HEIC"):
        (tmp_path / name).write_bytes(b"x")
    assert [path.name for path in find_photographs(tmp_path)] == ["a.jpg", "b.HEIC"]
