"""Which solids must stay apart: from rules with names and patterns, or every two that are not joined."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from itertools import combinations
from typing import Protocol, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.kinematics.wheel import Corner

Array: TypeAlias = NDArray[np.float64]

#: Parts of the wheel that may be named by what they are.
WHEEL_ROLES = ("tyre", "rim")


class PairError(KnucklepathError):
    """A clearance names something that is not there."""


class Rule(Protocol):
    """What must stay apart: two names, either of them "*", and the gap asked for, mm."""

    @property
    def a(self) -> str:
        """One name."""

    @property
    def b(self) -> str:
        """The other name."""

    @property
    def gap(self) -> float:
        """The gap asked for, mm."""

    @property
    def relief(self) -> float:
        """Radius, mm, about the joints that both parts share, inside which they may touch; 0 for none."""


@dataclass(frozen=True)
class Relief:
    """A sphere about a joint of both parts inside which contact is ignored: centre (3,) at design, radius, mm."""

    joint: str
    centre: Array
    radius_mm: float


@dataclass(frozen=True)
class Pair:
    """Two solids, the gap asked of them, mm, and where they may touch."""

    a: Solid
    b: Solid
    required_mm: float
    relief: tuple[Relief, ...] = ()


def pairs_to_check(corner: Corner, solids: Sequence[Solid], rules: Sequence[Rule]) -> tuple[Pair, ...]:
    """Resolve rules into pairs of solids.

    A name is a solid's, or a body's (then it means every solid on that body), or "tyre" or "rim" (the part that
    is it). "*" means every solid that is not
    joined to the other one. A pair that is named is always checked; where two rules speak of one pair the greater
    gap counts, a rule with both names going before one with "*". Without rules every two solids that are not joined
    are checked against touching. Solids that do not move against each other because both stand on the chassis are
    left out.

    Raises
    ------
    PairError : a name is unknown; the message gives the nearest one.
    """
    if not rules:
        return tuple(Pair(a, b, 0.0) for a, b in combinations(solids, 2) if _may_meet(corner, a, b))
    named: dict[frozenset[str], Pair] = {}
    matched: dict[frozenset[str], Pair] = {}
    for rule in rules:
        wild = "*" in (rule.a, rule.b)
        into = matched if wild else named
        for a in _meant(corner, solids, rule.a):
            for b in _meant(corner, solids, rule.b):
                if a.name == b.name or (wild and not _may_meet(corner, a, b)):
                    continue
                key = frozenset((a.name, b.name))
                if key not in into or into[key].required_mm < rule.gap:
                    into[key] = Pair(a, b, rule.gap, _relief(corner, a, b, rule.relief))
    return tuple({**matched, **named}.values())


def _relief(corner: Corner, a: Solid, b: Solid, radius_mm: float) -> tuple[Relief, ...]:
    """Spheres about every joint that two parts share. Both carry the joint's point with them, so it stays a sphere."""
    if radius_mm <= 0.0:
        return ()
    names = corner.mechanism.shared_points(corner.body(a.body), corner.body(b.body))
    if not names:
        raise PairError(f"'{a.name}' and '{b.name}' share no joint, so there is nowhere to give relief; leave it out")
    return tuple(Relief(name, corner.point(name), radius_mm) for name in names)


def _may_meet(corner: Corner, a: Solid, b: Solid) -> bool:
    return not corner.joined(a.body, b.body)


def _meant(corner: Corner, solids: Sequence[Solid], name: str) -> list[Solid]:
    """The solids that a name means."""
    if name == "*":
        return list(solids)
    own = [solid for solid in solids if solid.name in (name, f"{name} tube")]
    if own:
        return own
    on_body = [solid for solid in solids if solid.body == name]
    on_body = on_body or [solid for solid in solids if name in WHEEL_ROLES and solid.role == name]
    if on_body:
        return on_body
    if name in corner.body_names:
        on_body = [solid for solid in solids if corner.body(solid.body) == corner.body(name) and solid.body != "wheel"]
        if on_body:
            return on_body
        raise PairError(f"nothing stands on '{name}', so no gap to it can be measured; give it a part or show its rod")
    if name == "spring":
        raise PairError("the spring-damper changes its length and is not checked yet; leave 'spring' out")
    known = list(dict.fromkeys([*(solid.name for solid in solids), *(solid.body for solid in solids)]))
    near = get_close_matches(name, known, n=1)
    hint = f"did you mean '{near[0]}'? " if near else ""
    raise PairError(f"there is no part '{name}'; {hint}Names: {', '.join(known)}, or \"*\" for all")
