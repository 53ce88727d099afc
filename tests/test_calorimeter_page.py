"""The screen Calorimeter through Streamlit's own test client."""

from pathlib import Path

import pytest

from energy.bomb.cautions import CAUTIONS

ROOT = Path(__file__).parent.parent


@pytest.fixture
def app(open_screen):
    return open_screen("calorimeter")


def test_the_cautions_stand_on_the_screen(app, said):
    text = said(app)
    assert all(caution in text for caution in CAUTIONS)


def test_every_signal_has_its_reason(app):
    table = next(t.value for t in app.table if "calls for" in t.value.columns and "calibration" in t.value.columns)
    calls = table["calls for"].str.replace("\\", "")
    assert calls.iloc[0].startswith("✕ action")
    assert "upward shift" in calls.iloc[0]
    assert (calls == "◆ nothing").sum() == 9


def test_held_results_and_the_due_date_are_told(app, said):
    text = said(app)
    assert "2 results are held" in text
    assert "R360" in text
    assert "due on 2026-03-09" in text
    assert "GB/T 213" in text


def test_withdrawing_a_calibration_lists_its_runs(app, said):
    app.selectbox(key="record_withdraw").set_value("cal 2025-03-31").run()
    assert not app.exception
    assert "Reduce them with another calibration" in said(app)


def test_an_assigned_value_judges_the_first_runs_too(app, said):
    app.text_input(key="record_material").set_value("house feed").run()
    app.number_input(key="record_value").set_value(17.30).run()
    assert not app.exception
    assert "MJ/kg assigned" in said(app)


def test_check_substances_stand_with_their_source(app, said):
    assert "NIST WebBook" in said(app)
