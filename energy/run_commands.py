"""The terminal's commands for bomb runs: `reduce` and `calibrate`."""

from __future__ import annotations

import argparse
import re
import sys
from typing import TYPE_CHECKING, Any

from energy.bomb.cautions import CAUTIONS

if TYPE_CHECKING:
    from energy.bomb.outcome import Reduction

METHOD_NAMES = ("regnault_pfaundler", "dickinson", "dickinson_exponential", "adiabatic")


def add(commands: Any) -> None:
    """Put both commands into the parser's list."""
    cautions = "Cautions:\n" + "\n".join(f"- {c}" for c in CAUTIONS)
    for name, line in (
        ("reduce", "raw bomb runs to gross energies"),
        ("calibrate", "heat capacity from benzoic acid runs"),
    ):
        p = commands.add_parser(name, help=line, description=f"{line[0].upper()}{line[1:]}.", epilog=cautions,
                                formatter_class=argparse.RawDescriptionHelpFormatter)  # fmt: skip
        p.add_argument("runs", help="run sheet, CSV, XLSX or Parquet: one row per run (see `template runs`)")
        p.add_argument("--thermograms", metavar="FILE", help="long table: run_id, time [s], temperature [°C]")
        p.add_argument("--method", choices=METHOD_NAMES, default=METHOD_NAMES[0], help="how the rise is corrected")
        p.add_argument("--nitric-acid", choices=("given", "share"), default="given",
                       help="share: of the heat, where nobody titrated")  # fmt: skip
        p.add_argument(
            "--rated-energy", metavar="TEXT", help="what the vessel is rated for, e.g. '30 kJ': a warning, no more"
        )
        p.add_argument("--decimal", choices=("point", "comma"))
        p.add_argument("--units", metavar="FILE", help='TOML file: "header" = "unit"')
        p.add_argument("--out", metavar="PATH", help="write results: .csv .xlsx .parquet .json .html")
        if name == "reduce":
            p.add_argument(
                "--heat-capacity", metavar="TEXT", help="for all runs, e.g. '10062 J/K'; else the sheet's calibration"
            )
            p.add_argument("--u-heat-capacity", metavar="TEXT", help="its standard uncertainty, e.g. '4 J/K'")
            p.add_argument("--sulfur", choices=("off", "separate", "total_acid"), default="off",
                           help="off for food and feed; for fuels: nitric acid found separately, or all acid booked as nitric")  # fmt: skip
            p.add_argument("--repeatability", metavar="TEXT", help="r by which duplicates are judged, e.g. '120 J/g'")
            p.add_argument("--samples", metavar="FILE", help="wide sample table (CSV) to put the gross energies beside")
            p.add_argument("--basis", choices=("as_analysed", "as_is", "dry_matter"), help="basis of the joined column")


def amount(text: str | None, dimension: str) -> float | None:
    """'10062 J/K' -> the number in the internal unit. Raises WrongUse."""
    from energy.bomb.runs import scale_of
    from energy.problems import UnitProblem, WrongUse

    if text is None:
        return None
    match = re.fullmatch(r"\s*([0-9.]+(?:[eE][+-]?\d+)?)\s*(\S.*?)\s*", text)
    if match is None:
        raise WrongUse(
            f"'{text}' is not a number with its unit.", "Write for example '10062 J/K', '30 kJ' or '120 J/g'."
        )
    try:
        return float(match[1]) * scale_of(match[2], dimension)
    except (UnitProblem, ValueError) as found:
        raise WrongUse(f"'{text}' cannot be read: {found}", "") from None


def run(options: argparse.Namespace) -> int:
    """Either command; returns the exit code."""
    from energy.bomb.reduction import calibrate, reduce_runs
    from energy.intake import units_given
    from energy.report import bench_work
    from energy.report.tables import check_ending

    if options.out:
        check_ending(options.out)
    wishes: dict[str, Any] = {
        "method": options.method, "nitric_acid": options.nitric_acid, "decimal": options.decimal,
        "rated_energy": amount(options.rated_energy, "heat"), "units": units_given(options.units),
    }  # fmt: skip
    if options.command == "calibrate":
        found = calibrate(options.runs, options.thermograms, **wishes)
        print(bench_work.calibrations_text(found))
        return _close(found, options, None)
    wishes |= {
        "heat_capacity": amount(options.heat_capacity, "heat_capacity"), "sulfur": options.sulfur,
        "u_heat_capacity": amount(options.u_heat_capacity, "heat_capacity"),
        "repeatability": amount(options.repeatability, "energy"),
    }  # fmt: skip
    found = reduce_runs(options.runs, options.thermograms, **wishes)
    joined = None
    if options.samples:
        import pandas as pd

        joined = found.joined(pd.read_csv(options.samples, dtype=str, keep_default_na=False), options.basis)
    print(bench_work.samples_text(found))
    return _close(found, options, joined)


def _close(found: Reduction, options: argparse.Namespace, joined: Any) -> int:
    """Notes, problems, files and cautions."""
    from energy.report import bench_work

    for note in found.notes:
        _tell(f"note: {note}")
    if found.problems:
        _tell(f"{len(found.problems)} problem(s) in the sheet:")
    for problem in found.problems[:100]:
        _tell(f"- {problem}")
    if options.out:
        for path in bench_work.save(found, options.out, joined):
            _tell(f"written: {path}")
    for caution in CAUTIONS:
        _tell(caution)
    return 0


def _tell(text: str) -> None:
    print(text, file=sys.stderr)
