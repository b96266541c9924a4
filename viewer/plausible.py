"""Sizes that a corner and its parts can have, and the unit that fits when they do not. Reads no file.

A wrong unit is the commonest fault of a project: it makes every later message a riddle, so it is looked for first.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import MeshError
from knucklepath.kinematics.mechanism import WHEEL_CENTRE
from knucklepath.kinematics.wheel import Wheel
from knucklepath.viewer.schema import MM_PER_UNIT, UNIT_NAMES
from knucklepath.viewer.source import Source

Array = NDArray[np.float64]

#: Diagonal, mm, of the box around a corner's hardpoints: a small scale model's, and a heavy lorry's, with reserve.
CORNER_MM = (40.0, 5000.0)
#: The same where a unit is to be guessed: full-size vehicles.
TYPICAL_CORNER_MM = (200.0, 3000.0)
#: A wheel's radius over that diagonal: possible, and typical.
WHEEL_SHARE = (1.0 / 15.0, 3.0)
TYPICAL_WHEEL_SHARE = (0.15, 1.0)
#: Greatest believable size of other lengths, over that diagonal.
MOST_SHARE = {
    ("travel", "bump"): 1.5,
    ("travel", "rebound"): 1.5,
    ("rack", "each_way"): 1.5,
    ("spring", "shortest"): 20.0,
    ("spring", "longest"): 20.0,
    ("rods", "diameter"): 1.0,
    ("vehicle", "wheelbase"): 100.0,
    ("vehicle", "centre_of_gravity_height"): 20.0,
}
#: Diagonal, mm, of the box around a part: below, it is a speck; above, it is longer than a car.
PART_MM = (1.0, 6000.0)
TYPICAL_PART_MM = (10.0, 3000.0)
#: A part whose every point is farther than this from the wheel centre, mm, does not belong to the corner.
FARTHEST_PART_MM = 6000.0


def fitting_unit(size: float, typical: tuple[float, float], stated: str) -> str | None:
    """The unit in which a size, a bare number, is typical; None if there is none, or only the stated one."""
    middle = np.sqrt(typical[0] * typical[1])
    fitting = [
        (abs(np.log(size * per / middle)), unit)
        for unit, per in MM_PER_UNIT.items()
        if unit != stated and typical[0] <= size * per <= typical[1]
    ]
    return min(fitting)[1] if fitting else None


def in_words(millimetres: float) -> str:
    """A length for people, in mm or m."""
    return f"{millimetres:.3g} mm" if millimetres < 1000.0 else f"{millimetres / 1000.0:.4g} m"


def check_corner_size(source: Source, points: Mapping[str, Array], units: str) -> float:
    """Refuse hardpoints that lie too far apart or too close together for a corner.

    Parameters
    ----------
    points : "table.point" → (3,) mm, with the wheel centre.

    Returns
    -------
    The diagonal of the box around them, mm.

    Raises
    ------
    ProjectError : one point lies far from the others, or all of them fit another unit.
    """
    placed = np.stack(list(points.values()))
    diagonal = float(np.linalg.norm(np.ptp(placed, axis=0)))
    if CORNER_MM[0] <= diagonal <= CORNER_MM[1]:
        return diagonal
    away = np.linalg.norm(placed - np.median(placed, axis=0), axis=1)
    far = away > CORNER_MM[1] / 2.0
    if far.any() and far.sum() <= max(1, len(placed) // 4):
        name = list(points)[int(away.argmax())]
        path = ("wheel", "centre") if name == WHEEL_CENTRE else ("points", *name.split("."))
        raise source.error(
            path, f"lies {in_words(float(away.max()))} from the other hardpoints; check it, in {UNIT_NAMES[units]}"
        )
    unit = fitting_unit(diagonal / MM_PER_UNIT[units], TYPICAL_CORNER_MM, units)
    hint = f'units = "{unit}" would fit' if unit else "check the numbers and 'units'"
    raise source.error(
        ("units",) if "units" in source.data else ("points",),
        f"read in {UNIT_NAMES[units]} the hardpoints span {in_words(diagonal)}, which no corner does; {hint}",
    )


def check_wheel_size(source: Source, wheel: Wheel, diagonal: float, units: str) -> None:
    """Refuse a wheel that does not fit the hardpoints, and a tyre and rim that do not fit each other.

    Raises
    ------
    ProjectError : naming the key.
    """
    radius = wheel.loaded_radius
    if not WHEEL_SHARE[0] <= radius / diagonal <= WHEEL_SHARE[1]:
        size = radius / MM_PER_UNIT[units]
        unit = fitting_unit(size, (TYPICAL_WHEEL_SHARE[0] * diagonal, TYPICAL_WHEEL_SHARE[1] * diagonal), units)
        hint = f"give it in {UNIT_NAMES[units]} too"
        if unit:
            right = size * MM_PER_UNIT[unit] / MM_PER_UNIT[units]
            hint = f"it would fit if it is in {UNIT_NAMES[unit]}: write {right:.6g}"
        raise source.error(
            ("wheel", "loaded_radius"),
            f"is {in_words(radius)} beside hardpoints that span {in_words(diagonal)}; {hint}",
        )
    outer = wheel.outer_radius
    if outer < radius:
        raise source.error(
            ("wheel", "tyre_radius"),
            f"is smaller than loaded_radius; the free radius is the greater one (at least {radius:g} mm)",
        )
    if outer > 2.0 * radius:
        raise source.error(
            ("wheel", "tyre_radius"),
            f"is more than twice loaded_radius ({radius:g} mm); it is a radius, not a diameter",
        )
    if wheel.rim_diameter is not None and wheel.rim_diameter >= 2.0 * outer:
        raise source.error(
            ("wheel", "rim_diameter"), f"does not fit into the tyre, whose outer diameter is {2.0 * outer:g} mm"
        )
    if wheel.tyre_width is not None and wheel.tyre_width > 4.0 * outer:
        raise source.error(("wheel", "tyre_width"), f"is more than four times the tyre's radius, {outer:g} mm")


def check_lengths(source: Source, values: Mapping[str, Any], diagonal: float) -> None:
    """Refuse lengths that are out of proportion to the corner.

    Raises
    ------
    ProjectError : naming the key and the greatest length that would be believed.
    """
    for (table, key), share in MOST_SHARE.items():
        length = values.get(table, {}).get(key)
        if length is not None and length > share * diagonal:
            raise source.error(
                (table, key),
                f"is {in_words(length)} beside hardpoints that span {in_words(diagonal)}; at most "
                f"{in_words(share * diagonal)} is believable: check the number and 'units'",
            )


def corner_region(points: Mapping[str, Array], wheel: Wheel) -> Array:
    """(2, 3) box, mm, around the hardpoints and the wheel."""
    half_width = 0.5 * (wheel.tyre_width or 0.6 * wheel.outer_radius)
    half = np.array([wheel.outer_radius, half_width, wheel.outer_radius])
    placed = np.stack((*points.values(), wheel.centre - half, wheel.centre + half))
    return np.stack((placed.min(axis=0), placed.max(axis=0)))


def check_part_size(bounds: Array, region: Array, units: str, file: str) -> None:
    """Refuse a mesh whose size, or place, only another unit explains.

    Parameters
    ----------
    bounds : (2, 3) the mesh's box in mm, taken to be in ``units``; region : (2, 3) the corner's box, mm.

    Raises
    ------
    MeshError : with the size and the unit that fits.
    """
    with np.errstate(over="ignore"):
        diagonal = float(np.linalg.norm(bounds[1] - bounds[0]))
    size = diagonal / MM_PER_UNIT[units]
    unit = fitting_unit(size, TYPICAL_PART_MM, units)
    if not PART_MM[0] <= diagonal <= PART_MM[1]:
        hint = f'units = "{unit}" would make it {in_words(size * MM_PER_UNIT[unit])}' if unit else "check its export"
        raise MeshError(f"is {in_words(diagonal)} across when read in {UNIT_NAMES[units]}; {hint}", file=file)
    if _overlap(bounds, region):
        return
    for other, per in MM_PER_UNIT.items():
        scale = per / MM_PER_UNIT[units]
        believable = TYPICAL_PART_MM[0] <= size * per <= TYPICAL_PART_MM[1]
        if other != units and believable and _overlap(bounds * scale, region):
            raise MeshError(
                f"lies away from the corner and is {in_words(diagonal)} across when read in {UNIT_NAMES[units]}; "
                f'units = "{other}" would put it at the corner, {in_words(size * per)} across',
                file=file,
            )


def _overlap(a: Array, b: Array) -> bool:
    return bool(((a[0] <= b[1]) & (b[0] <= a[1])).all())
