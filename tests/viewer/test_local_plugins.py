"""Plugin files that a project names: run only when the user has allowed their present content."""

from __future__ import annotations

from pathlib import Path

import pytest

from knucklepath.kinematics.errors import ProjectError
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.project import load_project

PLUGIN = """
from dataclasses import replace
from knucklepath.plugins import hookimpl
from knucklepath.plugins.layouts.double_a_arm import LAYOUT

@hookimpl
def knucklepath_layouts():
    return [replace(LAYOUT, id="my-arms")]
"""


def message_of(path: Path, registry: Registry, allow_plugins: bool = False) -> str:
    """The one message that a project gives which cannot be loaded."""
    with pytest.raises(ProjectError) as caught:
        load_project(path, registry, allow_plugins)
    assert len(str(caught.value).splitlines()) == 1
    return str(caught.value)


@pytest.fixture
def own_config(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Keep what the test allows out of the user's own settings."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))


@pytest.fixture
def plugin_project(full_project: Path, own_config: None) -> Path:
    """A project whose layout comes from a plugin file beside it, which leaves a mark when it runs."""
    text = full_project.read_text().replace('"double-a-arm"', '"my-arms"\nplugins = ["my_layout.py"]')
    full_project.write_text(text)
    mark = f"from pathlib import Path\nPath({str(full_project.parent / 'ran')!r}).touch()\n"
    (full_project.parent / "my_layout.py").write_text(mark + PLUGIN)
    return full_project


def test_a_plugin_file_runs_only_when_allowed_and_again_only_with_the_same_content(
    plugin_project: Path, registry: Registry
) -> None:
    ran = plugin_project.parent / "ran"
    assert "--allow-plugins" in message_of(plugin_project, registry)
    assert not ran.exists()
    assert load_project(plugin_project, registry, allow_plugins=True).layout.id == "my-arms"
    assert ran.exists()
    # remembered by content
    assert load_project(plugin_project, registry).layout.id == "my-arms"
    ran.unlink()
    plugin = plugin_project.parent / "my_layout.py"
    plugin.write_text(plugin.read_text() + "# changed\n")
    assert "my_layout.py" in message_of(plugin_project, registry)
    assert not ran.exists()


@pytest.mark.parametrize(
    ("name", "hint"),
    [
        ("../my_layout.py", "out of the project folder"),
        ("my_layout.txt", "not a Python file"),
        ("my_layoot.py", "did you mean 'my_layout.py'"),
    ],
)
def test_a_plugin_path_that_cannot_be_is_refused(
    name: str, hint: str, plugin_project: Path, registry: Registry
) -> None:
    plugin_project.write_text(plugin_project.read_text().replace("my_layout.py", name))
    message = message_of(plugin_project, registry, allow_plugins=True)
    assert hint in message
    assert "plugins[1]" in message


def test_a_broken_plugin_file_is_named_with_its_reason(plugin_project: Path, registry: Registry) -> None:
    (plugin_project.parent / "my_layout.py").write_text("raise RuntimeError('no\\ngearbox oil')\n")
    message = message_of(plugin_project, registry, allow_plugins=True)
    assert "my_layout.py is broken" in message
    assert "gearbox oil" in message
