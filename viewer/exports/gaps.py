"""Clearance results as JSON and in words."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import asdict
from typing import Any

from knucklepath.kinematics.clearance.gap import ASSUMPTIONS, SAMPLED, Gap
from knucklepath.kinematics.limits import LimitResult
from knucklepath.kinematics.motion import Motion
from knucklepath.viewer import CAUTION
from knucklepath.viewer.exports.tables import figure
from knucklepath.viewer.project import Project


def gaps_json(
    motion: Motion, gaps: Sequence[Gap], limits: Sequence[LimitResult], tolerance_mm: float, method: str
) -> str:
    """The result as JSON text, worst pair first; ``method`` is "proven" or "sampled"."""
    travel, rack = motion.travel_mm, motion.rack_mm
    result: dict[str, Any] = {
        "motion": {
            "travel_mm": [float(travel.min()), float(travel.max())],
            "rack_mm": [float(rack.min()), float(rack.max())],
        },
        "tolerance_mm": tolerance_mm,
        "method": method,
        "assumes": ASSUMPTIONS if method == "proven" else SAMPLED,
        "caution": CAUTION,
        "pairs": [_pair(gap) for gap in gaps],
        "limits": [asdict(limit) for limit in limits],
    }
    return json.dumps(result, indent=1, allow_nan=False) + "\n"


def _pair(gap: Gap) -> dict[str, Any]:
    pair: dict[str, Any] = {
        "between": list(gap.between),
        "required_mm": gap.required_mm,
        "verdict": gap.verdict,
        "gap_mm": gap.gap_mm,
        "proven_gap_mm": gap.proven_gap_mm,
        "travel_mm": gap.travel_mm,
        "rack_mm": gap.rack_mm,
        "point_a_mm": [float(value) for value in gap.point_a_mm],
        "point_b_mm": [float(value) for value in gap.point_b_mm],
        "evaluations": gap.evaluations,
    }
    if gap.note:
        pair["note"] = gap.note
    return pair


def pose_text(project: Project, gap: Gap | LimitResult) -> str:
    """The pose of a gap or limit in words: "travel +60.0 mm, rack −35.0 mm"."""
    text = f"travel {_signed(gap.travel_mm)} mm"
    return f"{text}, rack {_signed(gap.rack_mm)} mm" if project.corner.steered else text


def _signed(value: float) -> str:
    text = figure(value, "mm")
    return text if text.startswith("−") or text == "0.0" else f"+{text}"
