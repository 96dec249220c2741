"""The house: imports point down, names stand in the vocabulary, lists agree, imports are cheap."""

from __future__ import annotations

import ast
import inspect
import json
import os
import pkgutil
import re
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from importlib import import_module
from pathlib import Path

import pytest

import windkit

ROOT = Path(__file__).parent.parent
PACKAGE = ROOT / "windkit"
FLOORS = ("kernels", "study", "faces")
MODULES = sorted(PACKAGE.rglob("*.py"))


def imported_modules(file: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            yield node.module or ""
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def floor_of(name: str) -> int | None:
    parts = name.split(".")
    if parts[0] == "windkit" and len(parts) > 1 and parts[1] in FLOORS:
        return FLOORS.index(parts[1])
    return None


@pytest.mark.parametrize("file", MODULES, ids=lambda f: str(f.relative_to(PACKAGE)))
def test_imports_point_down(file: Path) -> None:
    own = floor_of(".".join(["windkit", *file.relative_to(PACKAGE).parts]))
    if own is None:
        return
    upward = [
        name
        for name in imported_modules(file)
        if (floor := floor_of(name)) is not None and floor > own
    ]
    assert not upward, f"{file.name} is on floor '{FLOORS[own]}' and imports from above: {upward}"


def test_the_import_test_can_fail(tmp_path: Path) -> None:
    file = tmp_path / "air.py"
    file.write_text("from windkit.faces import figures\n")
    assert [n for n in imported_modules(file) if floor_of(n) == FLOORS.index("faces")]


@pytest.mark.parametrize("file", sorted((PACKAGE / "kernels").glob("*.py")), ids=lambda f: f.name)
def test_kernels_know_numpy_and_scipy_only(file: Path) -> None:
    allowed = {"numpy", "scipy", "windkit", "__future__", *sys.stdlib_module_names}
    heavy = {"pathlib", "os", "io", "csv", "json", "sqlite3", "shutil", "tempfile"}
    met = {name.split(".")[0] for name in imported_modules(file) if name}
    if file.name == "estimator.py":
        met -= {"sklearn"}  # imported only when scikit-learn itself asks
    assert met <= allowed, f"{file.name} imports {met - allowed}"
    assert not met & heavy, f"{file.name} knows files: {met & heavy}"


def test_no_import_cycle() -> None:
    graph: dict[str, set[str]] = {}
    names = {
        ".".join(f.relative_to(ROOT).with_suffix("").parts).removesuffix(".__init__"): f
        for f in MODULES
    }
    for name, file in names.items():
        graph[name] = {n for n in imported_modules(file) if n in names and n != name}
    graph["windkit"] = set()  # its lazy attributes are no imports at import time
    done: set[str] = set()

    def visit(name: str, path: tuple[str, ...]) -> None:
        assert name not in path, f"import cycle: {' -> '.join([*path, name])}"
        if name not in done:
            for other in sorted(graph[name]):
                visit(other, (*path, name))
            done.add(name)

    for name in graph:
        visit(name, ())


def test_import_is_cheap() -> None:
    code = (
        "import sys, windkit; heavy = {'pandas', 'matplotlib', 'scipy', 'numpy', 'ipywidgets'};"
        "print(sorted(heavy & set(sys.modules)))"
    )
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert out.stdout.strip() == "[]"


def kernel_functions() -> Iterator[tuple[str, inspect.Signature]]:
    import windkit.kernels

    for info in pkgutil.iter_modules(windkit.kernels.__path__):
        if info.name.startswith("_"):
            continue
        module = import_module(f"windkit.kernels.{info.name}")
        for name in module.__all__:
            thing = getattr(module, name)
            if inspect.isfunction(thing):
                yield f"{info.name}.{name}", inspect.signature(thing)


def vocabulary() -> set[str]:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    section = text.split("## Vocabulary", 1)[1].split("\n## ", 1)[0]
    names: set[str] = set()
    for line in section.splitlines():
        if line.startswith("| `"):
            names |= set(re.findall(r"`([A-Za-z_0-9]+)`", line.split("|")[1]))
    return names


def test_every_public_parameter_stands_in_the_vocabulary() -> None:
    known = vocabulary()
    missing: dict[str, list[str]] = {}
    for function, signature in kernel_functions():
        for name in signature.parameters:
            if name not in known:
                missing.setdefault(name, []).append(function)
    assert not missing, f"add to the vocabulary of DEVELOPERS.md, or rename: {missing}"


def test_public_kernels_document_themselves() -> None:
    for function, _ in kernel_functions():
        module, name = function.split(".")
        doc = getattr(import_module(f"windkit.kernels.{module}"), name).__doc__
        assert doc, f"{function} has no docstring"


def test_modules_are_readable_in_a_sitting() -> None:
    long = {
        str(f.relative_to(ROOT)): n
        for f in MODULES
        if (n := len(f.read_text(encoding="utf-8").splitlines())) > 520
    }
    assert not long, f"split by subject: {long}"


def test_environment_yml_agrees_with_pyproject() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    wanted = {re.sub(r"\s", "", line) for line in project["dependencies"]}
    wanted.add(f"python{project['requires-python']}")
    lines = (ROOT / "environment.yml").read_text().splitlines()
    listed = {line.strip()[2:] for line in lines if line.startswith("  - ")} - {
        "conda-forge",
        "pip",
    }
    assert listed == wanted


@pytest.mark.parametrize("file", sorted((ROOT / "workbooks").glob("*.ipynb")), ids=lambda f: f.stem)
def test_templates_are_clean(file: Path) -> None:
    notebook = json.loads(file.read_text(encoding="utf-8"))
    assert notebook["metadata"]["kernelspec"]["name"] == "python3"
    ids = [cell["id"] for cell in notebook["cells"]]
    assert len(set(ids)) == len(ids)
    tagged = 0
    for cell in notebook["cells"]:
        if cell["cell_type"] != "code":
            continue
        assert cell["outputs"] == []
        assert cell["execution_count"] is None
        source = "".join(cell["source"])
        tagged += "parameters" in cell["metadata"].get("tags", [])
        code = [line for line in source.splitlines() if line.strip() and not line.startswith("#")]
        assert len(code) <= 15, "a long cell belongs in the library"
        assert not re.search(r"^\s*(def|class|for|while|if) ", source, re.M)
    assert tagged == 1


def test_version_stands_in_one_place_or_agrees() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    assert project["version"] == windkit.__version__


def test_the_project_speaks_of_itself_alone() -> None:
    tracked = subprocess.run(
        ["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=False
    ).stdout.split()
    if not tracked:
        pytest.skip("not a git checkout")
    home = re.escape(os.path.expanduser("~"))
    # Written in pieces, so that this file does not find itself.
    machine_path = re.compile(rf"(?<![\w.])(?:{home}/|/wo" r"rk/)")
    for name in tracked:
        file = ROOT / name
        if file.suffix in {".gz", ".png", ".parquet"} or not file.is_file():
            continue
        found = machine_path.search(file.read_text(encoding="utf-8"))
        assert not found, f"{name} holds the path of a machine: {found and found[0]}"
