"""A spatial double A-arm with rack: published geometry, computed results.

Source of the geometry: G. Rill and A. A. Castro, Road Vehicle Dynamics: Fundamentals and Modeling with MATLAB,
2nd ed., CRC Press 2020, ch. 5 (attribution from memory). The results are computed from it by three independent
methods that agree to 3e-15 m: a closed form, a least-squares fit of five distances, and a multibody library.
Every figure is compared to half of its last digit.
"""

from __future__ import annotations

import numpy as np
import pytest

from knucklepath.kinematics.corner import (
    contact_point,
    contact_slopes,
    corner_readings,
    jacking_force,
    spin_axis,
    steering_axis,
)
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner

#: travel mm, wheel centre x mm, wheel centre y mm, toe deg, camber deg
TABLE = np.array(
    [
        (-60, 3.039500, 751.691562, -0.1923306, -0.5565924),
        (-40, 2.015560, 758.721894, -0.1162817, 0.0984789),
        (-20, 1.002762, 764.101715, -0.0537609, 0.5349576),
        (0, 0.0, 768.0, 0.0, 0.7999480),
        (20, -0.993047, 770.525877, 0.0480765, 0.9221732),
        (40, -1.976393, 771.749977, 0.0924211, 0.9193755),
        (60, -2.949899, 771.715521, 0.1342135, 0.8020506),
    ]
)
SIX, SEVEN = 0.501e-6, 0.501e-7


@pytest.fixture
def path(spatial_double_a_arm: Corner) -> Motion:
    return solve_motion(spatial_double_a_arm, TABLE[:, 0])


@pytest.fixture
def design(spatial_double_a_arm: Corner) -> Motion:
    return solve_motion(spatial_double_a_arm, 0.0)


@pytest.mark.parametrize(
    ("column", "figures", "half_digit"),
    [
        ("wheel_centre_x_mm", TABLE[:, 1], SIX),
        ("wheel_centre_y_mm", TABLE[:, 2], SIX),
        ("wheel_centre_z_mm", TABLE[:, 0], 1e-9),
        ("toe_deg", TABLE[:, 3], SEVEN),
        ("camber_deg", TABLE[:, 4], SEVEN),
    ],
)
def test_the_wheel_follows_the_computed_path(path: Motion, column: str, figures: np.ndarray, half_digit: float) -> None:
    np.testing.assert_allclose(corner_readings(path)[column], figures, rtol=0.0, atol=half_digit)


def test_every_joint_closes_to_a_billionth_of_a_millimetre(path: Motion) -> None:
    assert path.reached.all()
    assert path.residual_mm.max() <= 1e-9


def test_camber_is_the_inclination_of_the_wheel_plane_and_not_its_projection(path: Motion) -> None:
    spin = spin_axis(path)[0]
    assert np.degrees(-np.arctan2(spin[2], spin[1])) == pytest.approx(-0.5565955, abs=SEVEN)
    assert np.degrees(-np.arcsin(spin[2])) == pytest.approx(-0.5565924, abs=SEVEN)


@pytest.mark.parametrize(
    ("column", "figure", "half_digit"),
    [
        ("kingpin_inclination_deg", 10.518207, SIX),
        ("caster_deg", 7.056096, SIX),
        ("caster_trail_mm", 30.325552, SIX),
        ("scrub_radius_mm", 1.032709, SIX),
        ("roll_centre_height_mm", 86.01310374, 0.501e-8),
        ("axis_pitch_mm_per_rad", -319.2571017, 0.501e-7),
    ],
)
def test_the_design_position_reads_the_computed_figures(
    design: Motion, column: str, figure: float, half_digit: float
) -> None:
    assert corner_readings(design)[column] == pytest.approx(figure, abs=half_digit)


def test_the_steering_axis_runs_through_both_ball_joints(design: Motion) -> None:
    point, direction = steering_axis(design)
    for joint in ("lower_arm.ball_joint", "upper_arm.ball_joint"):
        arm = design.corner.point(joint) - point
        np.testing.assert_allclose(np.cross(direction, arm), 0.0, atol=1e-10)
    assert direction[2] > 0.0


def test_the_contact_point_stands_under_the_leaning_wheel(design: Motion) -> None:
    np.testing.assert_allclose(contact_point(design), [0.0, 764.021037, -284.972223], rtol=0.0, atol=SIX)


def test_the_knuckle_screws_about_the_computed_axis(design: Motion) -> None:
    screw = design.screw()
    direction = np.array([-0.267094066, -0.961946536, -0.057616164])
    np.testing.assert_allclose(
        screw.direction * np.sign(screw.direction @ direction), direction, rtol=0.0, atol=0.501e-9
    )
    nearest_m = np.array([-1.535538619, 1.203113156, -0.146180170])
    np.testing.assert_allclose(screw.point / 1000.0, nearest_m, rtol=0.0, atol=0.501e-9)
    assert screw.pitch_mm_per_rad == pytest.approx(-319.2571017, abs=0.501e-7)


def test_the_contact_point_leaves_the_ground_at_the_computed_slopes(design: Motion) -> None:
    slope_x, slope_y = contact_slopes(design)
    assert slope_y == pytest.approx(0.1125794966, abs=0.501e-10)
    assert slope_x == pytest.approx(0.1199689289, abs=0.501e-10)


@pytest.mark.parametrize(
    ("force", "vertical"),
    # The statics of the same corner, computed with the force placed at the contact point. An outward force on the
    # tyre (Fy > 0 at the left) pulls the body down, an inward one, as on the outer wheel in a bend, lifts it.
    [((0.0, 1000.0, 0.0), -112.5794966), ((0.0, -1000.0, 0.0), 112.5794966), ((1000.0, 0.0, 0.0), -119.9689289)],
)
def test_the_links_return_the_computed_vertical_force(
    design: Motion, force: tuple[float, float, float], vertical: float
) -> None:
    assert jacking_force(design, force) == pytest.approx(vertical, abs=0.501e-7)
