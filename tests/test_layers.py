"""The layers hold: who may import whom, and what may be imported only late.

Read from the source with `ast`, so that nothing needs to be imported and packages that
are still to come are covered as soon as they exist.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from sys import stdlib_module_names

import pytest

PACKAGE = Path(__file__).parents[1] / "calib"
LAYERS = (
    "models",
    "curves",
    "quantification",
    "acceptance",
    "drift",
    "intake",
    "store",
    "bench",
    "report",
    "cli",
)

# Packages of calib that each layer may use at run time, beside calib.errors.
ALLOWED = {
    "models": set(),
    "curves": {"models"},
    "quantification": {"models", "curves"},
    "acceptance": {"models", "curves", "quantification"},
    "drift": {"models", "curves", "quantification"},
    "intake": set(),
    "store": {"shipped"},
    "bench": {*LAYERS[:7], "shipped", "__version__"},
    "report": {"acceptance", "drift", "bench", "shipped", "__version__"},
    "cli": {"bench", "report", "shipped", "__version__"},
}
CORE = ("models", "curves", "quantification", "acceptance", "drift")
# Standard-library modules with a clock, the disk, the network or unseeded chance in them.
IMPURE = {"time", "datetime", "random", "os", "pathlib", "io", "socket", "urllib", "sqlite3", "subprocess"}
CORE_LIBRARIES = {"numpy", "scipy"}
HEAVY = {"pandas", "matplotlib", "alembic", "openpyxl", "jinja2", "rich"}
# Reading back is part of a curve's public interface, but the inversion needs the curve:
# Curve.invert and Curve.back_calculate import upward, inside the method.
UPWARD = {("curves/curve.py", "calib.quantification.inverse")}


@dataclass(frozen=True)
class Import:
    """One import statement: the full module or name, and where it stands."""

    file: str
    name: str
    late: bool
    for_types_only: bool

    @property
    def library(self) -> str:
        return self.name.split(".")[0]

    @property
    def package(self) -> str:
        """Package below calib, or the name taken from calib itself."""
        return self.name.split(".")[1] if "." in self.name else ""


def is_type_checking(node: ast.AST) -> bool:
    return isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test)


def walk(node: ast.AST, file: str, late: bool = False, typing: bool = False) -> Iterator[Import]:
    for child in ast.iter_child_nodes(node):
        if isinstance(child, ast.Import):
            for alias in child.names:
                yield Import(file, alias.name, late, typing)
        elif isinstance(child, ast.ImportFrom):
            assert child.level == 0, f"{file}: relative import; write the full name"
            for alias in child.names:
                yield Import(file, f"{child.module}.{alias.name}", late, typing)
        inside = isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
        yield from walk(child, file, late or inside, typing or is_type_checking(child))


def imports(layer: str) -> list[Import]:
    return [
        found
        for path in sorted((PACKAGE / layer).rglob("*.py"))
        for found in walk(ast.parse(path.read_text(encoding="utf-8")), path.relative_to(PACKAGE).as_posix())
    ]


def everything() -> list[Import]:
    return [
        found
        for path in sorted(PACKAGE.rglob("*.py"))
        for found in walk(ast.parse(path.read_text(encoding="utf-8")), path.relative_to(PACKAGE).as_posix())
    ]


def listed(wrong: list[Import]) -> list[str]:
    return sorted({f"{i.file} imports {i.name}" for i in wrong})


def test_every_package_is_a_known_layer() -> None:
    found = {p.name for p in PACKAGE.iterdir() if (p / "__init__.py").exists()}
    assert found <= set(LAYERS), "give the new package its place in this file"


@pytest.mark.parametrize("layer", list(LAYERS))
def test_a_layer_uses_only_what_lies_below(layer: str) -> None:
    wrong = [
        i
        for i in imports(layer)
        if i.library == "calib"
        and not i.for_types_only
        and i.package not in ALLOWED[layer] | {layer, "errors"}
        and not any(i.file == file and i.late and i.name.startswith(name) for file, name in UPWARD)
    ]
    assert not wrong, listed(wrong)


@pytest.mark.parametrize("layer", CORE)
def test_the_core_is_pure(layer: str) -> None:
    """Only numpy, scipy and the harmless part of the standard library: no clock, no files, no store."""
    allowed = CORE_LIBRARIES | {"calib"} | (set(stdlib_module_names) - IMPURE)
    wrong = [i for i in imports(layer) if i.library not in allowed]
    assert not wrong, listed(wrong)


@pytest.mark.parametrize("layer", CORE)
def test_the_core_uses_no_unseeded_chance(layer: str) -> None:
    for path in sorted((PACKAGE / layer).rglob("*.py")):
        source = path.read_text(encoding="utf-8")
        assert "np.random.seed" not in source, path.name
        assert "default_rng()" not in source, path.name


def test_scipy_stats_is_never_imported() -> None:
    """It doubles the start-up time; scipy.special has the quantiles."""
    wrong = [i for i in everything() if i.name.startswith("scipy.stats")]
    assert not wrong, listed(wrong)


def test_heavy_libraries_are_imported_inside_the_functions_that_need_them() -> None:
    wrong = [i for i in everything() if i.library in HEAVY and not (i.late or i.for_types_only)]
    assert not wrong, listed(wrong)


def test_nothing_imports_upward_but_reading_back() -> None:
    """The exception must still exist, and stay late; otherwise strike it from the list."""
    found = {(i.file, i.name.rpartition(".")[0]) for i in imports("curves") if i.package == "quantification"}
    late = {i.late or i.for_types_only for i in imports("curves") if i.package == "quantification"}
    assert found - {("curves/curve.py", "calib.quantification.budget")} == UPWARD
    assert late == {True}


def test_report_and_command_line_compute_nothing() -> None:
    """report and cli compute nothing: no scipy there, and numpy only to hold arrays for a figure."""
    wrong = [i for layer in ("report", "cli") for i in imports(layer) if i.library == "scipy"]
    wrong += [i for i in imports("cli") if i.library == "numpy"]
    assert not wrong, listed(wrong)


def test_the_package_itself_loads_its_parts_on_first_use() -> None:
    source = (PACKAGE / "__init__.py").read_text(encoding="utf-8")
    wrong = [
        i for i in walk(ast.parse(source), "__init__.py") if i.library == "calib" and not i.for_types_only
    ]
    assert not wrong, listed(wrong)
