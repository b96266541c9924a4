"""``knucklepath picture``: one pose, drawn."""

from __future__ import annotations

import argparse

import numpy as np

from knucklepath.viewer.commands.arguments import UsageError, check_rack, number, open_project, size
from knucklepath.viewer.exports.picture import write_picture


def run(options: argparse.Namespace) -> int:
    """Draw and write the picture."""
    travel, rack = number(options.travel, "--travel"), number(options.rack, "--rack")
    pixels = size(options.size)
    if not options.out.lower().endswith(".png"):
        raise UsageError(f"{options.out}: pictures are PNG; give a name that ends in .png")
    project = open_project(options.project, options.allow_plugins)
    check_rack(project, np.array([rack]))
    write_picture(
        project,
        options.out,
        travel_mm=travel,
        rack_mm=rack,
        look=options.look,
        show=overlay_names(options.show),
        size=pixels,
        dark=options.dark,
    )
    print(options.out)
    return 0


def overlay_names(text: str | None) -> tuple[str, ...] | None:
    """Read the names of overlays: None is the program's own choice, "none" is no overlay at all."""
    if text is None:
        return None
    return tuple(name.strip() for name in text.split(",") if name.strip() and name.strip() != "none")
