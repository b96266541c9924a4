"""Outlines of see-through solids: the edges between what faces the camera and what does not. Knows no overlay."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from vtkmodules.vtkCommonCore import vtkPoints
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData
from vtkmodules.vtkRenderingCore import vtkActor, vtkPolyDataMapper

from knucklepath.viewer.looks import Camera
from knucklepath.viewer.vtk_arrays import set_cells, set_points

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]

OPACITY = 0.40


class Outline:
    """The outline of one solid, found anew for each pose; it shares the solid's matrix.

    vertices (n, 3), faces (m, 3) : the mesh at the design position, mm.
    """

    def __init__(
        self, solid: vtkActor, vertices: Array, faces: Faces, colour: tuple[float, float, float], width_px: float
    ) -> None:
        corners = vertices[faces]
        normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        self._normals, self._middles = normals, corners.mean(axis=1)
        edges, beside = shared_edges(faces)
        # an edge that is a valley is never part of a contour; grooves would only scribble over what is behind
        across = self._middles[beside[:, 1]] - self._middles[beside[:, 0]]
        ridge = np.einsum("ij,ij->i", normals[beside[:, 0]], across) <= 0.0
        self._edges, self._beside = edges[ridge], beside[ridge]
        self._seen: NDArray[np.bool_] = np.zeros(len(self._edges), dtype=bool)
        self._data = vtkPolyData()
        points = vtkPoints()
        set_points(points, vertices)
        self._data.SetPoints(points)
        self._cells = vtkCellArray()
        self._data.SetLines(self._cells)
        mapper: Any = vtkPolyDataMapper()
        mapper.SetInputData(self._data)
        self.actor = vtkActor()
        self.actor.SetMapper(mapper)
        self.actor.SetUserMatrix(solid.GetUserMatrix())
        self.actor.PickableOff()
        look = self.actor.GetProperty()
        look.SetColor(*colour)
        look.SetOpacity(OPACITY)
        look.SetLineWidth(width_px)
        look.LightingOff()

    def show(self, matrix: Array, camera: Camera) -> None:
        """Find the outline for a pose (4, 4) and a camera."""
        seen = self.seen(matrix, camera)
        if np.array_equal(seen, self._seen):
            return
        self._seen = seen
        chosen = self._edges[seen]
        set_cells(self._cells, np.full(len(chosen), 2), chosen.reshape(-1).astype(np.int64))
        self._data.Modified()

    def seen(self, matrix: Array, camera: Camera) -> NDArray[np.bool_]:
        """(e,) True for edges with one side towards the camera and the other away from it."""
        rotation = matrix[:3, :3]
        if camera.look.parallel:
            towards = np.broadcast_to(rotation.T @ camera.look.backward, self._middles.shape)
        else:
            towards = rotation.T @ (camera.position - matrix[:3, 3]) - self._middles
        facing = np.einsum("ij,ij->i", self._normals, towards) > 0.0
        return np.asarray(facing[self._beside[:, 0]] != facing[self._beside[:, 1]])


def shared_edges(faces: Faces) -> tuple[NDArray[np.int32], NDArray[np.int64]]:
    """Edges (e, 2) that exactly two triangles share, and those triangles (e, 2)."""
    count = len(faces)
    edges = np.sort(np.concatenate((faces[:, [0, 1]], faces[:, [1, 2]], faces[:, [2, 0]])), axis=1)
    owner = np.tile(np.arange(count), 3)
    order = np.lexsort((edges[:, 1], edges[:, 0]))
    edges, owner = edges[order], owner[order]
    same = (edges[1:] == edges[:-1]).all(axis=1)
    # an edge of three or more triangles has neighbours on both sides in the sorted list
    lone = same & ~np.concatenate((same[1:], [False])) & ~np.concatenate(([False], same[:-1]))
    first = np.flatnonzero(lone)
    return edges[first].astype(np.int32), np.stack((owner[first], owner[first + 1]), axis=-1)
