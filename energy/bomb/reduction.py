"""From a sheet of raw bomb runs to gross energies: `reduce_runs`, and `calibrate` for the benzoic acid runs in it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from energy.bomb import corrections, heat_capacity
from energy.bomb.constants import value as constant
from energy.bomb.corrections import SULFUR_REASON, Budget, Term
from energy.bomb.drift import Floats
from energy.bomb.heat_capacity import Calibration
from energy.bomb.outcome import BIT, LACKS, Reduction
from energy.bomb.periods import periods
from energy.bomb.preparation import net_mass
from energy.bomb.rating import over_rating, run_energy
from energy.bomb.rise import BIT as RISE_BIT
from energy.bomb.rise import METHODS, Rise, corrected_rise
from energy.bomb.runs import KINDS, RUN_STATUS, RunSheet, read_runs
from energy.problems import Problem, WrongUse
from energy.quantities import dictionary

CALIBRATION = KINDS.index("calibration")
#: rises so many times smaller or larger than those of the calibration are told (ours)
FAR = 3.0
NITRIC_ACID = ("given", "share")


def reduce_runs(
    runs: Any,
    thermograms: Any = None,
    *,
    heat_capacity: float | None = None,
    u_heat_capacity: float | None = None,
    calibrations: tuple[Calibration, ...] = (),
    method: str = "regnault_pfaundler",
    sulfur: str = "off",
    nitric_acid: str = "given",
    repeatability: float | None = None,
    rated_energy: float | None = None,
    moved: Mapping[str, tuple[float, float]] | None = None,
    units: Mapping[str, str] | None = None,
    decimal: str | None = None,
    name: str | None = None,
    thermograms_name: str | None = None,
) -> Reduction:
    """Reduce a run sheet.

    runs, thermograms : path, bytes (with `name`, `thermograms_name`), DataFrame, or a RunSheet; see run_columns.toml for
    the columns. heat_capacity, u_heat_capacity : J/K for every run, in place of the sheet's own calibrations.
    calibrations : those of another sheet (`calibrate(...).calibrations`). method : rise from thermograms, one of
    rise.METHODS. sulfur : off (food and feed), separate, total_acid. nitric_acid : given (titration or heat in the sheet)
    or share (of the heat, GB/T 213, where the sheet gives none). repeatability : r [J/g] duplicates are judged by.
    rated_energy : J the vessel is rated for. moved : run id -> (firing, end of the main period) in s, in place of what the
    sheet says or the tool finds. Raises StructuralProblems, WrongUse.
    """
    sheet = read_runs(runs, thermograms, units, decimal, name, thermograms_name)
    if nitric_acid not in NITRIC_ACID:
        raise WrongUse(f"nitric_acid = '{nitric_acid}' is not known.", f"One of: {', '.join(NITRIC_ACID)}.")
    if method not in METHODS:
        raise WrongUse(f"The method '{method}' is not known.", f"One of: {', '.join(METHODS)}.")
    if heat_capacity is not None and not heat_capacity > 0:
        raise WrongUse(f"A heat capacity of {heat_capacity:g} J/K is impossible.", "Give it in J/K, such as 10062.")
    n = len(sheet)
    for column, k in (("firing_time", 0), ("main_end", 1)):
        if moved:
            times = [moved[str(r)][k] if str(r) in moved else np.nan for r in sheet.text["run_id"]]
            sheet.number[column] = np.where(np.isnan(times), sheet.values(column), times)
    flags = np.zeros(n, dtype=np.int64)
    told: list[Problem] = []
    rise, u_rise, found = _rises(sheet, method)
    mass = _masses(sheet)
    calibrating = sheet.kind_code == CALIBRATION
    any_calibrating = bool(calibrating.any())
    terms = _terms(sheet, mass, sulfur, calibrating)
    usable = ~(sheet.is_void | sheet.is_rejected)
    own: tuple[Calibration, ...] = ()
    capacity, u_capacity = np.full(n, np.nan), np.full(n, np.nan)
    code = np.full(n, -1, dtype=np.intp)
    heats = np.full(n, np.nan)
    if any_calibrating:
        heats = _certificate(sheet, calibrating, mass, flags, told)
        terms = _share_of_calibrations(terms, mass * heats, calibrating, nitric_acid)
        c, uc = capacities = _of_runs(mass, heats, rise, terms, u_rise)
        capacity[calibrating], u_capacity[calibrating] = c[calibrating], uc[calibrating]
        own, code = _calibrations(sheet, calibrating & usable & ~np.isnan(c), *capacities, rise, terms)
    if heat_capacity is not None:
        all_of_them: tuple[Calibration, ...] = (_given(heat_capacity, u_heat_capacity), *own)
        code = np.where(calibrating, code + (code >= 0), 0)
    else:
        all_of_them = (*own, *calibrations)
        code = _assign(sheet, calibrating, code, all_of_them, flags)
    _spread_capacity(sheet, calibrating, code, all_of_them, capacity, u_capacity, flags)
    taken = capacity * rise
    with np.errstate(divide="ignore", invalid="ignore"):
        if nitric_acid == "share":
            terms = _share_of_tests(terms, taken, mass, calibrating)
        part_c = rise * u_capacity
        u_taken = np.sqrt((capacity * u_rise) ** 2 + part_c**2)
        budget = Budget(taken, u_taken, terms, mass, np.full(n, constant("u_mass")))
        gross = budget.per_gram
        u, common = budget.u_of(gross), part_c / mass
    energy = taken
    if "expected_energy" in sheet.number:
        beside = sum((t.heat for t in terms), np.zeros(n))
        predicted = run_energy(mass, sheet.number["expected_energy"], beside)
        energy = np.where(np.isnan(predicted), taken, predicted)
    rated = np.full(n, np.nan if rated_energy is None else rated_energy)
    if "rated_energy" in sheet.number:
        rated = np.where(np.isnan(sheet.number["rated_energy"]), rated, sheet.number["rated_energy"])
    if any_calibrating:
        gross[calibrating], u[calibrating] = np.nan, np.nan
    _flag(sheet, flags, rise, mass, capacity, gross, terms, taken, energy, rated, code, all_of_them, calibrating)
    status = _status(sheet, flags, found)
    void = status > RUN_STATUS.index("warned")
    if void.any():
        gross[void], u[void] = np.nan, np.nan
    notes = _notes(sheet, all_of_them, sulfur, terms)
    r = constant("repeatability") if repeatability is None else repeatability
    return Reduction(sheet, rise, u_rise, capacity, u_capacity, mass, budget, gross, u, common, flags, status, code,
                     all_of_them, found, rated, energy, r, notes, told)  # fmt: skip


def calibrate(runs: Any, thermograms: Any = None, **wishes: Any) -> Reduction:
    """Heat capacities from the calibration runs of a sheet: `.calibrations`, `.calibration_table`, `.runs`.

    Takes what reduce_runs takes. Raises WrongUse where the sheet holds no calibration run.
    """
    found = reduce_runs(runs, thermograms, **wishes)
    if not (found.sheet.kind_code == CALIBRATION).any():
        raise WrongUse("The sheet holds no calibration run.", "Write 'calibration' into the column kind of these runs.")
    return found


def _given(value: float, u: float | None) -> Calibration:
    return heat_capacity.given(value, u)


def _rises(sheet: RunSheet, method: str) -> tuple[Floats, Floats, Rise | None]:
    """Given rises, else those of the thermograms."""
    rise = sheet.values("rise").copy()
    given_u = sheet.u.get("rise")
    u = np.where(np.isnan(rise), np.nan, constant("u_rise"))
    if given_u is not None:
        u = np.where(np.isnan(given_u), u, given_u)
    if sheet.records is None or sheet.place is None:
        return rise, u, None
    bounds, drifts = _wishes(sheet)
    found = corrected_rise(sheet.records, method, periods(sheet.records, **bounds), **drifts)
    take = np.isnan(rise) & (sheet.place >= 0)
    rise[take], u[take] = found.value[sheet.place[take]], found.u[sheet.place[take]]
    return rise, u, found


def _wishes(sheet: RunSheet) -> tuple[dict[str, Floats], dict[str, tuple[Floats, Floats]]]:
    """Periods and drifts the sheet gives, per record."""
    assert sheet.records is not None and sheet.place is not None
    has = sheet.place >= 0
    where = sheet.place[has]

    def per_record(column: str) -> Floats:
        out = np.full(len(sheet.records.ids), np.nan)  # type: ignore[union-attr]
        out[where] = sheet.values(column)[has]
        return out

    names = {"fore_start": "fore_start", "ignition": "firing_time", "main_end": "main_end", "after_end": "after_end"}
    bounds = {key: per_record(column) for key, column in names.items() if column in sheet.number}
    drifts = {f"{w}_drift": (per_record(f"{w}_drift"), per_record(f"{w}_temperature")) for w in ("fore", "after")
              if f"{w}_drift" in sheet.number and f"{w}_temperature" in sheet.number}  # fmt: skip
    return bounds, drifts


def _masses(sheet: RunSheet) -> Floats:
    """(n,) g of what was burnt; where only the mass with bag or capsule was taken these are subtracted."""
    mass = sheet.values("sample_mass")
    if "total_mass" in sheet.number:
        wrapping = np.nan_to_num(sheet.values("bag_mass")) + np.nan_to_num(sheet.values("capsule_mass"))
        mass = np.where(np.isnan(mass), net_mass(sheet.number["total_mass"], wrapping), mass)
        with np.errstate(invalid="ignore"):
            mass = np.where(mass > 0, mass, np.nan)
    return mass


def _terms(sheet: RunSheet, mass: Floats, sulfur: str, calibrating: NDArray[np.bool_]) -> tuple[Term, ...]:
    """What else gave heat, in the order of the standards; terms no column speaks of are left out."""
    n, number = len(sheet), sheet.number
    terms = []
    if {"ignition_heat", "ignition_mass", "ignition_length"} & set(number):
        terms.append(corrections.ignition(n, number.get("ignition_heat"), number.get("ignition_mass"),
                     number.get("ignition_length"), sheet.text.get("ignition_material"), sheet.u.get("ignition_heat")))  # type: ignore[arg-type]  # fmt: skip
    acid = _nitric_acid(sheet)
    if acid is not None:
        terms.append(acid)
    content = np.where(calibrating, 0.0, sheet.values("sulfur")) if "sulfur" in number else None
    if sulfur != "off" or content is not None:
        terms.append(corrections.sulfur(n, mass, content, sulfur, sheet.u.get("sulfur")))
    for what, title in (("aid", "combustion aid"), ("capsule", "capsule"), ("bag", "bag")):
        if f"{what}_mass" in number or f"{what}_heat" in number:
            terms.append(corrections.burnt_beside(what, title, n, number.get(f"{what}_mass"), number.get(f"{what}_heat"),
                                                  sheet.u.get(f"{what}_heat")))  # fmt: skip
    return tuple(terms)


def _nitric_acid(sheet: RunSheet) -> Term | None:
    """Titration where given, else the heat given."""
    n, number = len(sheet), sheet.number
    if not {"nitric_acid_heat", "acid_volume"} & set(number):
        return None
    heat, u = np.zeros(n), np.zeros(n)
    if "nitric_acid_heat" in number:
        heat = np.nan_to_num(number["nitric_acid_heat"])
        given = sheet.u.get("nitric_acid_heat", np.full(n, np.nan))
        u = np.where(np.isnan(given), constant("u_acid_constant") * heat, given)
    if "acid_volume" in number:
        strength = number.get("acid_concentration")
        alkali = 0.1 if strength is None else np.where(np.isnan(strength), 0.1, strength)
        titrated, u_titrated = corrections.nitric_acid_titrated(number["acid_volume"], alkali)
        untitrated = np.isnan(titrated)
        if untitrated.any():
            titrated, u_titrated = np.where(untitrated, heat, titrated), np.where(untitrated, u, u_titrated)
        heat, u = titrated, u_titrated
    return Term("nitric_acid", "nitric acid", heat, u)


def _share_of_calibrations(
    terms: tuple[Term, ...], known: Floats, calibrating: NDArray[np.bool_], wish: str
) -> tuple[Term, ...]:
    """Nitric acid of calibration runs as a share of benzoic acid's heat, where the share is asked for and none given."""
    if wish != "share":
        return terms
    with np.errstate(invalid="ignore"):
        heat = np.where(calibrating, known * constant("nitric_acid_share_high"), 0.0)
    return _with_share(terms, np.nan_to_num(heat), calibrating)


def _share_of_tests(
    terms: tuple[Term, ...], taken: Floats, mass: Floats, calibrating: NDArray[np.bool_]
) -> tuple[Term, ...]:
    beside = sum((t.heat for t in terms if t.name not in ("nitric_acid", "sulfur")), np.zeros(len(mass)))
    heat = taken - beside
    share = np.where(calibrating, 0.0, np.nan_to_num(corrections.nitric_acid_share(heat / mass) * heat))
    return _with_share(terms, share, ~calibrating)


def _with_share(terms: tuple[Term, ...], share: Floats, rows: NDArray[np.bool_]) -> tuple[Term, ...]:
    old = next((t for t in terms if t.name == "nitric_acid"), None)
    base, u = (old.heat, old.u) if old else (np.zeros(len(share)), np.zeros(len(share)))
    use = rows & (base == 0)
    new = Term("nitric_acid", "nitric acid", np.where(use, share, base),
               np.where(use, constant("u_acid_constant") * share, u), "share of the heat")  # fmt: skip
    at = next(
        (k for k, t in enumerate(terms) if t.name == "nitric_acid"), int(bool(terms) and terms[0].name == "ignition")
    )
    rest = [t for t in terms if t.name != "nitric_acid"]
    return (*rest[:at], new, *rest[at:])


def _of_runs(
    mass: Floats, heats: Floats, rise: Floats, terms: tuple[Term, ...], u_rise: Floats
) -> tuple[Floats, Floats]:
    return heat_capacity.of_runs(mass, heats, rise, terms, u_rise)


def _certificate(
    sheet: RunSheet, calibrating: NDArray[np.bool_], mass: Floats, flags: NDArray[np.int64], told: list[Problem]
) -> Floats:
    """(n,) J/g weighed in air of the calibrant; a value on the wrong basis voids its run and is told."""
    n = len(sheet)
    given = sheet.values("certificate_heat")
    basis = sheet.words("certificate_basis")
    heats = np.full(n, constant("benzoic_acid_air"))
    rows = np.flatnonzero(calibrating & ~np.isnan(given))
    for i in rows.tolist():
        trouble = heat_capacity.certificate_trouble(float(given[i]), str(basis[i]))
        if trouble:
            row = None if sheet.rows is None else int(sheet.rows[i])
            told.append(Problem(f"{trouble}.", "The run is left out of the calibration.", sheet.source, row,
                                "certificate_heat", f"{given[i]:g}"))  # fmt: skip
            sheet.void.setdefault(i, trouble)
    sheet.__dict__.pop("is_void", None)  # cells were voided after it may have been asked for
    heats[rows] = heat_capacity.heat_weighed_in_air(given[rows], basis[rows])
    needed = ("oxygen_pressure", "bomb_volume")
    if all(c in sheet.number for c in needed):
        water, warm = np.nan_to_num(sheet.values("bomb_water")), sheet.values("final_temperature")
        factor, inside = heat_capacity.conditions_factor(
            sheet.number["oxygen_pressure"], mass, water, sheet.number["bomb_volume"], np.where(np.isnan(warm), 25.0, warm))  # fmt: skip
        heats = heats * factor
        flags[calibrating & ~inside] |= BIT["conditions"]
    return heats


def _calibrations(
    sheet: RunSheet, rows: NDArray[np.bool_], c: Floats, uc: Floats, rise: Floats, terms: tuple[Term, ...]
) -> tuple[tuple[Calibration, ...], NDArray[np.intp]]:
    """The sheet's own calibrations: one per calibration_id, else per instrument."""
    named, instrument = sheet.words("calibration_id"), sheet.words("instrument")
    keys = np.array([str(a) or (f"calibration of {b}" if b else "calibration") for a, b in zip(named, instrument, strict=True)],
                    dtype=object)  # fmt: skip
    code = np.full(len(sheet), -1, dtype=np.intp)
    made = []
    water, dates = sheet.values("bucket_water"), sheet.words("date")
    usable = rows & ~(sheet.is_void | sheet.is_rejected)
    for key in dict.fromkeys(keys[usable]):
        mine = usable & (keys == key)
        at = np.flatnonzero(mine)
        mean_rise = float(rise[at].mean())
        odd = float(np.sqrt(sum(float(t.u[at].mean()) ** 2 for t in terms if t.name == "ignition"))) / mean_rise
        known = water[at][~np.isnan(water[at])]
        made.append(heat_capacity.summary(
            str(key), sheet.text["run_id"][at], c[at], rise[at], uc[at], float(known.mean()) if len(known) else np.nan,
            str(instrument[at[0]]), max(str(d) for d in dates[at]), corrections.counted(terms, mine), odd,
            tuple(sorted({str(w) for w in sheet.words("ignition_material")[at]} - {""}))))  # fmt: skip
        code[(keys == key) & (sheet.kind_code == CALIBRATION)] = len(made) - 1
    return tuple(made), code


def _assign(
    sheet: RunSheet,
    calibrating: NDArray[np.bool_],
    code: NDArray[np.intp],
    known: tuple[Calibration, ...],
    flags: NDArray[np.int64],
) -> NDArray[np.intp]:
    """Which calibration each run uses: the one it names, else the only one, else the only one of its instrument."""
    if not known:
        return code
    names = {c.id: k for k, c in enumerate(known)}
    named = sheet.words("calibration_id")
    if len(known) == 1:
        asked = np.array([str(x) in ("", known[0].id) for x in named], dtype=bool)
        flags[~calibrating & ~asked] |= BIT["unknown_calibration"]
        return np.where(calibrating, code, np.where(asked, 0, -1))
    by_instrument: dict[str, list[int]] = {}
    for k, calibration in enumerate(known):
        by_instrument.setdefault(calibration.instrument, []).append(k)
    instruments = sheet.words("instrument")
    out = code.copy()
    for i in np.flatnonzero(~calibrating).tolist():
        if str(named[i]):
            out[i] = names.get(str(named[i]), -1)
            if out[i] < 0:
                flags[i] |= BIT["unknown_calibration"]
            continue
        mine = by_instrument.get(str(instruments[i]), [])
        out[i] = mine[0] if len(mine) == 1 else -1
        if len(mine) != 1:
            flags[i] |= BIT["many_calibrations"]
    return out


def _spread_capacity(
    sheet: RunSheet,
    calibrating: NDArray[np.bool_],
    code: NDArray[np.intp],
    known: tuple[Calibration, ...],
    capacity: Floats,
    u_capacity: Floats,
    flags: NDArray[np.int64],
) -> None:
    """Put each run's heat capacity in place: its calibration's, for its own mass of bucket water; the row's own wins."""
    use = ~calibrating & (code >= 0)
    if known:
        means, us, waters = (np.array([getattr(c, a) for c in known]) for a in ("mean", "u", "water"))
        capacity[use], u_capacity[use] = means[code[use]], us[code[use]]
        if "bucket_water" in sheet.number:
            water = sheet.number["bucket_water"]
            there = np.where(code >= 0, waters[code], np.nan)
            both = use & ~np.isnan(water) & ~np.isnan(there)
            capacity[both] = heat_capacity.for_other_water(capacity[both], water[both], there[both])
            flags[use & ~np.isnan(water) & np.isnan(there)] |= BIT["water_unknown"]
    if "heat_capacity" in sheet.number:
        given = sheet.number["heat_capacity"]
        own = ~calibrating & ~np.isnan(given)
        spread = sheet.u.get("heat_capacity", np.full(len(sheet), np.nan))
        default = constant("calibration_rsd") / np.sqrt(constant("calibration_runs"))
        capacity[own] = given[own]
        u_capacity[own] = np.where(np.isnan(spread), default * given, spread)[own]
        code[own] = -1
        flags[own] &= ~(BIT["many_calibrations"] | BIT["unknown_calibration"] | BIT["water_unknown"])


def _flag(
    sheet: RunSheet,
    flags: NDArray[np.int64],
    rise: Floats,
    mass: Floats,
    capacity: Floats,
    gross: Floats,
    terms: tuple[Term, ...],
    taken: Floats,
    energy: Floats,
    rated: Floats,
    code: NDArray[np.intp],
    known: tuple[Calibration, ...],
    calibrating: NDArray[np.bool_],
) -> None:
    """Set the bits of what is lacking and what is to be told."""
    burnt = ~calibrating
    food = (sheet.kind_code == KINDS.index("test")) | (sheet.kind_code == KINDS.index("control"))
    _mark(flags, np.isnan(mass), "no_mass")
    _mark(flags, np.isnan(rise), "no_rise")
    _mark(flags, np.isnan(capacity) & burnt, "no_heat_capacity")
    with np.errstate(invalid="ignore", divide="ignore"):
        beside = [t for t in terms if t.name in ("aid", "capsule", "bag")]
        if beside:
            _mark(flags, corrections.aid_share(terms, taken) > constant("aid_share"), "aid_third")
            for term in beside:
                m, q = (sheet.values(f"{term.name}_{what}") for what in ("mass", "heat"))
                _mark(flags, (m > 0) != (q > 0), "bag_bare")
        low, high = dictionary()["gross_energy"].range
        _mark(flags, burnt & (gross <= 0), "nothing_left")
        _mark(flags, food & ((gross < low * 1e3) | (gross > high * 1e3)), "implausible")
        if not np.isnan(rated).all():
            _mark(flags, over_rating(energy, rated), "over_rating")
        lows, highs = (np.array([getattr(c, a) for c in known] or [np.nan]) for a in ("low", "high"))
        if np.isfinite(lows).any():
            near, far = np.where(code >= 0, lows[code], np.nan), np.where(code >= 0, highs[code], np.nan)
            _mark(flags, burnt & ((rise < near / FAR) | (rise > far * FAR)), "rise_far")
    if "pellet_date" in sheet.text and "moisture_date" in sheet.text:
        flags[sheet.days_apart] |= BIT["days_apart"]
    if "ignition_material" in sheet.text:
        for k, calibration in enumerate(known):
            if calibration.fired_with:
                same = np.isin(sheet.text["ignition_material"].astype(str), (*calibration.fired_with, ""))
                _mark(flags, burnt & (code == k) & ~same, "material_differs")
    if any(c.counted for c in known):
        for name in ("ignition", "nitric_acid"):
            there = np.array([c.counted.get(name, False) if c.run_ids else None for c in known], dtype=object)
            here = next((t.used for t in terms if t.name == name), np.zeros(len(sheet), dtype=bool))
            for k in range(len(known)):
                if there[k] is not None:
                    flags[burnt & (code == k) & (here != there[k])] |= BIT[f"{name}_differs"]


def _mark(flags: NDArray[np.int64], where: NDArray[np.bool_], name: str) -> None:
    if where.any():
        flags[where] |= BIT[name]


def _status(sheet: RunSheet, flags: NDArray[np.int64], found: Rise | None) -> NDArray[np.int8]:
    lacks = sum(BIT[name] for name in LACKS)
    status = np.where(flags & ~lacks, RUN_STATUS.index("warned"), RUN_STATUS.index("ok"))
    if found is not None and sheet.place is not None:
        warned = np.zeros(len(sheet), dtype=np.int64)
        has = (sheet.place >= 0) & np.isnan(sheet.values("rise"))
        warned[has] = found.warned[sheet.place[has]]
        status = np.where(warned & ~RISE_BIT["unreadable"], RUN_STATUS.index("warned"), status)
    status = np.where((flags & lacks) > 0, RUN_STATUS.index("problem"), status)
    status = np.where(sheet.is_void, RUN_STATUS.index("problem"), status)
    return np.where(sheet.is_rejected, RUN_STATUS.index("rejected"), status).astype(np.int8)


def _notes(sheet: RunSheet, known: tuple[Calibration, ...], sulfur: str, terms: tuple[Term, ...]) -> tuple[str, ...]:
    """What holds for the whole sheet."""
    said = [f"{c.id}: {w}" for c in known for w in c.warnings]
    if sulfur == "off":
        said.append(SULFUR_REASON)
    if not any(t.name == "ignition" for t in terms):
        said.append("No heat of ignition is in the sheet: it counts as nothing, in calibration and test alike.")
    if not any(t.name == "nitric_acid" for t in terms):
        said.append("No nitric acid is in the sheet: it counts as nothing, in calibration and test alike.")
    if "residual_moisture" in sheet.number and not {"pellet_date", "moisture_date"} <= set(sheet.text):
        said.append("The days of pellets and residual moisture are not given (pellet_date, moisture_date): a powder takes up or"
                    " loses water within hours, so both belong to one day.")  # fmt: skip
    return tuple(said)
