"""Cameras frame what they are given; colours stay apart for every common colour vision."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest

from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.viewer.looks import FILL_HEIGHT, NAMES, VIEW_ANGLE_DEG, frame, look
from knucklepath.viewer.theme import DARK, LIGHT, MEANINGS, Theme, theme, type_scale

WHEEL = np.array([0.0, 650.0, 270.0])
CLOUD = WHEEL + np.random.default_rng(5).uniform(-1.0, 1.0, (300, 3)) * [280.0, 120.0, 280.0]


@pytest.mark.parametrize("name", [*NAMES, "75,30", "-120,-20"])
@pytest.mark.parametrize("aspect", [16 / 9, 1.0])
def test_the_mechanism_fills_two_thirds_of_the_height_where_the_look_wants_it(name: str, aspect: float) -> None:
    chosen = look(name)
    camera = frame(CLOUD, chosen, aspect)
    seen = camera.project(CLOUD, aspect, 1.0)[:, :2]
    low, high = seen.min(axis=0), seen.max(axis=0)
    assert high[1] - low[1] == pytest.approx(FILL_HEIGHT, abs=1e-3) or high[0] - low[0] > 0.7 * aspect
    middle = 0.5 * (low + high)
    assert middle == pytest.approx([chosen.middle[0] * aspect, 1.0 - chosen.middle[1]], abs=1e-3)


def test_named_looks_are_orthographic_but_for_the_corner_and_level() -> None:
    assert [name for name in NAMES if not look(name).parallel] == ["corner"]
    for name in NAMES:
        chosen = look(name)
        assert abs(chosen.right[2]) < 1e-12, "no horizon tilts"
        basis = np.stack((chosen.right, chosen.up, chosen.backward))
        assert basis @ basis.T == pytest.approx(np.eye(3), abs=1e-12)
        assert np.linalg.det(basis) > 0.0
    camera = frame(CLOUD, look("corner"), 1.5)
    assert 2.0 * np.degrees(np.arctan2(camera.half_height, camera.distance)) == pytest.approx(VIEW_ANGLE_DEG)


def test_left_and_right_are_as_one_would_see_them() -> None:
    # seen from ahead, the left wheel is on the right; from outside, the front is on the left; from above, left is left
    assert look("front").right == pytest.approx([0, 1, 0], abs=1e-12)
    assert look("side").right == pytest.approx([-1, 0, 0], abs=1e-12)
    assert look("top").right == pytest.approx([0, -1, 0], abs=1e-12)
    assert look("top").up == pytest.approx([1, 0, 0], abs=1e-12)
    corner = look("corner").backward
    assert (corner > 0.0).all(), "from ahead, from outside, from above"


def test_a_parallel_picture_is_to_scale() -> None:
    camera = frame(CLOUD, look("front"), 16 / 9)
    a, b = camera.project(np.array([WHEEL, WHEEL + [300.0, 100.0, 0.0]]), 1920.0, 1080.0)[:, :2]
    assert b[0] - a[0] == pytest.approx(100.0 * camera.px_per_mm(WHEEL, 1080.0))


@pytest.mark.parametrize("text", ["under", "40", "1,2,3", "nan,0", "0,95", "inf,0", ""])
def test_a_look_that_is_none_is_refused_with_what_would_be_right(text: str) -> None:
    with pytest.raises(KnucklepathError, match=r"corner, front, side, top.*40,15"):
        look(text)


def test_a_view_leaves_out_constructions_that_it_sees_edge_on() -> None:
    across, along = np.array([1.0, 0.0, 0.0]), np.array([0.0, 1.0, 0.0])
    assert look("front").shows(across)
    assert not look("front").shows(along)
    assert look("side").shows(along)
    assert not look("top").shows(across)
    assert look("corner").shows(across)
    assert look("corner").shows(along)
    assert look("top").shows(None)


# Machado, Oliveira and Fernandes, "A physiologically-based model for simulation of color vision deficiency", IEEE
# TVCG 15 (2009), severity 1.0, on linear RGB; the matrices are from memory.
VISION = {
    "normal": np.eye(3),
    "protanopia": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
    "tritanopia": [
        [1.255528, -0.076749, -0.178779],
        [-0.078411, 0.930809, 0.147602],
        [0.004733, 0.691367, 0.303900],
    ],
}


def linear(rgb: tuple[float, float, float]) -> np.ndarray:  # type: ignore[type-arg]
    value = np.array(rgb)
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def lab(light: np.ndarray) -> np.ndarray:  # type: ignore[type-arg]
    """CIE L*a*b* of linear sRGB, D65 (IEC 61966-2-1 matrix, from memory)."""
    matrix = np.array(
        [[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.0721750], [0.0193339, 0.1191920, 0.9503041]]
    )
    ratio = matrix @ np.clip(light, 0.0, 1.0) / np.array([0.95047, 1.0, 1.08883])
    f = np.where(ratio > 216 / 24389, np.cbrt(ratio), (24389 / 27 * ratio + 16) / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("vision", VISION)
@pytest.mark.parametrize("colours", [LIGHT, DARK], ids=lambda colours: colours.name)
def test_tension_and_compression_are_far_apart_and_no_two_meanings_look_alike(colours: Theme, vision: str) -> None:
    seen = {name: lab(np.array(VISION[vision]) @ linear(colours.rgb(name))) for name in MEANINGS}
    apart = {pair: float(np.linalg.norm(seen[pair[0]] - seen[pair[1]])) for pair in combinations(MEANINGS, 2)}
    assert apart["tension", "compression"] > 40.0
    assert min(apart.values()) > 9.0, min(apart, key=lambda pair: apart[pair])


@pytest.mark.parametrize("colours", [LIGHT, DARK], ids=lambda colours: colours.name)
def test_words_can_be_read_on_the_background_and_on_plates(colours: Theme) -> None:
    """Contrast of 4.5 and more for text, as WCAG 2.1 asks (formula from memory)."""

    def luminance(token: str) -> float:
        return float(linear(colours.rgb(token)) @ np.array([0.2126, 0.7152, 0.0722]))

    for text in ("ink", "muted"):
        for under in ("background", "plate"):
            light, dark = sorted((luminance(text), luminance(under)), reverse=True)
            assert (light + 0.05) / (dark + 0.05) > 4.5, (text, under)


def test_the_tokens_are_those_of_the_visual_language() -> None:
    assert theme(dark=False) is LIGHT
    assert theme(dark=True) is DARK
    assert set(LIGHT.colours) == set(DARK.colours)
    assert LIGHT.colour("background") == "#F6F5F1"
    assert DARK.colour("compression") == "#56B4E9"
    assert LIGHT.colour("a plugin's own meaning") == LIGHT.colour("ink")
    assert LIGHT.bytes_rgb("tension") == (213, 94, 0)


def test_type_grows_with_the_picture_and_never_vanishes() -> None:
    assert type_scale(960, 540) == 1.0
    assert type_scale(1920, 1080) == 2.0
    assert type_scale(160, 120) >= 0.75
