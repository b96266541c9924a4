"""Readings as CSV and as a readable table. Knows no terminal width and no command."""

from __future__ import annotations

import io
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.corner import Reading, corner_readings
from knucklepath.kinematics.motion import Motion

Array = NDArray[np.float64]

#: The readings of the readable table, in its order; the CSV has all of them.
READABLE = (
    "camber",
    "toe",
    "caster",
    "kingpin_inclination",
    "scrub_radius",
    "caster_trail",
    "half_track_change",
    "fvsa_length",
    "roll_centre_height",
    "motion_ratio",
    "anti_dive",
    "anti_lift",
    "anti_squat",
)


def sweep_columns(motion: Motion, readings: Sequence[Reading]) -> dict[str, Array]:
    """All columns of a sweep over a (travel, rack) grid, flattened: travel outer, rack inner."""
    columns = {"travel_mm": motion.travel_mm, "rack_mm": motion.rack_mm}
    columns.update(corner_readings(motion, readings))
    return {name: np.broadcast_to(value, motion.shape).reshape(-1) for name, value in columns.items()}


def sweep_csv(motion: Motion, readings: Sequence[Reading]) -> str:
    """The sweep as CSV: a header, then a row a pose; full double precision, ``nan``, ``inf`` and ``-inf``."""
    columns = sweep_columns(motion, readings)
    out = io.StringIO()
    out.write(",".join(columns) + "\n")
    # adding 0.0 turns −0.0, an accident of rounding, into 0.0
    for row in zip(*((value + 0.0).tolist() for value in columns.values()), strict=True):
        out.write(",".join(map(repr, row)) + "\n")
    return out.getvalue()


def figure(value: float, unit: str) -> str:
    """One number for people: digits by unit, "–" for what does not exist, "∞" for what is infinite."""
    if np.isnan(value):
        return "–"
    if np.isinf(value):
        return "∞" if value > 0 else "−∞"
    digits = {"deg": 3, "mm": 1, "%": 1, "deg/mm": 4}.get(unit, 3)
    text = f"{value:.{digits}f}"
    if float(text) == 0.0:
        text = text.lstrip("-")
    return text.replace("-", "−")
