"""The shape of the code: imports point down, pint stays at the door, pages do no arithmetic."""

import ast
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
LAYERS = [
    ["energy", "energy.problems"],
    [
        "energy.conformity",
        "energy.replicates",
        "energy.scores",
        "energy.robust",
        "energy.propagation",
        "energy.equivalence",
    ],
    ["energy.interlaboratory", "energy.agreement"],
    ["energy.units"],
    ["energy.bomb", "energy.bomb.constants", "energy.bomb.cautions", "energy.bomb.rating", "energy.bomb.drift"],
    ["energy.bomb.periods", "energy.bomb.preparation"],
    ["energy.bomb.rise", "energy.bomb.corrections", "energy.bomb.net_value", "energy.bomb.open_vessel"],
    ["energy.bomb.heat_capacity", "energy.bomb.check_substance", "energy.bomb.charts"],
    ["energy.quantities", "energy.algebra", "energy.formula", "energy.basis", "energy.reconcile"],
    ["energy.catalogue", "energy.catalogue.records", "energy.catalogue.tables"],
    ["energy.catalogue.chains", "energy.catalogue.derived"],
    ["energy.catalogue.reader"],
    ["energy.rounding", "energy.label_law"],
    ["energy.feedlaw"],
    ["energy.samples"],
    ["energy.targets"],
    ["energy.silage"],
    ["energy.tabular", "energy.cells", "energy.headers", "energy.uncertainty", "energy.duplicates", "energy.gather"],
    ["energy.wide", "energy.long"],
    ["energy.intake"],
    ["energy.bomb.runs", "energy.recipe_table"],
    ["energy.bomb.outcome"],
    ["energy.bomb.reduction"],
    ["energy.bomb.control"],
    ["energy.bomb.record"],
    ["energy.resolve"],
    ["energy.programs"],
    ["energy.evaluate"],
    ["energy.display"],
    ["energy.recipe"],
    ["energy.compare", "energy.consistency"],
    ["energy.choice", "energy.balance"],
    ["energy.sensitivity", "energy.matrices", "energy.label_energy"],
    ["energy.monte_carlo", "energy.label_tolerance"],
    ["energy.declare"],
    ["energy.handling"],
    ["energy.causes"],
    ["energy.explain"],
    ["energy.figures", "energy.order"],
    ["energy.reasons"],
    ["energy.partition"],
    ["energy.views"],
    ["energy.assessment"],
    [
        "energy.report",
        "energy.report.tables",
        "energy.report.board",
        "energy.report.document",
        "energy.report.screen",
        "energy.report.label_work",
    ],
    ["energy.report.recipe_work", "energy.report.record_work"],
    ["energy.report.entries", "energy.report.agreement", "energy.report.bench_work"],
    [
        "energy.pages",
        "energy.pages.drawing",
        "energy.pages.session",
        "energy.pages.agreement_plots",
        "energy.pages.bench",
        "energy.pages.sample",
        "energy.pages.equations",
        "energy.pages.bomb_drawing",
        "energy.pages.bomb_runs",
        "energy.pages.calorimeter",
        "energy.pages.declared",
    ],
    ["energy.run_commands", "energy.label_commands"],
    ["energy.__main__"],
]
HEIGHT = {module: level for level, modules in enumerate(LAYERS) for module in modules}
#: an assessment can save itself; the report module is loaded inside that method
ALLOWED = {("energy.assessment", "energy.report.tables")}
FILES = sorted((ROOT / "energy").rglob("*.py"))


def module_of(path: Path) -> str:
    name = ".".join(path.relative_to(ROOT).with_suffix("").parts)
    return name.removesuffix(".__init__")


def at_run_time(tree: ast.Module):
    """Imports of a module that happen when it runs: those under TYPE_CHECKING do not."""
    for node in ast.walk(tree):
        if isinstance(node, ast.If) and isinstance(node.test, ast.Name) and node.test.id == "TYPE_CHECKING":
            node.body = []
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield node.module
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


@pytest.mark.parametrize("path", FILES, ids=module_of)
def test_every_module_has_its_place(path):
    assert module_of(path) in HEIGHT, "give the new module its layer in this test"


@pytest.mark.parametrize("path", FILES, ids=module_of)
def test_imports_point_down(path):
    me = module_of(path)
    for other in at_run_time(ast.parse(path.read_text())):
        if other in HEIGHT and (me, other) not in ALLOWED:
            assert HEIGHT[other] <= HEIGHT[me], f"{me} imports {other}"


def test_only_units_imports_pint():
    users = [module_of(p) for p in FILES if "pint" in set(at_run_time(ast.parse(p.read_text())))]
    assert users == ["energy.units"]


PAGES = [*sorted((ROOT / "energy" / "pages").glob("*.py")), ROOT / "app.py"]


@pytest.mark.parametrize("path", PAGES, ids=lambda p: p.stem)
def test_pages_hold_no_arithmetic(path):
    """No - * / ** anywhere in a page, and + only to join texts: every number comes from an assessment."""
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.BinOp) and not isinstance(node.op, ast.BitOr):  # `A | None` is a type
            assert isinstance(node.op, ast.Add), f"line {node.lineno}"
            texts = [n for n in ast.walk(node) if isinstance(n, ast.Constant)]
            assert all(isinstance(t.value, str) for t in texts), f"line {node.lineno}"


def test_no_file_is_called_a_drawer_of_odds_and_ends():
    assert not [p for p in FILES if p.stem in {"util", "utils", "helper", "helpers", "common", "misc"}]


def test_top_level_holds_only_what_the_layout_allows():
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout.split()
    tops = {name.split("/")[0] for name in listed}
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "app.py", "energy", "tests", "demo_data"}
    assert {t for t in tops if not t.startswith(".")} <= allowed
