"""The run sheet of a bomb calorimeter: one row per firing, and the table of what came of each.

`OUTCOME_COLUMNS` is what `reduce_runs(...).runs` and `calibrate(...).runs` hand on, one row per run in the order of the
sheet; control charts and the calorimeter's record read these names.
"""

from __future__ import annotations

#: what a run was fired for; in a sheet without the column every run is a test
KINDS = ("test", "calibration", "control", "blank")
#: what became of a run. warned: computed, with something to look at (in `reason`); rejected: stays visible, counts for
#: nothing (soot, a spoilt firing); problem: could not be computed, `reason` says what is missing
RUN_STATUS = ("ok", "warned", "rejected", "problem")

#: name -> (unit, what it is), one row per run
OUTCOME_COLUMNS = {
    "run_id": ("", "as in the sheet, unique, text"),
    "sample_id": ("", "what was burnt; the name of the control material, of benzoic acid in a calibration"),
    "kind": ("", "one of KINDS"),
    "instrument": ("", "as in the sheet, '' where not given"),
    "operator": ("", "as in the sheet, '' where not given"),
    "date": ("", "ISO date text, '' where not given"),
    "batch": ("", "as in the sheet, '' where not given"),
    "preparation": ("", "as in the sheet, '' where not given"),
    "rise": ("K", "corrected temperature rise"),
    "u_rise": ("K", "its standard uncertainty"),
    "heat_capacity": ("J/K", "the one used for this run; in a calibration run the one this run gives"),
    "u_heat_capacity": ("J/K", "its standard uncertainty; in a calibration run that of this run alone"),
    "calibration_id": ("", "the calibration used; in a calibration run the one it belongs to"),
    "mass": ("g", "of what was burnt, as weighed in air"),
    "gross_energy": ("MJ/kg", "at constant volume, as analysed (as weighed); NaN in a calibration run"),
    "u": ("MJ/kg", "standard uncertainty of gross_energy of this run alone, calibration included"),
    "status": ("", "one of RUN_STATUS"),
    "reason": ("", "why it is not ok, in words"),
}
