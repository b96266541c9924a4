"""Solids as long-lived VTK actors that are moved by matrix only. Knows no camera and no overlay."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from vtkmodules.vtkCommonDataModel import vtkPolyData
from vtkmodules.vtkCommonMath import vtkMatrix4x4
from vtkmodules.vtkFiltersCore import vtkPolyDataNormals, vtkQuadricDecimation
from vtkmodules.vtkRenderingCore import vtkActor, vtkPolyDataMapper

from knucklepath.kinematics.clearance.primitives import axis_frame, coil, cylinder, merged, signed_volume
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.frames import rotation_from_vector
from knucklepath.kinematics.motion import Motion
from knucklepath.kinematics.wheel import Corner, Spring
from knucklepath.viewer.theme import Theme, unit_rgb
from knucklepath.viewer.vtk_arrays import to_numpy, triangle_data

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]

#: Edges sharper than this, deg, stay sharp in shading.
FEATURE_ANGLE_DEG = 32.0
#: A moving picture is drawn from at most so many triangles; larger scenes are thinned for display.
MOST_TRIANGLES = 50_000
#: Meshes below this are never thinned: there is nothing to gain and a shape to lose.
SMALL_MESH = 1_500
#: Depth units between ranks of solids whose surfaces coincide.
RANK_STEP = 2.0
#: Names of the three pieces that a spring-damper is drawn as.
SPRING, DAMPER, DAMPER_ROD = "spring", "spring damper", "spring damper rod"


def shaded(vertices: Array, faces: Faces) -> vtkPolyData:
    """Vertices (n, 3) and triangles (m, 3) as VTK's mesh with normals; sharp edges are split."""
    normals: Any = vtkPolyDataNormals()
    normals.SetInputData(triangle_data(vertices, faces))
    normals.SetFeatureAngle(FEATURE_ANGLE_DEG)
    normals.ConsistencyOff()
    normals.Update()
    return normals.GetOutput()


def watertight(vertices: Array, faces: Faces) -> bool:
    """True when the mesh is closed, wound consistently and outward: its back faces can never be seen."""
    if len(faces) == 0:
        return False
    edges = np.concatenate((faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]])).astype(np.int64)
    count = int(edges.max()) + 1
    there = edges[:, 0] * count + edges[:, 1]
    back = edges[:, 1] * count + edges[:, 0]
    unique = np.unique(there)
    if len(unique) != len(there) or not np.array_equal(unique, np.unique(back)):
        return False
    return signed_volume(vertices, faces) > 0.0


def thinned(vertices: Array, faces: Faces, share: float) -> tuple[Array, Faces]:
    """Thin a mesh to about a share of its triangles, for display only (quadric error, VTK's filter)."""
    thin: Any = vtkQuadricDecimation()
    thin.SetInputData(triangle_data(vertices, faces))
    thin.SetTargetReduction(1.0 - share)
    thin.Update()
    found = thin.GetOutput()
    kept = to_numpy(found.GetPolys().GetConnectivityArray()).reshape(-1, 3)
    return to_numpy(found.GetPoints().GetData()).astype(float), kept.astype(np.int32)


def display_meshes(solids: tuple[Solid, ...], most: int = MOST_TRIANGLES) -> list[tuple[Array, Faces]]:
    """The solids' meshes as they are drawn: their own, or thinned where the scene is too large to move smoothly."""
    total = sum(len(solid.faces) for solid in solids)
    meshes: list[tuple[Array, Faces]] = [(solid.vertices, solid.faces) for solid in solids]
    if total <= most:
        return meshes
    large = sum(len(faces) for _, faces in meshes if len(faces) > SMALL_MESH)
    share = max((most - (total - large)) / large, 0.02) if large else 1.0
    if share >= 1.0:
        return meshes
    return [thinned(*mesh, share) if len(mesh[1]) > SMALL_MESH else mesh for mesh in meshes]


def solid_actor(vertices: Array, faces: Faces, colour: tuple[float, float, float], rank: int = 0) -> vtkActor:
    """A matt actor at the design position, with a matrix of its own.

    rank : where surfaces of two solids coincide, as balls of two bodies do in a joint, the lower rank is seen.
    """
    mapper: Any = vtkPolyDataMapper()
    mapper.SetResolveCoincidentTopologyToPolygonOffset()
    mapper.SetRelativeCoincidentTopologyPolygonOffsetParameters(0.0, RANK_STEP * rank)
    mapper.SetInputData(shaded(vertices, faces))
    mapper.ScalarVisibilityOff()
    actor = vtkActor()
    actor.SetMapper(mapper)
    actor.SetUserMatrix(vtkMatrix4x4())
    look = actor.GetProperty()
    look.SetColor(*colour)
    look.SetInterpolationToPhong()
    look.SetAmbient(0.24)
    look.SetDiffuse(0.82)
    look.SetSpecular(0.10)
    look.SetSpecularPower(18.0)
    if watertight(vertices, faces):
        look.BackfaceCullingOn()
    return actor


def solid_colour(solid: Solid, theme: Theme) -> tuple[float, float, float]:
    """The part's own colour, or its role's."""
    return unit_rgb(solid.colour) if solid.colour else theme.rgb(solid.role)


def set_matrix(actor: vtkActor, matrix: Array) -> None:
    """Give an actor a pose (4, 4); the data on the way to the screen stay as they are."""
    actor.GetUserMatrix().DeepCopy(matrix.ravel().tolist())
    actor.Modified()


class SpringActors:
    """A straight spring-damper: a coil whose matrix stretches, a damper tube and its rod."""

    def __init__(self, spring: Spring, theme: Theme) -> None:
        self.spring = spring
        along = spring.moving - spring.chassis
        self.length = length = float(np.linalg.norm(along))
        self._along = along / length
        self._frame = axis_frame(along)
        radius = float(np.clip(0.12 * length, 20.0, 48.0))
        wire = 0.13 * radius
        zero, top = np.zeros(3), np.array([0.0, 0.0, length])
        seat = 0.1 * radius
        coil_vertices, coil_faces = coil(0.84 * length, radius, wire)
        coil_vertices = coil_vertices + 0.08 * top
        plate = (zero, np.array([0.0, 0.0, seat]))
        tube = merged(
            [
                cylinder(zero, 0.58 * top, 0.48 * radius),
                cylinder(plate[0] + 0.07 * top, plate[1] + 0.07 * top, 1.18 * radius, 40),
            ]
        )
        rod = merged(
            [
                cylinder(-0.62 * top, zero, 0.22 * radius),
                cylinder(-0.08 * top, plate[1] - 0.08 * top, 1.18 * radius, 40),
            ]
        )
        self.actors = {
            SPRING: solid_actor(coil_vertices, coil_faces, theme.rgb("spring")),
            DAMPER: solid_actor(*tube, theme.rgb("chassis")),
            DAMPER_ROD: solid_actor(*rod, theme.rgb("rod")),
        }

    def show(self, pose: Motion) -> None:
        """Stretch and turn the spring to the pose."""
        for name, matrix in self.matrices(pose).items():
            set_matrix(self.actors[name], matrix)

    def matrices(self, pose: Motion) -> dict[str, Array]:
        """Matrices (4, 4) of the three pieces; the coil's has the stretch along the spring."""
        chassis, moving = self.spring.chassis, pose.point(self.spring.on, self.spring.moving)
        along = moving - chassis
        length = float(np.linalg.norm(along))
        along = along / length
        axis = np.cross(self._along, along)
        sine = float(np.linalg.norm(axis))
        angle = float(np.arctan2(sine, self._along @ along))
        turn = rotation_from_vector(axis * (angle / sine)) if sine > 0.0 else np.eye(3)
        frame = turn @ self._frame
        fixed, rod, stretched = np.eye(4), np.eye(4), np.eye(4)
        fixed[:3, :3] = rod[:3, :3] = frame
        stretched[:3, :3] = frame * np.array([1.0, 1.0, length / self.length])
        fixed[:3, 3] = stretched[:3, 3] = chassis
        rod[:3, 3] = moving
        return {SPRING: stretched, DAMPER: fixed, DAMPER_ROD: rod}


def spring_actors(corner: Corner, solids: tuple[Solid, ...], theme: Theme) -> SpringActors | None:
    """The corner's spring, unless a part stands for it."""
    if corner.spring is None or any("spring" in solid.name.lower() for solid in solids):
        return None
    return SpringActors(corner.spring, theme)
