"""What was learned is kept in a file a person can read, and used unless a person says otherwise."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from typer.testing import CliRunner, Result

from analyse.cli import app
from detect.area import frame_area
from detect.calibration import Calibration
from detect.doubt import GENERAL
from detect.errors import OptionWrong, TaughtUnreadable
from detect.find import find_spots
from detect.lengths import Length
from detect.own_colour import OwnColour
from detect.requests import parse_request
from detect.sheet import read_sheet
from detect.taught import Lessons, Taught
from detect.taught_file import SCHEMA, identity_of, read_taught, taught_text
from detect.wanted import DetectOptions
from tests.discs import DIAMETER, scattered, write_discs
from tests.scenes import SpotScene
from tests.scenes import scattered as discs_of

LESSONS = Lessons((('dish "1"\n.jpg', "a" * 64), ("böd.png", "b" * 64)), 41, 3, 7, 0.8, 0.85)
TAUGHT = Taught(
    "spots",
    LESSONS,
    GENERAL,
    0.47,
    Calibration(0.25, 0.8),
    OwnColour((50.5, 10.0, -3.0), (0.0, 0.0, 0.0)),
    direction=(-0.6, 0.8, 0.0),
    diameter=(Length(11.5, "px"), Length(24, "px")),
    tool_version="0.1",
)


def written(folder: Path, text: str) -> Path:
    path = folder / "taught.toml"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    "taught",
    [
        TAUGHT,
        replace(
            TAUGHT,
            own_colour=None,
            direction=None,
            diameter=None,
            calibration=None,
            highest_doubt=None,
            colour="green",
            kind="seedlings",
        ),
        replace(
            TAUGHT, direction=None, polarity="dark", diameter=(Length(1, "mm"), Length(6, "mm"))
        ),
    ],
)
def test_what_is_written_is_what_is_read(taught: Taught, tmp_path: Path) -> None:
    path = written(tmp_path, taught_text(taught))
    assert read_taught(path) == taught
    assert identity_of(read_taught(path)) == identity_of(taught)
    path.write_text("# a person's remark\n" + path.read_text(encoding="utf-8"), encoding="utf-8")
    assert identity_of(read_taught(path)) == identity_of(taught)
    assert identity_of(replace(taught, highest_doubt=0.5)) != identity_of(taught)


def test_the_file_can_be_read_by_a_person() -> None:
    text = taught_text(TAUGHT)
    for line in (
        'kind = "spots"',
        "spots_real = 41  # left counted, or placed",
        "spots_struck = 7",
        'diameter = "11.5px-24px"',
        "lightness = -0.6",
        f"rough = {GENERAL.rough}",
        "slope = 0.8",
    ):
        assert line in text.splitlines()


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        (f"schema = {SCHEMA}", "schema = 2", r"has schema 2, but this version reads 1; use the v"),
        (f"schema = {SCHEMA}", "", r"taught.toml holds nothing that was learned; name a taught"),
        ("[doubt]", "[doubt", r"taught.toml is damaged \(.*\); learn again with --learn"),
        ("rough = ", "rogh = ", r"damaged \(the weight 'rogh' is not known\)"),
        (f"rough = {GENERAL.rough}", "rough = nan", r"damaged \(a weight is not finite\)"),
        (f"rough = {GENERAL.rough}", 'rough = "much"', r"damaged \(could not convert"),
        ('kind = "spots"', 'kind = "stars"', r"damaged \(The kind 'stars' is not known"),
        ('kind = "spots"', "", r"damaged \('kind' is missing\)"),
        ("lightness = -0.6", "lightness = 2", r"damaged \(the direction .* has not the length 1"),
        ("\nslope = 0.8\n", "\nslope = -1\n", r"damaged \(a calibration needs a finite intercept"),
        ("highest = 0.47", "highest = 4", r"damaged \(The highest doubt must lie between 0 and 1"),
        ("spots_real = 41", "spots_real = 1", r"damaged \(1 real spots, 3 placed and 7 struck"),
        ('"11.5px-24px"', '"24px-11.5px"', r"damaged \(diameter must run from small to large"),
    ],
)  # fmt: skip
def test_a_damaged_or_later_file_is_refused(
    old: str, new: str, message: str, tmp_path: Path
) -> None:
    text = taught_text(TAUGHT)
    assert old in text
    with pytest.raises(TaughtUnreadable, match=message):
        read_taught(written(tmp_path, text.replace(old, new, 1)))


def test_a_file_that_is_not_there_or_no_text_is_refused(tmp_path: Path) -> None:
    with pytest.raises(TaughtUnreadable, match=r"none.toml cannot be read \(no such file"):
        read_taught(tmp_path / "none.toml")
    path = tmp_path / "taught.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(TaughtUnreadable, match=r"is damaged \(it is not text\)"):
        read_taught(path)


def test_nothing_comes_from_no_photographs() -> None:
    with pytest.raises(ValueError, match="no photograph is named"):
        Lessons((), 10, 0, 0, 0.5, 0.5)


def test_what_a_person_asks_for_wins() -> None:
    plain = DetectOptions()
    full = TAUGHT.completed(plain)
    assert full.diameter == TAUGHT.diameter
    assert full.highest_doubt == 0.47
    assert TAUGHT.direction_for(plain) is not None
    assert TAUGHT.overruled(plain) == ()
    own = DetectOptions(
        diameter=(Length(1, "px"), Length(2, "px")), colour="red", highest_doubt=0.2
    )
    assert TAUGHT.completed(own) == own
    assert TAUGHT.direction_for(own) is None
    assert replace(TAUGHT, sized=True).overruled(own) == ("diameter", "colour", "highest_doubt")
    # The reviewed sheets' own diameters were asked for then: they were not learned.
    assert TAUGHT.overruled(own) == ("colour", "highest_doubt")
    assert TAUGHT.overruled(DetectOptions(polarity="dark")) == ("polarity",)
    green = replace(TAUGHT, direction=None, colour="green")
    assert green.completed(plain).colour == "green"
    assert green.overruled(DetectOptions(colour="green")) == ()


def test_the_detector_does_as_it_was_taught() -> None:
    discs = discs_of(24, radius=(6, 9))
    photograph = SpotScene(discs=discs, colour=(0.75, 0.45, 0.45)).draw()
    area = frame_area(photograph.width, photograph.height)
    found = find_spots(photograph, area, DetectOptions(), taught=TAUGHT)
    assert found.settings["direction_lab"] == [-0.6, 0.8, 0.0]
    assert found.settings["diameter_px"] == [11.5, 24.0]
    assert found.settings["highest_doubt"] == 0.47
    assert len(found.spots) == 24
    plainly = replace(TAUGHT, calibration=Calibration())
    before = find_spots(photograph, area, DetectOptions(), taught=plainly).spots
    assert found.spots.doubt == pytest.approx(TAUGHT.calibration.applied(before.doubt))
    unlearned = replace(TAUGHT, model=GENERAL, calibration=None, highest_doubt=None)
    kinds = find_spots(photograph, area, DetectOptions(), taught=unlearned).settings
    usual = find_spots(photograph, area, TAUGHT.completed(DetectOptions(highest_doubt=0.4)))
    expected = pytest.approx(usual.settings["doubt_calibration"], rel=0.1)
    assert kinds["doubt_calibration"] == expected
    assert found.settings["doubt_calibration"] == [0.0, 1.0]
    wary = replace(TAUGHT, model=replace(GENERAL, intercept=-9.0))
    assert len(find_spots(photograph, area, DetectOptions(), taught=wary).spots) == 0


def test_doubt_is_calibrated_as_usual_where_no_calibration_was_taught() -> None:
    photograph = SpotScene(discs=discs_of(24, radius=(6, 9))).draw()
    area = frame_area(photograph.width, photograph.height)
    sizes = DetectOptions(diameter=TAUGHT.diameter)
    nothing = replace(
        TAUGHT, highest_doubt=None, calibration=None, own_colour=None, direction=None, diameter=None
    )
    usual = find_spots(photograph, area, sizes)
    found = find_spots(photograph, area, sizes, taught=nothing)
    assert found.spots.doubt == pytest.approx(usual.spots.doubt)
    assert found.settings == usual.settings


def test_a_request_knows_what_was_taught(tmp_path: Path) -> None:
    written(tmp_path, taught_text(replace(TAUGHT, kind="lesions")))
    request = parse_request({"taught": "taught.toml"}, folder=tmp_path)
    assert request.options.kind == "lesions"
    assert request.taught is not None
    assert request.as_dict()["taught_sha256"] == identity_of(request.taught)
    with pytest.raises(OptionWrong, match="learned is about lesions, but colonies are asked for"):
        parse_request({"taught": "taught.toml", "kind": "colonies"}, folder=tmp_path)
    with pytest.raises(OptionWrong, match=r"taught must be a file such as taught.toml, not 3"):
        parse_request({"taught": 3})


def run(*arguments: object) -> Result:
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


def test_the_command_says_which_options_win_over_what_was_learned(tmp_path: Path) -> None:
    photo = write_discs(tmp_path / "a.png", scattered(24, seed=4))
    taught = written(tmp_path, taught_text(replace(TAUGHT, direction=None, sized=True)))
    given = ("detect", photo, "--taught", taught, "--out", tmp_path / "out")
    quiet = run(*given)
    assert (quiet.exit_code, quiet.stderr) == (0, "")
    request = read_sheet(tmp_path / "out" / "a.sheet.json").settings["request"]
    assert request["taught_sha256"] == identity_of(read_taught(taught))
    said = run(*given, "--diameter", DIAMETER)
    assert said.exit_code == 0
    assert said.stderr == "--diameter as given is used instead of what was learned.\n"
    missing = run("detect", photo, "--taught", tmp_path / "b.toml", "--out", tmp_path / "out")
    assert missing.exit_code == 2
    assert "name a taught.toml that --learn wrote" in " ".join(missing.stderr.split())


def test_a_photograph_in_which_what_was_taught_leaves_nothing_is_told(tmp_path: Path) -> None:
    photo = write_discs(tmp_path / "a.png", scattered(24, seed=4))
    write_discs(tmp_path / "bare.png", [])
    wary = replace(TAUGHT, direction=None, model=replace(GENERAL, intercept=-9.0))
    taught = written(tmp_path, taught_text(wary))
    out = tmp_path / "out"
    for options in ((), ("--diameter", DIAMETER)):
        done = run(
            "detect", photo, tmp_path / "bare.png", "--taught", taught, *options, "--out", out
        )
        assert done.exit_code == 0, done.stderr
        note = (
            "What was taught leaves out every candidate in this photograph; look at it, and teach"
            " with more photographs or detect without --taught"
        )
        assert done.stderr == f"Note: a.png: {note}\n"
        assert read_sheet(out / "a.sheet.json").settings["notes"] == [note]
        assert read_sheet(out / "bare.sheet.json").settings["notes"] == []


def test_a_recipe_names_the_file_beside_it(tmp_path: Path) -> None:
    places = scattered(24, seed=4)
    write_discs(tmp_path / "a.png", places)
    written(tmp_path, taught_text(replace(TAUGHT, direction=None)))
    (tmp_path / "survey.toml").write_text('[[set]]\nmatch = "*.png"\ntaught = "taught.toml"\n')
    done = run("survey", tmp_path, "--out", tmp_path / "out", "--workers", 1, "--simulations", 99)
    assert done.exit_code == 0, done.output
    sheet = read_sheet(tmp_path / "out" / "a.sheet.json")
    assert sheet.settings["detector"]["diameter_px"] == [11.5, 24.0]
    assert len(sheet.spots) == 24
    assert np.isclose(sheet.spots.radius.mean(), 8.0, atol=1.0)
