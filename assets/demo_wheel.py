"""The demo's turning parts: tyre, rim, hub and brake disc.

Needed only to make the demo's meshes again (``make_demo.py``); the program itself never imports this.
"""

from __future__ import annotations

from itertools import pairwise

from manifold3d import CrossSection, Manifold

from knucklepath.assets.demo_car import Car
from knucklepath.assets.modelling import (
    Array,
    arc,
    bevelled,
    block,
    drum,
    hexagon,
    placed,
    skin,
    together,
    turned,
    unit,
)

#: Face of the hub on which the rim stands, along the spin axis, mm.
FACE = 36.0
#: Driving pegs, and pairs of spokes.
PEGS = 5
#: Radius of the circle of driving pegs, mm.
PEG_CIRCLE = 48.0
#: The brake disc's two faces along the spin axis, and its radii, mm.
DISC_FACES = (-9.0, 1.0)
DISC_RADII = (82.0, 126.0)
BOBBINS = 10


def tyre(car: Car) -> Manifold:
    """A slick's carcass with four rain grooves, the same all round."""
    radius, half, bead = car.wheel["tyre_radius"], car.wheel["tyre_width"] / 2.0, car.wheel["rim_diameter"] / 2.0
    shoulder, crown = 22.0, 260.0 / 2.0

    def tread(at: float) -> float:
        return radius - 3.2 * (at / crown) ** 2

    edge = half - 2.2 - shoulder
    side = arc((edge, tread(edge) - shoulder), shoulder, 90.0, 4.0, 5)
    side += [(half - 0.6, radius - 48.0), (half - 0.6, bead + 40.0), (half - 4.8, bead + 24.0)]
    side += [(half - 10.0, bead + 14.0), (half - 15.0, bead + 5.0), (half - 21.5, bead + 0.6)]
    inner = [(half - 30.0, bead + 0.6), (half - 14.0, bead + 40.0), (half - 30.0, radius - 20.0), (0.0, radius - 17.0)]
    middle: list[tuple[float, float]] = []
    for groove in (-56.0, -19.0, 19.0, 56.0):
        lip, floor = 5.2, 6.0
        for at, deep in ((-lip, 0.0), (-lip + 1.8, floor), (lip - 1.8, floor), (lip, 0.0)):
            middle.append((groove + at, tread(groove + at) - deep))
    outline = [(-along, r) for along, r in reversed(side)] + middle + side
    outline += inner + [(-along, r) for along, r in reversed(inner[:-1])]
    return turned(outline, car.hub, car.spin, 72)


def rim(car: Car) -> Manifold:
    """A barrel with flanges, bead seats and a well; five pairs of spokes on a centre-lock boss."""
    radius, half = car.wheel["rim_diameter"] / 2.0, 0.43 * car.wheel["tyre_width"]
    outside = [(-half, radius + 8.0), (-half + 1.6, radius + 9.6), (-half + 4.4, radius + 9.6)]
    outside += [(-half + 7.0, radius + 1.0), (-half + 9.0, radius - 0.4), (-half + 31.0, radius - 0.4)]
    outside += [(-half + 48.0, radius - 6.8), (half - 36.0, radius - 6.8)]
    outside += [(half - 27.0, radius - 0.4), (half - 9.0, radius - 0.4), (half - 7.0, radius + 1.0)]
    outside += [(half - 4.4, radius + 9.6), (half - 1.6, radius + 9.6), (half, radius + 8.0)]
    inside = [(half, radius + 2.0), (half - 8.0, radius - 5.2), (half - 30.0, radius - 11.0)]
    inside += [(-half + 46.0, radius - 11.0), (-half + 32.0, radius - 5.4), (-half + 8.0, radius - 5.2)]
    inside += [(-half, radius + 2.0)]
    barrel = turned([*outside, *inside], car.hub, car.spin, 72)
    boss = [
        (FACE, 29.0),
        (FACE, 62.0),
        (FACE + 2.0, 64.0),
        (FACE + 12.0, 62.0),
        (FACE + 18.0, 52.0),
        (FACE + 18.0, 44.0),
    ]
    boss += [(FACE + 14.0, 41.0), (FACE + 14.0, 29.0)]
    pieces = [barrel, turned(boss, car.hub, car.spin, 44)]
    for pair in range(PEGS):
        for side in (-1.0, 1.0):
            pieces += _spoke(car, 360.0 * pair / PEGS, side, radius, half)
    holes = []
    for peg in range(PEGS):
        holes.append(drum(car.on_wheel(FACE + 10.0, PEG_CIRCLE, 360.0 * (peg + 0.5) / PEGS), car.spin, 7.4, 60.0, 20))
    return together(pieces) - together(holes) - drum(car.hub + FACE * car.spin, car.spin, 29.0, 80.0, 48)


def _spoke(car: Car, angle: float, side: float, radius: float, half: float) -> list[Manifold]:
    """One spoke of a pair, bowed outboard, as a chain of sections: (radius, along, off angle, width, thickness)."""
    stations = (
        (52.0, FACE + 9.0, 9.0, 26.0, 17.0),
        (72.0, FACE + 12.0, 9.5, 20.0, 16.0),
        (96.0, FACE + 17.0, 10.5, 15.0, 14.0),
        (122.0, FACE + 22.0, 12.0, 13.5, 13.0),
        (142.0, FACE + 25.5, 13.5, 17.0, 13.5),
        (radius - 3.5, half - 22.5, 14.2, 28.0, 17.0),
    )
    centres = [car.on_wheel(along, r, angle + side * off) for r, along, off, _, _ in stations]
    sections = []
    for k, (_, _, _, width, thick) in enumerate(stations):
        ahead = unit(centres[min(k + 1, len(centres) - 1)] - centres[max(k - 1, 0)])
        sections.append(_section(centres[k], ahead, car.spin, width, thick))
    return [skin(a, b) for a, b in pairwise(sections)]


def _section(at: Array, ahead: Array, outboard: Array, width: float, thick: float) -> Manifold:
    """A thin slice of a spoke: flat at the back, crowned in front."""
    w, t = width / 2.0, thick / 2.0
    outline = [(-w, -0.7 * t), (-0.9 * w, -t), (0.9 * w, -t), (w, -0.7 * t), (w, 0.3 * t), (0.82 * w, 0.72 * t)]
    outline += [(0.4 * w, t), (-0.4 * w, t), (-0.82 * w, 0.72 * t), (-w, 0.3 * t)]
    return placed(Manifold.extrude(CrossSection([outline]), 0.2), at, ahead, outboard)


def hub(car: Car) -> Manifold:
    """The turning hub: spindle, lobed flange with driving pegs, and the centre nut."""
    centre, spin = car.hub, car.spin
    spindle = [(-72.0, 15.0), (-72.0, 27.0), (-70.0, 29.0), (-66.5, 29.0), (-66.5, 38.8), (16.0, 38.8), (24.0, 46.0)]
    spindle += [(24.0, 58.0), (FACE - 1.5, 58.0), (FACE, 56.5), (FACE, 28.6), (FACE + 38.0, 28.6), (FACE + 40.0, 26.6)]
    spindle += [(FACE + 40.0, 15.0)]
    pieces = [turned(spindle, centre, spin, 40)]
    for peg in range(PEGS):
        angle = 360.0 * (peg + 0.5) / PEGS
        pieces.append(
            skin(
                drum(car.on_wheel(30.0, PEG_CIRCLE, angle), spin, 14.0, 12.0, 16),
                drum(car.on_wheel(30.0, 30.0, angle), spin, 20.0, 12.0, 12),
            )
        )
        pieces.append(bevelled(car.on_wheel(FACE + 6.0, PEG_CIRCLE, angle), spin, 7.0, 22.0, 1.2, 14))
    nut = hexagon(centre + (FACE + 26.0) * spin, spin, 62.0, 22.0) + bevelled(
        centre + (FACE + 16.6) * spin, spin, 39.0, 4.8
    )
    pieces.append(nut + bevelled(centre + (FACE + 36.0) * spin, spin, 30.5, 8.0))
    return together(pieces) - drum(centre, spin, 15.0, 400.0, 28)


def brake_disc(car: Car) -> Manifold:
    """A drilled disc that floats on bobbins in a pierced bell."""
    centre, spin = car.hub, car.spin
    low, high = DISC_FACES
    inner, outer = DISC_RADII
    ring = [(low, inner), (high, inner)]
    ring += [(high, outer - 1.0), (high - 1.0, outer), (low + 1.0, outer), (low, outer - 1.0)]
    bell = [
        (-6.5, 60.0),
        (-6.5, 74.0),
        (-1.5, 74.0),
        (-1.5, 70.5),
        (20.0, 65.0),
        (23.8, 62.0),
        (23.8, 46.4),
        (19.5, 46.4),
    ]
    bell += [(19.5, 58.0), (-1.5, 64.0)]
    pieces, holes = [turned(ring, centre, spin, 72), turned(bell, centre, spin, 44)], []
    for k in range(BOBBINS):
        angle = 360.0 * (k + 0.5) / BOBBINS
        pieces.append(
            skin(
                drum(car.on_wheel(-4.0, 77.0, angle), spin, 8.5, 5.0, 10),
                drum(car.on_wheel(-4.0, 70.0, angle), spin, 11.0, 5.0, 10),
            )
        )
        pieces.append(bevelled(car.on_wheel(-4.0, 79.0, angle), spin, 6.8, 13.0, 1.0, 10))
        out = unit(car.on_wheel(0.0, 1.0, angle + 18.0) - centre)
        holes.append(block(car.on_wheel(6.0, 68.0, angle + 18.0), (22.0, 12.0, 40.0), out, spin))
        for step, radius in enumerate((93.0, 105.0, 117.0)):
            turn = angle + 18.0 + 9.0 * step - 9.0
            holes.append(drum(car.on_wheel(-4.0, radius, turn), spin, 2.9, 30.0, 8))
    return together(pieces) - together(holes)
