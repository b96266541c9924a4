"""A scene frame against bare VTK drawing the same actors: ``python tests/benchmarks/bench_scene.py``.

Ours: ``Scene.show`` (matrices, overlays, outlines, clipping range) and one rendering. Bare: the same actors in the
same window, their matrices worked out beforehand, overlays left as they are. Frames alternate in one run; the ratio
is of medians. Wanted: at most 1.15.
"""

from __future__ import annotations

import statistics
import time
from importlib.resources import as_file, files
from typing import Any

import numpy as np
import pyvista

from knucklepath.kinematics.clearance.solids import RodStyle, generated_solids
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Wheel
from knucklepath.plugins.registry import load_registry
from knucklepath.viewer.looks import look
from knucklepath.viewer.project import load_project
from knucklepath.viewer.scene import Scene
from knucklepath.viewer.theme import theme

SIZE = (1280, 720)
DEMO = "the demo"
FRAMES, ROUNDS = 40, 6


def example(layout: Layout) -> Corner:
    """A layout's own example as a corner with a spring."""
    centre = np.array(layout.example["wheel.centre"])
    chassis, moving = centre + np.array([-20.0, -310.0, 250.0]), centre + np.array([-5.0, -130.0, -80.0])
    return Corner(
        layout.mechanism(layout.example, steered=layout.steers),
        Wheel(centre, centre[2], camber_deg=-1.0, tyre_width=190.0, rim_diameter=330.0),
        layout.carrier,
        layout.steering_axis,
        spring=Spring(chassis, moving, layout.carrier),
    )


def build(name: str) -> tuple[Any, Scene, Motion]:
    """The shipped demo, or a layout's example, in a scene off screen as a window would show it, and 40 poses of it."""
    registry = load_registry()
    if name == DEMO:
        with as_file(files("knucklepath.assets") / "hill_climb_front") as folder:
            project = load_project(folder, registry)
        corner, solids = project.corner, project.solids()
    else:
        corner = example(registry.layouts[name])
        solids = generated_solids(corner, RodStyle())
    plotter = pyvista.Plotter(off_screen=True, window_size=SIZE, lighting="none")
    plotter.render_window.SetMultiSamples(0)
    scene = Scene(
        plotter,
        corner,
        solids,
        solve_motion(corner, np.linspace(-50.0, 55.0, 56)),
        overlays=[overlay for overlay in registry.overlays.values() if "corner" in overlay.standard],
        theme=theme(dark=False),
    )
    scene.look(look("corner"), SIZE[0] / SIZE[1])
    poses = solve_motion(corner, 2.5 + 45.0 * np.sin(np.linspace(0.0, 2.0 * np.pi, FRAMES, endpoint=False)))
    return plotter, scene, poses


def measure(name: str) -> tuple[float, float, int]:
    """Median ms a frame of ours and of bare VTK, and the number of actors."""
    plotter, scene, poses = build(name)
    window = plotter.render_window
    # an outline shares its solid's matrix
    actors = list(scene.actors.values())
    own = [actor.GetUserMatrix() for actor in actors]
    recorded = []
    each = [poses[number] for number in range(FRAMES)]
    for pose in each:
        scene.show(pose)
        window.Render()
        recorded.append([_copy(matrix) for matrix in own])
    ours: list[float] = []
    bare: list[float] = []
    for _ in range(ROUNDS):
        # poses are taken afresh, or what a motion keeps from the last round would make ours look fast
        for number, matrices in enumerate(recorded):
            pose = poses[number]
            begin = time.perf_counter()
            scene.show(pose)
            window.Render()
            middle = time.perf_counter()
            for actor, matrix, now in zip(actors, own, matrices, strict=True):
                matrix.DeepCopy(now)
                actor.Modified()
            # any program must do this before it draws, or moving bodies are cut open
            scene.renderer.ResetCameraClippingRange()
            window.Render()
            bare.append(time.perf_counter() - middle)
            ours.append(middle - begin)
    count = scene.renderer.GetActors().GetNumberOfItems()
    plotter.close()
    return 1e3 * statistics.median(ours), 1e3 * statistics.median(bare), count


def _copy(matrix: Any) -> Any:
    copied = type(matrix)()
    copied.DeepCopy(matrix)
    return copied


def main() -> None:
    """Print the ratio for the demo and for each built-in layout."""
    for name in (DEMO, "double-a-arm", "strut", "five-link", "semi-trailing-arm"):
        ours, bare, count = measure(name)
        print(
            f"{name:18} {count:3d} actors, {SIZE[0]}x{SIZE[1]}: ours {ours:.1f} ms, "
            f"bare {bare:.1f} ms, ratio {ours / bare:.3f}"
        )


if __name__ == "__main__":
    main()
