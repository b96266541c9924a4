"""Whatever stands in the file, the loader gives a project or one message: nothing else comes out of it."""

from __future__ import annotations

import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tomlkit
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.plugins.registry import Registry, load_registry
from knucklepath.viewer.project import Project, load_project
from knucklepath.viewer.toml_lines import find_lines

LAYOUTS = ("double-a-arm", "strut", "five-link", "semi-trailing-arm")
EASY = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@pytest.fixture(scope="module")
def texts(tmp_path_factory: pytest.TempPathFactory) -> dict[str, tuple[Path, str]]:
    """A sound project of each layout: its folder, and its text."""
    from knucklepath.viewer.starter import make_starter

    installed = load_registry()
    made = {}
    for layout in LAYOUTS:
        file = make_starter(tmp_path_factory.mktemp("sound") / layout, installed.layouts[layout], installed)
        made[layout] = (file.parent, file.read_text())
    return made


def outcome(content: bytes, folder: Path, registry: Registry) -> Project | str:
    """Load some content as a project file beside the parts of a sound project: the project, or the message."""
    with tempfile.NamedTemporaryFile(dir=folder, suffix=".toml") as file:
        file.write(content)
        file.flush()
        try:
            project = load_project(file.name, registry)
        except KnucklepathError as error:
            message = str(error)
            assert len(message.splitlines()) == 1
            assert Path(file.name).name in message
            assert message.encode()
            return message
    assert isinstance(project, Project)
    return project


@EASY
@given(content=st.binary(max_size=400))
def test_any_bytes(content: bytes, texts: dict[str, tuple[Path, str]], registry: Registry) -> None:
    assert isinstance(outcome(content, texts["strut"][0], registry), str)


@EASY
@given(content=st.text(max_size=300))
def test_any_text(content: str, texts: dict[str, tuple[Path, str]], registry: Registry) -> None:
    assert isinstance(outcome(content.encode(errors="ignore"), texts["strut"][0], registry), str)


numbers = st.one_of(
    st.integers(-(10**30), 10**30),
    st.floats(),
    st.sampled_from([0, 1, -1, 1e-9, 1e6, 1e12, 1e308, float("nan"), float("inf")]),
)
words = st.one_of(
    st.sampled_from(
        ["mm", "in", "knuckle", "wheel", "rack", "chassis", "tyre", "*", "", "../x", "/x", "strut", "\0", "a\nb"]
    ),
    st.text(max_size=12),
)
scalars = st.one_of(numbers, words, st.booleans())
values: st.SearchStrategy[Any] = st.recursive(
    scalars,
    lambda inner: st.one_of(
        st.lists(inner, max_size=4),
        st.lists(numbers, min_size=3, max_size=3),
        st.dictionaries(st.one_of(words, st.sampled_from(["name", "on", "mesh", "gap"])), inner, max_size=3),
    ),
    max_leaves=6,
)


def places(data: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """Every place in a document."""
    steps: list[Any] = []
    if isinstance(data, dict):
        steps = list(data)
    elif isinstance(data, list):
        steps = list(range(len(data)))
    found = [] if not path else [path]
    for step in steps:
        found += places(data[step], (*path, step))
    return found


@settings(EASY, max_examples=200)
@given(layout=st.sampled_from(LAYOUTS), data=st.data())
def test_any_value_at_any_key(
    layout: str, data: st.DataObject, texts: dict[str, tuple[Path, str]], registry: Registry
) -> None:
    folder, text = texts[layout]
    document = tomlkit.parse(text).unwrap()
    path = data.draw(st.sampled_from(places(document)))
    here = document
    for step in path[:-1]:
        here = here[step]
    how = data.draw(st.sampled_from(["replace", "remove", "rename", "add"]))
    if how == "remove" or (how != "replace" and isinstance(here, list)):
        del here[path[-1]]
    elif how == "rename":
        here[data.draw(words)] = here.pop(path[-1])
    elif how == "add":
        here[data.draw(words)] = data.draw(values)
    else:
        here[path[-1]] = data.draw(values)
    try:
        changed = tomlkit.dumps(document)
    except ValueError:
        # a mixture that TOML has no way to write
        return
    outcome(changed.encode(errors="ignore"), folder, registry)


SIGNS = ["", "[", "]", '"', "=", "\n", ".", "-", "e9", "nan", "[[", "'''", "{", "#"]


def cut(text: str, at: int, length: int, put: str) -> str:
    return text[:at] + put + text[at + length :]


def twice(text: str, at: int, length: int, put: str) -> str:
    return text[:at] + text[at : at + 8 * length] * 2 + text[at + 8 * length :]


@settings(EASY, max_examples=200)
@given(
    layout=st.sampled_from(LAYOUTS),
    share=st.floats(0.0, 1.0),
    length=st.integers(0, 30),
    put=st.one_of(
        st.sampled_from(["", "[", "]", '"', "=", "\n", ".", "-", "e9", "nan", "[[", "'''", "{", "#"]),
        st.text(max_size=6),
    ),
    change=st.sampled_from([cut, twice]),
)
def test_any_small_damage_to_a_sound_file(
    layout: str,
    share: float,
    length: int,
    put: str,
    change: Callable[[str, int, int, str], str],
    texts: dict[str, tuple[Path, str]],
    registry: Registry,
) -> None:
    folder, text = texts[layout]
    damaged = change(text, int(share * len(text)), length, put)
    outcome(damaged.encode(errors="ignore"), folder, registry)


@settings(EASY, max_examples=40)
@given(
    factors=st.lists(st.floats(-3.0, 3.0), min_size=60, max_size=60),
    layout=st.sampled_from(LAYOUTS),
)
def test_any_geometry(
    factors: list[float], layout: str, texts: dict[str, tuple[Path, str]], registry: Registry
) -> None:
    folder, text = texts[layout]
    document = tomlkit.parse(text).unwrap()
    del document["parts"]
    waiting = iter(factors)
    for table in document["points"].values():
        for name, point in table.items():
            # nobody gives more than a thousandth of a millimetre
            table[name] = [round(value * next(waiting), 3) for value in point]
    project = outcome(tomlkit.dumps(document).encode(), folder, registry)
    if isinstance(project, Project):
        assert all(np.isfinite(solid.vertices).all() for solid in project.solids())


def test_undamaged_files_load(texts: dict[str, tuple[Path, str]], registry: Registry) -> None:
    for folder, text in texts.values():
        assert isinstance(outcome(text.encode(), folder, registry), Project)


@EASY
@given(text=st.text(alphabet="ab.=[]{}\"'\\#\n 1,\r\t", max_size=60))
def test_the_line_scanner_never_fails_and_stays_inside_the_text(text: str) -> None:
    lines = find_lines(text)
    assert all(1 <= line <= text.count("\n") + 1 for line in lines.places.values())
