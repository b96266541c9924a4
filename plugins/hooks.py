"""The hook contract: everything a plugin can bring, and nothing else.

A distribution announces a module under the entry-point group ``knucklepath``; functions in it that are named as
below and marked with ``hookimpl`` are called. All hooks are optional. Built-ins come in through the same hooks.

Example
-------
::

    from knucklepath.plugins import hookimpl

    @hookimpl
    def knucklepath_layouts():
        return [MY_LAYOUT]
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import pluggy

if TYPE_CHECKING:
    from knucklepath.kinematics.corner import Reading
    from knucklepath.kinematics.mechanism import Layout
    from knucklepath.plugins.overlays.glyphs import Overlay

#: Version of this contract. It goes up when a hook changes so that old plugins would misbehave.
HOOK_CONTRACT = 1
#: The entry-point group, and pluggy's project name.
GROUP = "knucklepath"

hookspec = pluggy.HookspecMarker(GROUP)
hookimpl = pluggy.HookimplMarker(GROUP)


@dataclass(frozen=True)
class Exporter:
    """A file format for a project's motion.

    id : the name; suffix : ".csv"; title : for people; write : (project, path) → None.
    """

    id: str
    suffix: str
    title: str
    write: Callable[[Any, Any], None]


@hookspec
def knucklepath_layouts() -> Sequence[Layout]:  # type: ignore[empty-body]
    """Suspension layouts. Each must pass the mobility audit with its own example geometry."""


@hookspec
def knucklepath_readings() -> Sequence[Reading]:  # type: ignore[empty-body]
    """Named numbers computed from a ``Motion``; they join every table, curve and picture."""


@hookspec
def knucklepath_overlays() -> Sequence[Overlay]:  # type: ignore[empty-body]
    """Things to draw over the bodies: a function from the state to glyphs."""


@hookspec
def knucklepath_exporters() -> Sequence[Exporter]:  # type: ignore[empty-body]
    """File formats."""
