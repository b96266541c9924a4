"""Layouts, readings, overlays and file formats that come in through hooks. Knows ``kinematics`` only."""

from knucklepath.plugins.hooks import HOOK_CONTRACT, Exporter, hookimpl

__all__ = ["HOOK_CONTRACT", "Exporter", "hookimpl"]
