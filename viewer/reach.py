"""What is said when a pose lies beyond where the mechanism locks."""

from __future__ import annotations

import numpy as np

from knucklepath.kinematics.errors import ReachError
from knucklepath.kinematics.motion import Motion, find_limit


def explain_limit(motion: Motion) -> str:
    """Say how far the mechanism goes when some poses of a motion cannot be reached.

    The limit of travel is sought with the rack where the first such pose has it.
    """
    missed = np.argwhere(~motion.reached)
    nearest = min(missed, key=lambda index: abs(float(motion.travel_mm[tuple(index)])))
    travel, rack = float(motion.travel_mm[tuple(nearest)]), float(motion.rack_mm[tuple(nearest)])
    limit = find_limit(motion.corner, "travel", travel, rack_mm=rack)
    if limit is None:
        return f"{len(missed)} poses cannot be reached on the design branch"
    others = "".join(f" with {name} at {value:+.1f} mm" for name, value in limit.others.items() if value)
    return (
        f"the mechanism locks at {limit.input} {limit.value_mm:+.2f} mm{others}: {limit.reason}. "
        f"{len(missed)} of {motion.reached.size} poses asked for lie beyond"
    )


def require_reached(motion: Motion) -> None:
    """Refuse to go on with poses that cannot be reached.

    Raises
    ------
    ReachError : with the limit and the reason.
    """
    if motion.reached.all():
        return
    missed = np.argwhere(~motion.reached)
    nearest = min(missed, key=lambda index: abs(float(motion.travel_mm[tuple(index)])))
    limit = find_limit(
        motion.corner,
        "travel",
        float(motion.travel_mm[tuple(nearest)]),
        rack_mm=float(motion.rack_mm[tuple(nearest)]),
    )
    value = limit.value_mm if limit else float("nan")
    raise ReachError(explain_limit(motion), input=limit.input if limit else "travel", limit=value)
