"""Rotations, rigid motions, twists and the instant screw axis. Pure geometry: knows no mechanism.

One convention throughout: ``x_now = R @ x_design + t``; a twist is angular velocity first, then the velocity
of the body-fixed point that is at the origin, so a body point at p moves with ``v + ω × p``.
Arrays carry leading axes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Angular rates below this (rad per mm, or per unit of input) are a pure translation: an arm of 10¹² mm.
RATE_FLOOR = 1e-12


def cross(a: Array, b: Array) -> Array:
    """Cross product over the last axis, (..., 3) × (..., 3); several times faster than ``numpy.cross``."""
    ax, ay, az = a[..., 0], a[..., 1], a[..., 2]
    bx, by, bz = b[..., 0], b[..., 1], b[..., 2]
    return np.stack((ay * bz - az * by, az * bx - ax * bz, ax * by - ay * bx), axis=-1)


def rotation_from_vector(vector: Array) -> Array:
    """Rotation matrix of a rotation vector (Rodrigues' formula).

    Parameters
    ----------
    vector : (..., 3) axis times angle, rad.

    Returns
    -------
    (..., 3, 3)
    """
    vector = np.asarray(vector, dtype=float)
    angle = np.linalg.norm(vector, axis=-1)
    first = np.sinc(angle / np.pi)[..., None, None]
    second = (0.5 * np.sinc(angle / (2 * np.pi)) ** 2)[..., None, None]
    skew = skew_matrix(vector)
    return np.asarray(np.eye(3) + first * skew + second * (skew @ skew))


def skew_matrix(vector: Array) -> Array:
    """(..., 3) → (..., 3, 3) with ``skew_matrix(a) @ b == a × b``."""
    x, y, z = vector[..., 0], vector[..., 1], vector[..., 2]
    zero = np.zeros_like(x)
    rows = [np.stack(row, axis=-1) for row in ((zero, -z, y), (z, zero, -x), (-y, x, zero))]
    return np.stack(rows, axis=-2)


def rotation_vector(rotation: Array) -> Array:
    """Rotation vector (..., 3), rad, of rotation matrices (..., 3, 3); the inverse of ``rotation_from_vector``.

    Through the quaternion with the largest component first, so that no angle up to π loses digits.
    """
    quaternion = quaternion_from_rotation(rotation)
    scalar, vector = quaternion[..., :1], quaternion[..., 1:]
    flip = np.where(scalar < 0.0, -1.0, 1.0)
    scalar, vector = scalar * flip, vector * flip
    length = np.linalg.norm(vector, axis=-1, keepdims=True)
    angle = 2.0 * np.arctan2(length, scalar)
    with np.errstate(invalid="ignore", divide="ignore"):
        scale = np.where(length > 1e-300, angle / length, 2.0)
    return np.asarray(vector * scale)


def quaternion_from_rotation(rotation: Array) -> Array:
    """Unit quaternions (..., 4), scalar first, of rotation matrices (..., 3, 3).

    S. W. Shepperd, "Quaternion from rotation matrix", J. Guidance and Control 1 (1978) (citation from memory).
    """
    r = np.asarray(rotation, dtype=float)
    trace = r[..., 0, 0] + r[..., 1, 1] + r[..., 2, 2]
    diagonal = np.stack((trace, r[..., 0, 0], r[..., 1, 1], r[..., 2, 2]), axis=-1)
    s0, s1, s2 = r[..., 2, 1] - r[..., 1, 2], r[..., 0, 2] - r[..., 2, 0], r[..., 1, 0] - r[..., 0, 1]
    p01, p02, p12 = r[..., 1, 0] + r[..., 0, 1], r[..., 2, 0] + r[..., 0, 2], r[..., 2, 1] + r[..., 1, 2]
    d1 = 1.0 - trace + 2.0 * r[..., 0, 0]
    d2 = 1.0 - trace + 2.0 * r[..., 1, 1]
    d3 = 1.0 - trace + 2.0 * r[..., 2, 2]
    candidates = np.stack(
        (
            np.stack((1.0 + trace, s0, s1, s2), axis=-1),
            np.stack((s0, d1, p01, p02), axis=-1),
            np.stack((s1, p01, d2, p12), axis=-1),
            np.stack((s2, p02, p12, d3), axis=-1),
        ),
        axis=-2,
    )
    chosen = np.take_along_axis(candidates, np.argmax(diagonal, axis=-1)[..., None, None], axis=-2)[..., 0, :]
    return np.asarray(chosen / np.linalg.norm(chosen, axis=-1, keepdims=True))


@dataclass(frozen=True)
class ScrewAxis:
    """The instant screw axis of a moving body.

    Attributes
    ----------
    direction : (..., 3) unit vector along the angular velocity; nan for a pure translation.
    point : (..., 3) point of the axis nearest the reference point, mm; nan for a pure translation.
    pitch_mm_per_rad : (...) advance along the axis per radian; inf for a pure translation.
    rate : (...) rad per unit of input.
    """

    direction: Array
    point: Array
    pitch_mm_per_rad: Array
    rate: Array


def screw_axis(angular: Array, velocity: Array, at: Array) -> ScrewAxis:
    """Instant screw axis from the motion at one point.

    Parameters
    ----------
    angular : (..., 3) angular velocity, rad per unit.
    velocity : (..., 3) velocity of the body-fixed point at ``at``, mm per unit.
    at : (..., 3) that point, mm.

    Returns
    -------
    ScrewAxis with direction ω/|ω|, point ``at + (ω × v)/|ω|²``, pitch ``ω·v/|ω|²`` (CONVENTIONS: instant screw
    axis; the theorem of Chasles and Mozzi).
    """
    squared = np.sum(angular * angular, axis=-1)
    rate = np.sqrt(squared)
    turning = rate > RATE_FLOOR
    with np.errstate(invalid="ignore", divide="ignore"):
        direction = np.where(turning[..., None], angular / rate[..., None], np.nan)
        point = np.where(turning[..., None], at + cross(angular, velocity) / squared[..., None], np.nan)
        pitch = np.where(turning, np.sum(angular * velocity, axis=-1) / squared, np.inf)
    pitch = np.where(np.isnan(rate), np.nan, pitch)
    return ScrewAxis(direction, point, pitch, rate)
