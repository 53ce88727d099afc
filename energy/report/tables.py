"""Writing an assessment to CSV, XLSX, Parquet, JSON or HTML, whole or not at all."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from energy.problems import WrongUse

if TYPE_CHECKING:
    import pandas as pd

    from energy.assessment import Assessment

ENDINGS = (".csv", ".xlsx", ".parquet", ".json", ".html")
_RISKY = ("=", "+", "-", "@", "\t")


def check_ending(path: str | Path) -> Path:
    """The path, if its ending says how to write it. Raises WrongUse with the endings there are."""
    found = Path(path)
    if found.suffix.lower() not in ENDINGS:
        raise WrongUse(f"'{found.name}' has no ending that can be written.", f"Use one of: {', '.join(ENDINGS)}.")
    if not found.parent.is_dir():
        raise WrongUse(f"There is no folder '{found.parent}'.", "Make it first, or choose another one.")
    return found


def save(assessment: Assessment, path: str | Path) -> list[Path]:
    """Write results by the path's ending; a CSV gets its verdicts beside it as <name>_verdicts.csv."""
    goal = check_ending(path)
    ending = goal.suffix.lower()
    if ending == ".csv":
        beside = goal.with_name(f"{goal.stem}_verdicts.csv")
        whole(goal, lambda p: _text_safe(assessment.results).to_csv(p, index=False))
        whole(beside, lambda p: _text_safe(assessment.verdicts).to_csv(p, index=False))
        return [goal, beside]
    writers: dict[str, Callable[[Path], None]] = {
        ".xlsx": lambda p: _workbook(assessment, p),
        ".parquet": lambda p: assessment.results.to_parquet(p, index=False),
        ".json": lambda p: _json(assessment, p),
        ".html": lambda p: _document(assessment, p),
    }
    whole(goal, writers[ending])
    return [goal]


def save_each(assessments: Sequence[Assessment], path: str | Path) -> list[Path]:
    """Write several assessments by the path's ending: tables one below the other, documents side by side."""
    goal = check_ending(path)
    if len(assessments) == 1:
        return save(assessments[0], goal)
    if goal.suffix.lower() == ".html":
        return [f for a in assessments for f in save(a, goal.with_name(f"{goal.stem}_{a.target}{goal.suffix}"))]
    return save(Joined(assessments), goal)  # type: ignore[arg-type]


class Joined:
    """The tables of several assessments, one below the other."""

    def __init__(self, assessments: Sequence[Assessment]):
        self.assessments = assessments

    def __getattr__(self, name: str) -> Any:
        import pandas as pd

        found = [getattr(a, name) for a in self.assessments]
        if name == "inputs":
            return lambda: pd.concat([f() for f in found], ignore_index=True)
        if name == "problems":
            return [problem for problems in found for problem in problems]
        joined = pd.concat(found, ignore_index=True)
        return joined.drop_duplicates() if name == "sources" else joined


def whole(goal: Path, write: Callable[[Path], None]) -> None:
    """Write beside the goal and move into place, so that nobody meets half a file."""
    handle, name = tempfile.mkstemp(dir=goal.parent, prefix=f".{goal.stem}-", suffix=goal.suffix)
    os.close(handle)
    try:
        write(Path(name))
        os.chmod(name, 0o644)
        os.replace(name, goal)
    except BaseException:
        Path(name).unlink(missing_ok=True)
        raise


def _text_safe(frame: pd.DataFrame) -> pd.DataFrame:
    """Texts from a user's file that a spreadsheet would take for a formula get a leading apostrophe."""
    safe = frame.copy()
    for name in ("sample_id", "food_name"):
        if name in safe:
            safe[name] = [f"'{t}" if isinstance(t, str) and t.startswith(_RISKY) else t for t in safe[name]]
    return safe


def problem_table(assessment: Assessment) -> pd.DataFrame:
    """The problems found while reading, one row each."""
    import pandas as pd

    columns = ["severity", "row", "sample_id", "column", "value", "what", "cure", "where"]
    return pd.DataFrame([{c: getattr(p, c) for c in columns} for p in assessment.problems], columns=columns)


def _workbook(assessment: Assessment, path: Path) -> None:
    sheets = {"verdicts": assessment.verdicts, "declared": assessment.declared, "results": assessment.results, "inputs": assessment.inputs(), "problems": problem_table(assessment),
              "sources": assessment.sources, "balances": assessment.balances}  # fmt: skip
    workbook({name: sheet for name, sheet in sheets.items() if name != "declared" or len(sheet)}, path)


def workbook(sheets: dict[str, pd.DataFrame], path: Path) -> None:
    """Tables as the sheets of one workbook: numbers as numbers, texts as texts, nothing as a formula."""
    import xlsxwriter

    options = {"constant_memory": True, "strings_to_formulas": False, "strings_to_urls": False, "strings_to_numbers": False,
               "nan_inf_to_errors": True}  # fmt: skip
    with xlsxwriter.Workbook(path, options) as book:
        head = book.add_format({"bold": True, "bottom": 1})
        for name, frame in sheets.items():
            sheet = book.add_worksheet(name)
            sheet.freeze_panes(1, 1)
            for k, column in enumerate(frame.columns):
                sheet.write_string(0, k, str(column), head)
            for r, row in enumerate(frame.itertuples(index=False), start=1):
                for k, value in enumerate(row):
                    _cell(sheet, r, k, value)


def _cell(sheet: object, r: int, k: int, value: object) -> None:
    import numpy as np

    if value is None or (isinstance(value, (float, np.floating)) and not np.isfinite(value)):
        return
    if isinstance(value, (bool, np.bool_)):
        sheet.write_boolean(r, k, bool(value))  # type: ignore[attr-defined]
    elif isinstance(value, (int, float, np.integer, np.floating)):
        sheet.write_number(r, k, float(value))  # type: ignore[attr-defined]
    else:
        sheet.write_string(r, k, str(value))  # type: ignore[attr-defined]


def _json(assessment: Assessment, path: Path) -> None:
    import json

    tables = {"results": assessment.results, "verdicts": assessment.verdicts, "declared": assessment.declared, "problems": problem_table(assessment),
              "sources": assessment.sources}  # fmt: skip
    body = ",\n".join(f"{json.dumps(n)}: {t.to_json(orient='records', double_precision=15)}" for n, t in tables.items())
    path.write_text("{" + body + "}\n", encoding="utf-8")


def _document(assessment: Assessment, path: Path) -> None:
    from energy.report.document import document

    path.write_text(document(assessment), encoding="utf-8")
