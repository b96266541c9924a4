"""A swept envelope as a binary STL."""

from __future__ import annotations

from typing import TYPE_CHECKING

from knucklepath.viewer.exports.stl import binary_stl
from knucklepath.viewer.exports.writing import whole_file

if TYPE_CHECKING:
    from knucklepath.kinematics.clearance.envelope import Envelope

#: What the file's header says.
TITLE = "volume swept by a part, made by knucklepath, mm"


def write_envelope(envelope: Envelope, out: str) -> None:
    """Write the mesh, mm, body frame; all of the file or nothing.

    Raises
    ------
    OutputError : the folder of ``out`` is not there.
    """
    with whole_file(out) as path:
        path.write_bytes(binary_stl((envelope.vertices, envelope.faces), TITLE))
