"""The architecture, read from the imports: layers point one way, heavy libraries have one home."""

from __future__ import annotations

import ast
import functools
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import topovet

PACKAGE = Path(topovet.__file__).parent

LAYERS = (
    "intake",
    "model",
    "symmetry",
    "spectrum",
    "invariants",
    "boundary",
    "deformation",
    "diagnosis",
    "verdict",
    "report",
    "pipeline",
    "screening",
    "demo",
    "cli",
)
"""In the order in which a case travels; each may import those before it."""

GROUND = ("errors", "arrays", "units", "notation")
"""Modules that any layer may import."""

HOMES = {
    "matplotlib": "report/figures",
    "jinja2": "report",
    "networkx": "pipeline",
    "click": "cli",
    "rich": "cli",
    "spglib": "symmetry",
    "threadpoolctl": "spectrum",
    "distributed": "screening",
}
"""The only place that imports each of these."""


@functools.cache
def _imports(path: Path) -> tuple[str, ...]:
    return tuple(_found_imports(path))


def _found_imports(path: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.module


def _modules() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


@pytest.mark.parametrize("path", _modules(), ids=lambda p: str(p.relative_to(PACKAGE)))
def test_layers_point_one_way(path: Path) -> None:
    layer = path.relative_to(PACKAGE).parts[0]
    for name in _imports(path):
        parts = name.split(".")
        if parts[0] != "topovet" or len(parts) < 2 or parts[1] in GROUND:
            continue
        if layer in LAYERS and parts[1] in LAYERS:
            assert LAYERS.index(parts[1]) <= LAYERS.index(layer), f"{path} imports {name}"
        elif layer in LAYERS:
            pytest.fail(f"{path} imports {name}, which stands above all layers")
        elif layer.removesuffix(".py") in GROUND:
            pytest.fail(f"{path} is ground and imports {name}")


@pytest.mark.parametrize("library", HOMES)
def test_each_library_has_one_home(library: str) -> None:
    for path in _modules():
        inside = path.relative_to(PACKAGE).as_posix().startswith(HOMES[library] + "/")
        if any(name.split(".")[0] == library for name in _imports(path)):
            assert inside, f"{path} imports {library}"


def test_the_demo_knows_no_more_than_files_and_models() -> None:
    """Its right answers must not come from what they are to test."""
    for path in (PACKAGE / "demo").rglob("*.py"):
        for name in _imports(path):
            parts = name.split(".")
            if parts[0] == "topovet" and len(parts) > 1:
                allowed = parts[1] in (*GROUND, "demo", "intake", "model")
                assert allowed, f"{path} imports {name}"


def test_pickle_is_never_imported() -> None:
    for path in _modules():
        assert not {"pickle", "shelve", "marshal"}.intersection(_imports(path)), path


def test_every_layer_says_what_enters_and_leaves() -> None:
    for layer in LAYERS:
        text = ast.get_docstring(ast.parse((PACKAGE / layer / "__init__.py").read_text()))
        assert text, layer
        assert text.endswith("."), layer


def _loaded_by(code: str) -> set[str]:
    """Top-level packages in memory after running the code in a fresh interpreter."""
    listing = (
        f"{code}\nimport sys\nprint(*{{m.split('.')[0] for m in sys.modules}}, file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", listing], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
    return set(done.stderr.split())


@pytest.mark.parametrize(
    "code",
    [
        "import topovet",
        "from topovet.cli.main import cli\ncli(['--help'], standalone_mode=False)",
    ],
)
def test_import_and_help_load_no_numerical_library(code: str) -> None:
    heavy = {"numpy", "scipy", "ase", "spglib", "matplotlib", "networkx", "jinja2"}
    assert not heavy & _loaded_by(code)


def test_physics_does_not_load_the_machinery() -> None:
    loaded = _loaded_by("import topovet.invariants.parity, topovet.spectrum.gap")
    assert not {"click", "networkx", "jinja2", "rich"} & loaded
