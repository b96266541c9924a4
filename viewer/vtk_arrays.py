"""numpy arrays in and out of VTK's own, in one place. Copies always: VTK never holds on to our memory."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util import numpy_support
from vtkmodules.vtkCommonCore import vtkPoints, vtkUnsignedCharArray
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData

Array: TypeAlias = NDArray[np.float64]
Whole: TypeAlias = NDArray[np.int64]

# VTK's helper functions carry no types
_support: Any = numpy_support


def to_vtk(array: NDArray[Any]) -> Any:
    """Any array as VTK's, copied."""
    return _support.numpy_to_vtk(np.ascontiguousarray(array), deep=True)


def to_numpy(array: Any) -> NDArray[Any]:
    """VTK's array as numpy's; it shares memory, so copy what must live on."""
    return np.asarray(_support.vtk_to_numpy(array))


def set_points(points: vtkPoints, places: Array) -> None:
    """Put places (n, 3) into VTK's points, in single precision as the graphics card takes them."""
    points.SetData(to_vtk(places.astype(np.float32)))


def set_cells(cells: vtkCellArray, lengths: Whole, order: Whole) -> None:
    """Make cells of runs of ``lengths`` of the point numbers in ``order``."""
    offsets = np.concatenate((np.zeros(1, dtype=np.int64), np.cumsum(lengths, dtype=np.int64)))
    cells.SetData(
        _support.numpy_to_vtkIdTypeArray(offsets, deep=True),
        _support.numpy_to_vtkIdTypeArray(np.ascontiguousarray(order, dtype=np.int64), deep=True),
    )


def triangle_data(vertices: Array, faces: NDArray[np.int32]) -> vtkPolyData:
    """Vertices (n, 3) and triangles (m, 3) as VTK's mesh."""
    data, points, cells = vtkPolyData(), vtkPoints(), vtkCellArray()
    set_points(points, vertices)
    set_cells(cells, np.full(len(faces), 3), faces.reshape(-1).astype(np.int64))
    data.SetPoints(points)
    data.SetPolys(cells)
    return data


def drawn_pixels(window: Any) -> NDArray[np.uint8]:
    """Draw a render window and read it: (height, width, 3), top row first."""
    window.Render()
    width, height = window.GetSize()
    found = vtkUnsignedCharArray()
    window.GetPixelData(0, 0, width - 1, height - 1, 0, found, 0)
    return np.ascontiguousarray(to_numpy(found).reshape(height, width, 3)[::-1])
