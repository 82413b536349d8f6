"""Reading photographs: every kind of file, every turn, every way a file can be wrong."""

from __future__ import annotations

import hashlib
import io
import os
import struct
import zlib
from pathlib import Path

import cv2
import numpy as np
import pytest
import tifffile
from hypothesis import given, settings
from hypothesis import strategies as st
from PIL import Image

from detect.directories import DirectoryDamaged, first_directory
from detect.errors import PhotographUnreadable, RequestWrong
from detect.photograph import (
    MOST_DECODED_PER_BYTE,
    Photograph,
    find_photographs,
    read_photograph,
)

RNG = np.random.default_rng(5)
COLOUR = RNG.integers(0, 256, (24, 36, 3), dtype=np.uint8)
GREY = COLOUR[..., 0]
DEEP = RNG.integers(0, 65536, (24, 36, 3), dtype=np.uint16)
SMOOTH = cv2.resize(RNG.integers(60, 200, (4, 6, 3), dtype=np.uint8), (96, 64))


def saved(image: np.ndarray | Image.Image, kind: str, **choices: object) -> bytes:
    """Bytes of an image as another library writes it."""
    buffer = io.BytesIO()
    picture = image if isinstance(image, Image.Image) else Image.fromarray(image)
    picture.save(buffer, kind, **choices)
    return buffer.getvalue()


def tiff(array: np.ndarray, **choices: object) -> bytes:
    buffer = io.BytesIO()
    tifffile.imwrite(buffer, array, **choices)
    return buffer.getvalue()


def read_bytes(folder: Path, data: bytes, name: str = "a.jpg") -> Photograph:
    path = folder / name
    path.write_bytes(data)
    return read_photograph(path)


def trouble(folder: Path, data: bytes, name: str = "a.jpg") -> str:
    with pytest.raises(PhotographUnreadable) as caught:
        read_bytes(folder, data, name)
    return str(caught.value)


def png_chunk(kind: bytes, body: bytes) -> bytes:
    check = zlib.crc32(kind + body)
    return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", check)


def png_claiming(width: int, height: int) -> bytes:
    """A well-formed PNG whose header claims a size its pixels do not fill."""
    header = png_chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, 8, 2, 0, 0, 0))
    pixels = png_chunk(b"IDAT", zlib.compress(bytes(64)))
    return b"\x89PNG\r\n\x1a\n" + header + pixels + png_chunk(b"IEND", b"")


LOSSLESS = {
    "png": (saved(COLOUR, "PNG"), COLOUR),
    "png, grey": (saved(GREY, "PNG"), np.dstack([GREY] * 3)),
    "png, one bit": (
        saved(Image.fromarray(GREY > 99), "PNG"),
        np.dstack([np.where(GREY > 99, 255, 0)] * 3),
    ),
    "png, 16 bits": (cv2.imencode(".png", DEEP[..., ::-1])[1].tobytes(), DEEP),
    "png, grey of 16 bits": (
        cv2.imencode(".png", DEEP[..., 1])[1].tobytes(),
        np.dstack([DEEP[..., 1]] * 3),
    ),
    "bmp": (saved(COLOUR, "BMP"), COLOUR),
    "tiff": (tiff(COLOUR, photometric="rgb"), COLOUR),
    "tiff, 16 bits": (tiff(DEEP, photometric="rgb"), DEEP),
    "tiff, 16 bits, other byte order": (tiff(DEEP, photometric="rgb", byteorder=">"), DEEP),
    "tiff, grey": (tiff(GREY), np.dstack([GREY] * 3)),
    "tiff, grey of 16 bits": (tiff(DEEP[..., 0]), np.dstack([DEEP[..., 0]] * 3)),
    "tiff, white is 0": (tiff(255 - GREY, photometric="miniswhite"), np.dstack([GREY] * 3)),
    "tiff, white is 0, 16 bits": (
        tiff(65535 - DEEP[..., 0], photometric="miniswhite"),
        np.dstack([DEEP[..., 0]] * 3),
    ),
    "tiff, lzw": (saved(COLOUR, "TIFF", compression="tiff_lzw"), COLOUR),
    "tiff, deflate": (tiff(COLOUR, photometric="rgb", compression="zlib", predictor=True), COLOUR),
    "tiff, packed": (saved(COLOUR, "TIFF", compression="packbits"), COLOUR),
    "tiff, tiles": (tiff(np.tile(COLOUR, (3, 3, 1)), photometric="rgb", tile=(64, 64)), None),
    "tiff, planes": (
        tiff(np.moveaxis(COLOUR, 2, 0), photometric="rgb", planarconfig="separate"),
        COLOUR,
    ),
    "bigtiff": (tiff(COLOUR, photometric="rgb", bigtiff=True), COLOUR),
}


@pytest.mark.parametrize("case", LOSSLESS)
def test_lossless_files_give_their_very_pixels(case: str, tmp_path: Path) -> None:
    data, expected = LOSSLESS[case]
    expected = np.tile(COLOUR, (3, 3, 1)) if expected is None else expected
    photograph = read_bytes(tmp_path, data)
    assert photograph.stored.dtype == (np.uint16 if expected.dtype == np.uint16 else np.uint8)
    np.testing.assert_array_equal(photograph.stored, expected)
    assert photograph.notes == ()
    assert photograph.sha256 == hashlib.sha256(data).hexdigest()
    assert not photograph.stored.flags.writeable


@pytest.mark.parametrize("progressive", [False, True])
@pytest.mark.parametrize("subsampling", [0, 2])
def test_a_jpeg_agrees_with_another_decoder(
    progressive: bool, subsampling: int, tmp_path: Path
) -> None:
    data = saved(SMOOTH, "JPEG", quality=90, progressive=progressive, subsampling=subsampling)
    other = np.asarray(Image.open(io.BytesIO(data)).convert("RGB"), dtype=int)
    assert np.abs(read_bytes(tmp_path, data).stored - other).max() <= 3


def test_a_grey_jpeg_has_three_equal_channels(tmp_path: Path) -> None:
    stored = read_bytes(tmp_path, saved(SMOOTH[..., 0], "JPEG")).stored
    assert (stored == stored[..., :1]).all()
    assert stored.shape == SMOOTH.shape


def test_a_palette_becomes_its_colours(tmp_path: Path) -> None:
    picture = Image.fromarray(COLOUR).quantize(16)
    expected = np.asarray(picture.convert("RGB"))
    for kind in ("PNG", "TIFF", "BMP"):
        np.testing.assert_array_equal(
            read_bytes(tmp_path, saved(picture, kind)).stored, expected, err_msg=kind
        )


@pytest.mark.parametrize("turn", range(1, 9))
@pytest.mark.parametrize("kind", ["PNG", "TIFF"])
def test_every_turn_is_undone(turn: int, kind: str, tmp_path: Path) -> None:
    # Exif 2.32, tag 0112 hex: where the stored 0th row and 0th column lie in the upright picture.
    undo = {
        1: lambda a: a,
        2: lambda a: a[:, ::-1],
        3: lambda a: a[::-1, ::-1],
        4: lambda a: a[::-1],
        5: lambda a: a.swapaxes(0, 1),
        6: lambda a: a.swapaxes(0, 1)[:, ::-1],
        7: lambda a: a[::-1, ::-1].swapaxes(0, 1),
        8: lambda a: a.swapaxes(0, 1)[::-1],
    }
    exif = Image.Exif()
    exif[0x0112] = turn
    where = {"exif": exif.tobytes()} if kind == "PNG" else {"tiffinfo": {274: turn}}
    stored = read_bytes(tmp_path, saved(COLOUR, kind, **where)).stored
    np.testing.assert_array_equal(stored, undo[turn](COLOUR))


@settings(deadline=None, max_examples=20)
@given(turn=st.integers(1, 8), seed=st.integers(0, 99))
def test_a_turned_jpeg_equals_its_upright_pixels(
    turn: int, seed: int, tmp_path_factory: pytest.TempPathFactory
) -> None:
    folder = tmp_path_factory.mktemp("turn")
    small = np.random.default_rng(seed).integers(0, 256, (3, 5, 3), dtype=np.uint8)
    picture = Image.fromarray(cv2.resize(small, (48, 32), interpolation=cv2.INTER_CUBIC))
    plain = saved(picture, "JPEG", quality=95, subsampling=0)
    exif = Image.Exif()
    exif[0x0112] = turn
    turned = read_bytes(
        folder, saved(picture, "JPEG", quality=95, subsampling=0, exif=exif.tobytes())
    )
    upright = {
        1: (),
        2: ("FLIP_LEFT_RIGHT",),
        3: ("ROTATE_180",),
        4: ("FLIP_TOP_BOTTOM",),
        5: ("TRANSPOSE",),
        6: ("ROTATE_270",),
        7: ("TRANSVERSE",),
        8: ("ROTATE_90",),
    }[turn]
    expected = Image.fromarray(read_bytes(folder, plain).stored)
    for step in upright:
        expected = expected.transpose(getattr(Image.Transpose, step))
    np.testing.assert_array_equal(turned.stored, np.asarray(expected))


def test_the_time_is_read_from_a_jpeg_and_a_tiff(tmp_path: Path) -> None:
    exif = Image.Exif()
    exif.get_ifd(0x8769)[0x9003] = "2031:05:06 07:08:09"
    exif.get_ifd(0x8769)[0x9011] = "+02:00"
    jpeg = read_bytes(tmp_path, saved(SMOOTH, "JPEG", exif=exif.tobytes()))
    assert jpeg.taken == "2031-05-06T07:08:09+02:00"
    info = {34665: {0x9003: "2031:05:06 07:08:09", 0x9011: "+02:00"}}
    as_tiff = read_bytes(tmp_path, saved(SMOOTH, "TIFF", tiffinfo=info))
    assert as_tiff.taken == "2031-05-06T07:08:09+02:00"


@pytest.mark.parametrize("text", ["0000:00:00 00:00:00", "yesterday", ""])
def test_a_clock_that_was_never_set_gives_no_time(text: str, tmp_path: Path) -> None:
    exif = Image.Exif()
    exif.get_ifd(0x8769)[0x9003] = text
    assert read_bytes(tmp_path, saved(SMOOTH, "JPEG", exif=exif.tobytes())).taken is None


def test_damaged_camera_notes_are_noted_and_the_picture_is_read(tmp_path: Path) -> None:
    exif = b"Exif\0\0II\x2a\0\x08\0\0\0\xff\x0f"
    photograph = read_bytes(tmp_path, saved(SMOOTH, "JPEG", exif=exif))
    assert photograph.notes == ("the camera's notes (Exif) are damaged",)
    assert photograph.stored.shape == SMOOTH.shape


def test_an_unknown_turn_counts_as_upright(tmp_path: Path) -> None:
    exif = Image.Exif()
    exif[0x0112] = 77
    stored = read_bytes(tmp_path, saved(COLOUR, "PNG", exif=exif.tobytes())).stored
    np.testing.assert_array_equal(stored, COLOUR)


@pytest.mark.parametrize("case", ["png", "png of 16 bits", "tiff", "tiff of 16 bits", "palette"])
def test_transparency_is_dropped_without_touching_the_colours(case: str, tmp_path: Path) -> None:
    clear = np.dstack([COLOUR, RNG.integers(0, 256, GREY.shape, dtype=np.uint8)])
    deep = np.dstack([DEEP, RNG.integers(0, 65536, GREY.shape, dtype=np.uint16)])
    few = Image.fromarray(COLOUR).quantize(8)
    data, expected = {
        "png": (saved(clear, "PNG"), COLOUR),
        "png of 16 bits": (cv2.imencode(".png", deep[..., [2, 1, 0, 3]])[1].tobytes(), DEEP),
        "tiff": (tiff(clear, photometric="rgb", extrasamples=["unassalpha"]), COLOUR),
        "tiff of 16 bits": (tiff(deep, photometric="rgb", extrasamples=["unassalpha"]), DEEP),
        "palette": (saved(few, "PNG", transparency=0), np.asarray(few.convert("RGB"))),
    }[case]
    photograph = read_bytes(tmp_path, data)
    np.testing.assert_array_equal(photograph.stored, expected)
    assert photograph.notes == ("transparency dropped",)


@pytest.mark.parametrize("kind", ["JPEG", "PNG", "TIFF"])
def test_a_colour_profile_is_noted(kind: str, tmp_path: Path) -> None:
    photograph = read_bytes(tmp_path, saved(SMOOTH, kind, icc_profile=bytes(200)))
    assert photograph.notes == ("colour profile not applied",)


def test_of_many_pages_the_first_is_read(tmp_path: Path) -> None:
    other = Image.fromarray(255 - COLOUR)
    data = saved(COLOUR, "TIFF", save_all=True, append_images=[other, other])
    photograph = read_bytes(tmp_path, data)
    np.testing.assert_array_equal(photograph.stored, COLOUR)
    assert photograph.notes == ("first of 3 pages read",)


def test_pages_that_point_in_a_circle_come_to_an_end(tmp_path: Path) -> None:
    data = bytearray(tiff(GREY))
    start = struct.unpack_from("<I", data, 4)[0]
    entries = struct.unpack_from("<H", data, start)[0]
    struct.pack_into("<I", data, start + 2 + 12 * entries, start)
    assert read_bytes(tmp_path, bytes(data)).notes == ("first of 2 pages read",)


def test_printing_colours_are_turned_into_rgb_as_another_library_does(tmp_path: Path) -> None:
    data = saved(Image.fromarray(SMOOTH).convert("CMYK"), "JPEG", quality=95)
    other = np.asarray(Image.open(io.BytesIO(data)).convert("RGB"), dtype=int)
    photograph = read_bytes(tmp_path, data)
    assert np.abs(photograph.stored - other).max() <= 4
    assert photograph.notes == ("printing colours (CMYK) turned into RGB without a profile",)


def test_pixels_are_0_to_1_whatever_the_depth(tmp_path: Path) -> None:
    eight = read_bytes(tmp_path, saved(COLOUR, "PNG"))
    sixteen = read_bytes(tmp_path, tiff(COLOUR.astype(np.uint16) * 257, photometric="rgb"))
    assert eight.pixels().dtype == np.float32
    np.testing.assert_allclose(eight.pixels(), COLOUR / 255, atol=1e-6)
    np.testing.assert_allclose(sixteen.pixels(), eight.pixels(), atol=1e-6)


def test_shrunk_pixels_are_averages(tmp_path: Path) -> None:
    photograph = read_bytes(tmp_path, saved(COLOUR, "PNG"))
    means = COLOUR.reshape(12, 2, 18, 2, 3).mean(axis=(1, 3)) / 255
    assert (photograph.width, photograph.height, photograph.name) == (36, 24, "a.jpg")
    np.testing.assert_allclose(photograph.pixels(shrink=0.5), means, atol=0.51 / 255)


@pytest.mark.parametrize("sides", [(96, 64), (48, 32), (36, 24), (30, 20)])
@pytest.mark.parametrize("depth", [np.uint8, np.uint16])
def test_averages_by_halves_are_averages(
    depth: type, sides: tuple[int, int], tmp_path: Path
) -> None:
    """A ramp, of which the average of an area is the value at its middle."""
    x, y = np.meshgrid(np.arange(192), np.arange(128))
    ramp = np.repeat((40 + x // 2 + y // 2)[..., None], 3, axis=2).astype(depth)
    photograph = Photograph(tmp_path / "a.png", "0" * 64, ramp)
    column, row = (np.arange(n) + 0.5 for n in sides)
    expected = 40 + (column * 192 / sides[0] - 1 + (row[:, None] * 128 / sides[1] - 1)) / 2
    for quick in (False, True):
        reduced = photograph.reduced(shrink=sides[0] / 192, quick=quick)
        assert reduced.shape == (sides[1], sides[0], 3)
        np.testing.assert_allclose(reduced[..., 1], expected, atol=1.01)


@pytest.mark.parametrize("depth", [np.uint8, np.uint16])
def test_reduced_pixels_are_the_same_in_the_depth_of_the_file(depth: type, tmp_path: Path) -> None:
    most = np.iinfo(depth).max
    stored = np.ascontiguousarray(COLOUR.astype(depth) * (most // 255))
    photograph = Photograph(tmp_path / "a.png", "0" * 64, stored)
    for choices in (
        {},
        {"shrink": 0.4},
        {"box": (3, 2, 30, 17)},
        {"shrink": 0.7, "box": (0, 5, 9, 24)},
    ):
        reduced = photograph.reduced(**choices)
        assert reduced.dtype == depth
        np.testing.assert_allclose(reduced / most, photograph.pixels(**choices), atol=1e-6)


# ---- files that are wrong -----------------------------------------------------------------------


def jpeg_with_thumbnail() -> bytes:
    """A JPEG whose camera notes hold a whole small JPEG, end-of-image mark included."""
    thumbnail = saved(SMOOTH[:32, :32], "JPEG")
    block = b"II\x2a\0\x08\0\0\0" + b"\0\0" + b"\0\0\0\0" + thumbnail
    return saved(SMOOTH, "JPEG", exif=b"Exif\0\0" + block)


def test_a_thumbnail_does_not_pass_for_the_end(tmp_path: Path) -> None:
    data = jpeg_with_thumbnail()
    assert read_bytes(tmp_path, data).stored.shape == SMOOTH.shape
    assert "no end-of-image mark" in trouble(tmp_path, data[: len(data) - 40])


@pytest.mark.parametrize("fraction", [0.02, 0.2, 0.5, 0.8, 0.999])
@pytest.mark.parametrize("kind", ["JPEG", "PNG", "TIFF", "BMP"])
def test_a_file_cut_short_is_told_and_nothing_is_spilled(
    kind: str, fraction: float, tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    data = saved(SMOOTH, kind)
    message = trouble(tmp_path, data[: int(len(data) * fraction)])
    assert message.startswith("a.jpg: the file is ")
    assert "copy it again" in message
    assert capfd.readouterr() == ("", "")


def test_a_tail_of_zeros_is_a_file_cut_short(tmp_path: Path) -> None:
    data = saved(cv2.resize(COLOUR, (96, 64)), "JPEG")
    half = len(data) // 2
    assert "no end-of-image mark" in trouble(tmp_path, data[:half] + bytes(len(data) - half))


def test_bytes_after_the_end_do_no_harm(tmp_path: Path) -> None:
    assert read_bytes(tmp_path, saved(SMOOTH, "JPEG") + b"\xff" * 99).stored.shape == SMOOTH.shape


def jpeg_header(marker: int, depth: int, channels: int) -> bytes:
    body = struct.pack(">BHHB", depth, 64, 96, channels) + bytes(3 * channels)
    frame = b"\xff" + bytes([marker]) + struct.pack(">H", len(body) + 2) + body
    return b"\xff\xd8" + frame + b"\xff\xda\0\x02" + bytes(99) + b"\xff\xd9"


WRONG_BYTES = {
    "empty": (b"", "the file is empty (0 bytes); copy it again from the camera or card."),
    "text": (
        b"x,y\n12,15\n",
        "the file is no JPEG, PNG, TIFF or BMP picture (it is text that begins 'x,y'); "
        "export it as an 8- or 16-bit RGB JPEG, PNG or TIFF.",
    ),
    "other bytes": (
        b"\0\1\2\xff" * 9,
        "the file is no JPEG, PNG, TIFF or BMP picture (it begins with the bytes "
        "00 01 02 ff 00 01 02 ff); export it as",
    ),
    "avif": (
        b"\0\0\0\x18ftypavif" + bytes(99),
        "the file is an AVIF picture, a film or a raw file; export it as an 8- or 16-bit",
    ),
    "one pixel": (
        saved(COLOUR[:1, :1], "PNG"),
        "the picture has 1 x 1 pixels, too small to count in; at least 16 each way are needed.",
    ),
    "absurd png": (
        png_claiming(20_000, 20_000),
        "the header claims 20000 x 20000 pixels, which ",
    ),
    "huge png": (
        png_claiming(30_000, 30_000),
        "the picture has 30000 x 30000 pixels, more than 500 million; cut it into parts.",
    ),
    "png check sum": (
        saved(COLOUR, "PNG").replace(b"IDAT", b"IDAt"),
        "the PNG is damaged (chunk 'IDAt' fails its check);",
    ),
    "png without header": (
        b"\x89PNG\r\n\x1a\n" + png_chunk(b"tEXt", b"a") + png_chunk(b"IEND", b""),
        "the PNG does not begin with its header;",
    ),
    "jpeg of 12 bits": (jpeg_header(0xC1, 12, 3), "rare kind (frame type 1, 12 bits);"),
    "lossless jpeg": (jpeg_header(0xC3, 8, 3), "rare kind (frame type 3, 8 bits);"),
    "two channels": (jpeg_header(0xC0, 8, 2), "the JPEG has 2 colour channels;"),
    "jpeg without frame": (
        b"\xff\xd8\xff\xda\0\x02" + bytes(20) + b"\xff\xd9",
        "the file is cut short (no picture before its end);",
    ),
    "jpeg without scan": (
        b"\xff\xd8\xff\xd9",
        "the file is cut short (no picture before its end);",
    ),
    "jpeg of a stub frame": (
        b"\xff\xd8\xff\xc0\0\x04\0\0\xff\xda\0\x02\0\xff\xd9",
        "its frame header is incomplete",
    ),
    "jpeg off the rails": (
        b"\xff\xd8\xff\xe0\0\x02" + b"zzzz",
        "the JPEG is damaged at byte 6; copy it again",
    ),
    "bmp stub": (b"BM" + bytes(9), "its header is incomplete"),
    "tiff stub": (b"II\x2a\0\x08", "the TIFF header is missing or cut short"),
    "tiff of many entries": (
        b"II\x2a\0\x08\0\0\0\xff\xff",
        "a tag directory claims 65535 entries",
    ),
    "tiff without pixels": (
        tiff(GREY).replace(struct.pack("<HH", 273, 4), struct.pack("<HH", 60000, 4)),
        "the TIFF does not say where its pixels are;",
    ),
    "float tiff": (
        tiff(COLOUR.astype(np.float32), photometric="rgb"),
        "the TIFF holds floating-point or signed numbers, not 8 or 16 bits; export it",
    ),
    "signed tiff": (tiff(GREY.astype(np.int16)), "the TIFF holds floating-point or signed"),
    "tiff of 32 bits": (tiff(GREY.astype(np.uint32)), "the TIFF has 32 bits per channel;"),
    "cmyk tiff": (
        tiff(np.dstack([COLOUR, GREY]), photometric="separated"),
        "the TIFF's colour model (number 5) is not grey, RGB or palette;",
    ),
    "many channels": (
        tiff(np.zeros((24, 36, 6), np.uint8), photometric="minisblack", planarconfig="contig"),
        "the TIFF keeps its 6 channels in a layout that is not read;",
    ),
    "planes of 16 bits": (
        tiff(np.moveaxis(DEEP, 2, 0), photometric="rgb", planarconfig="separate"),
        "the TIFF keeps its 3 channels in a layout that is not read;",
    ),
}


@pytest.mark.parametrize("case", WRONG_BYTES)
def test_each_wrong_file_is_told_and_nothing_is_spilled(
    case: str, tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    data, expected = WRONG_BYTES[case]
    message = trouble(tmp_path, data)
    assert message.startswith("a.jpg: ")
    assert expected in message
    assert capfd.readouterr() == ("", "")


def test_pixels_that_do_not_unpack_are_told(tmp_path: Path) -> None:
    message = trouble(tmp_path, png_claiming(20, 20))
    assert message == (
        "a.jpg: the picture cannot be decoded; open it in an image viewer and save it as JPEG or TIFF."
    )


def test_the_ratio_bound_lets_every_blank_picture_pass(tmp_path: Path) -> None:
    blank = np.full((3000, 4000, 3), 255, np.uint8)
    data = saved(blank, "PNG", compress_level=9)
    assert blank.nbytes / len(data) < MOST_DECODED_PER_BYTE
    assert read_bytes(tmp_path, data).width == 4000
    grey_jpeg = saved(blank, "JPEG", quality=1, progressive=True)
    assert read_bytes(tmp_path, grey_jpeg).width == 4000


@settings(deadline=None, max_examples=60)
@given(data=st.data(), kind=st.sampled_from(["JPEG", "PNG", "TIFF", "BMP"]))
def test_a_spoilt_header_gives_a_picture_or_a_sentence(
    data: st.DataObject, kind: str, tmp_path_factory: pytest.TempPathFactory
) -> None:
    spoilt = bytearray(saved(COLOUR, kind))
    header = 200 if kind != "TIFF" else len(spoilt)
    at = data.draw(st.integers(0, min(header, len(spoilt)) - 1))
    spoilt[at] = data.draw(st.integers(0, 255))
    folder = tmp_path_factory.mktemp("spoilt")
    try:
        outcome = f"a.jpg: {read_bytes(folder, bytes(spoilt)).stored.shape[2]} channels"
    except PhotographUnreadable as told:
        outcome = str(told)
    assert outcome.startswith("a.jpg: ")


def test_directories_say_which_version_they_do_not_know() -> None:
    with pytest.raises(DirectoryDamaged, match=r"holds an unknown version \(7\)"):
        first_directory(b"II\x07\0" + bytes(12))


def test_a_folder_and_a_missing_file_are_told(tmp_path: Path) -> None:
    with pytest.raises(PhotographUnreadable, match=r"this is a folder; give a picture in it\.$"):
        read_photograph(tmp_path)
    with pytest.raises(PhotographUnreadable, match=r"^no\.jpg: there is no such file; check"):
        read_photograph(tmp_path / "no.jpg")


@pytest.mark.skipif(
    not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root reads files without permission"
)
def test_a_file_without_permission_is_told(tmp_path: Path) -> None:
    path = tmp_path / "a.png"
    path.write_bytes(saved(COLOUR, "PNG"))
    path.chmod(0)
    with pytest.raises(PhotographUnreadable, match=r"cannot be opened \(permission denied\)"):
        read_photograph(path)


def test_a_device_that_fails_is_told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(self: Path) -> bytes:
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(Path, "read_bytes", fail)
    with pytest.raises(
        PhotographUnreadable, match=r"cannot be opened \(input/output error\); check its perm"
    ):
        read_photograph(tmp_path / "a.png")


@pytest.mark.parametrize("suffix", [".NEF", ".dng", ".cr3"])
def test_raw_files_are_refused_with_advice(suffix: str, tmp_path: Path) -> None:
    assert trouble(tmp_path, b"II\x2a\0", f"a{suffix}") == (
        f"a{suffix}: {suffix} files are raw files, whose colours depend on how it is developed;"
        " develop it in the camera's own program, the same way for all, and give the JPEG or 16-bit"
        " TIFF, or set the camera to keep JPEG as well."
    )


def test_files_of_the_web_are_refused_with_advice(tmp_path: Path) -> None:
    assert trouble(tmp_path, b"RIFF", "a.webp") == (
        "a.webp: .webp files are not read; export it as an 8- or 16-bit RGB JPEG, PNG or TIFF."
    )


@pytest.mark.parametrize(
    "tags",
    [
        [(50706, "B", 4, (1, 4, 0, 0), True)],  # DNGVersion
        [(254, "I", 1, 1, True)],  # the first page is a reduced copy
    ],
)
def test_a_raw_file_that_is_called_tif_is_not_taken_for_its_small_copy(
    tags: list[tuple[object, ...]], tmp_path: Path
) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, COLOUR, extratags=tags, photometric="rgb", metadata=None)
    with pytest.raises(
        PhotographUnreadable, match=r"a\.tif: the file is a camera's raw file, whose"
    ):
        read_photograph(path)


def test_a_photograph_checks_itself() -> None:
    with pytest.raises(ValueError, match=r"stored must be \(height, width, 3\), not \(4, 5\)"):
        Photograph(Path("a"), "0", np.zeros((4, 5), np.uint8))
    with pytest.raises(ValueError, match="stored must be uint8 or uint16, not float64"):
        Photograph(Path("a"), "0", np.zeros((4, 5, 3)))  # type: ignore[arg-type]


# ---- folders ------------------------------------------------------------------------------------


def test_photographs_of_a_folder_come_in_natural_order(tmp_path: Path) -> None:
    names = ["dish_10.jpg", "dish_2.jpg", "Dish_1.JPG", "b.tiff", "a.png", "c.bmp"]
    others = ["notes.txt", ".hidden.jpg", "dish_2.overlay.jpg", "dish_2.nef"]
    for name in names + others:
        (tmp_path / name).write_bytes(b"x")
    (tmp_path / "folder.jpg").mkdir()
    assert [p.name for p in find_photographs(tmp_path)] == [
        *("a.png", "b.tiff", "c.bmp", "Dish_1.JPG", "dish_2.jpg", "dish_10.jpg")
    ]


def test_a_phone_file_without_a_readable_twin_is_listed(tmp_path: Path) -> None:
    for name in ("one.heic", "two.heic", "two.jpg"):
        (tmp_path / name).write_bytes(b"x")
    assert [p.name for p in find_photographs(tmp_path)] == ["one.heic", "two.jpg"]


def test_a_folder_without_photographs_is_told(tmp_path: Path) -> None:
    (tmp_path / "notes.txt").write_text("no picture")
    with pytest.raises(RequestWrong, match=r"holds no photograph \(\.jpg, .*\); give the folder"):
        find_photographs(tmp_path)
    with pytest.raises(RequestWrong, match=r"There is no folder .*nowhere; check the path\."):
        find_photographs(tmp_path / "nowhere")
