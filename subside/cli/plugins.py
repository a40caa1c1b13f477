"""`subside plugins`: what is installed, and what each takes."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from subside.cli.options import common, json_option, note_warnings, plugin_option, print_json


@click.group("plugins")
def command() -> None:
    """Laws, earth models, readers, quantities and exporters that are installed.

    \b
    Example:
        subside plugins describe isotach
    """


@command.command("list")
@plugin_option
@json_option
@common
def list_plugins(plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """Every plug-in by kind, with where it came from.

    \b
    Example:
        subside plugins list
    """
    from subside.hooks.registry import registry
    from subside.hooks.specs import HOOKS

    note_warnings()
    for file in plugins:
        registry.load_file(file)
    found = [r for kind in HOOKS for r in registry.all(kind).values()]
    if as_json:
        print_json({"plugins": [
            {"kind": r.kind, "name": r.name, "summary": r.cls.summary, "origin": r.origin,
             "version": r.version} for r in found], "left_out": registry.broken})
        return
    width = max(len(r.name) for r in found)
    kind = ""
    for entry in found:
        if entry.kind != kind:
            kind = entry.kind
            click.echo(kind)
        click.echo(f"  {entry.name:<{width}}  {entry.cls.summary}  "
                   f"({entry.origin} {entry.version})".rstrip())


@command.command("describe")
@click.argument("name")
@plugin_option
@json_option
@common
def describe(name: str, plugins: tuple[Path, ...], as_json: bool, quiet: bool) -> None:
    """What a plug-in does, its source, and its parameters with units, bounds and an example.

    \b
    Example:
        subside plugins describe bilinear
    """
    from subside.errors import PluginError, nearest
    from subside.hooks.registry import registry
    from subside.hooks.specs import HOOKS

    note_warnings()
    for file in plugins:
        registry.load_file(file)
    found = registry.find(name)
    if not found:
        names = [r.name for kind in HOOKS for r in registry.all(kind).values()]
        raise PluginError(f"no plug-in is called '{name}'." + nearest(name, names))
    facts = [_facts(r) for r in found]
    if as_json:
        print_json({"plugins": facts})
        return
    for fact in facts:
        _print(fact)


def _facts(entry: Any) -> dict[str, Any]:
    from subside.hooks.contracts import COMMON_LAW_PARAMETERS

    parameters = (*entry.cls.parameters,
                  *(COMMON_LAW_PARAMETERS if entry.kind == "law" else ()))
    facts: dict[str, Any] = {
        "name": entry.name, "kind": entry.kind, "summary": entry.cls.summary,
        "source": entry.cls.source, "origin": entry.origin, "version": entry.version,
        "parameters": [
            {"name": p.name, "unit": p.unit, "meaning": p.meaning, "required": p.required,
             "default": p.default, "bounds": p.bounds_text(), "varies": p.varies,
             "example": p.example} for p in parameters],
    }
    for name in ("needs", "linear_in", "suffixes", "unit"):
        if getattr(entry.cls, name, None):
            value = getattr(entry.cls, name)
            facts[name] = list(value) if isinstance(value, tuple) else value
    return facts


def _print(fact: dict[str, Any]) -> None:
    click.echo(f"{fact['name']} ({fact['kind']}, {fact['origin']} {fact['version']})")
    click.echo(f"  {fact['summary']}")
    click.echo(f"  source: {fact['source']}")
    for key, label in (("needs", "needs"), ("linear_in", "linear in"), ("suffixes", "reads"),
                       ("unit", "unit")):
        if key in fact:
            value = fact[key]
            click.echo(f"  {label}: {', '.join(value) if isinstance(value, list) else value}")
    for p in fact["parameters"]:
        unit = f" {p['unit']}" if p["unit"] != "1" else ""
        need = "required" if p["required"] else (
            f"default {p['default']:g}{unit}" if p["default"] is not None else "optional")
        click.echo(f"  {p['name']}  [{p['unit']}]  {need}; {p['bounds']}")
        click.echo(f"      {p['meaning']}")
        if p["example"]:
            click.echo(f"      for example {p['name']} = \"{p['example']}\"")
