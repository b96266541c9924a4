"""Limits in the project file, and in the clearance command's answer."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from knucklepath.kinematics.errors import ProjectError
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.cli import main
from knucklepath.viewer.project import load_project

LIMITS = """
[[joint_limits]]
joint = "lower_arm.ball_joint"
axis = [0.0, 0.0, 2.0]
greatest_deg = {cone}
[drive_shaft]
inner = [0.0, 200.0, 220.0]
outer = [0.0, 640.0, 205.0]
greatest_inner_deg = 25.0
greatest_plunge = 40.0
"""


def test_limits_are_read_and_checked(
    full_project: Path, registry: Registry, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    text = full_project.read_text()
    full_project.write_text(text + LIMITS.format(cone=60.0))
    project = load_project(full_project, registry)
    assert project.joint_limits[0].axis.tolist() == [0.0, 0.0, 1.0]
    assert project.drive_shaft is not None
    out = tmp_path / "gaps.json"
    main(["clearance", str(full_project), "--json", str(out)])
    limits = {limit["name"]: limit for limit in json.loads(out.read_text())["limits"]}
    assert limits["lower_arm.ball_joint, angle"]["ok"]
    assert {"drive shaft, inner angle", "drive shaft, plunge", "travel to lock-up, bump"} <= set(limits)
    capsys.readouterr()
    full_project.write_text(text + LIMITS.format(cone=2.0))
    assert main(["clearance", str(full_project)]) == 1
    line = next(line for line in capsys.readouterr().out.splitlines() if "lower_arm.ball_joint, angle" in line)
    assert "exceeded" in line
    assert "travel" in line


WRONG = {
    "unknown joint": ('joint = "lower_arm.ball_joint"', 'joint = "lower_arm.pivot"', "no ball joint or rod end"),
    "misspelt joint": (
        'joint = "lower_arm.ball_joint"',
        'joint = "lower_arm.bal_joint"',
        "did you mean 'lower_arm.ball",
    ),
    "axis without direction": ("axis = [0.0, 0.0, 2.0]", "axis = [0.0, 0.0, 0.0]", "has no direction"),
    "cone of nothing": ("greatest_deg = 60.0", "greatest_deg = 0.0", "greatest_deg"),
    "shaft without length": ("outer = [0.0, 640.0, 205.0]", "outer = [0.0, 200.0, 220.0]", "same point"),
    "misspelt key": ("greatest_plunge", "greatest_plung", "greatest_plunge"),
}


@pytest.mark.parametrize("case", WRONG)
def test_wrong_limits_are_refused_with_key_and_line(case: str, full_project: Path, registry: Registry) -> None:
    old, new, hint = WRONG[case]
    text = full_project.read_text() + LIMITS.format(cone=60.0)
    assert old in text
    head, tail = text.split("[[joint_limits]]")
    full_project.write_text(head + "[[joint_limits]]" + tail.replace(old, new))
    with pytest.raises(ProjectError) as caught:
        load_project(full_project, registry)
    assert hint in str(caught.value)
    assert caught.value.line is not None
