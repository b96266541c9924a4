"""A scene frame against bare VTK drawing the same actors: ``python tests/benchmarks/bench_scene.py``.

Ours: ``Scene.show`` (matrices, overlays, outlines, clipping range) and one rendering. Bare: the same actors in the
same window, their matrices worked out beforehand, overlays left as they are. Frames alternate in one run; the ratio
is of medians. Wanted: at most 1.15.
"""

from __future__ import annotations

import statistics
import time
from typing import Any

import numpy as np
import pyvista

from knucklepath.kinematics.clearance.solids import RodStyle, generated_solids
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner, Spring, Wheel
from knucklepath.plugins.registry import load_registry
from knucklepath.viewer.looks import look
from knucklepath.viewer.scene import Scene
from knucklepath.viewer.theme import theme

SIZE = (1280, 720)
FRAMES, ROUNDS = 40, 6


def build(layout_id: str) -> tuple[Any, Scene, Motion]:
    """A layout's own example in a window off screen, as a window would show it, and 40 poses of it."""
    registry = load_registry()
    layout = registry.layouts[layout_id]
    centre = np.array(layout.example["wheel.centre"])
    corner = Corner(
        layout.mechanism(layout.example, steered=layout.steers),
        Wheel(centre, centre[2], camber_deg=-1.0, tyre_width=190.0, rim_diameter=330.0),
        layout.carrier,
        layout.steering_axis,
        spring=Spring(
            centre + np.array([-20.0, -310.0, 250.0]), centre + np.array([-5.0, -130.0, -80.0]), layout.carrier
        ),
    )
    plotter = pyvista.Plotter(off_screen=True, window_size=SIZE, lighting="none")
    plotter.render_window.SetMultiSamples(0)
    overlays = [overlay for overlay in registry.overlays.values() if "corner" in overlay.standard]
    scene = Scene(
        plotter,
        corner,
        generated_solids(corner, RodStyle()),
        solve_motion(corner, np.linspace(-50.0, 60.0, 56)),
        overlays=overlays,
        theme=theme(dark=False),
    )
    scene.look(look("corner"), SIZE[0] / SIZE[1])
    poses = solve_motion(corner, 5.0 + 45.0 * np.sin(np.linspace(0.0, 2.0 * np.pi, FRAMES, endpoint=False)))
    return plotter, scene, poses


def measure(layout_id: str) -> tuple[float, float, int]:
    """Median ms a frame of ours and of bare VTK, and the number of actors."""
    plotter, scene, poses = build(layout_id)
    window = plotter.render_window
    actors = [*scene.actors.values(), *scene.outline_actors]
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
    """Print the ratio for each built-in layout."""
    for layout_id in ("double-a-arm", "strut", "five-link", "semi-trailing-arm"):
        ours, bare, count = measure(layout_id)
        print(
            f"{layout_id:18} {count:3d} actors, {SIZE[0]}x{SIZE[1]}: ours {ours:.1f} ms, "
            f"bare {bare:.1f} ms, ratio {ours / bare:.3f}"
        )


if __name__ == "__main__":
    main()
