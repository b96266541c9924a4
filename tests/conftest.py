"""What many tests start from: the installed plugins, and a sound project of each layout."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from knucklepath.kinematics.mechanism import Layout
from knucklepath.plugins.registry import Registry, load_registry
from knucklepath.viewer.starter import make_starter


@pytest.fixture(scope="session")
def registry() -> Registry:
    """Every installed plugin."""
    return load_registry()


@pytest.fixture(params=["double-a-arm", "strut", "five-link", "semi-trailing-arm"])
def layout(request: pytest.FixtureRequest, registry: Registry) -> Layout:
    """Each built-in layout in turn."""
    return registry.layouts[request.param]


@pytest.fixture
def sound_project(tmp_path: Path, registry: Registry) -> Callable[[str], Path]:
    """Write a starter project of a layout, by id, and return its file."""

    def write(layout: str) -> Path:
        return make_starter(tmp_path / layout, registry.layouts[layout], registry)

    return write
