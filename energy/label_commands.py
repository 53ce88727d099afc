"""The terminal's command for declared values: `declare`."""

from __future__ import annotations

import argparse
import sys
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from energy.assessment import Assessment

OUTCOMES = ("within", "outside", "inconclusive", "no_rule")


def add(commands: Any) -> None:
    """Put the command into the parser's list."""
    p = commands.add_parser("declare", help="may a declared energy stand, under one law or all of them",
                            description="Declared energy against what a law computes, rounds and tolerates.")  # fmt: skip
    p.add_argument("file", help="CSV, XLSX or Parquet; wide or long; declared energy [kJ/100 g] and [kcal/100 g]")
    p.add_argument("--law", required=True, help="a label law by its id, or 'all' to see them side by side")
    p.add_argument("--rule", choices=("simple", "guarded", "conditional"), default="simple",
                   help="decision rule, chosen before the result: simple acceptance, a guard band of U, or conditional")  # fmt: skip
    p.add_argument("--per", choices=("100g", "100ml", "serving"), default="100g", help="what the label speaks of")
    p.add_argument("--serving", type=float, metavar="GRAMS", help="size of a serving")
    p.add_argument(
        "--sampling", type=float, metavar="SHARE", help="relative SD of drawing the sample, to speak of the lot"
    )
    p.add_argument(
        "--production", type=float, metavar="SHARE", help="relative SD from unit to unit, to speak of the lot"
    )
    p.add_argument("--units-in-composite", type=int, default=1, metavar="N", help="units mixed into the sample tested")
    p.add_argument("--target", help="human, dog, ... (else the table's column 'target' says)")
    p.add_argument("--basis", help="basis of headers that name none")
    p.add_argument("--units", metavar="FILE", help='TOML file: "header" = "unit basis"')
    p.add_argument("--decimal", choices=("point", "comma"))
    p.add_argument("--out", metavar="PATH", help="write the table: .csv .xlsx .parquet .json .html")
    p.add_argument("--fail-on", metavar="WORDS", help=f"exit 3 if an outcome is among these: {', '.join(OUTCOMES)}")


def run(options: argparse.Namespace) -> int:
    """The command; returns the exit code."""
    from energy.assessment import assess
    from energy.declare import Lot
    from energy.intake import read_samples
    from energy.problems import WrongUse
    from energy.report import board, label_work
    from energy.report.tables import check_ending

    words = [w.strip() for w in (options.fail_on or "").split(",") if w.strip()]
    unknown = [w for w in words if w not in OUTCOMES]
    if unknown:
        raise WrongUse(f"--fail-on does not know {', '.join(unknown)}.", f"Use: {', '.join(OUTCOMES)}.")
    if options.out:
        check_ending(options.out)
    if (options.sampling is None) != (options.production is None):
        raise WrongUse(
            "A lot needs both --sampling and --production.", "Give the other one, or none for the sample tested."
        )
    lot = None if options.sampling is None else Lot(options.sampling, options.production, options.units_in_composite)
    samples = read_samples(
        options.file, units=options.units, basis=options.basis, target=options.target, decimal=options.decimal
    )
    a = assess(samples, law=options.law) if options.target or samples.target or "target" in samples.text else assess(
        samples, target="human", law=options.law
    )  # fmt: skip
    found = a.declare(per=options.per, serving=options.serving, decision=options.rule, lot=lot)
    table = label_work.table(a, found)
    print(label_work.text(a, found))
    _problems(a)
    if options.out:
        for path in label_work.save(table, options.out):
            _tell(f"written: {path}")
    for caution in board.CAUTIONS[:1]:
        _tell(caution)
    met = set(words) & set(table["verdict"])
    if met:
        _tell(f"--fail-on met: {', '.join(sorted(met))}")
        return 3
    return 0


def _problems(a: Assessment) -> None:
    if a.problems:
        _tell(f"{len(a.problems)} problem(s) in the table:")
    for problem in a.problems[:100]:
        _tell(f"- {problem}")


def _tell(text: str) -> None:
    print(text, file=sys.stderr)
