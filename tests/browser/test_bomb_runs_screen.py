"""The screen Bomb runs in a real headless Chromium, at 1440 and 800 px."""

import shutil

import pytest
from playwright.sync_api import expect
from test_screens import address, browser, fits, ready  # noqa: F401  fixtures of the other screens

CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="Chromium is not installed (apt-get install chromium)")

SHEET = b"run_id,sample_id,sample_mass [g],heat_capacity [J/K],ignition_heat [J]\nA,own bran,0.95,10000,50\n"
READINGS = "run_id,time [s],temperature [C]\n" + "".join(
    f"A,{30 * k},{22.0 if k <= 10 else 23.75 - 1.75 * 0.5 ** (2 * (k - 10)):.4f}\n" for k in range(50)
)


@pytest.fixture(params=[1440, 800])
def page(request, browser, address):  # noqa: F811
    context = browser.new_context(viewport={"width": request.param, "height": 3000}, reduced_motion="reduce")
    fresh = context.new_page()
    fresh.goto(f"{address}/bomb-runs")
    ready(fresh, "Bomb runs")
    yield fresh
    context.close()


def test_the_thermogram_and_the_budget_of_the_demo(page, tmp_path):
    chart = page.get_by_test_id("stVegaLiteChart")
    expect(chart).to_be_visible(timeout=60_000)
    for words in ("fore period", "main period", "after period"):
        expect(chart.get_by_text(words, exact=True).first).to_be_visible()
    expect(page.get_by_role("row", name="heat of the sample", exact=False)).to_be_visible()
    expect(page.get_by_test_id("stTable").get_by_text("burn a third", exact=False).first).to_be_visible()
    expect(page.get_by_text("Nothing here says that a run is safe", exact=False)).to_be_visible()
    fits(page, tmp_path, "bomb_runs")


def test_a_sheet_of_one_s_own_to_its_corrected_rise(page, tmp_path):
    page.get_by_text("Load your own run sheet").click()
    sheets = page.locator('input[type="file"]')
    sheets.nth(1).set_input_files({"name": "t.csv", "mimeType": "text/csv", "buffer": READINGS.encode()})
    expect(page.get_by_text("t.csv").first).to_be_visible(timeout=60_000)  # a second file sent meanwhile would be lost
    ready(page, "Bomb runs")
    sheets.nth(0).set_input_files({"name": "own.csv", "mimeType": "text/csv", "buffer": SHEET})
    # by hand: no drift on either side, 23.75 - 22.00; (10000 x 1.75 - 50) / 0.95 = 18368 J/g
    expect(page.get_by_text("1.7500 K, u", exact=False)).to_be_visible(timeout=60_000)
    expect(page.get_by_text("18.3684 MJ/kg as burnt", exact=False)).to_be_visible()
    fits(page, tmp_path, "own_runs")


def test_the_sample_table_can_be_taken_away(page):
    with page.expect_download(timeout=60_000) as download:
        page.get_by_role("button", name="Sample table (CSV)").click()
    assert "wheat bran" in download.value.path().read_text(encoding="utf-8")
