"""Cameras: named looks, and framing the mechanism. Pure geometry; knows no renderer.

Body frame: x forward, y left, z up, mm. The camera's azimuth is measured about z from straight ahead (0°) towards the
left, which is outside on a left corner (90°); its elevation is measured up from level.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import KnucklepathError

Array: TypeAlias = NDArray[np.float64]

#: Full vertical angle of the long lens, deg.
VIEW_ANGLE_DEG = 20.0
#: The mechanism takes this share of the picture's height, and at most that share of its width.
FILL_HEIGHT, FILL_WIDTH = 2.0 / 3.0, 0.72
#: A construction whose normal stands this nearly across the line of sight (cosine) is seen edge-on.
EDGE_ON = 0.3
#: Rounds of framing; each brings the picture's error down by a factor of ten or more.
ROUNDS = 12


@dataclass(frozen=True)
class Look:
    """A direction to look from.

    azimuth_deg, elevation_deg : where the camera stands; parallel : orthographic or through the long lens; name :
    as asked for; title : for people; middle : where the mechanism's middle comes to stand, shares of width (from the
    left) and height (from below).
    """

    name: str
    title: str
    azimuth_deg: float
    elevation_deg: float
    parallel: bool
    middle: tuple[float, float] = (0.5, 0.5)

    @property
    def backward(self) -> Array:
        """(3,) unit vector from the mechanism to the camera."""
        azimuth, elevation = np.radians(self.azimuth_deg), np.radians(self.elevation_deg)
        level = np.cos(elevation)
        return np.array([level * np.cos(azimuth), level * np.sin(azimuth), np.sin(elevation)])

    @property
    def up(self) -> Array:
        """(3,) unit vector that points up in the picture; no horizon tilts. Seen from above, forward is up."""
        azimuth, elevation = np.radians(self.azimuth_deg), np.radians(self.elevation_deg)
        if abs(abs(self.elevation_deg) - 90.0) < 1e-9:
            return np.array([1.0, 0.0, 0.0])
        high = np.sin(elevation)
        return np.array([-high * np.cos(azimuth), -high * np.sin(azimuth), np.cos(elevation)])

    @property
    def right(self) -> Array:
        """(3,) unit vector that points right in the picture."""
        return np.cross(self.up, self.backward)

    def shows(self, facing: Array | None) -> bool:
        """False when a plane with this normal is seen edge-on."""
        return facing is None or abs(float(facing @ self.backward)) > EDGE_ON


#: Inboard lie the instant centres: the named looks leave more room on that side.
NAMED = (
    Look("corner", "from ahead and outside", 40.0, 15.0, False, (0.56, 0.5)),
    Look("front", "front view", 0.0, 0.0, True, (0.62, 0.5)),
    Look("side", "side view, from outside", 90.0, 0.0, True, (0.44, 0.5)),
    Look("top", "top view, forward is up", 90.0, 90.0, True, (0.44, 0.5)),
)
NAMES = tuple(look.name for look in NAMED)


def look(text: str) -> Look:
    """Read a look: a name, or "AZ,EL" in degrees.

    Raises
    ------
    KnucklepathError : neither; the message says what would be right.
    """
    for named in NAMED:
        if text.strip().lower() == named.name:
            return named
    words = text.split(",")
    try:
        azimuth, elevation = (float(word) for word in words)
    except ValueError:
        azimuth = elevation = float("nan")
    if not (np.isfinite(azimuth) and abs(azimuth) <= 360.0 and abs(elevation) <= 90.0):
        raise KnucklepathError(
            f"--look: '{text}' is not a look; give {', '.join(NAMES)}, or azimuth and elevation in degrees, "
            "for example 40,15 (azimuth from straight ahead towards the outside, elevation -90 to 90)"
        )
    return Look(text.strip(), f"from azimuth {azimuth:g}°, elevation {elevation:g}°", azimuth, elevation, False)


@dataclass(frozen=True)
class Camera:
    """A camera that has been placed.

    focus : (3,) mm, a point in the middle of the picture; distance : from it to the camera, mm; half_height : half
    the picture's height in the plane through the focus across the line of sight, mm.
    """

    look: Look
    focus: Array
    distance: float
    half_height: float

    @property
    def position(self) -> Array:
        """(3,) where the camera stands, mm."""
        return self.focus + self.distance * self.look.backward

    def project(self, points: Array, width: float, height: float) -> Array:
        """(..., 3) points, mm → (..., 3) px from the left, px from the top, depth before the camera (mm).

        A point behind the camera gets nan px.
        """
        apart = points - self.focus
        depth = self.distance - apart @ self.look.backward
        lens = self.distance / np.where(depth > 0.0, depth, np.nan)
        nearer = np.ones_like(depth) if self.look.parallel else lens
        scale = 0.5 * height / self.half_height * nearer
        across, over = apart @ self.look.right, apart @ self.look.up
        return np.stack((0.5 * width + scale * across, 0.5 * height - scale * over, depth), axis=-1)

    def px_per_mm(self, at: Array, height: float) -> float:
        """Scale of the picture in the plane through a point (3,) across the line of sight."""
        depth = self.distance - float((at - self.focus) @ self.look.backward)
        nearer = 1.0 if self.look.parallel else self.distance / depth
        return 0.5 * height / self.half_height * nearer


def frame(points: Array, chosen: Look, aspect: float, fill: float = FILL_HEIGHT) -> Camera:
    """Place the camera so that points fill the picture.

    Parameters
    ----------
    points : (n, 3) mm; those that are not finite are left out.
    aspect : width over height of the picture; fill : the share of the height that the points take.
    """
    points = points[np.isfinite(points).all(axis=-1)]
    across, over = points @ chosen.right, points @ chosen.up
    focus = (
        0.5 * (across.max() + across.min()) * chosen.right
        + 0.5 * (over.max() + over.min()) * chosen.up
        + float(np.mean(points @ chosen.backward)) * chosen.backward
    )
    half = max(np.ptp(over) / fill, np.ptp(across) / (FILL_WIDTH * aspect), 1.0) / 2.0
    lens = np.tan(np.radians(VIEW_ANGLE_DEG) / 2.0)
    camera = Camera(chosen, focus, half / lens, half)
    wanted = np.array([chosen.middle[0] * aspect, 1.0 - chosen.middle[1]])
    for _ in range(ROUNDS):
        seen = camera.project(points, aspect, 1.0)[:, :2]
        low, high = seen.min(axis=0), seen.max(axis=0)
        grow = max((high[1] - low[1]) / fill, (high[0] - low[0]) / (FILL_WIDTH * aspect))
        half = camera.half_height * grow
        off = (0.5 * (low + high) - 0.5 * np.array([aspect, 1.0])) / grow + 0.5 * np.array([aspect, 1.0]) - wanted
        shift = 2.0 * half * (off[0] * chosen.right - off[1] * chosen.up)
        camera = replace(camera, focus=camera.focus + shift, distance=half / lens, half_height=half)
    return camera
