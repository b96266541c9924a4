"""The shipped demo: small, sound, and with just one pair that is too tight."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from knucklepath.kinematics.clearance.inside import is_closed
from knucklepath.kinematics.clearance.pairs import pairs_to_check
from knucklepath.kinematics.clearance.primitives import signed_volume
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.motion import find_limit, solve_motion
from knucklepath.viewer.project import Project, load_project

ASSETS = Path(__file__).parents[2] / "assets"
DEMO = ASSETS / "hill_climb_front"


@pytest.fixture(scope="module")
def demo() -> Project:
    return load_project(DEMO)


def test_the_demo_is_small_and_says_that_it_is_invented() -> None:
    assert sum(path.stat().st_size for path in DEMO.rglob("*") if path.is_file()) < 3_000_000
    assert "invented" in next(DEMO.glob("*.toml")).read_text()


def test_every_mesh_is_closed_and_wound_outward(demo: Project) -> None:
    assert len(demo.parts) >= 8
    for part in demo.parts:
        assert is_closed(part.vertices, part.faces), part.name
        assert signed_volume(part.vertices, part.faces) > 0.0, part.name
        assert part.dropped_triangles == 0


def test_its_readings_are_those_of_a_believable_car(demo: Project) -> None:
    motion = solve_motion(demo.corner, np.linspace(-demo.rebound, demo.bump, 12))
    readings = corner_readings(motion)
    assert np.ptp(readings["toe_deg"]) < 0.3
    assert 4.0 < readings["caster_deg"].min() < readings["caster_deg"].max() < 9.0
    assert 20.0 < np.interp(0.0, motion.travel_mm, readings["roll_centre_height_mm"]) < 80.0
    for towards in (1.3 * demo.bump, -1.3 * demo.rebound):
        assert find_limit(demo.corner, "travel", towards) is None


def test_one_pair_is_too_tight_at_full_bump_and_full_lock_and_only_there(demo: Project) -> None:
    assert demo.rack_each_way is not None
    travel = np.linspace(-demo.rebound, demo.bump, 15)
    rack = np.linspace(-demo.rack_each_way, demo.rack_each_way, 11)
    pairs = pairs_to_check(demo.corner, demo.solids(), demo.clearances)
    gaps = sampled_gaps(solve_motion(demo.corner, travel[:, None], rack[None]), pairs)
    assert [gap.between for gap in gaps if gap.verdict != "undecided"] == [("tyre", "bodywork stay")]
    assert (gaps[0].travel_mm, abs(gaps[0].rack_mm)) == (demo.bump, demo.rack_each_way)
    assert gaps[0].verdict == "tight"
    at_rest = sampled_gaps(solve_motion(demo.corner, [[0.0]], [[0.0]]), pairs)
    assert {gap.verdict for gap in at_rest} == {"undecided"}


def test_the_script_makes_the_meshes_again(tmp_path: Path) -> None:
    """Volumes and sizes agree; the very triangles may differ between releases of the modelling library."""
    copy = tmp_path / "assets"
    (copy / "hill_climb_front").mkdir(parents=True)
    for name in ("make_demo.py", "modelling.py", "hill_climb_front/hill-climb-front.toml"):
        (copy / name).write_bytes((ASSETS / name).read_bytes())
    subprocess.run([sys.executable, str(copy / "make_demo.py")], check=True, capture_output=True)
    made = load_project(copy / "hill_climb_front")
    shipped = load_project(DEMO)
    for new, old in zip(made.parts, shipped.parts, strict=True):
        assert new.name == old.name
        assert signed_volume(new.vertices, new.faces) == pytest.approx(signed_volume(old.vertices, old.faces), rel=1e-3)
        np.testing.assert_allclose(new.vertices.max(axis=0), old.vertices.max(axis=0), atol=0.05)
        np.testing.assert_allclose(new.vertices.min(axis=0), old.vertices.min(axis=0), atol=0.05)
