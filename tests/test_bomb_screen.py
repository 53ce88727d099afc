"""The screen Bomb runs through Streamlit's own test client."""

from pathlib import Path

import pytest

from energy.bomb.cautions import CAUTIONS

ROOT = Path(__file__).parent.parent


@pytest.fixture
def app(open_screen):
    return open_screen("bomb_runs")


def test_the_demo_is_reduced_and_the_cautions_stand_on_the_screen(app, said):
    text = said(app)
    assert "Invented demo data" in text
    assert "wheat bran" in text
    assert all(caution in text for caution in CAUTIONS)


def test_the_budget_of_a_run_adds_up_on_the_screen(app):
    app.selectbox(key="run_choice").set_value("R08").run()
    assert not app.exception
    table = next(t.value for t in app.table if "J per g" in t.value.columns)
    heats = [float(v.replace("\\", "")) for v in table["J"]]
    assert sum(heats[:-1]) == pytest.approx(heats[-1], abs=0.3)  # each is shown to 0.1 J
    assert len(heats) == 5


def test_a_rejected_run_says_why(app, said):
    app.selectbox(key="run_choice").set_value("R05").run()
    assert "rejected, not corrected" in said(app)


def test_periods_can_be_moved_and_found_again(app, said):
    app.selectbox(key="run_choice").set_value("R01").run()
    before = app.slider(key="main_period_R01").value
    app.slider(key="main_period_R01").set_value((before[0], 15.0)).run()
    assert not app.exception
    assert "set by hand" in said(app)
    assert app.slider(key="main_period_R01").value[1] == pytest.approx(15.0)
    next(b for b in app.button if b.label == "Find the periods again").click().run()
    assert not app.exception
    assert app.slider(key="main_period_R01").value == before


def test_a_sheet_of_one_s_own_takes_the_place_of_the_demo(app, said):
    sheet = b"run_id,sample_id,sample_mass [g],rise [K],heat_capacity [J/K]\n1,own bran,0.95,1.75,10000\n"
    app.file_uploader(key="runs_upload").set_value(("own.csv", sheet, "text/csv")).run()
    assert not app.exception
    assert "own bran" in said(app)
    assert "Invented demo data" not in said(app)
    assert "there is no thermogram to draw" in said(app)


def test_a_sheet_that_cannot_be_used_shows_every_problem(app, said):
    sheet = b"run_id,sample_mass,rise [J]\n1,0.95,1.75\n"
    app.file_uploader(key="runs_upload").set_value(("own.csv", sheet, "text/csv")).run()
    assert not app.exception
    text = said(app)
    assert "sample_mass has" in text or "has no unit" in text
    assert "rise [J]" in text


def test_the_gross_energies_are_put_beside_a_sample_table_and_taken_to_the_bench(app, said):
    table = b"sample_id,crude protein [% DM]\nwheat bran,17\n009,20\n"
    app.file_uploader(key="beside_upload").set_value(("own.csv", table, "text/csv")).run()
    assert not app.exception
    assert "1 of 2 samples got a gross energy" in said(app)
    next(b for b in app.button if b.label == "Assess it on the Bench").click().run()
    assert not app.exception
    assert app.title[0].value == "Bench"
