"""``knucklepath doctor``: what this machine can do, and what to install where it cannot."""

from __future__ import annotations

import argparse
import os
import platform
import sys
from importlib.metadata import PackageNotFoundError, version

from knucklepath.plugins.registry import load_registry
from knucklepath.viewer.drawing_check import can_draw

#: Packages that commands need, and what for.
PACKAGES = {
    "numpy": "the solver",
    "pluggy": "plugins",
    "tomlkit": "project files",
    "trimesh": "reading meshes",
    "python-fcl": "clearances",
    "pyvista": "pictures and movies",
    "pillow": "lettering and GIF",
}
#: Packages that widen what can be done.
EXTRAS = {"imageio-ffmpeg": ("MP4 movies", "knucklepath[movie]")}


def run(options: argparse.Namespace) -> int:
    """Print the findings; 1 when something that a command needs is missing."""
    print(f"knucklepath {version('knucklepath')}, Python {platform.python_version()} on {platform.platform()}")
    sound = True
    for name, purpose in PACKAGES.items():
        found = _version(name)
        sound &= found is not None
        print(f"  {'ok     ' if found else 'MISSING'} {name} {found or ''}  ({purpose})")
    for name, (purpose, extra) in EXTRAS.items():
        found = _version(name)
        remedy = "" if found else f"; to have it: pip install '{extra}'"
        print(f"  {'ok     ' if found else 'absent '} {name} {found or ''}  ({purpose}{remedy})")
    drawing = can_draw()
    sound &= drawing.ok
    if drawing.ok:
        print("  ok      drawing: pictures and movies can be made without a screen")
    else:
        print(f"  MISSING drawing: {drawing.reason}\n          to have it: {drawing.remedy}")
    display = os.environ.get("DISPLAY") or os.environ.get("WAYLAND_DISPLAY")
    if sys.platform.startswith("linux"):
        print(f"  {'ok      display ' + display if display else 'absent  display: pictures are made without one'}")
    registry = load_registry()
    print(f"layouts: {', '.join(registry.layouts)}")
    print(f"overlays for --show: {', '.join(registry.overlays)}")
    for item in registry.broken:
        print(f"  BROKEN  plugin {item.distribution}: {item.reason}")
    print("Everything is in place." if sound else "Some commands will not work until the above is put right.")
    return 0 if sound else 1


def _version(name: str) -> str | None:
    try:
        return version(name)
    except PackageNotFoundError:
        return None
