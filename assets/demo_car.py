"""The demo car's hardpoints and wheel, read from its project file: where its parts are to be."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from knucklepath.assets.modelling import Array, around, unit


@dataclass(frozen=True)
class Car:
    """Points (3,) mm by "table.point"; the wheel's figures, mm; its spin axis, unit, pointing outboard."""

    points: dict[str, Array]
    wheel: dict[str, float]
    spin: Array

    def __getitem__(self, name: str) -> Array:
        """A hardpoint."""
        return self.points[name]

    @property
    def hub(self) -> Array:
        """The wheel centre."""
        return self.points["wheel.centre"]

    def on_wheel(self, along: float, radius: float, angle_deg: float) -> Array:
        """A point of the wheel: so far outboard along the spin axis, at a radius, so far forward of the top."""
        return around(self.hub, self.spin, radius, angle_deg, along)

    def arm_normal(self, arm: str) -> Array:
        """Unit normal of an arm's plane, pointing up."""
        front, rear, ball = (self.points[f"{arm}.{end}"] for end in ("front_pivot", "rear_pivot", "ball_joint"))
        normal = unit(np.cross(ball - rear, front - rear))
        return normal * np.sign(normal[2])


def read_car(project: Path) -> Car:
    """Read the points, the wheel and the spring's ends from a double A-arm's project file in mm."""
    data = tomllib.loads(project.read_text(encoding="utf-8"))
    points = {f"{table}.{name}": np.array(at) for table, named in data["points"].items() for name, at in named.items()}
    wheel = dict(data["wheel"])
    points["wheel.centre"] = np.array(wheel.pop("centre"))
    points["spring.chassis"], points["spring.moving"] = (np.array(data["spring"][end]) for end in ("chassis", "moving"))
    camber, toe = np.radians(wheel["camber_deg"]), np.radians(wheel["toe_deg"])
    spin = np.array([np.cos(camber) * np.sin(toe), np.cos(camber) * np.cos(toe), -np.sin(camber)])
    return Car(points, wheel, spin)
