"""Pictures and movies as files: whole or not there at all, with what they must show, or one clear message."""

from __future__ import annotations

import sys
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from PIL import Image

from knucklepath.kinematics.errors import KnucklepathError, ReachError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.plugins.registry import Registry
from knucklepath.viewer import CAUTION
from knucklepath.viewer.drawing_check import TRIAL, can_draw, trial
from knucklepath.viewer.exports import movie, picture, studio
from knucklepath.viewer.exports.movie import GIF_RATE, travel_over_time, write_movie
from knucklepath.viewer.exports.picture import write_picture
from knucklepath.viewer.exports.studio import Studio, chosen_overlays, figures, path_of, signed
from knucklepath.viewer.looks import NAMES
from knucklepath.viewer.project import Project, load_project
from knucklepath.viewer.theme import theme

SMALL = (480, 270)


@pytest.fixture
def project(sound_project: Callable[[str], Path], registry: Registry) -> Project:
    return load_project(sound_project("double-a-arm"), registry)


def colours_of(path: Path) -> np.ndarray:  # type: ignore[type-arg]
    return np.asarray(Image.open(path).convert("RGB")).astype(int)


@pytest.mark.parametrize("name", [*NAMES, "110,20"])
def test_a_picture_of_each_look_shows_the_mechanism(name: str, project: Project, tmp_path: Path) -> None:
    out = tmp_path / "out.png"
    write_picture(project, out, travel_mm=12.0, rack_mm=5.0, look=name, size=SMALL, dark=name == "side")
    seen = colours_of(out)
    assert seen.shape == (SMALL[1], SMALL[0], 3)
    background = np.array(theme(name == "side").bytes_rgb("background"))
    share = float((np.abs(seen - background).max(axis=2) > 24).mean())
    # a machine without fonts has thinner letters
    assert 0.05 < share < 0.8
    assert [path.name for path in tmp_path.iterdir() if path.suffix == ".png"] == ["out.png"]


def test_every_layout_makes_a_picture(sound_project: Callable[[str], Path], registry: Registry, tmp_path: Path) -> None:
    for name in ("strut", "five-link", "semi-trailing-arm"):
        write_picture(load_project(sound_project(name), registry), tmp_path / "out.png", size=SMALL)
        assert np.ptp(colours_of(tmp_path / "out.png")) > 150


def test_the_mechanism_fills_about_two_thirds_of_the_height(project: Project, tmp_path: Path) -> None:
    out = tmp_path / "out.png"
    write_picture(project, out, look="side", show=(), size=(960, 540))
    seen = colours_of(out)
    # between the words above and below, left of the scale bar
    rows = np.abs(seen[70:450, 200:640] - np.array(theme(False).bytes_rgb("background"))).max(axis=2) > 24
    tall = np.flatnonzero(rows.any(axis=1))
    assert 0.5 < (tall[-1] - tall[0]) / 540.0 < 0.72


@pytest.mark.parametrize(
    ("changed", "message"),
    [
        ({"look": "under"}, "corner, front, side, top"),
        ({"show": ("instant-axes",)}, "did you mean 'instant-axis'"),
        ({"out": "out.jpg"}, "ends in .png"),
        ({"out": "no such folder/out.png"}, "does not exist"),
    ],
)
def test_what_cannot_be_drawn_is_said_and_no_file_is_left(
    changed: dict[str, object], message: str, project: Project, tmp_path: Path
) -> None:
    wanted: dict[str, object] = {"out": "out.png", "look": "corner", "show": None, **changed}
    before = set(tmp_path.iterdir())
    with pytest.raises(KnucklepathError, match=message):
        write_picture(project, tmp_path / str(wanted.pop("out")), size=SMALL, **wanted)  # type: ignore[arg-type]
    assert set(tmp_path.iterdir()) == before


def test_a_pose_out_of_reach_is_the_limit_not_a_picture(project: Project, tmp_path: Path) -> None:
    with pytest.raises(ReachError, match="locks at travel"):
        write_picture(project, tmp_path / "out.png", travel_mm=700.0, size=SMALL)
    assert not (tmp_path / "out.png").exists()


def test_each_look_has_its_own_overlays_and_a_plugins_own_joins_in(registry: Registry) -> None:
    front = {overlay.id for overlay in chosen_overlays(registry, "front", None)}
    assert {"roll-centre", "front-centre", "force-lines"} <= front
    assert "side-centre" not in front
    corner = {overlay.id for overlay in chosen_overlays(registry, "corner", None)}
    assert {"instant-axis", "force-lines", "wheel-path", "steering-axis", "ground"} <= corner
    assert {overlay.id for overlay in chosen_overlays(registry, "30,10", None)} == corner
    assert chosen_overlays(registry, "corner", ()) == ()


def test_the_words_of_a_picture(project: Project) -> None:
    pose = solve_motion(project.corner, 30.0, -7.5)
    with Studio(project, look_text="front", show=None, size=SMALL, dark=False, rack_mm=-7.5) as drawn:
        drawn.frame(pose)
        words = drawn.caption
        assert words is not None
        assert words.title == project.title
        assert words.pose.replace("\N{THIN SPACE}", " ") == "travel +30.0 mm · rack −7.5 mm · front view"
        assert words.source.startswith("axle.toml, 20")
        assert words.caution == "", "nothing is said about loads or gaps"
        drawn.frame(pose, case="a load case")
        assert drawn.caption is not None
        assert drawn.caption.caution == CAUTION


def test_figures_carry_signs_and_units_and_leave_out_what_does_not_exist(
    project: Project, sound_project: Callable[[str], Path], registry: Registry
) -> None:
    shown = {figure.title: figure for figure in figures(solve_motion(project.corner, 25.0), registry)}
    assert shown["Camber"].number[0] in "+−"
    assert shown["Camber"].number.endswith("°")
    assert shown["Half-track change"].unit == "\N{THIN SPACE}mm"
    rear = load_project(sound_project("semi-trailing-arm"), registry)
    assert "Caster" not in {figure.title for figure in figures(solve_motion(rear.corner, 0.0), registry)}
    assert [signed(value, 1) for value in (1.26, -0.04, -3.0)] == ["+1.3", "0.0", "−3.0"]


def test_the_path_has_design_both_ends_and_every_tick(project: Project) -> None:
    travel = path_of(project, 0.0).travel_mm
    assert travel[0] == -project.rebound
    assert travel[-1] == project.bump
    assert set(np.arange(-40.0, 50.0, 10.0)) <= set(travel)


def test_travel_is_a_sine_over_the_whole_range_that_starts_at_design(project: Project) -> None:
    travel = travel_over_time(project, 3.0, 400)
    assert len(travel) == 1200
    assert travel[0] == pytest.approx(0.0, abs=1e-9)
    assert travel[1] > travel[0]
    assert travel.max() == pytest.approx(project.bump, abs=0.01)
    assert travel.min() == pytest.approx(-project.rebound, abs=0.01)
    # a sine is its own second derivative, scaled: x'' = -w² (x - middle)
    second = np.diff(travel, 2) * 400**2
    assert second == pytest.approx(
        -((2 * np.pi / 3) ** 2) * (travel[1:-1] - (project.bump - project.rebound) / 2), abs=0.5
    )


def test_a_gif_loops_in_one_palette_with_numbers_that_rest(project: Project, tmp_path: Path) -> None:
    out = tmp_path / "out.gif"
    seen: list[tuple[int, int]] = []
    write_movie(project, out, size=SMALL, seconds=0.8, progress=lambda done, total: seen.append((done, total)))
    count = round(0.8 * GIF_RATE)
    assert seen == [(k + 1, count) for k in range(count)]
    with Image.open(out) as found:
        assert found.n_frames == count  # type: ignore[attr-defined]
        assert found.size == SMALL
        assert found.info["loop"] == 0
        assert found.info["duration"] == 1000 // GIF_RATE
        frames = []
        for number in range(count):
            found.seek(number)
            frames.append(np.asarray(found.convert("RGB")).astype(int))
    moved = np.abs(frames[4] - frames[5]).max(axis=2) > 30
    assert moved[60:220].any(), "the wheel moves from picture to picture"
    numbers = [frame[225:, :240] for frame in frames]
    changes = sum(bool((np.abs(a - b) > 60).any()) for a, b in pairwise(numbers))
    assert 1 <= changes <= 0.8 * movie.NUMBER_RATE
    assert [path.name for path in tmp_path.iterdir() if path.suffix == ".gif"] == ["out.gif"]


@pytest.mark.parametrize("name", ["out.avi", "out", "out.png"])
def test_a_movie_of_another_kind_is_refused(name: str, project: Project, tmp_path: Path) -> None:
    with pytest.raises(KnucklepathError, match=r"\.gif or \.mp4"):
        write_movie(project, tmp_path / name, size=SMALL)


def test_without_its_package_mp4_names_the_extra_and_gif_as_the_way_round(
    project: Project, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "imageio_ffmpeg", None)
    with pytest.raises(KnucklepathError, match=r"knucklepath\[movie\].*\.gif works without"):
        write_movie(project, tmp_path / "out.mp4", size=SMALL)


def test_a_movie_that_fails_half_way_leaves_the_old_one_alone(
    project: Project, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    out = tmp_path / "out.gif"
    out.write_bytes(b"the old one")

    def fail(*_: object) -> None:
        raise OSError("disk full")

    monkeypatch.setattr(movie, "write_gif", fail)
    with pytest.raises(OSError, match="disk full"):
        write_movie(project, out, size=SMALL, seconds=0.2)
    assert out.read_bytes() == b"the old one"
    assert [path.name for path in tmp_path.iterdir() if path.is_file()] == ["out.gif"]


def test_this_machine_can_draw_and_says_so_once() -> None:
    assert can_draw().ok
    assert can_draw() is can_draw()


def test_a_crash_in_the_trial_becomes_a_reason_and_a_line_to_run() -> None:
    crashed = trial("import os, signal; os.kill(os.getpid(), signal.SIGSEGV)")
    assert not crashed.ok
    assert "SIGSEGV" in crashed.reason
    if sys.platform.startswith("linux"):
        assert crashed.remedy == "apt-get install -y libegl1 libgl1-mesa-dri"


def test_a_missing_library_is_named_with_its_package() -> None:
    lacking = trial("raise ImportError('libXrender.so.1: cannot open shared object file: No such file or directory')")
    assert not lacking.ok
    assert "libXrender.so.1" in lacking.reason
    if sys.platform.startswith("linux"):
        assert lacking.remedy.endswith(" libxrender1")


def test_wrong_colours_silence_and_hanging_are_no_success() -> None:
    assert not trial("print('colour 0 0 0')").ok
    assert not trial("").ok
    assert "answer" in trial("import time; time.sleep(30)", patience_s=0.5).reason


def test_without_a_driver_the_real_trial_reports_instead_of_crashing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("DISPLAY", raising=False)
    # glvnd, the loader of EGL drivers on Linux, is told of a folder without any
    monkeypatch.setenv("__EGL_VENDOR_LIBRARY_DIRS", "/nonexistent")
    monkeypatch.setenv("__EGL_VENDOR_LIBRARY_FILENAMES", "/nonexistent")
    monkeypatch.setenv("VTK_DEFAULT_OPENGL_WINDOW", "vtkEGLRenderWindow")
    report = trial(TRIAL)
    assert report.ok is not sys.platform.startswith("linux")


def test_a_machine_that_cannot_draw_gets_the_remedy_before_anything_is_written(
    project: Project, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    lost = trial("raise SystemExit(3)")
    monkeypatch.setattr(studio, "can_draw", lambda: lost)
    with pytest.raises(KnucklepathError, match="cannot draw"):
        picture.write_picture(project, tmp_path / "out.png", size=SMALL)
    assert not list(tmp_path.glob("*.png"))
