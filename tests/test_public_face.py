"""The names handed out, and that looking at the package costs nothing."""

import subprocess
import sys

import energy

NAMES = {
    "Assessment", "CatalogueProblem", "EnergyError", "FormulaProblem", "Problem", "Samples", "StructuralProblems",
    "UnitProblem", "WrongUse", "__version__", "assess", "assess_each", "equations", "feed_tolerance",
    "read_samples", "reduce_runs", "calibrate",
}  # fmt: skip


def test_the_public_names_are_these():
    assert set(energy.__all__) == NAMES


def test_every_public_name_is_there():
    assert all(getattr(energy, name) is not None for name in NAMES)


def test_importing_the_package_loads_nothing_heavy():
    code = "import energy, sys; print([m for m in ('pandas', 'numpy', 'pint') if m in sys.modules])"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"


def test_help_loads_nothing_heavy():
    code = (
        "import sys, energy.__main__ as m\n"
        "try: m.main(['--help'])\n"
        "except SystemExit: pass\n"
        "print([m for m in ('pandas', 'numpy', 'pint') if m in sys.modules])"
    )
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip().endswith("[]")
