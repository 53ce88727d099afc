"""The screen Declared values in a real headless Chromium, at 1440 and 800 px."""

import shutil

import pytest
from playwright.sync_api import expect
from test_screens import address, browser, fits, ready  # noqa: F401  fixtures of the other screens

CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="Chromium is not installed (apt-get install chromium)")

RECIPE = b"product,ingredient,amount [g]\nloaf,flour,600\nloaf,wat,400\n"
PARTS = b"sample_id,moisture [%],protein [g/100 g as is],fat [g/100 g as is],available carbohydrate [g/100 g as is]\nflour,13,10,1,72\nwater,100,0,0,0\n"


@pytest.fixture(params=[1440, 800])
def page(request, browser, address):  # noqa: F811
    context = browser.new_context(viewport={"width": request.param, "height": 3000}, reduced_motion="reduce")
    fresh = context.new_page()
    fresh.goto(f"{address}/declared-values")
    ready(fresh, "Declared values")
    yield fresh
    context.close()


def test_rules_stand_with_their_place_and_caution(page, tmp_path):
    expect(page.get_by_text("licensed adviser", exact=False).first).to_be_visible(timeout=60_000)
    expect(page.get_by_test_id("stTable").get_by_text("table 1", exact=False).first).to_be_visible()
    expect(page.get_by_text("The verdict is about the sample tested", exact=False)).to_be_visible()
    fits(page, tmp_path, "declared")


def test_a_recipe_with_an_unknown_ingredient_is_told(page, tmp_path):
    files = page.locator('input[type="file"]')
    files.nth(0).set_input_files({"name": "r.csv", "mimeType": "text/csv", "buffer": RECIPE})
    expect(page.get_by_text("r.csv").first).to_be_visible(timeout=60_000)  # a second file sent meanwhile would be lost
    ready(page, "Declared values")
    files.nth(1).set_input_files({"name": "i.csv", "mimeType": "text/csv", "buffer": PARTS})
    expect(page.get_by_text("the ingredient has no row in the table of compositions", exact=False)).to_be_visible(
        timeout=60_000
    )
    expect(page.get_by_text("Did you mean water", exact=False)).to_be_visible()
    fits(page, tmp_path, "recipes")
