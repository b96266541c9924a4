"""The built-in layouts: one file each, registered through the same hook as any other plugin's."""

from __future__ import annotations

from knucklepath.kinematics.mechanism import Layout
from knucklepath.plugins.hooks import hookimpl


@hookimpl
def knucklepath_layouts() -> list[Layout]:
    """The four layouts that come with the program."""
    from knucklepath.plugins.layouts import double_a_arm, five_link, semi_trailing_arm, strut

    return [double_a_arm.LAYOUT, strut.LAYOUT, five_link.LAYOUT, semi_trailing_arm.LAYOUT]
