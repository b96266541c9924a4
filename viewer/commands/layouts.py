"""``knucklepath layouts``: what is installed, what it needs, what is broken."""

from __future__ import annotations

import argparse
from difflib import get_close_matches

from knucklepath.kinematics.mechanism import Layout
from knucklepath.plugins.registry import Registry, load_registry
from knucklepath.viewer.commands.arguments import UsageError


def run(options: argparse.Namespace) -> int:
    """List layouts, or one layout with its points."""
    from rich.console import Console

    registry = load_registry()
    console = Console()
    if options.id is None:
        _list(registry, console)
    elif options.id in registry.layouts:
        _one(registry.layouts[options.id], registry, console)
    else:
        near = get_close_matches(options.id, registry.layouts, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        broken = [item for item in registry.broken if f"'{options.id}'" in item.reason]
        why = (
            f" A plugin that would bring it is broken: {broken[0].distribution}: {broken[0].reason}." if broken else ""
        )
        raise UsageError(f"there is no layout '{options.id}'; {hint}Layouts: {', '.join(registry.layouts)}.{why}")
    return 0


def _list(registry: Registry, console: object) -> None:
    from rich.console import Console
    from rich.markup import escape
    from rich.table import Table

    assert isinstance(console, Console)
    table = Table(box=None, header_style="bold", padding=(0, 1))
    for heading in ("layout", "what it is", "points", "from"):
        table.add_column(heading)
    for layout in registry.layouts.values():
        table.add_row(layout.id, layout.title, str(len(layout.point_names)), registry.origin[layout.id])
    console.print(table)
    for item in registry.broken:
        hook = f" ({item.hook})" if item.hook else ""
        console.print(f"[bold]broken:[/bold] {escape(item.distribution)}{hook}: {escape(item.reason)}")


def _one(layout: Layout, registry: Registry, console: object) -> None:
    from rich.console import Console
    from rich.table import Table

    assert isinstance(console, Console)
    console.print(f"[bold]{layout.title}[/bold]  ({layout.id}, from {registry.origin[layout.id]})")
    if layout.description:
        console.print(layout.description)
    table = Table(box=None, header_style="bold", padding=(0, 1))
    for heading in ("table", "point", "what it is", "example, mm"):
        table.add_column(heading)
    for name, points in layout.points.items():
        for point, about in points.items():
            example = ", ".join(f"{value:g}" for value in layout.example[f"{name}.{point}"])
            table.add_row(f"points.{name}", point, about, example)
    console.print(table)
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    console.print(f"bodies: {', '.join(mechanism.body_names)}", highlight=False)
    steered = "steers with [rack]" if layout.steers else "does not steer"
    console.print(f"{steered}; the wheel stands on '{layout.carrier}'", highlight=False)
