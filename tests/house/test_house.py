"""The house keeps its plan: who may import whom, no cycles, small files and functions, no bag of leftovers."""

import ast
import re
from pathlib import Path
from statistics import median

import pytest

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "backtest"
FILES = sorted(PACKAGE.rglob("*.py"))

LONGEST_FILE = 300
LONGEST_FUNCTION = 40
RAISED: dict[str, int] = {}
"""Raised caps, each one reviewed number, by "path:function"."""
WRITTEN = {"backtest/kernels/passes.py"}
"""Files written by a script that stands beside them: outside the caps, held to the script by a test."""
COMPILER = {"compiled.py", "lanes.py"}
"""The kernel files that may speak to numba: the one that compiles and caches, and the vector type."""

# room -> what it may import inside the package
INSIDE = {
    "errors": set(),
    "kernels": {"kernels"},
    "records": {"errors"},
    "study_form": set(),
    "study": {"study_form", "errors"},
    "values": {"errors"},
    "reading": {"reading", "records", "errors", "study_form"},
    "forecasting": {"forecasting", "records", "errors", "values", "kernels"},
    "judging": {"judging", "records", "errors", "values", "kernels"},
    "recording": {"recording", "records", "errors"},
    "reporting": {"reporting", "records", "errors"},
    "explaining": {"explaining", "forecasting", "judging", "kernels", "records", "errors"},
    "verbs": {"reading", "forecasting", "judging", "kernels", "records", "errors", "values"},
    "review": {"verbs", "study_form", "judging", "forecasting", "recording", "explaining", "records", "errors"},
    "pipeline": {"review", "verbs", "study_form", "reading", "forecasting", "judging", "recording", "reporting",
                 "explaining", "kernels", "records", "errors", "values"},
    "cli": {"pipeline", "study", "errors"},
    "__init__": {"pipeline", "verbs", "study"},
}  # fmt: skip
FREE = {"numpy", "pandas"}
OUTSIDE = {
    "errors": set(),
    "kernels": {"numpy", "scipy.special", "numba", "llvmlite"},
    "records": FREE,
    "study_form": FREE | {"pydantic"},
    "study": {"pydantic"},
    "values": set(),
    "reading": FREE | {"pyarrow"},
    "forecasting": FREE | {"scipy.special", "arch"},
    "judging": FREE | {"scipy.special", "scipy.sparse", "arch"},
    "recording": FREE | {"pyarrow"},
    "reporting": FREE | {"matplotlib", "jinja2", "markupsafe"},
    "explaining": FREE,
    "verbs": FREE,
    "review": FREE,
    "pipeline": FREE,
    "cli": {"typer", "rich"},
    "__init__": set(),
}
LATE = {
    ("reporting/figures.py", "matplotlib"),
    ("forecasting/library.py", "arch"),
    ("judging/confidence_set.py", "arch"),
}
"""Imports allowed inside functions: one place per heavy library."""


def name(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


def room(path: Path) -> str:
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imports(node: ast.AST) -> list[tuple[str, ast.AST]]:
    found = []
    for item in ast.walk(node):
        if isinstance(item, ast.Import):
            found += [(alias.name, item) for alias in item.names]
        elif isinstance(item, ast.ImportFrom):
            assert item.level == 0, "imports are written in full"
            found += [(f"{item.module}.{alias.name}", item) for alias in item.names]
    return found


def functions(tree: ast.AST) -> list[ast.FunctionDef]:
    return [n for n in ast.walk(tree) if isinstance(n, ast.FunctionDef)]


def code_lines(function: ast.FunctionDef, source: list[str]) -> int:
    """Lines of a function that hold code: no docstring, no comment, no blank line."""
    first = function.body[0]
    text = isinstance(first, ast.Expr) and isinstance(first.value, ast.Constant) and isinstance(first.value.value, str)
    skip = set(range(first.lineno, (first.end_lineno or 0) + 1)) if text else set()
    lines = range(function.lineno, (function.end_lineno or 0) + 1)
    return sum(1 for i in lines if i not in skip and source[i - 1].split("#")[0].strip())


@pytest.mark.parametrize("path", FILES, ids=name)
def test_a_room_imports_only_what_its_floor_allows(path):
    import sys

    mine = room(path)
    for module, _ in imports(ast.parse(path.read_text())):
        parts = module.split(".")
        if parts[0] == "backtest":
            assert len(parts) > 1, "import from a module, not from the package"
            assert parts[1] in INSIDE[mine], f"{mine} may not import {module}"
        elif parts[0] not in sys.stdlib_module_names:
            allowed = OUTSIDE[mine]
            assert any(module == a or module.startswith(f"{a}.") for a in allowed), f"{mine} may not import {module}"


def test_only_two_modules_speak_to_the_compiler():
    for path in FILES:
        outside = {module.split(".")[0] for module, _ in imports(ast.parse(path.read_text()))}
        assert path.name in COMPILER or "numba" not in outside, name(path)


def test_modules_do_not_import_each_other_in_a_circle():
    names = {".".join(p.relative_to(ROOT).with_suffix("").parts): p for p in FILES}
    edges = {}
    for module, path in names.items():
        wanted = {m for m, _ in imports(ast.parse(path.read_text()))}
        edges[module] = {n for n in names if n != module and any(w == n or w.startswith(f"{n}.") for w in wanted)}
    done: set[str] = set()

    def walk(module: str, above: tuple[str, ...]) -> None:
        assert module not in above, " -> ".join([*above, module])
        if module not in done:
            for other in edges[module]:
                if not other.endswith("__init__"):
                    walk(other, (*above, module))
            done.add(module)

    for module in names:
        walk(module, ())


@pytest.mark.parametrize("path", FILES, ids=name)
def test_imports_stand_at_the_top(path):
    for function in functions(ast.parse(path.read_text())):
        for module, _ in imports(function):
            place = path.relative_to(PACKAGE).as_posix()
            assert (place, module.split(".")[0]) in LATE, f"{name(path)}: {function.name} imports {module}"


@pytest.mark.parametrize("path", FILES, ids=name)
def test_files_and_functions_stay_small(path):
    if name(path) in WRITTEN:
        return
    text = path.read_text()
    source = text.splitlines()
    assert len(source) <= LONGEST_FILE
    for function in functions(ast.parse(text)):
        cap = RAISED.get(f"{name(path)}:{function.name}", LONGEST_FUNCTION)
        assert code_lines(function, source) <= cap, f"{function.name} has {code_lines(function, source)} code lines"


def test_the_median_function_is_short():
    sizes = [
        code_lines(f, path.read_text().splitlines()) for path in FILES for f in functions(ast.parse(path.read_text()))
    ]
    assert median(sizes) <= 12


def test_every_raised_cap_is_still_needed():
    for place, cap in RAISED.items():
        path, function = place.split(":")
        text = (ROOT / path).read_text()
        found = next(f for f in functions(ast.parse(text)) if f.name == function)
        assert LONGEST_FUNCTION < code_lines(found, text.splitlines()) <= cap


def test_there_is_no_bag_of_leftovers():
    assert not [p for p in FILES if re.search(r"util|helper|misc|common", p.stem)]


@pytest.mark.parametrize("path", [p for p in FILES if p.name == "__init__.py"], ids=name)
def test_init_files_hold_no_logic(path):
    body = ast.parse(path.read_text()).body
    for node in body[1:]:
        names = isinstance(node, ast.Assign) and [t.id for t in node.targets if isinstance(t, ast.Name)] == ["__all__"]
        assert isinstance(node, ast.ImportFrom) or names


def test_the_public_verbs_are_named():
    import backtest

    assert sorted(backtest.__all__) == ["forecast", "judge", "read_study", "run"]
    assert all(callable(getattr(backtest, verb)) for verb in backtest.__all__)


@pytest.mark.parametrize("path", FILES, ids=name)
def test_public_things_have_docstrings(path):
    tree = ast.parse(path.read_text())
    assert ast.get_docstring(tree)
    for node in tree.body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            assert ast.get_docstring(node), f"{name(path)}: {node.name}"


def test_the_top_level_holds_what_it_should():
    import subprocess

    tracked = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout.split(
        "\n"
    )
    top = {line.split("/")[0] for line in tracked if line and not line.startswith(".")}
    assert top <= {
        "README.md",
        "DEVELOPERS.md",
        "LICENSE",
        "pyproject.toml",
        "backtest",
        "tests",
        "data_demo",
        "reports",
    }


def test_the_first_result_does_not_wait_for_heavy_libraries():
    import subprocess
    import sys

    code = "import sys, backtest; print([m for m in ('arch', 'scipy.stats', 'matplotlib') if m in sys.modules])"
    found = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"
