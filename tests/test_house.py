"""Rules of the house, kept by walking the source and the public API instead of by reviewers."""

import ast
import importlib
import inspect
import pkgutil
import re
import subprocess
import sys
from pathlib import Path

import pytest

import polefit

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "polefit"
SOURCES = sorted(PACKAGE.rglob("*.py"))
LONGEST_MODULE = 450
TOP_LEVEL = {"README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "polefit", "tests",
             "datasets", "scripts"}  # fmt: skip

# Layers from the bottom up; a module may import its own layer and those below.
LAYERS = (
    {
        "errors",
        "atomic",
        "channels",
        "estimates",
        "precision",
        "responses",
        "conversions",
        "modes",
        "confirmation",
    },
    {"engine", "readers", "datasets"},
    {"analysis"},
    {"report"},
    {"simulators"},
    {"cli", "__main__", "__init__"},
)
# The engine knows no file, no screen and no user; of the layer below it takes plain data types.
ENGINE_MAY_IMPORT = {"engine", "channels", "errors", "estimates", "precision", "responses"}
# Result types delegate their printing; report is then imported inside the method.
LAZY_EXCEPTIONS = {"modes", "confirmation"}


def layer(part):
    return next(i for i, names in enumerate(LAYERS) if part in names)


def part_of(path):
    """First component below the package: ``engine`` for engine/blocks.py, ``modes``."""
    return path.relative_to(PACKAGE).with_suffix("").parts[0]


def imported_parts(path):
    """(part, lazy) for every import of the package's own modules; lazy: inside a function.

    Imports under ``if TYPE_CHECKING`` are for annotations only and do not count.
    """
    tree = ast.parse(path.read_text(encoding="utf-8"))
    skipped = set()
    lazy = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            skipped.update(map(id, ast.walk(node)))
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            lazy.update(map(id, ast.walk(node)))
    for node in ast.walk(tree):
        if id(node) in skipped:
            continue
        if isinstance(node, ast.Import):
            modules = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}:{node.lineno}: relative import"
            modules = [f"{node.module}.{alias.name}" for alias in node.names]
        else:
            continue
        for module in modules:
            names = module.split(".")
            if names[0] == "polefit":
                yield (names[1] if len(names) > 1 else "__init__"), id(node) in lazy


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_point_downwards_only(path):
    part = part_of(path)
    for target, lazy in imported_parts(path):
        if part in LAZY_EXCEPTIONS and lazy and target == "report":
            continue
        if target not in {n for names in LAYERS for n in names}:
            target = "__init__"  # a name of the package itself, such as polefit.__version__
            assert part in {"cli", "__main__", "report"}, f"{path} imports the package itself"
            continue
        assert layer(target) <= layer(part), f"{path.name}: {part} must not import {target}"
        if part == "engine":
            assert target in ENGINE_MAY_IMPORT, f"{path.name}: the engine must not know {target}"
        if part == "readers":
            assert target not in {"engine", "modes"}, f"{path.name}: readers know data only"


def test_engine_stands_on_numpy_and_scipy_alone():
    allowed = {"numpy", "scipy", "threadpoolctl", "polefit"}
    for path in SOURCES:
        if part_of(path) != "engine":
            continue
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Import):
                roots = [alias.name.split(".")[0] for alias in node.names]
            elif isinstance(node, ast.ImportFrom):
                roots = [str(node.module).split(".")[0]]
            else:
                continue
            foreign = set(roots) - allowed - sys.stdlib_module_names
            assert not foreign, f"{path.name} imports {foreign}"


def modules():
    """Every module of the package except ``__main__``, which runs when imported."""
    found = [polefit]
    for info in pkgutil.walk_packages([str(PACKAGE)], "polefit."):
        if not info.name.endswith("__main__"):
            found.append(importlib.import_module(info.name))
    return found


def public_objects():
    """(qualified name, object) of public functions, classes, methods and properties."""
    for module in modules():
        for name, thing in vars(module).items():
            if name.startswith("_") or getattr(thing, "__module__", None) != module.__name__:
                continue
            if inspect.isfunction(thing):
                yield f"{module.__name__}.{name}", thing
            elif inspect.isclass(thing):
                yield f"{module.__name__}.{name}", thing
                for member, value in vars(thing).items():
                    inner = (
                        value.__func__ if isinstance(value, classmethod | staticmethod) else value
                    )
                    inner = inner.fget if isinstance(inner, property) else inner
                    if not member.startswith("_") and inspect.isfunction(inner):
                        yield f"{module.__name__}.{name}.{member}", inner


def section(doc, title):
    """The lines of one numpydoc section, empty when it is absent."""
    match = re.search(rf"^{title}\n-+\n(.*?)(?=^\w[\w ]*\n-+\n|\Z)", doc, re.M | re.S)
    return match.group(1) if match else ""


def test_public_api_is_documented():
    bare = [name for name, thing in public_objects() if not inspect.getdoc(thing)]
    assert not bare
    assert not [m.__name__ for m in modules() if not m.__doc__]


def test_names_in_parameter_sections_exist():
    """A docstring whose Parameters name something that the signature does not have is wrong."""
    wrong = []
    for name, thing in public_objects():
        documented = {
            n.strip().lstrip("*")
            for line in section(inspect.getdoc(thing) or "", "Parameters").splitlines()
            if (m := re.match(r"^(\*{0,2}\w[\w, *]*?)\s*(:|$)", line))
            for n in m.group(1).split(",")
        }
        try:
            known = set(inspect.signature(thing).parameters)
        except (TypeError, ValueError):
            continue
        wrong += [f"{name}: {n}" for n in documented - known]
    assert not wrong


def test_the_agreed_functions_document_parameters_and_raises():
    """The public names of the package: numpydoc in full."""
    missing = []
    for name in sorted(set(polefit.__all__) - {"__version__"}):
        thing = getattr(polefit, name)
        doc = inspect.getdoc(thing) or ""
        if inspect.isclass(thing) and issubclass(thing, Exception):
            continue
        parameters = [p for p in inspect.signature(thing).parameters if p != "self"]
        if parameters and not section(doc, "Parameters"):
            missing.append(f"{name}: Parameters")
        if inspect.isfunction(thing):
            missing += [f"{name}: {t}" for t in ("Returns", "Raises") if not section(doc, t)]
            documented = section(doc, "Parameters")
            missing += [
                f"{name}: {p}" for p in parameters if not re.search(rf"\b{p}\b", documented)
            ]
    assert not missing


def test_every_name_of_the_package_is_there():
    for name in polefit.__all__:
        assert getattr(polefit, name) is not None
    with pytest.raises(AttributeError, match="no attribute"):
        _ = polefit.no_such_name


def test_nothing_prints():
    """Results are returned; only the command line writes, and by its own means."""
    for path in SOURCES:
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
                assert node.func.id != "print", f"{path}:{node.lineno}"


def test_nothing_unpickles_or_evaluates():
    """File content is never executed."""
    for path in SOURCES:
        text = path.read_text(encoding="utf-8")
        for node in ast.walk(ast.parse(text)):
            if isinstance(node, ast.Call):
                called = ast.unparse(node.func)
                assert called not in {"eval", "exec", "pickle.load", "pickle.loads"}, path
        assert "allow_pickle=True" not in text
        assert not re.search(r"^\s*import pickle|^\s*from pickle", text, re.M), path


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_modules_are_read_in_one_sitting(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) <= LONGEST_MODULE


def test_result_types_are_frozen():
    loose = [
        name
        for name, thing in public_objects()
        if inspect.isclass(thing)
        and hasattr(thing, "__dataclass_params__")
        and not thing.__dataclass_params__.frozen
    ]
    assert not loose


def tracked():
    """Names that git tracks; skipped where the checkout is not a repository."""
    run = subprocess.run(
        ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=False
    )
    if run.returncode:
        pytest.skip("not a git checkout")
    return [name for name in run.stdout.split("\0") if name]


def test_top_level_names_are_the_agreed_ones():
    names = {name.split("/")[0] for name in tracked()}
    assert {n for n in names if not n.startswith(".")} <= TOP_LEVEL


def test_data_files_are_small():
    """A clone stays quick: no tracked file above 300 kB."""
    large = [n for n in tracked() if (ROOT / n).is_file() and (ROOT / n).stat().st_size > 300_000]
    assert not large


def test_every_data_folder_tells_its_origin():
    assert "Invented" in (ROOT / "datasets" / "README.md").read_text(encoding="utf-8")
    told = (ROOT / "tests" / "data" / "README.md").read_text(encoding="utf-8")
    for path in (ROOT / "tests" / "data").glob("*.csv"):
        assert path.name in told


def test_importing_the_package_loads_nothing_heavy():
    """``polefit --help`` must be quick: NumPy and the rest come with the first use of a name."""
    code = "import sys, polefit; print([m for m in ('numpy', 'scipy', 'skrf') if m in sys.modules])"
    run = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert run.stdout.strip() == "[]"
