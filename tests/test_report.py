"""Evidence: complete, escaped, recomputable."""

import json

import pytest

import energy
from energy.assessment import demo_paths
from energy.report.board import MARKS, board, text


@pytest.fixture(scope="module")
def demo():
    return energy.assess(demo_paths()[0], target="human", law="eu_1169_2011", unit="kJ/100 g")


def test_every_verdict_has_its_own_mark():
    assert len(set(MARKS.values())) == len(MARKS) == 7


def test_board_has_one_row_per_sample(demo):
    assert len(board(demo)) == len(demo.samples)


def test_board_fits_a_terminal(demo):
    assert max(len(line) for line in text(demo).splitlines()) <= 120


def test_document_is_self_contained(demo, tmp_path):
    demo.save(tmp_path / "e.html")
    page = (tmp_path / "e.html").read_text(encoding="utf-8")
    assert "<script" not in page
    assert "http://" not in page
    assert "https://" not in page
    for word in (
        "read at the source",
        "Regulation (EU) No 1169/2011",
        "probable cause",
        "licensed adviser",
    ):
        assert word in page


def test_document_escapes_what_users_write(tmp_path):
    table = b"sample_id,name,protein [% as is],fat [% as is],available carbohydrate [% as is]\n<b>x</b>,<script>alert(1)</script>,1,1,1\n"
    a = energy.assess(energy.read_samples(table, name="t.csv"), target="human", law="eu_1169_2011")
    a.save(tmp_path / "e.html")
    page = (tmp_path / "e.html").read_text(encoding="utf-8")
    assert "<script>" not in page
    assert "&lt;script&gt;" in page


def test_spreadsheets_get_no_formulas_from_a_users_file(tmp_path):
    table = b"sample_id,fat [% as is]\n=1+1,1\n"
    a = energy.assess(energy.read_samples(table, name="t.csv"), target="human", law="eu_1169_2011")
    a.save(tmp_path / "r.csv")
    assert "\n'=1+1," in (tmp_path / "r.csv").read_text()


def test_json_holds_results_and_sources(demo, tmp_path):
    demo.save(tmp_path / "r.json")
    found = json.loads((tmp_path / "r.json").read_text(encoding="utf-8"))
    assert len(found["results"]) == len(demo.results)
    assert {s["system"] for s in found["sources"]} == set(demo.blocks.systems)


def test_nothing_half_written_stays(demo, tmp_path, monkeypatch):
    from energy.report import tables

    monkeypatch.setattr(tables, "_json", lambda a, p: (_ for _ in ()).throw(RuntimeError("disk full")))
    with pytest.raises(RuntimeError):
        demo.save(tmp_path / "r.json")
    assert list(tmp_path.iterdir()) == []
