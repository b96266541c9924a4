"""The distance of one pair at every pose of a grid, for maps. Not a proof: see ``proved.py``."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.gap import relative_poses
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.kinematics.clearance.proved import Prepared
from knucklepath.kinematics.clearance.traverse import distance_at_each
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]


def gap_grid(corner: Corner, pair: Pair, travel_mm: Array, rack_mm: Array) -> Array:
    """Distances (travel, rack), mm, of a pair over a grid; nan at poses that cannot be reached."""
    first, second = Prepared(pair.a, pair.relief), Prepared(pair.b, pair.relief)
    motion = solve_motion(corner, travel_mm[:, None], rack_mm[None])
    rotations, shifts = relative_poses(motion, pair.a.body, pair.b.body)
    values = np.full(len(rotations), np.nan)
    reached = motion.reached.reshape(-1)
    values[reached] = distance_at_each(
        first.tree, second.tree, np.ascontiguousarray(rotations[reached]), np.ascontiguousarray(shifts[reached])
    )
    return values.reshape(motion.shape)
