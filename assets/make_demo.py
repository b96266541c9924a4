"""Make the demo's meshes again: ``python assets/make_demo.py`` (needs the packages of the extra ``test``).

The car is invented: a hill-climb single-seater, double A-arm front axle on 13-inch wheels. Hardpoints are read from the
demo's own project file, so that the parts follow when a point is moved. All in mm, left corner, design position.
"""

from __future__ import annotations

import sys
import tomllib
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent))

from manifold3d import Manifold
from modelling import Array, around, bar, block, drum, globe, placed, skin, turned, write_stl

FOLDER = Path(__file__).parent / "hill_climb_front"
UP = np.array([0.0, 0.0, 1.0])
#: Outer end of the bodywork stay, mm: so near the tyre that full bump with full lock is too tight.
STAY_END = (226.0, 449.0, 424.0)
#: Bolts of the wheel.
BOLTS = 5


def hardpoints() -> tuple[dict[str, Array], dict[str, float], Array]:
    """Points by "table.point", the wheel's figures, and its spin axis."""
    data = tomllib.loads((FOLDER / "hill-climb-front.toml").read_text(encoding="utf-8"))
    points = {f"{table}.{name}": np.array(at) for table, named in data["points"].items() for name, at in named.items()}
    wheel = data["wheel"]
    points["wheel.centre"] = np.array(wheel["centre"])
    points["spring.chassis"], points["spring.moving"] = (np.array(data["spring"][end]) for end in ("chassis", "moving"))
    camber, toe = np.radians(wheel["camber_deg"]), np.radians(wheel["toe_deg"])
    spin = np.array([np.cos(camber) * np.sin(toe), np.cos(camber) * np.cos(toe), -np.sin(camber)])
    return points, {key: value for key, value in wheel.items() if key != "centre"}, spin


def arm(points: dict[str, Array], name: str, tube: float, housing: float) -> Manifold:
    """A tubular A-arm: two legs, bushes along the pivot axis, a ball-joint housing and a gusset."""
    front, rear, ball = (points[f"{name}.{end}"] for end in ("front_pivot", "rear_pivot", "ball_joint"))
    axis = front - rear
    solid = bar(front, ball, tube) + bar(rear, ball, tube)
    for pivot in (front, rear):
        solid += drum(pivot, axis, 1.65 * tube, 38.0) + globe(pivot, 1.65 * tube)
    solid += drum(ball, UP, housing, 30.0, 36) + drum(ball + 13.0 * UP, UP, housing - 4.0, 10.0, 36)
    reach = [ball + 95.0 * (pivot - ball) / np.linalg.norm(pivot - ball) for pivot in (front, rear)]
    solid += skin(drum(ball, UP, 9.0, 5.0), *(drum(at, UP, 6.0, 5.0) for at in reach))
    for pivot in (front, rear):
        solid -= drum(pivot, axis, 6.0, 60.0)
    return solid


def lower_arm(points: dict[str, Array]) -> Manifold:
    """The lower arm with a cross tube and a lug for the spring-damper."""
    solid = arm(points, "lower_arm", 11.0, 21.0)
    front, rear, ball = (points[f"lower_arm.{end}"] for end in ("front_pivot", "rear_pivot", "ball_joint"))
    foot = points["spring.moving"]
    ends = [pivot + (ball - pivot) * (foot[1] - 14.0 - pivot[1]) / (ball[1] - pivot[1]) for pivot in (front, rear)]
    solid += bar(ends[0], ends[1], 9.0)
    middle = ends[0] + (ends[1] - ends[0]) * (foot[0] - ends[0][0]) / (ends[1][0] - ends[0][0])
    for side in (-1.0, 1.0):
        shift = np.array([side * 15.0, 0.0, 0.0])
        solid += skin(drum(foot + shift, (1, 0, 0), 12.0, 5.0), drum(middle + shift, (1, 0, 0), 10.0, 5.0))
    return solid - drum(foot, (1, 0, 0), 5.0, 60.0)


def tie_rod(points: dict[str, Array]) -> Manifold:
    """A tube with a rod end at each end."""
    inboard, outboard = points["tie_rod.inboard"], points["tie_rod.outboard"]
    along = (outboard - inboard) / np.linalg.norm(outboard - inboard)
    solid = bar(inboard + 34.0 * along, outboard - 34.0 * along, 9.0)
    for end, sign in ((inboard, 1.0), (outboard, -1.0)):
        solid += bar(end, end + sign * 48.0 * along, 5.5) + drum(end, UP, 13.0, 14.0)
        solid += drum(end + sign * 36.0 * along, along, 10.5, 9.0, 6)
    return solid


def knuckle(points: dict[str, Array], spin: Array) -> Manifold:
    """An upright: bearing housing, webs to both ball joints and the steering arm, lugs for the caliper."""
    hub = points["wheel.centre"]
    upper, lower, steer = points["upper_arm.ball_joint"], points["lower_arm.ball_joint"], points["tie_rod.outboard"]
    middle = hub - 42.0 * spin
    housing = drum(middle, spin, 52.0, 40.0, 48)
    ahead = np.array([1.0, 0.0, 0.0])

    def web(end: Array, root: Array, width: float, thick: float, boss: float, height: float) -> Manifold:
        across = [root + side * width * ahead for side in (-0.5, 0.5)]
        return skin(drum(end, UP, boss, height), *(drum(at, spin, thick, 26.0) for at in across))

    # the webs begin at the housing's edge and end above and below the arms' own joint housings
    top, bottom = upper - 20.0 * UP, lower + 22.0 * UP
    solid = housing + web(top, middle + 36.0 * UP, 44.0, 11.0, 15.0, 12.0)
    solid += web(bottom, middle - 36.0 * UP, 52.0, 11.0, 17.0, 14.0)
    solid += drum(upper - 6.0 * UP, UP, 9.0, 40.0) + drum(lower + 6.0 * UP, UP, 10.0, 44.0)
    root = middle + 34.0 * ahead - 26.0 * UP
    solid += skin(
        drum(steer + 14.0 * UP, UP, 13.0, 12.0), drum(root, spin, 12.0, 22.0), drum(root + 18.0 * UP, spin, 9.0, 18.0)
    )
    solid += drum(steer + 4.0 * UP, UP, 6.5, 28.0)
    for angle in (-112.0, -68.0):
        lug = around(hub, spin, 100.0, angle, -44.0)
        solid += skin(drum(lug, spin, 11.0, 12.0), drum(around(hub, spin, 42.0, angle, -44.0), spin, 13.0, 16.0))
        solid -= drum(lug, spin, 4.5, 40.0)
    # lightening pockets in the webs, and the bore
    for end, share in ((top, 0.52), (bottom, 0.5)):
        pocket = middle + share * (end - middle)
        solid -= drum(pocket, spin, 11.0, 90.0, 32)
    return solid - drum(middle, spin, 40.0, 200.0, 48)


def hub(points: dict[str, Array], spin: Array) -> Manifold:
    """The turning hub with its flange, bolts and brake-disc bell."""
    centre = points["wheel.centre"]
    solid = drum(centre - 20.0 * spin, spin, 39.0, 92.0, 48) + drum(centre + 30.0 * spin, spin, 66.0, 12.0, 60)
    solid += drum(centre + 44.0 * spin, spin, 29.0, 22.0, 40)
    for bolt in range(BOLTS):
        solid += drum(around(centre, spin, 50.0, 360.0 * bolt / BOLTS, 48.0), spin, 6.5, 34.0, 12)
    return solid - drum(centre - 20.0 * spin, spin, 15.0, 260.0, 32)


def brake_disc(points: dict[str, Array], spin: Array) -> Manifold:
    """A drilled disc with its bell."""
    centre = points["wheel.centre"]
    ring = [
        (-9.0, 72.0),
        (-9.0, 126.0),
        (1.0, 126.0),
        (1.0, 80.0),
        (24.0, 70.0),
        (24.0, 40.0),
        (20.0, 40.0),
        (20.0, 64.0),
    ]
    solid = turned(ring, centre, spin, 72)
    for hole in range(24):
        radius = 92.0 if hole % 2 else 108.0
        solid -= drum(around(centre, spin, radius, 15.0 * hole, -4.0), spin, 4.0, 30.0, 10)
    return solid


def caliper(points: dict[str, Array], spin: Array) -> Manifold:
    """A four-piston caliper behind the axle, straddling the disc."""
    centre = points["wheel.centre"]
    body = []
    for angle in (-118.0, -104.0, -90.0, -76.0, -62.0):
        body.append(drum(around(centre, spin, 116.0, angle, -4.0), spin, 20.0, 58.0, 20))
    solid = skin(*body[0:2]) + skin(*body[1:3]) + skin(*body[2:4]) + skin(*body[3:5])
    solid -= turned([(-14.0, 60.0), (-14.0, 128.0), (6.0, 128.0), (6.0, 60.0)], centre, spin, 72)
    solid -= turned([(-60.0, 60.0), (-60.0, 92.0), (60.0, 92.0), (60.0, 60.0)], centre, spin, 72)
    for angle in (-108.0, -72.0):
        for along in (-33.0, 25.0):
            solid += drum(around(centre, spin, 114.0, angle, along), spin, 13.0, 6.0, 24)
    for angle in (-112.0, -68.0):
        solid += drum(around(centre, spin, 100.0, angle, -34.0), spin, 9.0, 10.0, 20)
    return solid


def tyre(points: dict[str, Array], wheel: dict[str, float], spin: Array) -> Manifold:
    """A slick's carcass with four rain grooves, rotationally symmetric."""
    radius, width, bead = wheel["tyre_radius"], wheel["tyre_width"], wheel["rim_diameter"] / 2.0
    half = width / 2.0
    outline = [(-0.86 * half, bead), (-0.95 * half, bead + 12.0), (-half, bead + 0.42 * (radius - bead))]
    outline += [(-0.985 * half, radius - 34.0), (-0.93 * half, radius - 16.0), (-0.85 * half, radius - 6.5)]
    outline.append((-0.76 * half, radius - 2.5))
    for groove in (-0.5, -0.18, 0.18, 0.5):
        at = groove * half
        crown = radius - 2.0 * groove * groove
        outline += [(at - 5.0, crown), (at - 3.6, crown - 6.0), (at + 3.6, crown - 6.0), (at + 5.0, crown)]
    outline.append((0.76 * half, radius - 2.5))
    outline += [(0.85 * half, radius - 6.5), (0.93 * half, radius - 16.0), (0.985 * half, radius - 34.0)]
    outline += [(half, bead + 0.42 * (radius - bead)), (0.95 * half, bead + 12.0), (0.86 * half, bead)]
    outline += [(0.8 * half, bead + 8.0), (0.9 * half, bead + 0.5 * (radius - bead)), (0.7 * half, radius - 18.0)]
    outline += [(-0.7 * half, radius - 18.0), (-0.9 * half, bead + 0.5 * (radius - bead)), (-0.8 * half, bead + 8.0)]
    return turned(outline, points["wheel.centre"], spin, 96)


def rim(points: dict[str, Array], wheel: dict[str, float], spin: Array) -> Manifold:
    """A barrel with flanges and ten spokes."""
    radius, half = wheel["rim_diameter"] / 2.0, 0.43 * wheel["tyre_width"]
    centre = points["wheel.centre"]
    barrel = [(-half, radius - 6.0), (-half, radius + 9.0), (-half + 5.0, radius + 9.0), (-half + 7.0, radius - 0.5)]
    barrel += [(-half + 34.0, radius - 1.0), (-half + 44.0, radius - 6.0), (half - 30.0, radius - 6.0)]
    barrel += [
        (half - 24.0, radius - 0.5),
        (half - 7.0, radius - 0.5),
        (half - 5.0, radius + 9.0),
        (half, radius + 9.0),
    ]
    barrel += [
        (half, radius - 6.0),
        (half - 22.0, radius - 11.0),
        (-half + 36.0, radius - 11.0),
        (-half + 26.0, radius - 6.0),
    ]
    solid = turned(barrel, centre, spin, 96)
    face = 44.0
    solid += turned([(36.0, 20.0), (36.0, 68.0), (50.0, 64.0), (52.0, 20.0)], centre, spin, 60)
    for spoke in range(2 * BOLTS):
        angle = 360.0 * (spoke + 0.5) / (2 * BOLTS)
        inner = around(centre, spin, 58.0, angle, face)
        outer = around(centre, spin, radius - 10.0, angle, half - 26.0)
        solid += skin(drum(inner, spin, 11.0, 12.0, 12), drum(outer, spin, 9.0, 14.0, 12))
    for bolt in range(BOLTS):
        solid -= drum(around(centre, spin, 50.0, 360.0 * bolt / BOLTS, face), spin, 8.0, 60.0, 16)
    return solid - drum(centre + face * spin, spin, 30.0, 80.0, 40)


def chassis(points: dict[str, Array]) -> Manifold:
    """The left half of a tubular front bulkhead: rails, uprights, pick-up brackets, damper hoop and rack housing."""
    lower_rail = [np.array([250.0, 190.0, 158.0]), np.array([-330.0, 202.0, 150.0])]
    upper_rail = [np.array([215.0, 262.0, 398.0]), np.array([-330.0, 290.0, 372.0])]
    solid = bar(*lower_rail, 16.0) + bar(*upper_rail, 16.0)

    def on(rail: list[Array], x: float) -> Array:
        return rail[0] + (rail[1] - rail[0]) * (x - rail[0][0]) / (rail[1][0] - rail[0][0])

    frames = (205.0, -55.0, -300.0)
    for x in frames:
        low, high = on(lower_rail, x), on(upper_rail, x)
        solid += bar(low, high, 13.0)
        solid += bar(low, [x, 0.0, low[2]], 13.0) + bar(high, [x, 0.0, high[2]], 13.0)
    solid += bar(on(lower_rail, 205.0), on(upper_rail, -55.0), 11.0)
    solid += bar(on(lower_rail, -300.0), on(upper_rail, -55.0), 11.0)
    for name, rail in (("upper_arm", upper_rail), ("lower_arm", lower_rail)):
        front, rear = points[f"{name}.front_pivot"], points[f"{name}.rear_pivot"]
        axis = (front - rear) / np.linalg.norm(front - rear)
        for pivot in (front, rear):
            for side in (-1.0, 1.0):
                at = pivot + side * 25.0 * axis
                foot = on(rail, float(at[0]))
                solid += skin(drum(at, axis, 15.0, 6.0), drum(foot, axis, 13.0, 6.0))
            solid += drum(pivot, axis, 5.5, 64.0, 16)
    top = points["spring.chassis"]
    for side in (-1.0, 1.0):
        foot = on(upper_rail, float(top[0]) + side * 70.0)
        solid += bar(foot, top + np.array([side * 19.0, -10.0, 14.0]), 11.0)
        shift = np.array([side * 19.0, 0.0, 0.0])
        solid += skin(
            drum(top + shift, (1, 0, 0), 14.0, 6.0), drum(top + shift + [0.0, -10.0, 16.0], (1, 0, 0), 12.0, 6.0)
        )
    solid += drum(top, (1, 0, 0), 5.0, 46.0, 16)
    rack = points["tie_rod.inboard"]
    solid += bar([rack[0], 0.0, rack[2]], [rack[0], rack[1] - 66.0, rack[2]], 25.0, 36)
    for y in (40.0, 150.0):
        solid += skin(
            drum([rack[0], y, rack[2]], (0, 1, 0), 31.0, 18.0), drum([rack[0] + 44.0, y, 168.0], (0, 1, 0), 14.0, 18.0)
        )
    solid += bar([rack[0] + 44.0, 0.0, 164.0], [rack[0] + 44.0, 186.0, 158.0], 13.0)
    # the piece ends in the car's middle plane
    return solid.trim_by_plane((0.0, 1.0, 0.0), 0.0)


def bodywork_stay(points: dict[str, Array]) -> Manifold:
    """An outrigger that carries the nose's side panel: drawn without a thought of the wheel on full lock."""
    corner, end = np.array([215.0, 262.0, 398.0]), np.array(STAY_END)
    knee = corner + [18.0, 60.0, 26.0]
    solid = bar(corner, knee, 9.0) + globe(knee, 9.0) + bar(knee, end, 9.0) + globe(end, 9.0)
    solid += skin(drum(end, UP, 17.0, 4.0), drum(end + [44.0, 4.0, 0.0], UP, 11.0, 4.0))
    return solid - drum(end + [44.0, 4.0, 0.0], UP, 4.0, 20.0, 16)


def rack_bar(points: dict[str, Array]) -> Manifold:
    """The moving rack's end with its clevis."""
    end = points["tie_rod.inboard"]
    solid = bar(end - [0.0, 190.0, 0.0], end - [0.0, 24.0, 0.0], 13.0)
    return solid + skin(
        drum(end - [0.0, 24.0, 0.0], (0, 1, 0), 13.0, 10.0), drum(end - [0.0, 14.0, 0.0], (0, 1, 0), 9.0, 10.0)
    )


def main() -> None:
    """Write every part and say how large it is."""
    points, wheel, spin = hardpoints()
    parts = {
        "knuckle": knuckle(points, spin),
        "upper-arm": arm(points, "upper_arm", 9.0, 18.0),
        "lower-arm": lower_arm(points),
        "tie-rod": tie_rod(points),
        "rack": rack_bar(points),
        "hub": hub(points, spin),
        "brake-disc": brake_disc(points, spin),
        "caliper": caliper(points, spin),
        "tyre": tyre(points, wheel, spin),
        "rim": rim(points, wheel, spin),
        "chassis": chassis(points),
        "bodywork-stay": bodywork_stay(points),
    }
    folder = FOLDER / "parts"
    folder.mkdir(exist_ok=True)
    total = 0
    for name, solid in parts.items():
        count = write_stl(solid, folder / f"{name}.stl")
        total += count
        print(f"{name:12} {count:7,} triangles  volume {solid.volume() / 1e3:9.1f} cm³")
    print(f"{'together':12} {total:7,} triangles  {total * 50 / 1e6:.2f} MB")


if __name__ == "__main__":
    main()


__all__ = ["block", "hardpoints", "main", "placed"]
