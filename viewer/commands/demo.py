"""``knucklepath demo``: the shipped demo, from project file to pictures, movie and tables."""

from __future__ import annotations

import argparse
import json
import shutil
from importlib.resources import as_file, files
from pathlib import Path

from knucklepath.viewer.commands import clearance, sweep
from knucklepath.viewer.commands.arguments import UsageError, open_project
from knucklepath.viewer.commands.progress import counting
from knucklepath.viewer.drawing_check import can_draw

#: The demo's folder in the assets.
DEMO = "hill_climb_front"


def run(options: argparse.Namespace) -> int:
    """Write the demo's results; what is found in the demo is no fault of the call, so the status is 0.

    1 when this machine cannot draw: the tables are written, the remedy is said.
    """
    folder = Path(options.folder)
    if folder.exists() and not folder.is_dir():
        raise UsageError(f"--folder: {folder} is a file; give a folder")
    project_folder = folder / "project"
    folder.mkdir(parents=True, exist_ok=True)
    with as_file(files("knucklepath.assets") / DEMO) as source:
        shutil.copytree(source, project_folder, dirs_exist_ok=True, ignore=shutil.ignore_patterns("__pycache__"))
    project = str(project_folder)
    print(f"The demo is an invented car. Its project is in {project_folder}; results go to {folder}.\n")
    common = {"project": project, "allow_plugins": False, "quiet": True}
    table = argparse.Namespace(**common, travel=None, rack=None, csv=str(folder / "sweep.csv"))
    sweep.run(table)
    readable = argparse.Namespace(**common, travel=None, rack="0", csv=None)
    sweep.run(readable)
    print()
    gaps = argparse.Namespace(
        **common, json=str(folder / "gaps.json"), tolerance="0.05", pair=None, map=str(folder / "gap-map.png")
    )
    clearance.run(gaps)
    print()
    drawing = can_draw()
    if not drawing.ok:
        print(f"No pictures: {drawing.reason}\nTo have them: {drawing.remedy}\nThen call 'knucklepath demo' again.")
        return 1
    _draw(project, folder)
    print(f"\nLook at {folder / 'corner.png'} and {folder / 'travel.gif'} first. Then try, say:")
    print(f"  knucklepath picture {project} lock.png --travel 50 --rack 30 --look top")
    return 0


def _draw(project_path: str, folder: Path) -> None:
    from knucklepath.viewer.exports.movie import write_movie
    from knucklepath.viewer.exports.picture import write_picture

    project = open_project(project_path, allow_plugins=False, quiet=True)
    worst = json.loads((folder / "gaps.json").read_text(encoding="utf-8"))["pairs"][0]
    poses = (
        ("corner", "corner", 0.0, 0.0),
        ("front", "front", 0.0, 0.0),
        ("side", "side", 0.0, 0.0),
        ("top", "top", 0.0, 0.0),
        ("tightest", "top", worst["travel_mm"], worst["rack_mm"]),
    )
    for name, look, travel, rack in poses:
        out = folder / f"{name}.png"
        write_picture(project, str(out), travel_mm=travel, rack_mm=rack, look=look)
        print(out)
    with counting("frames") as progress:
        write_movie(project, str(folder / "travel.gif"), progress=progress)
    print(folder / "travel.gif")
