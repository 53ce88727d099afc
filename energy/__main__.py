"""The terminal: `python -m energy ...`.

Tables go to stdout, everything else to stderr. Exit 0 done, 1 structural problems (all listed, nothing written),
2 wrong use, 3 a verdict named by --fail-on was met.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from energy import label_commands, run_commands
from energy.problems import EnergyError, StructuralProblems

if TYPE_CHECKING:
    from energy.assessment import Assessment

VERDICTS = ("concordant", "biased", "inconclusive", "discordant", "screening", "single_route", "not_computed")
DEMO_FOLDER = "energy-demo"


def parser() -> argparse.ArgumentParser:
    """The command line's grammar."""
    top = argparse.ArgumentParser(
        prog="python -m energy", description="Bomb and composition: two routes to one energy."
    )
    commands = top.add_subparsers(dest="command", required=True, metavar="COMMAND")
    assess = commands.add_parser("assess", help="assess a table of samples")
    assess.add_argument("file", help="CSV, XLSX or Parquet; wide or long")
    _common(assess)
    assess.add_argument("--out", metavar="PATH", help="write results: .csv .xlsx .parquet .json .html")
    assess.add_argument("--fail-on", metavar="WORDS", help=f"exit 3 if a verdict is among these: {', '.join(VERDICTS)}")
    listing = commands.add_parser("equations", help="the catalogue, or one entry of it")
    listing.add_argument("id", nargs="?", help="show one entry whole")
    listing.add_argument("--target")
    listing.add_argument("--stage")
    listing.add_argument("--route")
    listing.add_argument("--house", metavar="FILE", help="TOML file of the house's own equations")
    run_commands.add(commands)
    label_commands.add(commands)
    template = commands.add_parser("template", help="an empty table to fill in")
    template.add_argument("kind", choices=("samples", "long", "runs"))
    template.add_argument("--target", help="an animal's name gives the columns of a feed laboratory")
    commands.add_parser("demo", help=f"assess the invented demo foods and feeds; writes into ./{DEMO_FOLDER}/")
    return top


def _common(p: argparse.ArgumentParser) -> None:
    p.add_argument("--target", help="human, dog, ... (else the table's column 'target' says; it may name several)")
    p.add_argument("--law", help="a label law by its id, or 'all'")
    p.add_argument("--basis", help="basis of headers that name none: as_is, dry_matter, as_analysed, organic_matter")
    p.add_argument("--units", metavar="FILE", help='TOML file: "header" = "unit basis"')
    p.add_argument("--decimal", choices=("point", "comma"))
    p.add_argument("--bomb-system")
    p.add_argument("--composition-system")
    p.add_argument("--systems", choices=("default", "all"), default="default")
    p.add_argument("--limit", help="practical limit: 5%% or '100 kJ/100 g'")
    p.add_argument("--unit", help="unit of the tables, e.g. 'kJ/100 g'")
    p.add_argument("--house", metavar="FILE", help="TOML file of the house's own equations")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run a command; returns the exit code."""
    options = parser().parse_args(arguments)
    try:
        run = {"assess": _assess, "equations": _equations, "template": _template, "demo": _demo,
               "reduce": run_commands.run, "calibrate": run_commands.run,
               "declare": label_commands.run}[options.command]  # fmt: skip
        return run(options)
    except StructuralProblems as problems:
        _tell(str(problems))
        return 1
    except EnergyError as problem:
        _tell(str(problem))
        return 2
    except BrokenPipeError:
        sys.stderr.close()
        return 0
    except OSError as problem:
        _tell(f"{problem.filename or 'file'}: {problem.strerror or problem}. Check the path and your rights.")
        return 2


def _tell(text: str) -> None:
    print(text, file=sys.stderr)


def _run(options: argparse.Namespace) -> list[Assessment]:
    from energy.assessment import assess, assess_each, named_targets
    from energy.intake import read_samples

    samples = read_samples(
        options.file, units=options.units, basis=options.basis, target=options.target, decimal=options.decimal
    )
    wishes = {
        "bomb_system": options.bomb_system,
        "composition_system": options.composition_system,
        "law": options.law,
        "limit": options.limit,
        "systems": options.systems,
        "unit": options.unit,
        "house": options.house,
    }
    if options.target is None and len(named_targets(samples)) > 1:
        return list(assess_each(samples, **wishes).values())
    return [assess(samples, **wishes)]


def _assess(options: argparse.Namespace) -> int:
    from energy.report import board
    from energy.report.tables import check_ending, save_each

    words = [w.strip() for w in (options.fail_on or "").split(",") if w.strip()]
    unknown = [w for w in words if w not in VERDICTS]
    if unknown:
        _tell(f"--fail-on does not know {', '.join(unknown)}. Use: {', '.join(VERDICTS)}.")
        return 2
    if options.out:
        check_ending(options.out)
    assessments = _run(options)
    print("\n\n".join(board.text(a) for a in assessments))
    for assessment in assessments:
        _problems(assessment)
    if options.out:
        for path in save_each(assessments, options.out):
            _tell(f"written: {path}")
    for caution in board.CAUTIONS:
        _tell(caution)
    met = set(words) & {v for a in assessments for v in a.verdicts["verdict"]}
    if met:
        _tell(f"--fail-on met: {', '.join(sorted(met))}")
        return 3
    return 0


def _problems(assessment: Assessment) -> None:
    if assessment.problems:
        _tell(f"{len(assessment.problems)} problem(s) in the table:")
    for problem in assessment.problems[:100]:
        _tell(f"- {problem}")
    if len(assessment.problems) > 100:
        _tell(f"- ... and {len(assessment.problems) - 100} more, all in the written results")


def _equations(options: argparse.Namespace) -> int:
    from energy.assessment import equations
    from energy.problems import WrongUse

    table = equations(options.target, options.stage, options.route, house=options.house)
    if options.id is None:
        for row in table.itertuples(index=False):
            print(f"{row.id:<44}{row.kind or row.stage!s:<15}{row.route:<13}{row.source_words:<46.45}{row.title}")
        return 0
    found = table[table["id"] == options.id]
    if found.empty:
        raise WrongUse(f"There is no entry '{options.id}'.", "List them with: python -m energy equations.")
    for name, value in found.iloc[0].items():
        if value not in ("", None) and value == value:
            print(f"{str(name).replace('_', ' '):<18}{value}")
    return 0


def _template(options: argparse.Namespace) -> int:
    from energy.catalogue.records import TARGETS
    from energy.problems import WrongUse

    if options.target is not None and options.target not in TARGETS:
        raise WrongUse(f"The target '{options.target}' is not known.", f"One of: {', '.join(TARGETS)}.")
    if options.kind == "samples" and options.target not in (None, "human", "none"):
        unit = "% as fed" if options.target in ("dog", "cat") else "g/kg DM"
        names = ["crude protein", "crude fat", "crude fibre", "ash"]
        names += [] if options.target in ("dog", "cat") else ["starch", "sugars", "NDF", "ADF"]
        print(
            "sample_id,name,target,form,fat_method,starch_method,moisture_method,dry matter [%],residual moisture [%],"
            + ",".join(f"{name} [{unit}]" for name in names)
            + f",gross energy [MJ/kg {unit.split(' ', 1)[1]}],u(gross energy) [MJ/kg],energy digestibility [%]"
        )
    elif options.kind == "samples":
        print(
            "sample_id,name,target,food_group,form,fat_method,moisture_method,nitrogen_factor,moisture [%],"
            "crude protein [g/100 g as is],fat [g/100 g as is],available carbohydrate [g/100 g as is],"
            "total dietary fibre [g/100 g as is],ash [g/100 g as is],gross energy [kJ/100 g as is],"
            "gross energy #2 [kJ/100 g as is],u(gross energy) [kJ/100 g],declared energy [kJ/100 g]"
        )
    elif options.kind == "runs":
        from energy.bomb.runs import template

        print(template())
    else:
        print("sample_id,name,analyte,result,unit,basis,method,loq,U,k,replicate")
    return 0


def _demo(options: argparse.Namespace) -> int:
    import shutil

    from energy.assessment import assess, assess_each, demo_paths
    from energy.report import board
    from energy.report.tables import save_each

    folder = _free_folder(Path(DEMO_FOLDER))
    folder.mkdir()
    _tell("Invented demo data: no real food, maker or laboratory.")
    for path in demo_paths():
        shutil.copy(path, folder / path.name)
        if path.stem.startswith("foods"):
            found = [assess(folder / path.name, target="human", law="eu_1169_2011", unit="kJ/100 g")]
        else:
            found = list(assess_each(folder / path.name).values())
        for assessment in found:
            print(board.text(assessment), end="\n\n")
            _problems(assessment)
        for ending in (".csv", ".xlsx", ".html"):
            save_each(found, folder / f"{path.stem}_evidence{ending}")
    _tell(f"Evidence is in ./{folder}/: *_evidence.html to read, .xlsx and .csv to recompute.")
    for caution in board.CAUTIONS:
        _tell(caution)
    return 0


def _free_folder(folder: Path) -> Path:
    """The folder, or the next free name: the demo never writes over a file."""
    free, number = folder, 2
    while free.exists():
        free, number = folder.with_name(f"{folder.name}-{number}"), number + 1
    return free


if __name__ == "__main__":
    sys.exit(main())
