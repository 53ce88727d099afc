"""Cells: text -> number. Decimal commas, censored values, and what is refused with its cure."""

from __future__ import annotations

import re
from dataclasses import dataclass

import numpy as np

NUMBER = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?")
_COMMA_NUMBER = re.compile(r"[+-]?\d*,\d+")
_AMBIGUOUS = re.compile(r"[+-]?\d{1,3}(,\d{3})+")
_NOT_A_NUMBER = ("n.d.", "nd", "n.d", "trace", "traces", "tr", "tr.", "na", "n/a", "-", "--", "not detected")


@dataclass
class Column:
    """Numbers of one column. value: (n,) NaN where empty or unusable. bad: index -> (what, cure)."""

    value: np.ndarray
    censored: np.ndarray
    u_censored: np.ndarray
    bad: dict[int, tuple[str, str]]


def decimal_of(texts: np.ndarray, separator: str) -> str:
    """'point', 'comma', or 'ambiguous' for the number cells of a whole table.

    A comma is a decimal comma when the file is not comma-separated, some cell has one comma that cannot be a
    thousands mark, and no cell has a decimal point.
    """
    with_comma = [t for t in texts if "," in t and re.fullmatch(r"[<>]?\s*[+-]?[\d.,]+", t)]
    if not with_comma:
        return "point"
    points = any(re.fullmatch(r"[<>]?\s*[+-]?\d*\.\d+", t) for t in texts)
    bare = [t.lstrip("<> ") for t in with_comma]
    unmistakable = any(_COMMA_NUMBER.fullmatch(t) and not _AMBIGUOUS.fullmatch(t) for t in bare)
    if points or not all(_COMMA_NUMBER.fullmatch(t) for t in bare):
        return "ambiguous"
    if unmistakable and separator != ",":
        return "comma"
    return "comma" if unmistakable else "ambiguous"


def numbers(texts: np.ndarray, comma: bool) -> Column:
    """(n,) texts -> numbers; the plain ones at once, the others one by one."""
    import pandas as pd

    cleaned = texts
    if comma:
        cleaned = np.array(
            [t.replace(",", ".") if t.count(",") == 1 and "." not in t else t for t in texts], dtype=object
        )
    parsed = pd.to_numeric(pd.Series(cleaned, dtype=object).replace("", np.nan), errors="coerce").to_numpy(dtype=float)
    empty = texts == ""
    value = np.where(np.isfinite(parsed), parsed, np.nan)
    censored = np.zeros(len(texts), dtype=bool)
    u = np.full(len(texts), np.nan)
    bad: dict[int, tuple[str, str]] = {}
    for i in np.flatnonzero(np.isnan(value) & ~empty).tolist():
        text = str(cleaned[i]).replace("\u2212", "-").replace("\u00a0", "").replace("\u2009", "").strip()
        if NUMBER.fullmatch(text) and np.isfinite(float(text)):
            value[i] = float(text)
        elif text.startswith("<") and NUMBER.fullmatch(text[1:].strip()):
            limit = float(text[1:])
            value[i], censored[i], u[i] = limit / 2, True, limit / np.sqrt(12)
        else:
            bad[i] = _why(text)
    return Column(value, censored, u, bad)


def _why(text: str) -> tuple[str, str]:
    lowered = text.lower()
    if lowered in _NOT_A_NUMBER:
        return "it is not a number.", "Leave the cell empty if it was not measured, or write '<' and the limit."
    if text.startswith(">"):
        return "an open upper bound has no value.", "Give the measured value."
    if text.endswith("%"):
        return "it carries a percent sign.", "Put the unit into the header and leave the number."
    if "," in text:
        return "the comma can be read in two ways.", "Declare decimal='comma' (--decimal comma), or write points."
    return "it is not a number.", "Write a plain number such as 12.3."
