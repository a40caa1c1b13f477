"""The layers of the house: a module imports only from its own package or from lower layers."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import subside

ROOT = Path(subside.__file__).parent

LAYERS = [
    {"errors", "units", "names", "params", "progress", "checksums", "heap", "batches", "legs"},
    {"earth"},
    {"superposition"},
    {"hooks"},
    {"api"},
    {"scenario", "tables", "timeline"},
    {"grid", "compaction", "earth_models", "observe", "quantities", "survey", "export"},
    {"earth_setup", "bodies", "starter", "work", "maps", "job"},
    {"crew", "cluster", "assemble", "result_file"},
    {"outlook"},
    {"pipeline"},
    {"report"},
    {"cli"},
]
"""From the bottom up. Packages of one layer do not import each other; single files at the two ends
may (they are one idea cut in pieces)."""

SIBLINGS_MAY = [LAYERS[0], {"scenario", "tables"}]
FACE = {"__init__", "__main__"}
NUMBERS_ONLY = {
    "earth": {"numpy", "scipy", "numba"},
    "superposition": {"numpy", "scipy", "numba", "threadpoolctl"},
}


def _level(part: str) -> int:
    return next(n for n, layer in enumerate(LAYERS) if part in layer)


def _imports(file: Path) -> set[str]:
    found = set()
    for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.level == 0 and node.module:
            found.add(node.module)
            if node.module == "subside":
                found |= {f"subside.{alias.name}" for alias in node.names}
    return found


FILES = sorted(f for f in ROOT.rglob("*.py") if f.relative_to(ROOT).parts[0][:-3] not in FACE)


@pytest.mark.parametrize("file", FILES, ids=lambda f: f.relative_to(ROOT).as_posix())
def test_a_module_imports_only_from_below(file: Path) -> None:
    own = file.relative_to(ROOT).parts[0].removesuffix(".py")
    for name in _imports(file):
        parts = name.split(".")
        if parts[0] != "subside" or len(parts) < 2 or parts[1] == own:
            continue
        other = parts[1]
        same_idea = any({own, other} <= group for group in SIBLINGS_MAY)
        assert _level(other) < _level(own) or same_idea, f"{own} imports {name}"


@pytest.mark.parametrize("package", sorted(NUMBERS_ONLY))
def test_kernels_know_numbers_only(package: str) -> None:
    allowed = NUMBERS_ONLY[package]
    for file in (ROOT / package).rglob("*.py"):
        for name in _imports(file):
            top = name.split(".")[0]
            standard = top in {"__future__", "collections", "dataclasses", "math", "typing",
                               "functools", "contextlib", "enum", "threading", "concurrent"}
            assert top == "subside" or standard or top in allowed, f"{file.name} imports {name}"


def test_every_module_has_its_layer() -> None:
    parts = {f.relative_to(ROOT).parts[0].removesuffix(".py") for f in FILES}
    assert parts == set().union(*LAYERS)


def test_a_plug_in_needs_only_the_api() -> None:
    for file in (ROOT / "compaction").glob("*.py"):
        if file.stem in {"apply", "rock", "fields", "findings", "piece", "span", "strength"}:
            continue
        for name in _imports(file):
            if name.startswith("subside"):
                assert name == "subside.api" or name.startswith("subside.compaction"), name
