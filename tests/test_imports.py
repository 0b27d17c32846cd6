"""Imports point one way: app, routes, worker and studies, translation, core; the core and the analyses stand alone."""

from __future__ import annotations

import graphlib
import importlib.metadata
import subprocess
import sys
import tomllib
from collections.abc import Mapping

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

from tests.import_graph import ROOT, graph, part_of, read_sources

SOURCES = read_sources("service")
GRAPH = graph(SOURCES)

# Parts that import nothing of the others, and what they may import.
ALONE = ("core", "analysis")
ALLOWED_ALONE = {"numpy", "scipy", *sys.stdlib_module_names}

# A part imports parts of lower rank and of its own. Parts that are not here have no rank.
RANK = {"core": 0, "analysis": 0, "translation": 1, "translate": 1, "worker": 2, "studies": 2, "routes": 3, "app": 4}

# What a client writes and how it is read knows nothing of how it is answered.
DESCRIPTIONS = {"models", "units", "unit_text", "settings"}
ANSWERING = {"app", "routes", "worker", "studies", "translation", "translate"}

# Imported by us, and installed and pinned as part of what stands beside it.
COMES_WITH = {"starlette": "fastapi", "pydantic-core": "pydantic"}


def strangers(imported: Mapping[str, set[str]]) -> set[tuple[str, str]]:
    return {
        (module, name)
        for module, names in imported.items()
        for name in names
        if part_of(module) in ALONE and part_of(name) != part_of(module) and name.partition(".")[0] not in ALLOWED_ALONE
    }


def arrows_that_point_up(imported: Mapping[str, set[str]]) -> set[tuple[str, str]]:
    def is_up(module: str, name: str) -> bool:
        if part_of(module) in DESCRIPTIONS:
            return part_of(name) in ANSWERING
        return RANK.get(part_of(name), -1) > RANK.get(part_of(module), len(RANK))

    return {(module, name) for module, names in imported.items() for name in names if is_up(module, name)}


def test_core_and_analyses_import_only_numpy_scipy_the_standard_library_and_themselves() -> None:
    assert set(ALONE) <= {part_of(module) for module in GRAPH}
    assert strangers(GRAPH) == set()


def test_imports_point_one_way() -> None:
    assert arrows_that_point_up(GRAPH) == set()


def test_no_modules_import_each_other_in_a_circle() -> None:
    ours = {module: {name for name in names if name in SOURCES} for module, names in GRAPH.items()}
    order = list(graphlib.TopologicalSorter(ours).static_order())
    assert set(order) == set(SOURCES)


def test_worker_of_studies_starts_without_the_web() -> None:
    program = "import sys, service.studies.chunk_work; print(*{name.partition('.')[0] for name in sys.modules})"
    printed = subprocess.check_output([sys.executable, "-c", program], cwd=ROOT, text=True)
    assert set(printed.split()) & {"fastapi", "starlette", "uvicorn", "plotly", "dbos", "sqlalchemy"} == set()


def test_optional_packages_are_imported_by_one_module_that_nobody_imports() -> None:
    asked = {"dask", "distributed"}
    assert {module for module, names in GRAPH.items() if {name.partition(".")[0] for name in names} & asked} == {
        "service.studies.cluster"
    }
    assert not any("service.studies.cluster" in names for names in GRAPH.values())


def test_core_can_be_used_without_the_packages_of_the_service() -> None:
    modules = ", ".join(module for module in SOURCES if part_of(module) == "core")
    program = f"import sys, {modules}; print(*{{name.partition('.')[0] for name in sys.modules}})"
    printed = subprocess.check_output([sys.executable, "-c", program], cwd=ROOT, text=True)
    assert set(printed.split()) & {"fastapi", "pydantic", "pint", "starlette", "plotly"} == set()


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("service.core.bad", "import pydantic"),
        ("service.core.bad", "def late() -> None:\n    from fastapi import FastAPI"),
        ("service.core.bad", "from service import units"),
        ("service.core.bad", "import service.worker"),
        ("service.analysis.bad", "from service.core import solve"),
        ("service.analysis.bad", "import pydantic"),
    ],
)
def test_stranger_where_none_belongs_would_be_found(module: str, source: str) -> None:
    assert [found for found, _ in strangers(graph(SOURCES | {module: source}))] == [module]


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("service.models.bad", "from service.routes.bad import answer"),
        ("service.settings", "from service import app"),
        ("service.worker", "import service.routes.bad"),
        ("service.core.bad", "from service.translation.bad import body"),
    ],
)
def test_arrow_that_points_up_would_be_found(module: str, source: str) -> None:
    planted = {"service.routes.bad": "", "service.translation.bad": "", "service.app": "", module: source}
    assert [found for found, _ in arrows_that_point_up(graph(planted))] == [module]


@pytest.mark.parametrize("package", ["service", "tests"])
def test_every_package_imported_is_declared(package: str) -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    texts = [*project["dependencies"], *project["optional-dependencies"]["cluster"]]
    if package == "tests":
        texts += project["optional-dependencies"]["test"]
    declared = {canonicalize_name(Requirement(text).name) for text in texts}
    distributions = importlib.metadata.packages_distributions()
    known = {*sys.stdlib_module_names, "service", "tests"}

    undeclared = {}
    for module, names in graph(read_sources(package)).items():
        for top in {name.partition(".")[0] for name in names} - known:
            providers = {canonicalize_name(name) for name in distributions.get(top, [top])}
            if not {COMES_WITH.get(name, name) for name in providers} & declared:
                undeclared[module] = top
    assert undeclared == {}
