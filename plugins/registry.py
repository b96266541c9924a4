"""Discovery of plugins: finds them, checks what they bring, names the broken ones and keeps the rest working."""

from __future__ import annotations

import hashlib
import importlib.metadata
import importlib.util
import sys
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from types import ModuleType
from typing import TYPE_CHECKING, Any

import pluggy

from knucklepath.kinematics.audit import audit
from knucklepath.kinematics.corner import BUILTIN_READINGS, Reading
from knucklepath.kinematics.errors import KnucklepathError, PluginError
from knucklepath.kinematics.mechanism import WHEEL_CENTRE, Layout
from knucklepath.plugins import hooks
from knucklepath.plugins.hooks import GROUP, HOOK_CONTRACT, Exporter

if TYPE_CHECKING:
    from knucklepath.plugins.overlays.glyphs import Overlay


@dataclass(frozen=True)
class Broken:
    """A plugin, or something that it brings, that cannot be used: who, which hook, why."""

    distribution: str
    hook: str | None
    reason: str


@dataclass(frozen=True)
class Registry:
    """Everything that sound plugins bring.

    layouts, overlays, exporters : by id; readings : in order, built-in ones first; broken : what was left out,
    and why; origin : id of a layout, overlay, reading or exporter → the distribution that brought it.
    """

    layouts: Mapping[str, Layout]
    readings: tuple[Reading, ...]
    overlays: Mapping[str, Overlay]
    exporters: Mapping[str, Exporter]
    broken: tuple[Broken, ...]
    origin: Mapping[str, str]


def load_registry(extra_files: Iterable[Path] = ()) -> Registry:
    """Load every installed plugin, and plugin files that the user has allowed.

    Never raises for a broken plugin: it is listed in ``Registry.broken`` and the rest keeps working.
    """
    manager = pluggy.PluginManager(GROUP)
    manager.add_hookspecs(hooks)
    broken: list[Broken] = []
    names: dict[str, str] = {}
    for entry, distribution in _entry_points():
        _register(manager, f"{distribution}:{entry.name}", distribution, entry.load, names, broken)
    for path in extra_files:
        _register(manager, str(path), path.name, partial(_load_file, path), names, broken)
    return _collect(manager, names, broken)


def _entry_points() -> list[tuple[importlib.metadata.EntryPoint, str]]:
    """Entry points with their distributions' names: ours first, the rest by name."""
    found: dict[tuple[str, str], tuple[importlib.metadata.EntryPoint, str]] = {}
    for distribution in importlib.metadata.distributions():
        name = distribution.metadata["Name"] or "unnamed distribution"
        for entry in distribution.entry_points:
            if entry.group == GROUP:
                found.setdefault((name, entry.name), (entry, name))
    return sorted(found.values(), key=lambda pair: (pair[1] != "knucklepath", pair[1].lower(), pair[0].name))


def _register(
    manager: pluggy.PluginManager,
    key: str,
    distribution: str,
    load: Callable[[], Any],
    names: dict[str, str],
    broken: list[Broken],
) -> None:
    """Import one plugin and register it; whatever goes wrong is written down with its distribution's name."""
    plugin: Any = None
    try:
        plugin = load()
        wanted = getattr(plugin, "KNUCKLEPATH_HOOK_CONTRACT", HOOK_CONTRACT)
        if wanted != HOOK_CONTRACT:
            reason = f"made for hook contract {wanted}; this program has {HOOK_CONTRACT}"
            broken.append(Broken(distribution, None, reason))
            return
        manager.register(plugin, name=key)
        manager.check_pending()
        names[key] = distribution
    except pluggy.PluginValidationError as error:
        hook = next((word for word in str(error).replace("'", " ").split() if word.startswith(GROUP + "_")), None)
        broken.append(Broken(distribution, hook, _one_line(error)))
        if plugin is not None and manager.is_registered(plugin):
            manager.unregister(plugin)
    except (Exception, SystemExit) as error:
        broken.append(Broken(distribution, None, f"cannot be imported: {_one_line(error)}"))


def _one_line(error: BaseException) -> str:
    text = " ".join(str(error).split())
    return f"{type(error).__name__}: {text}" if text else type(error).__name__


def _load_file(path: Path) -> ModuleType:
    """Run a plugin file under a name of its own."""
    digest = hashlib.sha256(str(path.resolve()).encode()).hexdigest()[:12]
    name = f"_knucklepath_local_{digest}"
    spec = importlib.util.spec_from_file_location(name, path)
    if spec is None or spec.loader is None:
        raise PluginError("is not a Python file", distribution=path.name)
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    try:
        spec.loader.exec_module(module)
    except BaseException:
        del sys.modules[name]
        raise
    return module


def _collect(manager: pluggy.PluginManager, names: Mapping[str, str], broken: list[Broken]) -> Registry:
    """Call every hook of every plugin on its own, so that one that fails takes nothing else with it."""
    origin: dict[str, str] = {}
    layouts: dict[str, Layout] = {}
    overlays: dict[str, Any] = {}
    exporters: dict[str, Exporter] = {}
    readings: dict[str, Reading] = {reading.id: reading for reading in BUILTIN_READINGS}
    origin.update({name: GROUP for name in readings})
    from knucklepath.plugins.overlays.glyphs import Overlay

    wanted: tuple[tuple[str, type, dict[str, Any], Callable[[Any], None]], ...] = (
        ("knucklepath_layouts", Layout, layouts, check_layout),
        ("knucklepath_readings", Reading, readings, _accept),
        ("knucklepath_overlays", Overlay, overlays, _accept),
        ("knucklepath_exporters", Exporter, exporters, _accept),
    )
    for key, distribution in names.items():
        plugin = manager.get_plugin(key)
        for hook, kind, into, check in wanted:
            for implementation in manager.get_hookcallers(plugin) or ():
                if implementation.name != hook:
                    continue
                try:
                    brought = list(getattr(plugin, hook)())
                except (Exception, SystemExit) as error:
                    broken.append(Broken(distribution, hook, f"raises {_one_line(error)}"))
                    continue
                for item in brought:
                    reason = _refuse(item, kind, into, check, origin)
                    if reason:
                        broken.append(Broken(distribution, hook, reason))
                    else:
                        into[item.id] = item
                        origin[item.id] = distribution
    return Registry(layouts, tuple(readings.values()), overlays, exporters, tuple(broken), origin)


def _refuse(
    item: Any, kind: type, into: Mapping[str, Any], check: Callable[[Any], None], origin: Mapping[str, str]
) -> str | None:
    """Why an item cannot be taken, or None."""
    if not isinstance(item, kind):
        return f"brings a {type(item).__name__} where a {kind.__name__} is expected"
    if item.id in into:  # type: ignore[attr-defined]
        name = item.id  # type: ignore[attr-defined]
        return f"the id '{name}' is taken already, by {origin[name]}"
    try:
        check(item)
    except KnucklepathError as error:
        return f"'{item.id}': {error}"  # type: ignore[attr-defined]
    except Exception as error:
        return f"'{getattr(item, 'id', kind.__name__)}' cannot be checked: {_one_line(error)}"
    return None


def _accept(item: Any) -> None:
    """Take an item whose kind says enough."""


def check_layout(layout: Layout) -> None:
    """Audit a layout with its own example geometry, steered and not.

    Raises
    ------
    MechanismError : a point is missing, the geometry is degenerate, or the mobility is not what the inputs set.
    """
    if WHEEL_CENTRE not in layout.example:
        raise PluginError(f"the example has no {WHEEL_CENTRE}", distribution=layout.id)
    audit(layout.mechanism(layout.example, steered=layout.steers))
    if layout.steers:
        audit(layout.mechanism(layout.example, steered=False))
