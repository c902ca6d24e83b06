"""The shape of the code: one direction of imports, the two ends at the ends, docstrings throughout, heavy imports late."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from importlib.resources import files
from pathlib import Path

import pytest

import budgetcheck

PACKAGE = Path(budgetcheck.__file__).parent

ORDER = (
    "version",
    "text",
    "figures",
    "findings",
    "quadrature",
    "bounded",
    "rates",
    "paths",
    "exponents",
    "streams",
    "equivalence",
    "numerals",
    "keys",
    "declared",
    "assumptions",
    "timeline",
    "table",
    "roles",
    "ledger",
    "contradictions",
    "conventions",
    "rules.check",
    "rules.amounts",
    "rules.rates",
    "rules.heads",
    "rules.horizon",
    "rules.preferences",
    "rules",
    "audit",
    "intake",
    "rows",
    "drifts",
    "flows",
    "plan",
    "budget",
    "trace",
    "wealth",
    "weights",
    "usual",
    "carrying",
    "flow",
    "settling",
    "longrun",
    "extension",
    "estimates",
    "preferences",
    "verdict",
    "conditions",
    "notices",
    "assessment",
    "summary",
    "report.terminal",
    "report.json",
    "report",
    "pipeline",
    "__init__",
    "cli",
    "__main__",
)
"""Every module, lowest first: a module imports only from those above it in this list."""


def name_of(path: Path) -> str:
    """A module's name within the package."""
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" and len(parts) > 1 else parts)


MODULES = {name_of(path): ast.parse(path.read_text(encoding="utf-8")) for path in sorted(PACKAGE.rglob("*.py"))}


def imported(module: str) -> Iterator[tuple[str, int]]:
    """Modules of the package that a module imports anywhere, inside functions too, each with its line."""
    folder = module.split(".")[:-1] if module != "report" else ["report"]
    for node in ast.walk(MODULES[module]):
        if isinstance(node, ast.Import):
            for alias in node.names:
                if alias.name.split(".")[0] == "budgetcheck":
                    yield alias.name.partition(".")[2] or "__init__", node.lineno
        elif isinstance(node, ast.ImportFrom):
            base = list(folder[: len(folder) - node.level + 1]) if node.level else []
            path = (node.module or "").split(".") if node.module else []
            if not node.level:
                if path[:1] != ["budgetcheck"]:
                    continue
                path = path[1:]
            target = ".".join(base + path)
            for alias in node.names:
                inner = f"{target}.{alias.name}".lstrip(".")
                yield inner if inner in MODULES else target or "__init__", node.lineno


def outside(module: str) -> set[str]:
    """Names of other packages that a module imports anywhere."""
    found = set()
    for node in ast.walk(MODULES[module]):
        if isinstance(node, ast.Import):
            found |= {alias.name.split(".")[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and not node.level:
            found.add((node.module or "").split(".")[0])
    return found


def test_every_module_has_its_place_in_the_order() -> None:
    """A new module says where it belongs."""
    assert set(ORDER) == set(MODULES)


@pytest.mark.parametrize("module", ORDER)
def test_imports_go_one_way(module: str) -> None:
    """No module imports from itself or from one below it in the list, not even inside a function."""
    rank = ORDER.index(module)
    upward = [f"line {line}: {other}" for other, line in imported(module) if ORDER.index(other) >= rank]
    assert upward == [], f"{module} imports what stands on it"


def test_the_walk_sees_imports() -> None:
    """The test above would be empty if the walk saw nothing."""
    assert "text" in {other for other, _ in imported("findings")}
    assert {"assessment", "text", "figures"} <= {other for other, _ in imported("report.terminal")}
    assert "assessment" in {other for other, _ in imported("cli")}


@pytest.mark.parametrize("module", [module for module in ORDER if module not in ("cli", "__main__")])
def test_only_the_ends_know_the_terminal(module: str) -> None:
    """Options belong to the command line, styles to a renderer; the rest prints nothing and ends no program."""
    allowed = {"rich"} if module.startswith("report") else set()
    assert outside(module) & {"typer", "click", "rich", "argparse"} <= allowed
    calls = [node.func for node in ast.walk(MODULES[module]) if isinstance(node, ast.Call)]
    named = {f.id for f in calls if isinstance(f, ast.Name)} | {f.attr for f in calls if isinstance(f, ast.Attribute)}
    assert not named & {"input", "exit", "_exit", "SystemExit"}
    assert "print" not in {f.id for f in calls if isinstance(f, ast.Name)}


@pytest.mark.parametrize("module", ["quadrature", "bounded", "rates", "paths", "streams", "plan", "budget", "verdict"])
def test_the_middle_knows_no_files(module: str) -> None:
    """Pure functions between the two ends: neither files nor the system are imported."""
    assert not outside(module) & {"os", "sys", "io", "pathlib", "csv", "json", "tomllib", "pandas", "subprocess"}


def definitions(tree: ast.Module) -> Iterator[ast.AST]:
    """The module itself, its public functions and classes, and the public methods of these."""
    yield tree
    bodies = [tree.body]
    while bodies:
        for node in bodies.pop():
            if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
                yield node
                if isinstance(node, ast.ClassDef):
                    bodies.append(node.body)


@pytest.mark.parametrize("module", ORDER)
def test_everything_public_has_a_docstring(module: str) -> None:
    """Modules, functions, classes and methods without an underscore say what they are for."""
    bare = [
        getattr(node, "name", module)
        for node in definitions(MODULES[module])
        if ast.get_docstring(node) is None  # type: ignore[arg-type]
    ]
    assert bare == []


def test_the_package_says_that_it_is_typed() -> None:
    """Type checkers of other projects look for this file."""
    assert files("budgetcheck").joinpath("py.typed").is_file()


@pytest.mark.parametrize("name", budgetcheck.__all__)
def test_every_public_name_is_there(name: str) -> None:
    """What the package promises it has, though it imports on first use."""
    assert getattr(budgetcheck, name) is not None
    with pytest.raises(AttributeError, match=r"no attribute 'absent'"):
        _ = budgetcheck.absent


def loaded_by(code: str) -> set[str]:
    """Top-level packages that are loaded after this code has run in a fresh interpreter."""
    probe = f"import sys\n{code}\nprint(*sorted({{name.split('.')[0] for name in sys.modules}}))"
    done = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True, cwd=PACKAGE.parent)
    return set(done.stdout.split())


@pytest.mark.parametrize(
    ("code", "absent"),
    [
        ("import budgetcheck", {"numpy", "pandas", "scipy", "rich"}),
        ("import budgetcheck.cli", {"numpy", "pandas", "scipy"}),
        ("import budgetcheck.pipeline", {"pandas", "scipy", "typer", "rich"}),
        ("import budgetcheck.report.json", {"pandas", "scipy", "typer", "rich"}),
        ("import budgetcheck.report.terminal", {"pandas", "scipy", "typer"}),
    ],
)
def test_heavy_imports_wait_for_their_use(code: str, absent: set[str]) -> None:
    """A check from a cold start loads only what it needs."""
    assert not loaded_by(code) & absent


def test_totals_are_assessed_without_pandas_and_scipy(tmp_path: Path) -> None:
    """The common case, yearly totals from a file, needs neither."""
    plan = tmp_path / "plan.csv"
    plan.write_text("year,wage,consumption\n2031,100,90\n2032,100,90\n")
    code = f"import budgetcheck\nbudgetcheck.assess({str(plan)!r}, {{'market': {{'r': 0.03}}}})"
    assert not loaded_by(code) & {"pandas", "scipy"}
