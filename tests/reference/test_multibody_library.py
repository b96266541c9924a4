"""The four layouts, built a second time in a general-purpose multibody library, over travel and rack.

Source: E. Todorov, T. Erez and Y. Tassa, "MuJoCo: A physics engine for model-based control", IROS 2012 (citation
from memory); the results are computed. The models share with ours only the hardpoints. The library places the
bodies, gives the residuals of its own equality constraints and their derivatives; a plain Newton iteration closes them,
from the design position outward, never from a pose of ours. The trees differ too: the knuckle rides on the lower
arm, hangs on the strut or floats, and every rod is a body of its own.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import mujoco
import numpy as np
import pytest
from numpy.typing import NDArray

from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

Array = NDArray[np.float64]
Points = Mapping[str, Array]

TRAVEL = np.linspace(-70.0, 70.0, 15)
RACK = np.linspace(-25.0, 25.0, 5)
#: Newton stops here (mm); a step of it moves nothing by more than rounding does.
CLOSED = 1e-12
#: What the two must agree to: mm, rotation matrix, rad per mm and mm per mm.
SAME_PLACE, SAME_TURN, SAME_TURN_RATE, SAME_SPEED = 1e-9, 2e-12, 1e-12, 1e-11


def numbers(vector: Array) -> str:
    return " ".join(repr(float(value)) for value in np.atleast_1d(vector))


def body(name: str, at: Array, above: Array, inside: str) -> str:
    """A body whose frame stands at ``at``, inside a body that stands at ``above``. Masses play no part."""
    inertial = '<inertial pos="0 0 0" mass="1" diaginertia="1 1 1"/>'
    return f'<body name="{name}" pos="{numbers(at - above)}">{inertial}{inside}</body>'


def hinge(name: str, axis: Array) -> str:
    return f'<joint name="{name}" type="hinge" pos="0 0 0" axis="{numbers(axis)}"/>'


def ball(name: str) -> str:
    return f'<joint name="{name}" type="ball" pos="0 0 0"/>'


def slide(name: str, axis: Array) -> str:
    return f'<joint name="{name}" type="slide" axis="{numbers(axis)}"/>'


@dataclass
class Model:
    """Pieces of a model: bodies on the ground, and points where two bodies are held together."""

    points: Points
    bodies: list[str] = field(default_factory=list)
    held: list[tuple[str, str, Array, Array]] = field(default_factory=list)

    def hold(self, one: str, one_at: Array, other: str, other_at: Array, point: str) -> None:
        """Hold two bodies, which stand at the places given, together at a point."""
        self.held.append((one, other, self.points[point] - one_at, self.points[point] - other_at))

    def rod(self, name: str, above: Array, knuckle_at: Array) -> str:
        """A rod as a body on a ball joint, held to the knuckle at its other end."""
        inboard = self.points[f"{name}.inboard"]
        self.hold(name, inboard, "knuckle", knuckle_at, f"{name}.outboard")
        return body(name, inboard, above, ball(name))

    def steering(self, name: str, knuckle_at: Array) -> None:
        """The rack with the tie rod on it."""
        origin = np.zeros(3)
        self.bodies.append(
            body("rack", origin, origin, slide("rack", np.array([0.0, 1.0, 0.0])) + self.rod(name, origin, knuckle_at))
        )

    def built(self) -> mujoco.MjModel:
        # points that two bodies share are sites of both, so that the library does not derive one from the other
        marks: dict[str, str] = {}
        connects = []
        for k, (one, other, in_one, in_other) in enumerate(self.held):
            for owner, where, at in ((one, "a", in_one), (other, "b", in_other)):
                marks[owner] = marks.get(owner, "") + f'<site name="{k}{where}" pos="{numbers(at)}"/>'
            connects.append(f'<connect site1="{k}a" site2="{k}b"/>')
        text = "".join(self.bodies)
        for owner, sites in marks.items():
            opening = text.index(f'<body name="{owner}"')
            inside = text.index(">", opening) + 1
            text = text[:inside] + sites + text[inside:]
        return mujoco.MjModel.from_xml_string(
            f"<mujoco><compiler autolimits='false'/><worldbody>{text}</worldbody>"
            f"<equality>{''.join(connects)}</equality></mujoco>"
        )


def double_a_arm_model(points: Points) -> Model:
    """The knuckle rides on the lower arm's ball joint and is held by the upper arm."""
    model, origin = Model(points), np.zeros(3)
    lower, upper = points["lower_arm.rear_pivot"], points["upper_arm.rear_pivot"]
    joint = points["lower_arm.ball_joint"]
    knuckle = body("knuckle", joint, lower, ball("knuckle"))
    model.bodies.append(
        body("lower_arm", lower, origin, hinge("lower_arm", points["lower_arm.front_pivot"] - lower) + knuckle)
    )
    model.bodies.append(body("upper_arm", upper, origin, hinge("upper_arm", points["upper_arm.front_pivot"] - upper)))
    model.hold("upper_arm", upper, "knuckle", joint, "upper_arm.ball_joint")
    model.steering("tie_rod", joint)
    return model


def strut_model(points: Points) -> Model:
    """The strut hangs on its top mount, the knuckle slides on the strut and is held by the lower arm."""
    model, origin = Model(points), np.zeros(3)
    top, lower, centre = points["strut.top_mount"], points["lower_arm.rear_pivot"], points["wheel.centre"]
    knuckle = body("knuckle", centre, top, slide("knuckle", points["strut.axis_lower"] - top))
    model.bodies.append(body("strut", top, origin, ball("strut") + knuckle))
    model.bodies.append(body("lower_arm", lower, origin, hinge("lower_arm", points["lower_arm.front_pivot"] - lower)))
    model.hold("lower_arm", lower, "knuckle", centre, "lower_arm.ball_joint")
    model.steering("tie_rod", centre)
    return model


def five_link_model(points: Points) -> Model:
    """The knuckle floats; five rods, each a body, hold it."""
    model, origin = Model(points), np.zeros(3)
    centre = points["wheel.centre"]
    model.bodies.append(body("knuckle", centre, origin, "<freejoint/>"))
    for link in ("upper_front", "upper_rear", "lower_front", "lower_rear"):
        model.bodies.append(model.rod(link, origin, centre))
    model.steering("toe_link", centre)
    return model


def semi_trailing_arm_model(points: Points) -> Model:
    """One hinge."""
    model, inner = Model(points), points["arm.inner_pivot"]
    model.bodies.append(body("knuckle", inner, np.zeros(3), hinge("arm", points["arm.outer_pivot"] - inner)))
    return model


class Mover:
    """Closes a model at given travel and rack by Newton on the library's own residuals and Jacobians."""

    def __init__(self, model: Model) -> None:
        self.model = model.built()
        self.data = mujoco.MjData(self.model)
        self.knuckle = self.model.body("knuckle").id
        self.centre = model.points["wheel.centre"]
        mujoco.mj_kinematics(self.model, self.data)
        self.arm = self.centre - self.data.xpos[self.knuckle]
        names = [self.model.joint(k).name for k in range(self.model.njnt)]
        self.rack = self.model.joint("rack") if "rack" in names else None
        unknown = np.ones(self.model.nv, dtype=bool)
        if self.rack is not None:
            unknown[self.rack.dofadr] = False
        self.unknown = unknown

    def place(self) -> tuple[Array, Array]:
        """Wheel centre (3,) and rotation (3, 3) of the knuckle."""
        rotation = self.data.xmat[self.knuckle].reshape(3, 3).copy()
        return self.data.xpos[self.knuckle] + rotation @ self.arm, rotation

    def equations(self, travel: float) -> tuple[Array, Array, Array]:
        """Residual and Jacobian of all held points and the travel, and the knuckle's Jacobian (6, nv)."""
        model, data = self.model, self.data
        mujoco.mj_kinematics(model, data)
        mujoco.mj_comPos(model, data)
        mujoco.mj_makeConstraint(model, data)
        centre, _ = self.place()
        along, turning = np.zeros((3, model.nv)), np.zeros((3, model.nv))
        mujoco.mj_jac(model, data, along, turning, centre, self.knuckle)
        residual = np.append(data.efc_pos, centre[2] - self.centre[2] - travel)
        jacobian = np.vstack((data.efc_J.reshape(-1, model.nv), along[2]))
        return residual, jacobian, np.vstack((turning, along))

    def close(self, travel: float, rack: float) -> None:
        """Newton from the pose at hand. The least-norm step leaves the rods' idle spins alone."""
        if self.rack is not None:
            self.data.qpos[self.rack.qposadr] = rack
        for _ in range(20):
            residual, jacobian, _ = self.equations(travel)
            if np.abs(residual).max() < CLOSED:
                break
            step = np.zeros(self.model.nv)
            step[self.unknown] = np.linalg.lstsq(jacobian[:, self.unknown], -residual, rcond=1e-10)[0]
            mujoco.mj_integratePos(self.model, self.data.qpos, step, 1.0)
        assert np.abs(self.equations(travel)[0]).max() < 10 * CLOSED

    def rates(self, travel: float, per: str) -> Array:
        """Angular velocity and velocity of the wheel centre (6,) per mm of an input, at the pose at hand."""
        residual, jacobian, of_knuckle = self.equations(travel)
        rate = np.zeros(self.model.nv)
        wanted = np.zeros(len(residual))
        if per == "travel":
            wanted[-1] = 1.0
        else:
            assert self.rack is not None
            rate[self.rack.dofadr] = 1.0
            wanted -= jacobian @ rate
        rate[self.unknown] = np.linalg.lstsq(jacobian[:, self.unknown], wanted, rcond=1e-10)[0]
        return of_knuckle @ rate


@dataclass(frozen=True)
class Moved:
    """What the library says over a grid: centre (..., 3), rotation (..., 3, 3), rates {input: (..., 6)}."""

    centre: Array
    rotation: Array
    rates: Mapping[str, Array]


def moved(model: Model, travels: Array, racks: Array) -> Moved:
    """Walk outward from the design position over a grid of travel × rack."""
    mover = Mover(model)
    design = mover.data.qpos.copy()
    shape = (len(travels), len(racks))
    inputs = ("travel", "rack") if mover.rack is not None else ("travel",)
    centre, rotation = np.empty((*shape, 3)), np.empty((*shape, 3, 3))
    rates = {name: np.empty((*shape, 6)) for name in inputs}
    for side in (travels >= 0.0, travels < 0.0):
        for j, rack in enumerate(racks):
            mover.data.qpos[:] = design
            for i in sorted(np.flatnonzero(side), key=lambda i: abs(travels[i])):
                mover.close(float(travels[i]), float(rack))
                centre[i, j], rotation[i, j] = mover.place()
                for name in inputs:
                    rates[name][i, j] = mover.rates(float(travels[i]), name)
    return Moved(centre, rotation, rates)


def assert_same(ours: Motion, theirs: Moved) -> None:
    assert ours.reached.all()
    centre = ours.corner.wheel.centre
    np.testing.assert_allclose(ours.point("wheel", centre), theirs.centre, rtol=0.0, atol=SAME_PLACE)
    np.testing.assert_allclose(ours.rotation("wheel"), theirs.rotation, rtol=0.0, atol=SAME_TURN)
    for name, rates in theirs.rates.items():
        np.testing.assert_allclose(ours.twist("wheel", name)[..., :3], rates[..., :3], rtol=0.0, atol=SAME_TURN_RATE)
        np.testing.assert_allclose(ours.velocity("wheel", centre, name), rates[..., 3:], rtol=0.0, atol=SAME_SPEED)


LAYOUTS = {
    "double-a-arm": (double_a_arm.LAYOUT, double_a_arm_model),
    "strut": (strut.LAYOUT, strut_model),
    "five-link": (five_link.LAYOUT, five_link_model),
    "semi-trailing-arm": (semi_trailing_arm.LAYOUT, semi_trailing_arm_model),
}


def corner_of(layout: Layout) -> Corner:
    wheel = Wheel(np.array(layout.example["wheel.centre"]), loaded_radius=300.0)
    return Corner(layout.mechanism(layout.example), wheel, layout.carrier, layout.steering_axis)


@pytest.mark.parametrize("name", LAYOUTS)
def test_the_knuckle_moves_as_in_the_multibody_library(name: str) -> None:
    layout, model = LAYOUTS[name]
    racks = RACK if layout.steers else np.zeros(1)
    points = {point: np.array(at) for point, at in layout.example.items()}
    assert_same(solve_motion(corner_of(layout), TRAVEL[:, None], racks), moved(model(points), TRAVEL, racks))


def test_the_published_double_a_arm_moves_as_in_the_multibody_library(spatial_double_a_arm: Corner) -> None:
    # G. Rill and A. A. Castro, Road Vehicle Dynamics, 2nd ed., CRC Press 2020, ch. 5 (attribution from memory)
    travel = np.linspace(-60.0, 60.0, 13)
    model = double_a_arm_model(spatial_double_a_arm.mechanism.points)
    assert_same(solve_motion(spatial_double_a_arm, travel[:, None], RACK), moved(model, travel, RACK))


def test_a_steered_wheel_reads_what_its_placement_in_the_library_says(spatial_double_a_arm: Corner) -> None:
    # The readings' definitions (ISO 8855:2011 where it has them; clause numbers not at hand), written out once more on
    # the library's placement: line through the ball joints, its foot on the ground, offsets along and across the wheel.
    corner, travel = spatial_double_a_arm, np.array([-40.0, 0.0, 50.0])
    theirs = moved(double_a_arm_model(corner.mechanism.points), travel, RACK)

    def there(point: Array) -> Array:
        return theirs.centre + theirs.rotation @ (point - corner.wheel.centre)

    lower, upper = (there(corner.point(f"{arm}.ball_joint")) for arm in ("lower_arm", "upper_arm"))
    spin = theirs.rotation @ corner.wheel.spin_axis
    heading = np.cross(spin, [0.0, 0.0, 1.0])
    heading /= np.linalg.norm(heading, axis=-1, keepdims=True)
    contact = theirs.centre + corner.wheel.loaded_radius * np.cross(spin, heading)
    axis = upper - lower
    foot = lower + axis * ((contact - lower)[..., 2] / axis[..., 2])[..., None]
    outward = np.cross([0.0, 0.0, 1.0], heading)
    expected = {
        "camber_deg": 90.0 - np.degrees(np.arccos(-spin[..., 2])),
        "toe_deg": -np.degrees(np.arctan2(heading[..., 1], heading[..., 0])),
        "caster_deg": np.degrees(np.arctan(-axis[..., 0] / axis[..., 2])),
        "kingpin_inclination_deg": np.degrees(np.arctan(-axis[..., 1] / axis[..., 2])),
        "caster_trail_mm": -np.sum((contact - foot) * heading, axis=-1),
        "scrub_radius_mm": np.sum((contact - foot) * outward, axis=-1),
        "contact_x_mm": contact[..., 0],
        "contact_y_mm": contact[..., 1],
        "contact_z_mm": contact[..., 2],
    }
    readings = corner_readings(solve_motion(corner, travel[:, None], RACK))
    assert np.ptp(readings["toe_deg"]) > 15.0
    for column, values in expected.items():
        np.testing.assert_allclose(readings[column], values, rtol=0.0, atol=1e-8, err_msg=column)


def test_the_library_keeps_the_hardpoints_it_is_given() -> None:
    # what the models share with ours must arrive whole: every held point closes at the design position
    for layout, model in LAYOUTS.values():
        mover = Mover(model({point: np.array(at) for point, at in layout.example.items()}))
        assert np.abs(mover.equations(0.0)[0]).max() < 1e-12
