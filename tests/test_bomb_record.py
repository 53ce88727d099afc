"""Controls that hold results, blanks, and the calorimeter's record with its chart, due date and withdrawals."""

import datetime
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import energy
from energy.bomb.control import FAILED, PASSED, WORDS, Assigned, judge
from energy.bomb.record import record
from energy.problems import WrongUse

DEMO = Path(__file__).parent.parent / "demo_data" / "calorimeter_record.csv"
ASSIGNED = {"house feed": Assigned(17.300, 0.020)}


def runs(*rows):
    """(run_id, kind, sample, MJ/kg) of one instrument, a day apart."""
    return pd.DataFrame(
        [{"run_id": i, "kind": kind, "sample_id": sample, "gross_energy": ge, "u": 0.01, "instrument": "b", "status": "ok",
          "date": f"2026-03-{d:02d}", "calibration_id": "K"} for d, (i, kind, sample, ge) in enumerate(rows, start=1)]
    )  # fmt: skip


def control(name, ge):
    return (name, "control", "house feed", ge)


def sample(name):
    return (name, "test", f"feed {name}", 18.0)


def test_a_failed_control_holds_back_to_the_last_that_passed():
    found = judge(runs(sample("1"), control("c1", 17.30), sample("2"), sample("3"), control("c2", 17.10), sample("4"),
                       control("c3", 17.31), sample("5")), ASSIGNED)  # fmt: skip
    assert found.held.tolist() == [False, False, True, True, False, True, False, False]
    assert found.told[2] == "held: control c2 failed and none has passed since the one before it"
    assert [WORDS[o] for o in found.outcome] == [
        "not judged",
        "passed",
        "not judged",
        "not judged",
        "failed",
        "not judged",
        "passed",
        "not judged",
    ]


def test_the_score_is_in_standard_deviations_of_the_material():
    assert judge(runs(control("c", 17.25)), ASSIGNED).score[0] == pytest.approx(-2.5)


def test_another_instrument_is_not_held():
    table = runs(sample("1"), control("c1", 17.0), sample("2"))
    table.loc[0, "instrument"] = "other"
    assert judge(table, ASSIGNED).held.tolist() == [False, False, True]


def test_order_is_by_date_not_by_row():
    table = runs(control("c1", 17.0), sample("1"))
    table["date"] = ["2026-03-09", "2026-03-01"]
    assert judge(table, ASSIGNED).held.tolist() == [False, True]


def test_a_control_that_is_overdue_is_told():
    found = judge(runs(control("c", 17.3), *(sample(str(k)) for k in range(4))), ASSIGNED, every=2)
    assert found.overdue.tolist() == [0, 0, 0, 3, 4]
    assert "overdue" in found.told[3]


def test_without_an_assigned_value_the_first_runs_only_teach():
    rng = np.random.default_rng(2)
    found = judge(
        runs(
            *(control(f"c{k}", x) for k, x in enumerate(17.3 + 0.02 * rng.normal(size=6))),
            control("bad", 17.0),
            control("good", 17.3),
        )
    )
    assert [WORDS[o] for o in found.outcome] == ["not judged"] * 6 + ["failed", "passed"]
    assert "no value is assigned" in found.told[0]


def test_few_earlier_runs_make_a_wide_limit_by_student():
    """Mean 10, SD 1 of six runs: 13.5 lies 3.5/sqrt(7/6) = 3.24 SD off; by t with 5 degrees of freedom that is p 0.0115."""
    from scipy import stats

    six = [9, 11, 9, 11, 10.0, 10.0]
    sd = float(np.std(six, ddof=1))
    t = (13.5 - 10) / (sd * np.sqrt(7 / 6))
    found = judge(runs(*(control(f"c{k}", x) for k, x in enumerate(six)), control("c", 13.5)))
    assert found.score[-1] == pytest.approx(stats.norm.isf(stats.t.sf(t, 5)))


def test_a_rejected_control_vouches_for_nothing():
    table = runs(sample("1"), control("c", 17.3), sample("2"))
    table.loc[1, "status"] = "rejected"
    assert judge(table, ASSIGNED).outcome.tolist() == [0, 0, 0]


def test_blanks_have_mean_and_u():
    """0.018, 0.019, 0.020 MJ/g of a bag: mean 19 J/kg... in J/g 18 000, 19 000, 20 000: mean 19 000, u 1000/sqrt(3)."""
    found = judge(runs(*((f"b{k}", "blank", "bag", x) for k, x in enumerate((18.0, 19.0, 20.0)))))
    blank = found.blanks[0]
    assert (blank.mean, blank.n) == (pytest.approx(19_000), 3)
    assert blank.u == pytest.approx(1000 / 3**0.5)


@pytest.fixture(scope="module")
def year():
    return record(energy.reduce_runs(DEMO))


def test_the_demo_s_planted_drift_is_found(year):
    history = year.history("bench 2")
    assert history.drift.p < 0.01
    signals = [i for i, told in enumerate(history.told) if "shift" in told]
    assert signals
    assert min(signals) >= 8  # the drift is planted from the eighth month
    assert "upward shift" in history.told[signals[0]]


def test_the_demo_s_failed_control_holds_its_results(year):
    failed = year.runs.index[year.controls.outcome == FAILED]
    assert [year.runs["run_id"][i] for i in failed] == ["C36z"]
    assert year.runs["run_id"][year.controls.held].tolist() == ["R360", "R361"]


def test_most_controls_of_the_demo_pass(year):
    judged = year.controls.outcome > 0
    assert (year.controls.outcome[judged] == PASSED).mean() > 0.98


def test_a_rejected_run_stays_visible(year):
    row = year.runs[year.runs["run_id"] == "R201"].iloc[0]
    assert row["status"] == "rejected"
    assert "soot" in row["reason"]


def test_recalibration_is_due_after_three_months_or_the_house_s_own(year):
    when, why = year.due("bench 2", datetime.date(2026, 2, 1))
    assert when == datetime.date(2025, 12, 8) + datetime.timedelta(days=91)
    assert "GB/T 213" in why
    when, why = year.due("bench 2", datetime.date(2026, 2, 1), days=30)
    assert when == datetime.date(2026, 1, 7)
    assert "overdue by 25 days" in why


def test_withdrawing_a_calibration_lists_what_rests_on_it(year):
    table, told = year.withdraw("cal 2025-03-31")
    assert set(table["calibration_id"]) == {"cal 2025-03-31"}
    assert "calibration" not in set(table["kind"])
    assert "feed 12-0" in told
    with pytest.raises(WrongUse):
        year.withdraw("never made")


def test_check_substances_of_the_demo_are_satisfactory(year):
    assert len(year.checks) == 8
    assert all(found.word == "satisfactory" for _, found in year.checks)


@pytest.mark.parametrize("written", ["03.02.2025", "2025-13-01", "Feb 2025", ""])
def test_a_date_that_cannot_be_read_is_told_and_stops_nothing(written):
    table = pd.read_csv(DEMO, dtype=str, keep_default_na=False)
    table.loc[table["calibration_id"] == "cal 2025-01-06", "date"] = written
    found = energy.reduce_runs(table)
    r = record(found)
    assert "cal 2025-01-06" not in r.history("bench 2").ids
    assert len(r.history("bench 2").ids) == 12
    assert not written or any("year-month-day" in p.what for p in found.problems)
    assert [r.runs["run_id"][i] for i in r.runs.index[r.controls.outcome == FAILED]] == ["C36z"]
