"""The house: imports go one way, files stay short, names and docstrings are true."""

from __future__ import annotations

import ast
import importlib
import inspect
import pickle
import pkgutil
import re
import subprocess
import sys
from pathlib import Path

import pytest

import fluxmesh
from fluxmesh import errors

ROOT = Path(fluxmesh.__file__).parent
MODULES = sorted(name for _, name, _ in pkgutil.walk_packages([str(ROOT)], "fluxmesh.") if name != "fluxmesh.__main__")

# a layer may import those of a smaller number, and its own
LAYERS = {
    "errors": 0,
    "units": 1,
    "compiling": 1,
    "guarded": 1,
    "integral": 2,
    "surface": 2,
    "field": 3,
    "balance": 4,
    "assess": 5,
    "report": 6,
    "job": 7,
    "starter": 7,
    "cli": 8,
}
# what the plain data of a case may know, and who may know a case
CASE_KNOWS = {"errors", "units", "surface"}
KNOWS_CASE = {"case", "job", "cli"}


def imports_of(name: str) -> list[tuple[str, bool]]:
    """Internal imports of a module, and whether each stands inside a function."""
    module = importlib.import_module(name)
    tree = ast.parse(Path(module.__file__).read_text(encoding="utf-8"))
    found = []

    def walk(node: ast.AST, inside: bool) -> None:
        for child in ast.iter_child_nodes(node):
            if isinstance(child, ast.ImportFrom) and (child.module or "").startswith("fluxmesh"):
                found.append((child.module, inside))
            elif isinstance(child, ast.Import):
                found.extend((alias.name, inside) for alias in child.names if alias.name.startswith("fluxmesh"))
            walk(child, inside or isinstance(child, ast.FunctionDef))

    walk(tree, False)
    return found


def room(name: str) -> str:
    return name.split(".")[1]


@pytest.mark.parametrize("name", MODULES)
def test_imports_go_down_the_layers(name: str) -> None:
    for imported, _ in imports_of(name):
        if imported == "fluxmesh":
            continue
        here, there = room(name), room(imported)
        if here == "case":
            assert there in CASE_KNOWS | {"case"}, f"{name} imports {imported}"
        elif there == "case":
            assert here in KNOWS_CASE, f"{name} imports {imported}"
        else:
            assert LAYERS[there] <= LAYERS[here], f"{name} imports {imported}"


@pytest.mark.parametrize("name", MODULES)
def test_internal_imports_stand_at_the_top(name: str) -> None:
    # the command and the job load what a case asks for when it asks: the start is counted in tenths of a second
    if name == "fluxmesh.cli" or room(name) == "job":
        return
    assert [imported for imported, inside in imports_of(name) if inside] == []


def test_there_is_no_cycle() -> None:
    graph = {name: {imported for imported, inside in imports_of(name) if not inside} for name in MODULES}
    done: set[str] = set()

    def visit(name: str, above: tuple[str, ...]) -> None:
        assert name not in above, f"cycle: {' -> '.join((*above, name))}"
        if name in done:
            return
        for other in graph.get(name, ()):
            visit(other, (*above, name))
        done.add(name)

    for name in MODULES:
        visit(name, ())


@pytest.mark.parametrize("name", MODULES)
def test_public_names_are_listed_sorted_and_there(name: str) -> None:
    module = importlib.import_module(name)
    listed = getattr(module, "__all__", None)
    if listed is None:
        assert Path(module.__file__).name == "__init__.py", f"{name} has no __all__"
        return
    assert sorted(set(listed), key=listed.index) == listed, f"{name} lists a name twice"
    for public in listed:
        assert hasattr(module, public), f"{name} lists {public}"
    own = {
        public
        for public, value in vars(module).items()
        if not public.startswith("_") and getattr(value, "__module__", None) == name and callable(value)
    }
    assert own <= set(listed), f"{name} does not list {sorted(own - set(listed))}"


@pytest.mark.parametrize("name", MODULES)
def test_documented_parameters_are_those_of_the_signature(name: str) -> None:
    module = importlib.import_module(name)
    for public in getattr(module, "__all__", ()):
        function = inspect.unwrap(getattr(module, public))
        function = getattr(function, "py_func", function)
        if not inspect.isfunction(function) or function.__module__ != name:
            continue
        parameters = r"\n\s*Parameters\n\s*-+\n(.*?)(?:\n\s*\n\s*\w[\w ]*\n\s*-{3,}|\Z)"
        section = re.search(parameters, function.__doc__ or "", re.S)
        if section is None:
            continue
        indent = re.match(r"\s*", section[1])[0].strip("\n")
        named = set()
        for line in section[1].splitlines():
            if line.startswith(indent) and line[len(indent) : len(indent) + 1].strip():
                named |= {part.strip(" *") for part in line.split(" : ")[0].split(",")}
        assert named == set(inspect.signature(function).parameters), f"{name}.{public}"


def test_files_stay_short() -> None:
    lines = {str(path.relative_to(ROOT)): len(path.read_text("utf-8").splitlines()) for path in ROOT.rglob("*.py")}
    assert {name: count for name, count in lines.items() if count > 420} == {}


ERRORS = [kind for kind in map(vars(errors).get, errors.__all__) if issubclass(kind, errors.FluxmeshError)]


@pytest.mark.parametrize("kind", ERRORS)
def test_errors_say_what_where_and_what_to_do_and_survive_pickling(kind: type[errors.FluxmeshError]) -> None:
    error = kind("two were found", "group 'a'", "Give one")
    assert str(error) == "group 'a': two were found. Give one"
    again = pickle.loads(pickle.dumps(error))
    assert type(again) is kind
    assert str(again) == str(error)
    assert str(kind("two were found")) == "two were found"


@pytest.mark.parametrize("kind", ERRORS)
def test_errors_derive_from_one_base(kind: type) -> None:
    assert issubclass(kind, errors.FluxmeshError)
    if kind not in (errors.FluxmeshError, errors.OutputError, errors.PictureError):
        assert issubclass(kind, ValueError)


def test_help_loads_no_heavy_package() -> None:
    code = (
        "import sys; sys.argv = ['fluxmesh', '--help']\n"
        "from fluxmesh.cli import main\n"
        "try: main()\n"
        "except SystemExit: pass\n"
        "heavy = {'numpy', 'numba', 'scipy', 'vtkmodules', 'pyvista', 'pint', 'trimesh', 'meshio', 'matplotlib'}\n"
        "heavy |= {'CoolProp', 'pandas'}\n"
        "print(sorted(heavy & set(sys.modules)), file=sys.stderr)\n"
    )
    ran = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT.parent)
    assert ran.stderr.strip() == "[]"
    assert "balance" in ran.stdout
