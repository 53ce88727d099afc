"""The three screens through Streamlit's own test client."""

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
    return " ".join(
        str(e.value) for kind in ("markdown", "text", "error", "info", "caption", "subheader") for e in at.get(kind)
    )


def test_the_demo_and_its_verdicts_stand_on_the_first_screen(app):
    assert any("Invented demo data" in e.value for e in app.info)
    board = app.dataframe[0].value
    assert len(board) >= 24
    assert "✕ discordant" in set(board["verdict"])


def test_an_uploaded_table_gets_its_board(app):
    upload(app, CSV)
    assert app.dataframe[0].value["sample"].tolist() == ["007"]


def test_a_missing_unit_is_asked_for_and_used(app):
    upload(app, CSV.replace(b"protein [g/100 g as is]", b"protein"))
    assert any("cannot be used yet" in e.value for e in app.error)
    app.selectbox(key="unit_protein").set_value("g/100 g as is")
    app.button[-1].click().run()
    assert not app.exception
    assert app.dataframe[0].value["sample"].tolist() == ["007"]


def test_a_missing_basis_is_asked_for(app):
    upload(app, CSV.replace(b"protein [g/100 g as is]", b"protein [g/100 g]"))
    assert app.selectbox(key="unit_protein [g/100 g]").options[0].endswith("as is")


@pytest.mark.parametrize(
    ("data", "word"), [(b"\x89PNG\r\n\x1a\n", "not a text table"), (b"a,b\n1,2\n", "sample_id"), (b"", "empty")]
)
def test_a_wrong_file_is_told_without_a_traceback(app, data, word):
    upload(app, data)
    assert any(word in " ".join(frame.value.astype(str).to_numpy().ravel()) for frame in app.dataframe)


def test_the_unit_switch_shows_the_laws_other_sum(app):
    upload(app, b"sample_id,protein [g/100 g as is],fat [g/100 g as is],available carbohydrate [g/100 g as is],"
                b"total dietary fibre [g/100 g as is],gross energy [kJ/100 g as is]\na,10,10,10,10,970\n")  # fmt: skip
    assert app.dataframe[0].value["by composition, kJ/100 g"].tolist() == [790.0]
    app.selectbox(key="unit").set_value("kcal/100 g").run()
    assert app.dataframe[0].value["by composition, kcal/100 g"].tolist() == [190.0]


def test_the_board_can_be_filtered(app):
    app.multiselect(key="words").set_value(["✕ discordant"]).run()
    assert set(app.dataframe[0].value["verdict"]) == {"✕ discordant"}


def test_a_sample_shows_questions_partition_and_parts(app):
    app.session_state["sample"] = "002"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    text = everything(app)
    for word in ("What does the bomb say?", "May the declared value stand?", "measurement part", "convention part"):
        assert word in text
    assert len(app.table) == 2
    for table in app.table:
        assert table.value["step"].tolist() == ["gross energy", "not used by the eater", "metabolizable energy"]


def test_a_sample_with_one_route_says_so(app):
    app.session_state["sample"] = "N01"
    app.switch_page("energy/pages/sample.py").run()
    assert not app.exception
    assert "One route only" in everything(app)


def test_equations_are_typeset_with_their_source(app):
    app.switch_page("energy/pages/equations.py").run()
    app.multiselect(key="filter_route").set_value(["bomb"]).run()
    app.selectbox(key="entry").set_value("miller_payne_1959").run()
    assert not app.exception
    assert r"0.95\,\mathrm{GE}" in app.latex[0].value
    assert "recalled" in everything(app)


def test_equations_filter_narrows(app):
    app.switch_page("energy/pages/equations.py").run()
    before = len(app.dataframe[0].value)
    app.multiselect(key="filter_stage").set_value(["GE"]).run()
    assert not app.exception
    assert 0 < len(app.dataframe[0].value) < before
