"""The 3D scene: long-lived actors moved by matrix, overlays drawn from glyphs, one camera. Knows no window and no file.

The scene is a function of the state: ``Scene.show(pose, case)`` sets matrices and glyphs and computes no mechanics.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from vtkmodules.vtkRenderingCore import vtkActor, vtkLight

from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.mechanism import CHASSIS
from knucklepath.kinematics.motion import Motion
from knucklepath.kinematics.wheel import Corner
from knucklepath.plugins.overlays.glyphs import Glyph, Label, Overlay, State
from knucklepath.viewer.glyph_shapes import Shapes, shapes
from knucklepath.viewer.looks import Camera, Look, frame
from knucklepath.viewer.scene_glyphs import GlyphActors
from knucklepath.viewer.scene_outline import Outline
from knucklepath.viewer.scene_solids import (
    MOST_TRIANGLES,
    display_meshes,
    set_matrix,
    solid_actor,
    solid_colour,
    spring_actors,
)
from knucklepath.viewer.theme import SEE_THROUGH, Theme

Array: TypeAlias = NDArray[np.float64]

#: Bodies that the camera does not try to fit into the picture.
NOT_FRAMED = (CHASSIS, "rack")
#: Directions whose farthest vertices stand for a solid when the camera is placed.
_SPREAD = np.array([[x, y, z] for x in (-1, 0, 1) for y in (-1, 0, 1) for z in (-1, 0, 1) if (x, y, z) != (0, 0, 0)])
#: Poses of the path that the camera considers.
FRAMED_POSES = 9


@dataclass(frozen=True)
class KeyedLabel:
    """A label with a name that it keeps from pose to pose: its overlay and its number there."""

    key: str
    label: Label


class Scene:
    """A corner on a plotter.

    Parameters
    ----------
    plotter : a pyvista plotter, of a window or off screen, without lights.
    corner, solids : what is drawn; solids at the design position, mm.
    path : the motion over travel (1-D) that overlays draw and the camera keeps in the picture.
    overlays : drawn in this order; see ``overlays``.
    theme : colours. pixel_ratio : how much larger than designed lines and dots are, in px of the plotter.
    most_triangles : larger scenes are thinned for display.
    """

    def __init__(
        self,
        plotter: Any,
        corner: Corner,
        solids: Sequence[Solid],
        path: Motion,
        *,
        overlays: Iterable[Overlay] = (),
        theme: Theme,
        pixel_ratio: float = 1.0,
        most_triangles: int = MOST_TRIANGLES,
    ) -> None:
        self.plotter, self.corner, self.solids, self.path, self.theme = plotter, corner, tuple(solids), path, theme
        self.renderer: Any = plotter.renderer
        self.actors: dict[str, vtkActor] = {}
        self.labels: tuple[KeyedLabel, ...] = ()
        self.glyphs: tuple[Glyph, ...] = ()
        self.faults: dict[str, str] = {}
        self.camera: Camera | None = None
        self._glyph_actors = GlyphActors(self.renderer, theme, pixel_ratio)
        self._bodies: dict[str, list[vtkActor]] = {}
        self._outlines: dict[str, tuple[str, Outline]] = {}
        meshes = display_meshes(self.solids, most_triangles)
        for rank, (solid, mesh) in enumerate(zip(self.solids, meshes, strict=True)):
            actor = solid_actor(*mesh, solid_colour(solid, theme), rank)
            self.actors[solid.name] = actor
            self._bodies.setdefault(solid.body, []).append(actor)
            self.renderer.AddActor(actor)
            if solid.role in SEE_THROUGH:
                outline = Outline(actor, *mesh, theme.rgb("muted"), 1.2 * pixel_ratio)
                self._outlines[solid.name] = (solid.body, outline)
                self.renderer.AddActor(outline.actor)
        self._spring = spring_actors(corner, self.solids, theme)
        if self._spring is not None:
            self.actors.update(self._spring.actors)
            for actor in self._spring.actors.values():
                self.renderer.AddActor(actor)
        self._frame_points = self._points_to_frame()
        self.size_mm = self._size()
        self._overlays: tuple[Overlay, ...] = ()
        self.overlays = tuple(overlays)
        self.renderer.SetBackground(theme.rgb("background"))
        self.renderer.SetUseFXAA(True)
        # blending in the order of the actors is enough for one see-through wheel, and three times as fast
        self.renderer.SetUseOIT(False)
        _light(self.renderer)

    @property
    def overlays(self) -> tuple[Overlay, ...]:
        """What is drawn over the bodies; while there is any, tyre and rim are see-through."""
        return self._overlays

    @overlays.setter
    def overlays(self, overlays: tuple[Overlay, ...]) -> None:
        self._overlays = overlays
        for solid in self.solids:
            if solid.role in SEE_THROUGH:
                self.actors[solid.name].GetProperty().SetOpacity(SEE_THROUGH[solid.role] if overlays else 1.0)
        for _, outline in self._outlines.values():
            outline.actor.SetVisibility(bool(overlays))

    @property
    def outline_actors(self) -> list[vtkActor]:
        """The actors of the see-through solids' outlines."""
        return [outline.actor for _, outline in self._outlines.values()]

    @property
    def glyph_actors(self) -> list[vtkActor]:
        """The actors of all overlays together."""
        return self._glyph_actors.actors

    def look(self, chosen: Look, aspect: float) -> Camera:
        """Place the camera, for the whole path: the same for every pose of a movie.

        aspect : width over height of the picture.
        """
        self.camera = camera = frame(self._frame_points, chosen, aspect)
        view = self.renderer.GetActiveCamera()
        view.SetParallelProjection(chosen.parallel)
        view.SetFocalPoint(camera.focus)
        view.SetPosition(camera.position)
        view.SetViewUp(chosen.up)
        view.SetParallelScale(camera.half_height)
        view.SetViewAngle(2.0 * float(np.degrees(np.arctan2(camera.half_height, camera.distance))))
        self.renderer.ResetCameraClippingRange()
        return camera

    def show(self, pose: Motion, case: Any = None) -> None:
        """Move every actor to a pose of shape () and draw the overlays for it.

        A pose that the mechanism does not reach changes nothing: the scene stays where it was.
        """
        if not bool(pose.reached):
            return
        matrices = {body: pose.matrix(body) for body in self._bodies}
        for body, actors in self._bodies.items():
            for actor in actors:
                set_matrix(actor, matrices[body])
        if self._spring is not None:
            self._spring.show(pose)
        if self.camera is not None and self._overlays:
            for body, outline in self._outlines.values():
                outline.show(matrices[body], self.camera)
        self._draw(State(self.path, pose, self.size_mm, case))
        self.renderer.ResetCameraClippingRange()

    def _draw(self, state: State) -> None:
        glyphs: list[Glyph] = []
        labels: list[KeyedLabel] = []
        made = Shapes()
        for overlay in self._overlays:
            if overlay.id in self.faults:
                continue
            try:
                drawn = [glyph for glyph in overlay.draw(state) if self._is_seen(glyph)]
                made.add(shapes(drawn, self.size_mm))
            except Exception as error:
                # a plugin's overlay that fails is named by whoever shows the picture; the rest is drawn
                self.faults[overlay.id] = f"{type(error).__name__}: {error}"
                continue
            glyphs += drawn
            found = [glyph for glyph in drawn if isinstance(glyph, Label)]
            labels += [KeyedLabel(f"{overlay.id} {number}", label) for number, label in enumerate(found)]
        self.glyphs, self.labels = tuple(glyphs), tuple(labels)
        self._glyph_actors.show(made)

    def _is_seen(self, glyph: Glyph) -> bool:
        return self.camera is None or self.camera.look.shows(glyph.facing)

    def _points_to_frame(self) -> Array:
        """(n, 3) places that the picture must hold: the moving solids' outermost vertices over the path."""
        reached = np.flatnonzero(self.path.reached)
        chosen = reached[np.linspace(0, len(reached) - 1, FRAMED_POSES).round().astype(int)]
        poses = self.path[np.unique(chosen)]
        places = []
        moving = [solid for solid in self.solids if solid.body not in NOT_FRAMED]
        for solid in moving or self.solids:
            directions = np.concatenate((_SPREAD, _circle_directions()))
            extreme = solid.vertices[np.unique((solid.vertices @ directions.T).argmax(axis=0))]
            at = np.einsum("pij,nj->pni", poses.rotation(solid.body), extreme) + poses.translation(solid.body)[:, None]
            places.append(at.reshape(-1, 3))
        return np.concatenate(places)

    def _size(self) -> float:
        """The mechanism's size: the longest side of what the picture must hold."""
        return float(np.ptp(self._frame_points, axis=0).max())


def _circle_directions(count: int = 24) -> Array:
    """Directions in the vertical planes, in which a wheel is widest."""
    angle = np.linspace(0.0, 2.0 * np.pi, count, endpoint=False)
    zero = np.zeros(count)
    return np.concatenate(
        (
            np.stack((np.cos(angle), zero, np.sin(angle)), axis=-1),
            np.stack((zero, np.cos(angle), np.sin(angle)), axis=-1),
        )
    )


def _light(renderer: Any) -> None:
    """One key light from above left, a soft fill from the camera's right."""
    renderer.RemoveAllLights()
    for place, strength in (((-0.9, 1.25, 1.0), 0.86), ((0.8, 0.15, 1.0), 0.42)):
        light = vtkLight()
        light.SetLightTypeToCameraLight()
        light.SetPosition(place)
        light.SetFocalPoint(0.0, 0.0, 0.0)
        light.SetIntensity(strength)
        renderer.AddLight(light)
