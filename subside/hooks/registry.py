"""Finds, loads, refuses and looks up plug-ins."""

from __future__ import annotations

import hashlib
import importlib.util
import inspect
import sys
import warnings
from collections.abc import Iterable
from dataclasses import dataclass
from importlib.metadata import EntryPoint, entry_points
from pathlib import Path
from types import ModuleType
from typing import Any

import pluggy

from subside.errors import InputError, PluginError, nearest
from subside.hooks import specs
from subside.hooks.contracts import EarthModel, Exporter, Law, Plugin, Quantity, Reader
from subside.params import Parameter

__all__ = ["PLUGIN_MODULE", "Registered", "Registry", "registry"]

PLUGIN_MODULE = "subside_plugin_"
"""How the names of modules begin that were loaded from a plug-in file."""

_BASE: dict[str, type[Plugin]] = {
    "reader": Reader, "law": Law, "earth-model": EarthModel, "quantity": Quantity,
    "exporter": Exporter,
}


@dataclass(frozen=True)
class Registered:
    """A plug-in class and where it came from."""

    kind: str
    cls: type[Any]
    origin: str
    version: str

    @property
    def name(self) -> str:
        """The word a scenario uses."""
        return self.cls.name


class Registry:
    """All plug-ins of one process, loaded when first asked for."""

    def __init__(self) -> None:
        self._manager = pluggy.PluginManager("subside")
        self._manager.add_hookspecs(specs)
        self._origin: dict[str, tuple[str, str]] = {}
        self._broken: dict[str, str] = {}
        self._by_kind: dict[str, dict[str, Registered]] = {}
        self._discovered = False

    # -- finding -------------------------------------------------------------------------------

    def discover(self) -> None:
        """Load every entry point of the group ``subside``, in order of name. Once."""
        if self._discovered:
            return
        self._discovered = True
        for entry in sorted(entry_points(group="subside"), key=lambda e: (e.name, e.value)):
            self._load_entry(entry)

    def _load_entry(self, entry: EntryPoint) -> None:
        origin = entry.dist.name if entry.dist else entry.value
        version = entry.dist.version if entry.dist else ""
        try:
            self._register(entry.load(), entry.name, origin, version)
        except Exception as error:
            if origin == "subside":
                raise
            # A stranger's broken plug-in must not stop a run that does not need it.
            reason = f"{type(error).__name__}: {error}"
            self._broken[entry.name] = f"{origin} {version} ({entry.value}): {reason}"
            warnings.warn(f"plug-in '{entry.name}' of {origin} {version} is left out: {reason}",
                          stacklevel=2)

    def load_file(self, path: Path) -> None:
        """Load a plug-in file that the user named on purpose."""
        if not path.is_file():
            raise PluginError(f"plug-in file '{path}' does not exist; check --plugin, or plugins "
                              "in the scenario (relative to the scenario file).")
        self.discover()
        digest = hashlib.sha256(path.read_bytes()).hexdigest()
        name = f"{PLUGIN_MODULE}{path.stem}_{digest[:12]}"
        if self._manager.has_plugin(name):
            return
        spec = importlib.util.spec_from_file_location(name, path)
        if spec is None or spec.loader is None:
            raise PluginError(f"plug-in file '{path}' is not a Python file (.py).")
        module = importlib.util.module_from_spec(spec)
        sys.modules[name] = module
        try:
            spec.loader.exec_module(module)
            self._register(module, name, str(path), f"sha256:{digest[:12]}")
            for kind in specs.HOOKS:  # what is wrong shows now, whatever the run will ask for
                self.all(kind)
        except BaseException as error:
            self._forget(module, name)
            if isinstance(error, PluginError) or not isinstance(error, (Exception, SystemExit)):
                raise
            raise PluginError(f"plug-in file '{path}' cannot be loaded: {type(error).__name__}: "
                              f"{error}. Mend the file, or run with --debug to see where."
                              ) from error

    def _forget(self, module: ModuleType, name: str) -> None:
        """Leave no trace of a plug-in file that was refused."""
        sys.modules.pop(name, None)
        if self._manager.is_registered(module):
            self._manager.unregister(module)
        self._origin.pop(name, None)
        self._by_kind.clear()

    def _register(self, module: ModuleType, name: str, origin: str, version: str) -> None:
        hooks = {n for n in vars(specs) if n.startswith("subside_")}
        for attribute in vars(module):
            if attribute.startswith("subside_") and attribute not in hooks:
                raise PluginError(f"plug-in {origin}: '{attribute}' is not a hook."
                                  + nearest(attribute, hooks))
        implemented = [a for a in hooks if hasattr(module, a)]
        if not implemented:
            raise PluginError(f"plug-in {origin}: it implements no hook; write one of "
                              f"{', '.join(sorted(hooks))} and mark it with @hookimpl.")
        for attribute in implemented:
            if not getattr(getattr(module, attribute), "subside_impl", None):
                raise PluginError(f"plug-in {origin}: {attribute} is not marked with @hookimpl "
                                  "(from subside.api import hookimpl).")
        self._manager.register(module, name=name)
        try:
            self._manager.check_pending()
        except pluggy.PluginValidationError as error:
            self._manager.unregister(module)
            raise PluginError(f"plug-in {origin}: {error}") from None
        self._origin[name] = (origin, version)
        self._by_kind.clear()

    # -- looking up ----------------------------------------------------------------------------

    def all(self, kind: str) -> dict[str, Registered]:
        """Every plug-in of a kind by name. A clash of names is an error, never a choice."""
        self.discover()
        if kind not in self._by_kind:
            self._by_kind[kind] = self._collect(kind)
        return self._by_kind[kind]

    def _collect(self, kind: str) -> dict[str, Registered]:
        found: dict[str, Registered] = {}
        hook = getattr(self._manager.hook, specs.HOOKS[kind])
        for impl in hook.get_hookimpls():
            origin, version = self._origin[impl.plugin_name]
            try:
                classes = impl.function()
            except Exception as error:
                raise PluginError(f"plug-in {origin}: {specs.HOOKS[kind]} failed with "
                                  f"{type(error).__name__}: {error}.") from error
            for cls in self._checked(classes, kind, origin):
                if cls.name in found:
                    raise PluginError(
                        f"two plug-ins are called '{cls.name}' ({kind}): {found[cls.name].origin} "
                        f"and {origin}; rename one or leave one out."
                    )
                found[cls.name] = Registered(kind, cls, origin, version)
        return dict(sorted(found.items()))

    @staticmethod
    def _checked(classes: object, kind: str, origin: str) -> Iterable[type[Any]]:
        base = _BASE[kind]
        if not isinstance(classes, (list, tuple)):
            raise PluginError(f"plug-in {origin}: {specs.HOOKS[kind]} must return a list of "
                              f"classes, it returned {type(classes).__name__}.")
        for cls in classes:
            if not (inspect.isclass(cls) and issubclass(cls, base)):
                raise PluginError(f"plug-in {origin}: {cls!r} is not a class derived from "
                                  f"subside.api.{base.__name__}.")
            if not cls.name or inspect.isabstract(cls):
                missing = sorted(getattr(cls, "__abstractmethods__", ())) or ["name"]
                raise PluginError(f"plug-in {origin}: {cls.__name__} lacks {', '.join(missing)}.")
            odd = [p for p in cls.parameters if not isinstance(p, Parameter)]
            if odd:
                raise PluginError(f"plug-in {origin}: {cls.__name__}.parameters holds {odd[0]!r}, "
                                  "which is no subside.api.Parameter.")
            yield cls

    def get(self, kind: str, name: str, where: str) -> type[Any]:
        """The class of that name; `where` (a key) goes into the message when there is none."""
        found = self.all(kind)
        if name not in found:
            broken = "".join(f" Left out: {text}." for text in self._broken.values())
            raise InputError(f"{where}: no {kind} is called '{name}'."
                             + nearest(name, found) + broken)
        return found[name].cls

    def find(self, name: str) -> list[Registered]:
        """Plug-ins of that name, of any kind."""
        return [r for kind in specs.HOOKS for r in self.all(kind).values() if r.name == name]

    @property
    def broken(self) -> dict[str, str]:
        """Plug-ins that could not be loaded, with the reason."""
        self.discover()
        return dict(self._broken)


registry = Registry()
"""The registry of this process."""
