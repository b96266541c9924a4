"""The built-in overlays, registered through the same hook as any other plugin's."""

from __future__ import annotations

from typing import TYPE_CHECKING

from knucklepath.plugins.hooks import hookimpl

if TYPE_CHECKING:
    from knucklepath.plugins.overlays.glyphs import Overlay


@hookimpl
def knucklepath_overlays() -> list[Overlay]:
    """All that comes with the program, from the ground up."""
    from knucklepath.plugins.overlays import ground, instant_axis, instant_centres, labels, steering, wheel_path

    return [
        *ground.OVERLAYS,
        *wheel_path.OVERLAYS,
        *instant_axis.OVERLAYS,
        *instant_centres.OVERLAYS,
        *steering.OVERLAYS,
        *labels.OVERLAYS,
    ]
