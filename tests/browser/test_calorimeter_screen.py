"""The screen Calorimeter in a real headless Chromium, at 1440 and 800 px."""

import shutil

import pytest
from playwright.sync_api import expect
from test_screens import address, browser, fits, ready  # noqa: F401  fixtures of the other screens

CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="Chromium is not installed (apt-get install chromium)")


@pytest.fixture(params=[1440, 800])
def page(request, browser, address):  # noqa: F811
    context = browser.new_context(viewport={"width": request.param, "height": 3000}, reduced_motion="reduce")
    fresh = context.new_page()
    fresh.goto(f"{address}/calorimeter")
    ready(fresh, "Calorimeter")
    yield fresh
    context.close()


def test_chart_limits_and_reasons_are_there(page, tmp_path):
    charts = page.get_by_test_id("stVegaLiteChart")
    expect(charts).to_have_count(2, timeout=60_000)
    for words in ("quiet", "signals"):
        expect(charts.first.get_by_text(words, exact=True).first).to_be_visible()
    expect(page.get_by_text("upward shift: the cumulative sum passes", exact=False).first).to_be_visible()
    expect(page.get_by_text("2 results are held", exact=False)).to_be_visible()
    fits(page, tmp_path, "calorimeter")


def test_a_file_that_is_no_run_sheet_is_told(page, tmp_path):
    page.get_by_text("Load your own record").click()
    page.locator('input[type="file"]').first.set_input_files(
        {"name": "x.csv", "mimeType": "text/csv", "buffer": b"a,b\n1,2\n"}
    )
    expect(page.get_by_text("x.csv cannot be used yet", exact=False)).to_be_visible(timeout=60_000)
    fits(page, tmp_path, "wrong_record")
