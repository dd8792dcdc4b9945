"""The arrows of DEVELOPERS.md: which package may import which."""

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "src" / "conetone"

# Each package and what it may import besides itself. Science sees no sweep, no table, no command line.
ALLOWED = {
    "errors": set(),
    "kernels": set(),
    "reference": {"errors"},
    "sprinkle": {"errors", "kernels", "reference"},
    "operators": {"errors", "kernels", "sprinkle"},
    "diagonalise": {"errors", "kernels", "sprinkle", "operators"},
    "fit": {"errors", "operators"},
    "aggregate": {"errors", "reference", "fit"},
    "records": {"errors", "sprinkle"},
    "sweep": {"errors", "reference", "sprinkle", "operators", "fit", "aggregate", "records"},
    "figure": {"errors", "reference"},
    "stages": {"errors", "kernels", "reference", "sprinkle", "operators", "diagonalise", "fit", "aggregate",
               "figure", "records", "sweep"},
    "run": {"errors", "records", "sprinkle", "sweep", "figure", "aggregate"},
    "cli": {"errors", "run", "stages", "sweep"},
    "__main__": {"cli"},
}  # fmt: skip
# Libraries that only some packages may touch: science takes arrays and returns results.
ONLY_IN = {
    "pydantic": {"sweep"},
    "yaml": {"sweep"},
    "pyarrow": {"records"},
    "pandas": {"figure"},
    "snakemake": {"run"},
    "matplotlib": {"figure"},
    "seaborn": {"figure"},
    "logging": set(),
    "typer": {"cli"},
    "rich": {"run"},
    "numba": {"kernels", "operators"},
    "llvmlite": {"kernels", "operators"},
    "platformdirs": {"kernels"},
}
MODULES = sorted(PACKAGE.rglob("*.py"))


def home(module: Path) -> str:
    return module.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imports(module: Path) -> set[str]:
    """Dotted names of every import in a module, those inside functions included."""
    found = set()
    for node in ast.walk(ast.parse(module.read_text())):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{module}: relative imports hide the arrows"
            found.add(
                f"{node.module}.{node.names[0].name}" if node.module == "conetone" else str(node.module)
            )
    return found


def test_every_package_has_its_arrows() -> None:
    assert {home(module) for module in MODULES} - {"__init__"} == set(ALLOWED)


@pytest.mark.parametrize("module", MODULES, ids=lambda module: str(module.relative_to(PACKAGE)))
def test_arrows_point_one_way(module: Path) -> None:
    where = home(module)
    for name in imports(module):
        first, *rest = name.split(".")
        if first == "conetone" and rest and rest[0] != "__version__":
            assert rest[0] == where or rest[0] in ALLOWED[where], f"{where} must not import {name}"
        if first in ONLY_IN:
            assert where in ONLY_IN[first], f"{where} must not import {name}"


def test_arrows_have_no_cycle() -> None:
    settled: set[str] = set()
    while settled != set(ALLOWED):
        free = {name for name, targets in ALLOWED.items() if targets <= settled} - settled
        assert free, f"a cycle among {set(ALLOWED) - settled}"
        settled |= free


@pytest.mark.parametrize("module", MODULES, ids=lambda module: str(module.relative_to(PACKAGE)))
def test_every_module_says_what_it_is_for(module: Path) -> None:
    assert ast.get_docstring(ast.parse(module.read_text()))
