"""The layers of docs/architecture.md, read from the source: imports go downward only.

The checker is tried on made-up trees first, so that a pass of the real one means something.
"""

from __future__ import annotations

import ast
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parents[1] / "fieldround"

# Lower number = lower layer. A layer may import its own modules and those of lower layers.
LAYERS = {
    "geometry": 0, "rounds": 1, "vision": 2, "place": 2, "solve": 3, "deliver": 4, "plan": 4,
    "checks": 4, "trade": 4, "run": 5, "cli": 6, "desk": 6,
}  # fmt: skip
APART = ({"vision", "place"},)
# Numbers in, numbers out: these open no file, print nothing, log nothing and ask no clock.
SILENT = ("geometry", "solve")
SILENT_CALLS = {"open", "print", "input", "breakpoint", "exec", "eval"}
SILENT_METHODS = {
    "read_text", "write_text", "read_bytes", "write_bytes", "open", "unlink", "mkdir", "touch",
    "tofile", "fromfile", "savetxt", "loadtxt", "genfromtxt", "savez", "memmap",
}  # fmt: skip
SILENT_MODULES = {
    "logging", "os", "io", "sys", "pathlib", "shutil", "tempfile", "subprocess", "socket",
    "urllib", "time", "random", "rich", "click", "json", "csv", "sqlite3", "pickle",
}  # fmt: skip
LINES_MOST = 400


def modules(package: Path) -> Iterator[tuple[str, Path, ast.Module]]:
    """Dotted name, path and syntax tree of every module of a package."""
    for path in sorted(package.rglob("*.py")):
        parts = [package.name, *path.relative_to(package).with_suffix("").parts]
        if parts[-1] == "__init__":
            parts.pop()
        yield ".".join(parts), path, ast.parse(path.read_text(encoding="utf-8"), str(path))


def imports(name: str, path: Path, tree: ast.Module) -> Iterator[tuple[int, str]]:
    """Line and dotted name of everything a module imports, wherever in it and however written."""
    parents = name.split(".") if path.name == "__init__.py" else name.split(".")[:-1]
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                above = parents[: len(parents) - node.level + 1]
                base = ".".join([*above, base] if base else above)
            # `from package import layer` names the layer only in its list.
            yield from ((node.lineno, f"{base}.{alias.name}") for alias in node.names)
        elif isinstance(node, ast.Call) and _called(node) in ("import_module", "__import__"):
            wanted = node.args[0] if node.args else None
            constant = isinstance(wanted, ast.Constant) and isinstance(wanted.value, str)
            yield node.lineno, wanted.value if constant else "a name made at run time"


def _called(node: ast.Call) -> str:
    function = node.func
    if isinstance(function, ast.Attribute):
        return function.attr
    return function.id if isinstance(function, ast.Name) else ""


def upward_imports(package: Path) -> list[str]:
    """A sentence for every import that goes up, sideways where it must not, or nowhere known."""
    told = []
    for name, path, tree in modules(package):
        parts = name.split(".")
        layer = parts[1] if len(parts) > 1 else None
        if layer is not None and layer not in LAYERS:
            told.append(f"{name} is in no known layer; add {layer} to LAYERS")
            continue
        for line, wanted in imports(name, path, tree):
            if wanted == "a name made at run time" and layer != "cli":
                told.append(f"{name}, line {line}: imports {wanted}, which no test can follow")
            other = wanted.split(".")[1] if wanted.startswith(f"{package.name}.") else None
            if other not in LAYERS:
                continue
            here = f"{name}, line {line}"
            if layer is None:
                told.append(f"{here}: the package itself imports layer {other}")
            elif LAYERS[other] > LAYERS[layer]:
                told.append(f"{here}: {layer} is below {other}, so it cannot import it")
            elif any({layer, other} == pair for pair in APART):
                told.append(f"{here}: {layer} and {other} stand side by side")
    return told


def outside_imports(package: Path, layer: str, allowed: set[str]) -> list[str]:
    """A sentence for every import of a layer from outside the standard library and `allowed`."""
    told = []
    for name, path, tree in modules(package):
        if not name.startswith(f"{package.name}.{layer}"):
            continue
        for line, wanted in imports(name, path, tree):
            top = wanted.split(".")[0]
            if top not in allowed | {package.name} | set(sys.stdlib_module_names):
                told.append(f"{name}, line {line}: imports {top}")
    return told


def noises(package: Path) -> list[str]:
    """A sentence for every place where a silent layer opens, prints or logs."""
    told = []
    for name, path, tree in modules(package):
        if not any(f"{name}.".startswith(f"{package.name}.{layer}.") for layer in SILENT):
            continue
        for line, wanted in imports(name, path, tree):
            if wanted.split(".")[0] in SILENT_MODULES:
                told.append(f"{name}, line {line}: imports {wanted.split('.')[0]}")
        for node in ast.walk(tree):
            if not isinstance(node, ast.Call):
                continue
            called = _called(node)
            plain = isinstance(node.func, ast.Name)
            if called in (SILENT_CALLS if plain else SILENT_METHODS):
                told.append(f"{name}, line {node.lineno}: calls {called}")
    return told


def unwieldy(package: Path) -> list[str]:
    """A sentence for every module without a docstring or with too many lines."""
    told = []
    for name, path, tree in modules(package):
        if not ast.get_docstring(tree):
            told.append(f"{name} does not say what it is for")
        lines = path.read_text(encoding="utf-8").count("\n")
        if lines > LINES_MOST:
            told.append(f"{name} has {lines} lines; split it at {LINES_MOST}")
    return told


# The real package ------------------------------------------------------------------------------


def test_imports_go_downward_only() -> None:
    assert upward_imports(PACKAGE) == []


def test_geometry_imports_numpy_only() -> None:
    assert outside_imports(PACKAGE, "geometry", {"numpy"}) == []


def test_geometry_and_solve_open_print_and_log_nothing() -> None:
    assert noises(PACKAGE) == []


def test_every_module_says_what_it_is_for_and_stays_short() -> None:
    assert unwieldy(PACKAGE) == []


def test_every_layer_that_is_named_first_exists() -> None:
    there = {path.name for path in PACKAGE.iterdir() if (path / "__init__.py").exists()}
    needed = {"geometry", "rounds", "vision", "place", "solve", "deliver", "run", "cli"}
    assert needed <= there <= set(LAYERS)


# The checker itself ----------------------------------------------------------------------------


def tree(folder: Path, sources: dict[str, str]) -> Path:
    """A made-up package; the keys are paths of its modules without the ending."""
    package = folder / "fieldround"
    for key, source in sources.items():
        path = package / f"{key}.py"
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(source, encoding="utf-8")
    return package


@pytest.mark.parametrize(
    "source",
    [
        "from fieldround.run.work import run_round",
        "import fieldround.run.work",
        "import fieldround.run.work as work",
        "from fieldround import run",
        "from ..run import work",
        "from .. import run",
        "from ..run.work import run_round",
        "def late():\n    from fieldround.run import work",
        "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    import fieldround.run.work",
        "try:\n    import fieldround.run\nexcept ImportError:\n    pass",
        "import importlib\nimportlib.import_module('fieldround.run.work')",
    ],
)
def test_an_upward_import_is_found_however_it_is_written(tmp_path: Path, source: str) -> None:
    (told,) = upward_imports(tree(tmp_path, {"solve/adjust": source}))
    assert told.startswith("fieldround.solve.adjust, line ")
    assert told.endswith("solve is below run, so it cannot import it")


@pytest.mark.parametrize(
    "source",
    [
        "from fieldround.geometry.spreads import readings",
        "from fieldround.solve.results import Reading",
        "from .results import Reading",
        "from ..geometry import spreads",
        "import numpy as np",
        "from fieldround import __version__",
    ],
)
def test_imports_that_go_down_or_stay_are_left_alone(tmp_path: Path, source: str) -> None:
    assert upward_imports(tree(tmp_path, {"solve/adjust": source})) == []


def test_a_relative_import_in_a_package_file_is_read_from_that_package(tmp_path: Path) -> None:
    assert upward_imports(tree(tmp_path, {"solve/__init__": "from . import adjust"})) == []
    (told,) = upward_imports(tree(tmp_path, {"solve/__init__": "from ..cli import main"}))
    assert "solve is below cli" in told


def test_siblings_and_strangers_are_found(tmp_path: Path) -> None:
    (told,) = upward_imports(tree(tmp_path, {"vision/ties": "import fieldround.place.frames"}))
    assert told.endswith("vision and place stand side by side")
    (told,) = upward_imports(tree(tmp_path / "b", {"odds/ends": "import math"}))
    assert "is in no known layer" in told
    (told,) = upward_imports(tree(tmp_path / "c", {"__init__": "from fieldround.run import work"}))
    assert "the package itself imports layer run" in told
    late = "import importlib\ndef f(n):\n    importlib.import_module(n)"
    (told,) = upward_imports(tree(tmp_path / "d", {"run/work": late}))
    assert "no test can follow" in told


def test_an_outside_library_in_geometry_is_found(tmp_path: Path) -> None:
    package = tree(
        tmp_path,
        {"geometry/a": "def f():\n    import scipy.linalg", "geometry/b": "import math"},
    )
    assert outside_imports(package, "geometry", {"numpy"}) == [
        "fieldround.geometry.a, line 2: imports scipy"
    ]


@pytest.mark.parametrize(
    ("source", "found"),
    [
        ("print('x')", "calls print"),
        ("def f(p):\n    return p.read_text()", "calls read_text"),
        ("def f(p):\n    with open(p) as g:\n        return g", "calls open"),
        ("import numpy as np\nnp.savetxt('x', [])", "calls savetxt"),
        ("import logging", "imports logging"),
        ("from time import perf_counter", "imports time"),
    ],
)
def test_a_noise_in_a_silent_layer_is_found(tmp_path: Path, source: str, found: str) -> None:
    (told,) = noises(tree(tmp_path, {"solve/adjust": source}))
    assert told.endswith(found)
    assert noises(tree(tmp_path / "other", {"deliver/write": source})) == []


def test_an_unwieldy_module_is_found(tmp_path: Path) -> None:
    package = tree(
        tmp_path, {"run/a": "x = 1\n", "run/b": '"""Noun."""\n' + "\n" * LINES_MOST}
    )
    assert unwieldy(package) == [
        "fieldround.run.a does not say what it is for",
        "fieldround.run.b has 401 lines; split it at 400",
    ]
