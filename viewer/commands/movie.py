"""``knucklepath movie``: the motion, drawn."""

from __future__ import annotations

import argparse

import numpy as np

from knucklepath.viewer.commands.arguments import check_rack, number, open_project, size
from knucklepath.viewer.commands.picture import overlay_names
from knucklepath.viewer.commands.progress import counting
from knucklepath.viewer.exports.movie import write_movie


def run(options: argparse.Namespace) -> int:
    """Draw and write the movie."""
    rack, seconds = number(options.rack, "--rack"), number(options.seconds, "--seconds", positive=True)
    pixels = size(options.size)
    project = open_project(options.project, options.allow_plugins)
    check_rack(project, np.array([rack]))
    with counting("frames") as progress:
        write_movie(
            project,
            options.out,
            rack_mm=rack,
            look=options.look,
            show=overlay_names(options.show),
            size=pixels,
            seconds=seconds,
            dark=options.dark,
            progress=progress,
        )
    print(options.out)
    return 0
