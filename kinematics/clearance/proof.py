"""A proof, over the whole continuous motion, that two parts stay apart — or the pose where they do not.

Branch and bound over the rectangle of travel and rack. A cell of it is done with when a bound shows that no pose in it
brings the parts nearer than a threshold: along one fixed direction a point's path cannot sink below its values at the
cell's corners by more than its curvature allows, and curvature is bounded from the motion's own polynomial. A cell that
cannot be done with is halved along the axis that moves the failing pair more. Knows no project and no pixel.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.boxes import BoxTree
from knucklepath.kinematics.clearance.cells import cell_of, height
from knucklepath.kinematics.clearance.compiled import compiled
from knucklepath.kinematics.clearance.course import Tile, evaluate
from knucklepath.kinematics.clearance.traverse import cell_holds, distance

Array: TypeAlias = NDArray[np.float64]

#: Pairs of boxes that a cell's bound may look at before the cell is halved; it grows as cells shrink, so that small
#: cells are looked at to the end.
FIRST_PATIENCE = 3000
PATIENCE_GROWTH = 1.6
#: Distances and bounds, together, before a search gives up.
MOST_EVALUATIONS = 6000
#: The downhill search from the best pose stops when its steps are below this share of a tile.
FINEST_STEP = 1e-4
FAR = 1e300


@dataclass
class Search:
    """The state of one pair's search: what has been found, and at what cost.

    best : smallest distance found, mm; tile, pose : where; on_a, on_b (3,) : nearest points in the frame of body a.
    """

    a: BoxTree
    b: BoxTree
    tiles: list[Tile]
    best: float = FAR
    tile: Tile | None = None
    pose: tuple[float, float] = (0.0, 0.0)
    on_a: Array | None = None
    on_b: Array | None = None
    distances: int = 0
    cells: int = 0

    @property
    def evaluations(self) -> int:
        """Distances and cell bounds computed."""
        return self.distances + self.cells

    @property
    def error_mm(self) -> float:
        """How far the motion's polynomials lie from solved poses, at most, where tried."""
        return max(tile.error_mm for tile in self.tiles)

    def try_pose(self, tile: Tile, u: float, v: float) -> float:
        """Distance at a pose, if it is below the best so far."""
        self.distances += 1
        pose = evaluate(tile, np.array([u]), np.array([v]))[0]
        value, on_a, on_b = distance(self.a, self.b, pose[:9].reshape(3, 3), pose[9:].copy(), self.best)
        if value < self.best:
            self.best, self.tile, self.pose, self.on_a, self.on_b = float(value), tile, (u, v), on_a, on_b
        return float(value)

    def seed(self) -> None:
        """Try the corners, edges and middle of every tile."""
        for tile in self.tiles:
            lines = [np.linspace(tile.low[k], tile.high[k], 3 if tile.high[k] > tile.low[k] else 1) for k in range(2)]
            for u in lines[0]:
                for v in lines[1]:
                    self.try_pose(tile, float(u), float(v))

    def descend(self, tolerance_mm: float) -> None:
        """Go downhill from the best pose within its tile, halving the steps."""
        tile = self.tile
        if tile is None or self.best <= 0.0:
            return
        width = tile.high - tile.low
        step = width / 4.0
        while (step > FINEST_STEP * width).any() and self.best > 0.0:
            before, (u, v) = self.best, self.pose
            for k, sign in ((0, 1.0), (0, -1.0), (1, 1.0), (1, -1.0)):
                at = np.array([u, v])
                at[k] = np.clip(at[k] + sign * step[k], tile.low[k], tile.high[k])
                if (at != (u, v)).any():
                    self.try_pose(tile, float(at[0]), float(at[1]))
            if before - self.best < 0.25 * tolerance_mm:
                step = step / 2.0

    def prove(self, floor: Callable[[], float]) -> bool:
        """Show that no pose brings the parts nearer than ``floor()``, which may sink while poses are tried.

        Returns
        -------
        True when the whole motion is shown; False when a pose nearer than the floor was found, or the search gave up.
        """
        waiting: list[Any] = [
            (tile, tile.low[0], tile.high[0], tile.low[1], tile.high[1], -1, -1, np.zeros(3), FIRST_PATIENCE)
            for tile in self.tiles
        ]
        spare = self.error_mm
        while waiting:
            if self.best < floor() or self.best <= 0.0 or self.evaluations >= MOST_EVALUATIONS:
                return False
            tile, u0, u1, v0, v1, node_a, node_b, direction, patience = waiting.pop()
            self.cells += 1
            direction = direction.copy()
            held, node_a, node_b, by_u, by_v = _bound(
                self.a,
                self.b,
                (tile.coefficients, tile.low, tile.high, tile.spare),
                (float(u0), float(u1), float(v0), float(v1)),
                floor() + spare,
                node_a,
                node_b,
                int(patience),
                direction,
            )
            if held:
                continue
            u, v = (u0 + u1) / 2.0, (v0 + v1) / 2.0
            self.try_pose(tile, float(u), float(v))
            rest = (node_a, node_b, direction, min(patience * PATIENCE_GROWTH, 1e9))
            if by_u >= by_v:
                waiting += [(tile, u0, u, v0, v1, *rest), (tile, u, u1, v0, v1, *rest)]
            else:
                waiting += [(tile, u0, u1, v0, v, *rest), (tile, u0, u1, v, v1, *rest)]
        return True


@compiled
def _bound(a, b, motion, cell, threshold, hint_a, hint_b, most, direction):
    """Whether a cell holds; else the failing pair, and how much each axis of the cell moves it."""
    coefficients, low, high, spare = motion
    u0, u1, v0, v1 = cell
    poses = cell_of(coefficients, low, high, spare, u0, u1, v0, v1)
    held, node_a, node_b, _ = cell_holds(a, b, threshold, poses, hint_a, hint_b, most, direction)
    by_u, by_v = 0.0, 0.0
    if not held:
        centre = b.centre[node_b]
        corners = np.empty(5)
        bend_u, bend_v = 0.0, 0.0
        for k in range(5):
            corners[k] = height(direction, poses.rotations[k], poses.shifts[k], centre)
            bend_u = max(bend_u, abs(height(direction, poses.bends_u[k], poses.bent_u[k], centre)))
            bend_v = max(bend_v, abs(height(direction, poses.bends_v[k], poses.bent_v[k], centre)))
        by_u = max(abs(corners[2] - corners[1]), abs(corners[4] - corners[3]))
        by_v = max(abs(corners[3] - corners[1]), abs(corners[4] - corners[2]))
        by_u += (u1 - u0) ** 2 * (bend_u + poses.spare_u) / 8.0
        by_v += (v1 - v0) ** 2 * (bend_v + poses.spare_v) / 8.0
    return held, node_a, node_b, by_u, by_v
