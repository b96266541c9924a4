"""The shipped demo: small, sound, a believable car, and with just one pair that is too tight."""

from __future__ import annotations

import subprocess
import sys
from itertools import combinations
from pathlib import Path

import numpy as np
import pytest
from manifold3d import Manifold, Mesh

from knucklepath.kinematics.clearance.inside import is_closed
from knucklepath.kinematics.clearance.pairs import pairs_to_check
from knucklepath.kinematics.clearance.primitives import signed_volume
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.motion import Motion, find_limit, solve_motion
from knucklepath.viewer.project import Project, load_project

ASSETS = Path(__file__).parents[2] / "assets"
DEMO = ASSETS / "hill_climb_front"


@pytest.fixture(scope="module")
def demo() -> Project:
    return load_project(DEMO)


@pytest.fixture(scope="module")
def lock(demo: Project) -> float:
    assert demo.rack_each_way is not None
    return demo.rack_each_way


def test_the_demo_is_small_and_says_that_it_is_invented(demo: Project) -> None:
    assert sum(path.stat().st_size for path in DEMO.rglob("*") if path.is_file()) < 3_000_000
    assert sum(len(part.faces) for part in demo.parts) < 55_000
    assert "invented" in next(DEMO.glob("*.toml")).read_text(encoding="utf-8")


def test_every_mesh_is_one_closed_piece_wound_outward(demo: Project) -> None:
    assert len(demo.parts) >= 8
    for part in demo.parts:
        assert is_closed(part.vertices, part.faces), part.name
        assert signed_volume(part.vertices, part.faces) > 0.0, part.name
        assert part.dropped_triangles == 0, part.name
        assert len(_as_manifold(part.vertices, part.faces).decompose()) == 1, part.name


def test_its_readings_are_those_of_a_believable_car(demo: Project) -> None:
    motion = solve_motion(demo.corner, np.linspace(-demo.rebound, demo.bump, 22))
    assert motion.reached.all()
    readings = corner_readings(motion)
    at_design = {name: float(np.interp(0.0, motion.travel_mm, values)) for name, values in readings.items()}
    assert np.ptp(readings["toe_deg"]) < 0.1
    assert 1.5 < np.ptp(readings["camber_deg"]) < 4.0
    assert 4.0 < readings["caster_deg"].min() < readings["caster_deg"].max() < 7.0
    assert 6.0 < at_design["kingpin_inclination_deg"] < 10.0
    assert 0.0 < readings["scrub_radius_mm"].min() < readings["scrub_radius_mm"].max() < 25.0
    assert 20.0 < at_design["roll_centre_height_mm"] < 60.0
    assert readings["roll_centre_height_mm"].min() > 0.0
    spring = demo.corner.spring
    assert spring is not None
    assert spring.shortest is not None
    assert spring.longest is not None
    length = readings["spring_length_mm"]
    assert spring.shortest < length.min() < length.max() < spring.longest


def test_it_steers_far_enough_for_a_hairpin_and_never_locks_up(demo: Project, lock: float) -> None:
    outer, inner = np.abs(corner_readings(solve_motion(demo.corner, 0.0, [-lock, lock]))["toe_deg"])
    assert 20.0 < outer < inner < 25.0
    for towards in (1.3 * demo.bump, -1.3 * demo.rebound):
        assert find_limit(demo.corner, "travel", towards) is None
    for towards in (1.3 * lock, -1.3 * lock):
        assert find_limit(demo.corner, "rack", towards) is None


def test_one_pair_is_too_tight_at_full_bump_and_full_lock_and_only_there(demo: Project, lock: float) -> None:
    travel = np.linspace(-demo.rebound, demo.bump, 15)
    rack = np.linspace(-lock, lock, 11)
    pairs = pairs_to_check(demo.corner, demo.solids(), demo.clearances)
    gaps = sampled_gaps(solve_motion(demo.corner, travel[:, None], rack[None]), pairs)
    assert [gap.between for gap in gaps if gap.verdict != "undecided"] == [("tyre", "bodywork stay")]
    assert (gaps[0].travel_mm, abs(gaps[0].rack_mm)) == (demo.bump, lock)
    assert gaps[0].verdict == "tight"
    for pose in ((0.0, 0.0), (demo.bump, 0.0), (0.0, lock), (0.0, -lock)):
        there = sampled_gaps(solve_motion(demo.corner, [[pose[0]]], [[pose[1]]]), pairs)
        assert {gap.verdict for gap in there} == {"undecided"}, pose


def test_no_two_parts_are_ever_in_the_same_place(demo: Project, lock: float) -> None:
    """Not even where they are joined: each ball has play in its race, the rack in its housing."""
    solids = demo.solids()
    shapes = {solid.name: _as_manifold(solid.vertices, solid.faces) for solid in solids}
    bump, rebound = demo.bump, -demo.rebound
    for travel, rack in ((0.0, 0.0), (bump, lock), (bump, -lock), (rebound, lock), (rebound, -lock)):
        pose = solve_motion(demo.corner, travel, rack)
        placed = {solid.name: shapes[solid.name].transform(_matrix(pose, solid.body)) for solid in solids}
        for a, b in combinations(solids, 2):
            if a.body != b.body:
                shared = (placed[a.name] ^ placed[b.name]).volume()
                assert shared < 1e-2, (a.name, b.name, travel, rack)


def test_the_script_makes_the_meshes_again(tmp_path: Path) -> None:
    """Twice the same bytes here; between releases of the modelling library, the same sizes and volumes."""
    (tmp_path / "hill_climb_front").mkdir()
    for name in ("make_demo.py", "hill_climb_front/hill-climb-front.toml"):
        (tmp_path / name).write_bytes((ASSETS / name).read_bytes())
    written = []
    for _ in range(2):
        subprocess.run([sys.executable, str(tmp_path / "make_demo.py")], check=True, capture_output=True)
        written.append({path.name: path.read_bytes() for path in tmp_path.rglob("*.stl")})
    assert written[0] == written[1]
    assert set(written[0]) == {path.name for path in DEMO.rglob("*.stl")}
    made, shipped = load_project(tmp_path / "hill_climb_front"), load_project(DEMO)
    for new, old in zip(made.parts, shipped.parts, strict=True):
        assert new.name == old.name
        assert signed_volume(new.vertices, new.faces) == pytest.approx(signed_volume(old.vertices, old.faces), rel=1e-3)
        np.testing.assert_allclose(new.vertices.max(axis=0), old.vertices.max(axis=0), atol=0.05)
        np.testing.assert_allclose(new.vertices.min(axis=0), old.vertices.min(axis=0), atol=0.05)


def _as_manifold(vertices: np.ndarray, faces: np.ndarray) -> Manifold:
    return Manifold(Mesh(np.ascontiguousarray(vertices, np.float32), np.ascontiguousarray(faces, np.uint32)))


def _matrix(pose: Motion, body: str) -> np.ndarray:
    return np.column_stack((pose.rotation(body), pose.translation(body)))
