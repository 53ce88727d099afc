"""The screen Declared values through Streamlit's own test client."""

from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent


@pytest.fixture
def app(open_screen):
    return open_screen("declared")


def test_a_verdict_carries_limit_place_and_how_it_is_known(app, said):
    text = said(app)
    assert "licensed adviser" in text
    assert "✕ outside" in text
    assert "table 1" in text
    assert "recalled, not yet checked at the source" in text
    assert "a bomb figure is evidence about the label, not the label" in text


def test_the_sum_that_leads_to_a_figure_stands_there(app, said):
    """Demo sample 002: 17 x 39.6 + 17 x 9.6 + 37 x 2.4 + 8 x 7.1 = 982 kJ; 4, 4, 9, 2 give 232.6 kcal."""
    text = said(app)
    assert "17 x 39.6 + 17 x 9.6 + 37 x 2.4 + 8 x 7.1 = 982 kJ" in text
    assert "= 232.6 kcal" in text


def test_all_laws_side_by_side(app):
    app.selectbox(key="declared_law_human").set_value("all").run()
    assert not app.exception
    table = next(t.value for t in app.dataframe if "us_21cfr_101_9_b" in t.value.columns)
    row = table[table["sample"] == "F03"].iloc[0]
    assert row["eu_1169_2011"] == "✕ outside"
    assert row["fsanz_sch11"] == "○ no rule found"


def test_a_guard_band_on_limits_that_hold_uncertainty_is_warned_of(app, said):
    app.selectbox(key="declared_rule").set_value("guarded").run()
    assert "counts it twice" in said(app)


def test_per_100_ml_without_density_is_asked_for(app, said):
    app.selectbox(key="declared_per").set_value("100ml").run()
    assert not app.exception
    assert "density" in said(app)


def test_a_lot_is_spoken_of_when_both_scatters_are_given(app, said):
    app.number_input(key="declared_sampling").set_value(3.0).run()
    assert "Both are needed" in said(app)
    app.number_input(key="declared_production").set_value(10.0).run()
    assert "The verdict is about the average of the lot" in said(app)


def test_recipes_show_their_mass_balance_and_their_label(app):
    """Potato wedges: yield 72 %, water lost 33 %: 5 g of fat came in per 100 g."""
    balance = next(t.value for t in app.table if "water lost" in t.value.columns)
    wedges = balance[balance["product"].str.contains("wedges")].iloc[0]
    assert [wedges[c].replace("\\", "") for c in ("water lost", "fat lost", "comes out")] == ["33.0", "-5.0", "72.0"]
    labels = next(t.value for t in app.dataframe if "to print, kJ" in t.value.columns)
    assert set(labels["product"]) == {"farmhouse loaf", "potato wedges"}


def test_a_feed_without_such_a_law_is_told(app):
    app.session_state["kept_target"] = "cat"
    app.session_state["kept_law"] = None
    app.switch_page("energy/pages/declared.py").run()
    assert not app.exception


def test_a_law_by_food_group_sums_the_ingredients_own(app, said):
    app.selectbox(key="declared_law_human").set_value("us_ah74_specific").run()
    assert not app.exception
    assert "each by its own group's factors" in said(app)
