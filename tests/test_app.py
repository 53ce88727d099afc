"""The three screens through Streamlit's own test client."""

import re
from pathlib import Path

import pytest
from streamlit.testing.v1 import AppTest

ROOT = Path(__file__).parent.parent
CSV = (
    b"sample_id,name,moisture [%],protein [g/100 g as is],fat [g/100 g as is],ash [g/100 g as is],gross energy [kJ/100 g as is]\n"
    b"007,own loaf,38,8.6,1.6,1.8,1150\n"
)


@pytest.fixture
def app(monkeypatch):
    monkeypatch.chdir(ROOT)
    at = AppTest.from_file(str(ROOT / "app.py"), default_timeout=60)
    at.run()
    assert not at.exception
    return at


def upload(at, data, name="own.csv"):
    at.file_uploader(key="upload").set_value((name, data, "text/csv")).run()
    assert not at.exception
    return at


def everything(at):
    """All texts of the screen as people read them: signs of Markdown taken off."""
    kinds = ("markdown", "text", "error", "info", "caption", "subheader", "html")
    said = [str(e.proto.body if kind == "html" else e.value) for kind in kinds for e in at.get(kind)]
    tables = [" ".join(map(str, table.value.to_numpy().ravel())) for table in (*at.table, *at.dataframe)]
    return " ".join([*said, *tables]).replace("\\", "")


def board(at):
    return at.dataframe[0].value


def test_the_demo_and_its_verdicts_stand_on_the_first_screen(app):
    assert any("Invented demo data" in e.value for e in app.info)
    assert len(board(app)) >= 24
    assert "✕ discordant" in set(board(app)["verdict"])
    assert "Gross energy: " in everything(app)


def test_the_agreement_of_the_batch_stands_under_the_board(app):
    said = everything(app)
    assert "Bomb less composition. Over 31 samples" in said
    assert "along the 31 samples" in said  # of a drift of the gross energy
    app.segmented_control(key="agreement_in").set_value("energy").run()
    assert not app.exception
    assert "kJ/100 g as is on average" in everything(app)


def test_a_planted_slip_is_told_in_a_sentence_with_what_to_do(app):
    # demo sample F01: its gross energy was typed in kcal and called kJ
    assert "The gross energy looks like kilocalories entered as kilojoules" in everything(app)
    assert "Next: compare the bomb sheet with the table" in everything(app)


def test_a_planted_slip_opens_its_sample(app):
    app.button(key="open_F02").click().run()
    assert not app.exception
    assert app.title[0].value == "Sample"
    assert app.selectbox(key="sample_choice").value == "F02"


def test_a_ticked_row_opens_its_sample(app):
    first = board(app)["sample"].iloc[0]
    app.session_state["board"] = {"selection": {"rows": [0], "columns": [], "cells": []}}
    app.run()
    assert not app.exception
    assert app.title[0].value == "Sample"
    assert app.selectbox(key="sample_choice").value == first


def test_the_sample_looked_at_is_kept_between_pages(app):
    app.switch_page("energy/pages/sample.py").run()
    app.selectbox(key="sample_choice").set_value("003").run()
    app.switch_page("energy/pages/equations.py").run()
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    assert app.selectbox(key="sample_choice").value == "003"


def test_choices_are_kept_between_pages(app):
    app.selectbox(key="unit_human").set_value("MJ/kg DM").run()
    app.switch_page("energy/pages/sample.py").run()
    assert "MJ/kg" in everything(app)
    app.switch_page("energy/pages/bench.py").run()
    assert not app.exception
    assert app.selectbox(key="unit_human").value == "MJ/kg DM"


def test_an_uploaded_table_gets_its_board(app):
    upload(app, CSV)
    assert board(app)["sample"].tolist() == ["007"]
    assert not any("Invented" in e.value for e in app.info)


def test_a_missing_unit_is_asked_for_and_used(app):
    upload(app, CSV.replace(b"protein [g/100 g as is]", b"protein"))
    assert any("cannot be used yet" in e.value for e in app.error)
    app.selectbox(key="unit_protein").set_value("g/100 g as is")
    app.button(key="FormSubmitter:mapping-Use these units").click().run()
    assert not app.exception
    assert board(app)["sample"].tolist() == ["007"]
    app.button(key="forget").click().run()
    assert not app.exception
    assert any("cannot be used yet" in e.value for e in app.error)


def test_a_missing_basis_is_asked_for_header_by_header_or_once_for_all(app):
    upload(app, CSV.replace(b"g/100 g as is", b"g/100 g").replace(b"kJ/100 g as is", b"kJ/100 g"))
    assert app.selectbox(key="unit_protein [g/100 g]").options[0].endswith("as is")
    app.selectbox(key="basis").set_value("as_is").run()
    assert not app.exception
    assert board(app)["sample"].tolist() == ["007"]


@pytest.mark.parametrize(
    ("data", "word"), [(b"\x89PNG\r\n\x1a\n", "not a text table"), (b"a,b\n1,2\n", "sample_id"), (b"", "empty")]
)
def test_a_wrong_file_is_told_without_a_traceback(app, data, word):
    upload(app, data)
    assert any("cannot be used yet" in e.value for e in app.error)
    assert word in everything(app)


def test_a_bad_cell_is_listed_with_row_column_value_and_cure(app):
    upload(app, CSV + b"008,second loaf,38,abc,1.6,1.8,1150\n")
    problem = app.table[0].value.iloc[0]
    assert [problem["row"], problem["sample"], problem["value"]] == ["3", "008", "abc"]
    assert problem["how to mend it"]
    assert set(board(app)["sample"]) == {"007", "008"}


def test_a_limit_that_cannot_be_read_is_told(app):
    app.text_input(key="limit").set_value("much").run()
    assert not app.exception
    assert any("much" in e.value for e in app.error)


def test_without_a_species_gross_energy_alone_is_checked(app):
    app.selectbox(key="target").set_value("none").run()
    assert not app.exception
    assert app.selectbox(key="stage").options == ["gross energy"]
    assert len(board(app)) >= 24


def test_every_stage_gives_a_row_per_sample_and_stage(app):
    per_stage = len(board(app))
    app.selectbox(key="stage").set_value("every stage").run()
    assert not app.exception
    assert len(board(app)) == 2 * per_stage
    assert not board(app).duplicated(["sample", "stage"]).any()


def test_the_unit_switch_shows_the_laws_other_sum(app):
    # Regulation (EU) 1169/2011, Annex XIV, by hand: 10 (17 + 37 + 17 + 8) = 790 kJ and 10 (4 + 9 + 4 + 2) = 190 kcal
    upload(app, b"sample_id,protein [g/100 g as is],fat [g/100 g as is],available carbohydrate [g/100 g as is],"
                b"total dietary fibre [g/100 g as is],gross energy [kJ/100 g as is]\na,10,10,10,10,970\n")  # fmt: skip
    assert board(app)["by composition, kJ/100 g"].tolist() == [790.0]
    app.selectbox(key="unit_human").set_value("kcal/100 g").run()
    assert not app.exception
    assert board(app)["by composition, kcal/100 g"].tolist() == [190.0]
    assert not [c for c in board(app).columns if "kJ" in c]


def test_the_board_can_be_filtered(app):
    app.multiselect(key="words").set_value(["✕ discordant"]).run()
    assert set(board(app)["verdict"]) == {"✕ discordant"}
    app.text_input(key="search").set_value("no such name").run()
    assert not app.exception
    assert any("No sample fits" in e.value for e in app.info)


def test_a_sample_shows_questions_partition_and_parts(app):
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    text = everything(app)
    for word in ("What does the bomb say?", "May the declared value stand?", "measurement part", "convention part"):
        assert word in text
    for table in app.table[:2]:
        assert table.value["step"].tolist() == ["gross energy", "not used by the eater", "metabolizable energy"]
    # demo sample 002 by hand: 9.6 x 17 + 2.4 x 37 + 39.6 x 17 + 7.1 x 8 = 982.0 kJ per 100 g
    assert app.table[1].value["kJ/100 g"].iloc[2] == "982\\.0"
    assert len(app.get("vega_lite_chart")) == 2  # the partition with its intervals, and the three parts


def test_in_kilocalories_a_sample_shows_the_laws_own_sum(app):
    # demo sample 002 by hand: 9.6 x 4 + 2.4 x 9 + 39.6 x 4 + 7.1 x 2 = 232.6 kcal per 100 g; 982 / 4.184 would be 234.7
    app.selectbox(key="unit_human").set_value("kcal/100 g").run()
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    assert app.table[1].value["kcal/100 g"].iloc[2] == "232\\.6"


def test_the_lines_of_the_three_parts_add_up_to_the_bars(app):
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    lines = app.table[3].value
    named = lines["part"].where(lines["part"] != "").ffill()
    sums = lines["makes, kJ/100 g"].str.replace("\\", "").astype(float).groupby(named).sum()
    sentence = next(e.value for e in app.markdown if e.value.startswith("Bomb less composition")).replace("\\", "")
    said = dict(re.findall(r"(\w+) part ([+-]?[\d.]+\d)", sentence))
    for part in ("measurement", "heats", "convention"):
        assert sums[part] == pytest.approx(float(said[part]), abs=0.06 * len(lines))


def test_a_sample_names_the_sources_of_its_figures_in_words(app):
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    text = everything(app)
    assert "Regulation (EU) No 1169/2011" in text
    assert "read at the source" in text
    assert "EU label energy" in text


def test_a_sample_shows_what_would_explain_its_difference(app):
    app.session_state["sample"] = "F03"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    assert any("what would settle it" in t.value.columns for t in app.table)


def test_a_figure_can_be_checked_by_monte_carlo(app):
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    next(b for b in app.button if b.label == "Check by Monte Carlo").click().run()
    assert "by Monte Carlo" in everything(app).replace("\\", "")


def test_a_sample_with_one_route_says_so(app):
    app.session_state["sample"] = "N01"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    assert "One route only" in everything(app)
    assert len(app.get("vega_lite_chart")) == 1  # the partition alone: there are no parts


def test_equations_are_typeset_with_their_source(app):
    app.switch_page("energy/pages/equations.py").run()
    app.multiselect(key="filter_route").set_value(["bomb"]).run()
    app.selectbox(key="entry").set_value("miller_payne_1959").run()
    assert not app.exception
    assert r"0.95\,\mathrm{GE}" in app.latex[0].value
    assert "recalled" in everything(app)


def test_an_equation_ticked_in_the_table_is_shown(app):
    app.switch_page("energy/pages/equations.py").run()
    second = app.dataframe[0].value["id"].iloc[1]
    app.session_state["list"] = {"selection": {"rows": [1], "columns": [], "cells": []}}
    app.run()
    assert not app.exception
    assert app.selectbox(key="entry").value == second


@pytest.mark.parametrize("name", ["target", "stage", "route", "source_words", "source"])
def test_each_filter_of_the_equations_narrows_and_can_be_left(app, name):
    app.switch_page("energy/pages/equations.py").run()
    before = len(app.dataframe[0].value)
    wanted = app.multiselect(key=f"filter_{name}").options[-1]
    app.multiselect(key=f"filter_{name}").set_value([wanted]).run()
    assert not app.exception
    assert 0 < len(app.dataframe[0].value) < before
    app.multiselect(key=f"filter_{name}").set_value([]).run()
    assert not app.exception
    assert len(app.dataframe[0].value) == before


def test_an_equation_search_without_a_hit_says_so(app):
    app.switch_page("energy/pages/equations.py").run()
    app.text_input(key="filter_text").set_value("no such thing").run()
    assert not app.exception
    assert any("No entry fits" in e.value for e in app.info)


# ---- feeds ----------------------------------------------------------------------------------------------------


@pytest.fixture
def pigs(app):
    app.selectbox(key="demo_table").set_value("feeds_growing_pig.csv").run()
    assert not app.exception
    return app


def test_a_demo_of_feeds_is_taken_for_its_own_species_in_its_users_unit(pigs):
    assert pigs.selectbox(key="target").value == "growing_pig"
    assert pigs.selectbox(key="unit_growing_pig").value == "MJ/kg"
    assert set(board(pigs)["sample"]) == {"P01", "P02", "P03", "P04", "P05", "P06"}


def test_stages_of_feeds_are_counted_one_by_one(pigs):
    said = everything(pigs)
    for stage in ("Digestible energy: 6 samples", "Metabolizable energy: 6", "Net energy: 6", "Gross energy: 6"):
        assert stage in said


def test_an_impossible_trial_is_told_on_the_bench(pigs):
    assert "digestible energy of 16.9 MJ/kg is more than gross energy" in everything(pigs)


def test_a_feeds_sample_shows_every_loss(pigs):
    pigs.switch_page("energy/pages/sample.py").run()
    assert not pigs.exception
    said = everything(pigs)
    for step in ("energy in faeces", "energy in urine and gas", "heat increment", "net energy"):
        assert step in said


def test_another_species_than_the_tables_is_refused_with_the_cure(pigs):
    pigs.selectbox(key="target").set_value("cat").run()
    assert not pigs.exception
    assert "No sample of the table is for cat" in everything(pigs)


@pytest.mark.parametrize(
    ("key", "value", "column"),
    [("target", "rabbit", "species or use"), ("stage", "NE", "stage"), ("route", "loss", "route"),
     ("source_words", "read at the source", "how it is known")],
)  # fmt: skip
def test_equations_are_narrowed(app, key, value, column):
    app.switch_page("energy/pages/equations.py").run()
    app.multiselect(key=f"filter_{key}").set_value([value]).run()
    assert not app.exception
    shown = app.dataframe[0].value[column]
    if column == "stage":
        assert set(shown) <= {"NE", "NEL", "NEm", "NEg", "NME"}
    else:
        assert all(value in cell or cell.startswith("every") for cell in shown)
    assert 0 < len(shown) < 250


def test_a_chain_is_typeset_step_by_step(app):
    app.switch_page("energy/pages/equations.py").run()
    app.selectbox(key="entry").set_value("nrc_2006_chain_cat_composition").run()
    assert not app.exception
    formula = str(app.get("latex")[0].value) if app.get("latex") else everything(app)
    assert r"\begin{aligned}" in formula
    assert formula.count("&=") == 4


def test_a_domain_is_shown_with_its_unit(app):
    app.switch_page("energy/pages/equations.py").run()
    app.selectbox(key="entry").set_value("king_taverner_1975_de_ndf").run()
    assert "NDF from 7.3 to 33.8 % DM" in everything(app)


def test_another_admissible_system_can_be_chosen(pigs):
    pigs.selectbox(key="bomb_growing_pig").set_value("le_goff_noblet_2001_chain_growing_bomb").run()
    pigs.selectbox(key="composition_growing_pig").set_value("noblet_perez_1993_de_cf").run()
    assert not pigs.exception
    assert "Digestible energy: 6 samples" in everything(pigs)
    pigs.switch_page("energy/pages/sample.py").run()
    assert "Le Goff and Noblet 2001" in everything(pigs)


def test_systems_of_two_stages_are_not_compared_and_it_is_said(pigs):
    pigs.selectbox(key="bomb_growing_pig").set_value("noblet_1994_chain_ne_bomb").run()
    pigs.selectbox(key="composition_growing_pig").set_value("noblet_perez_1993_de_cf").run()
    assert not pigs.exception
    assert "Choose two systems of one stage" in everything(pigs)
