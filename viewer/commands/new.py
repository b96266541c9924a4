"""``knucklepath new``: a starter project."""

from __future__ import annotations

import argparse
from difflib import get_close_matches
from pathlib import Path

from knucklepath.plugins.registry import load_registry
from knucklepath.viewer.commands.arguments import UsageError
from knucklepath.viewer.starter import make_starter


def run(options: argparse.Namespace) -> int:
    """Make the folder and say what to do next."""
    registry = load_registry()
    layout = registry.layouts.get(options.layout)
    if layout is None:
        near = get_close_matches(options.layout, registry.layouts, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        raise UsageError(f"--layout: there is no '{options.layout}'; {hint}Layouts: {', '.join(registry.layouts)}")
    path = make_starter(Path(options.folder), layout, registry)
    print(f"{path} made, with parts in {path.parent / 'parts'}. All numbers in it are invented: put yours in. Next:")
    for command in ("sweep {}", "picture {} corner.png", "clearance {}"):
        print(f"  knucklepath {command.format(options.folder)}")
    return 0
