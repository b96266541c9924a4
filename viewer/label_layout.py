"""Where labels go: never over one another, never out of the frame, leaders at 45°. Pure geometry in px.

Knows no renderer and no type: it is given the size of each label's box. x runs right, y runs down.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TypeAlias

Spot: TypeAlias = tuple[float, float]

#: No picture carries more labels than this.
MOST_LABELS = 6
#: Leaders have one of these lengths, in units of the shortest.
LENGTHS = (1.0, 1.5, 2.2, 3.2, 4.5, 6.0, 8.0)
DIAGONALS = ((1, -1), (1, 1), (-1, -1), (-1, 1))
#: Costs, in units of the shortest leader: of what lies under a label, of an anchor under it, and what staying is worth.
BUSY_COST, ANCHOR_COST, STAY_WORTH = 5.5, 3.0, 8.0
_HALF_ROOT = 0.5**0.5


@dataclass(frozen=True)
class Box:
    """An upright rectangle: left, top, right, bottom."""

    left: float
    top: float
    right: float
    bottom: float

    def overlaps(self, other: Box, margin: float = 0.0) -> bool:
        """True when the two are nearer than ``margin``."""
        return (
            self.left < other.right + margin
            and other.left < self.right + margin
            and self.top < other.bottom + margin
            and other.top < self.bottom + margin
        )

    def holds(self, other: Box) -> bool:
        """True when the other lies within."""
        inside = self.left <= other.left and other.right <= self.right
        return inside and self.top <= other.top and other.bottom <= self.bottom

    def has(self, spot: Spot, margin: float = 0.0) -> bool:
        """True when a spot lies within, or nearer than ``margin``."""
        return (
            self.left - margin <= spot[0] <= self.right + margin
            and self.top - margin <= spot[1] <= self.bottom + margin
        )

    def cut_by(self, a: Spot, b: Spot) -> bool:
        """True when the straight line from a to b enters the box (clipping after Liang and Barsky, from memory)."""
        begin, end = 0.0, 1.0
        for from_, to, low, high in ((a[0], b[0], self.left, self.right), (a[1], b[1], self.top, self.bottom)):
            along = to - from_
            if along == 0.0:
                if not low < from_ < high:
                    return False
                continue
            first, second = sorted(((low - from_) / along, (high - from_) / along))
            begin, end = max(begin, first), min(end, second)
            if begin >= end:
                return False
        return True


@dataclass(frozen=True)
class Wish:
    """A label that wants a place.

    key : its name from picture to picture; anchor : what it points at; size : of its box.
    """

    key: str
    anchor: Spot
    size: tuple[float, float]
    priority: int


@dataclass(frozen=True)
class Placed:
    """A label with its place: a leader from ``anchor`` to ``elbow``, the box beside the elbow.

    choice : direction and length index of the leader, by which a moving picture keeps labels calm.
    """

    key: str
    anchor: Spot
    elbow: Spot
    box: Box
    choice: tuple[int, int, int]


def place(
    wishes: Sequence[Wish],
    frame: Box,
    obstacles: Sequence[Box] = (),
    *,
    leader: float = 24.0,
    margin: float = 6.0,
    most: int = MOST_LABELS,
    busy: Callable[[Box], float] | None = None,
    previous: Mapping[str, Placed] | None = None,
) -> tuple[Placed, ...]:
    """Give places to labels, the smallest ``priority`` first; one that finds none is left out.

    Parameters
    ----------
    frame : labels stay inside; obstacles : boxes that they keep clear of; leader : shortest leader, px;
    margin : smallest distance between boxes, px; busy : how much of a box (0…1) covers what should be seen;
    previous : the places in the last picture, by key, that are kept while they can be.
    """
    anchors = [wish.anchor for wish in wishes]
    placed: list[Placed] = []
    for wish in sorted(wishes, key=lambda wish: wish.priority):
        if len(placed) >= most:
            break
        if not frame.has(wish.anchor):
            continue
        before = previous.get(wish.key) if previous else None
        best: tuple[float, Placed] | None = None
        for number, length in enumerate(LENGTHS):
            for across, down in DIAGONALS:
                found = _candidate(wish, across, down, number, length * leader)
                if not _fits(found, frame, obstacles, placed, margin):
                    continue
                cost = length + BUSY_COST * (busy(found.box) if busy else 0.0)
                cost += ANCHOR_COST * sum(found.box.has(spot, margin) for spot in anchors if spot != wish.anchor)
                if before is not None and before.choice == found.choice:
                    cost -= STAY_WORTH
                if best is None or cost < best[0]:
                    best = (cost, found)
        if best is not None:
            placed.append(best[1])
    return tuple(placed)


def _candidate(wish: Wish, across: int, down: int, number: int, length: float) -> Placed:
    step = length * _HALF_ROOT
    elbow = (wish.anchor[0] + across * step, wish.anchor[1] + down * step)
    width, height = wish.size
    left = elbow[0] if across > 0 else elbow[0] - width
    box = Box(left, elbow[1] - height / 2.0, left + width, elbow[1] + height / 2.0)
    return Placed(wish.key, wish.anchor, elbow, box, (across, down, number))


def _fits(found: Placed, frame: Box, obstacles: Sequence[Box], placed: Sequence[Placed], margin: float) -> bool:
    """Inside the frame, clear of everything, and no leader crosses a label or another leader."""
    if not frame.holds(found.box) or any(found.box.overlaps(box, margin) for box in obstacles):
        return False
    if found.box.has(found.anchor):
        return False
    for other in placed:
        if found.box.overlaps(other.box, margin):
            return False
        if other.box.cut_by(found.anchor, found.elbow) or found.box.cut_by(other.anchor, other.elbow):
            return False
        if _cross(found.anchor, found.elbow, other.anchor, other.elbow):
            return False
    return True


def _cross(a: Spot, b: Spot, c: Spot, d: Spot) -> bool:
    """True when the straight pieces a–b and c–d cross."""

    def side(p: Spot, q: Spot, r: Spot) -> float:
        return (q[0] - p[0]) * (r[1] - p[1]) - (q[1] - p[1]) * (r[0] - p[0])

    return side(a, b, c) * side(a, b, d) < 0.0 and side(c, d, a) * side(c, d, b) < 0.0
