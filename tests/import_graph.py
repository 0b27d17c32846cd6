"""Which module of the service imports which, read from the source without importing anything."""

from __future__ import annotations

import ast
from collections.abc import Iterator, Mapping
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def read_sources(package: str) -> dict[str, str]:
    """Full module name, such as "service.core.errors", to source text, of every module of a package."""
    sources = {}
    for path in sorted((ROOT / package).rglob("*.py")):
        parts = path.relative_to(ROOT).with_suffix("").parts
        name = ".".join(parts[:-1] if parts[-1] == "__init__" else parts)
        sources[name] = path.read_text(encoding="utf-8")
    return sources


def imports(source: str, modules: Mapping[str, str]) -> set[str]:
    """The full names that a module imports, anywhere in it, for type checking too.

    `from package import name` counts as package.name where that is a module of ours, else as package.
    """
    return set(_imported_names(ast.parse(source), modules))


def _imported_names(tree: ast.Module, modules: Mapping[str, str]) -> Iterator[str]:
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            package = node.module or ""
            for alias in node.names:
                full = f"{package}.{alias.name}"
                yield full if full in modules else package


def graph(sources: Mapping[str, str]) -> dict[str, set[str]]:
    """Each module and what it imports, of ours and of others."""
    return {name: imports(source, sources) for name, source in sources.items()}


def part_of(module: str) -> str:
    """The part of the service that a module belongs to: "core" for service.core.errors, "" outside."""
    words = module.split(".")
    return words[1] if words[0] == "service" and len(words) > 1 else ""
