"""The three screens in a real headless Chromium, at 1440 and 800 px."""

import os
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
from pathlib import Path

import pytest
from playwright.sync_api import expect, sync_playwright

ROOT = Path(__file__).parent.parent.parent
CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="Chromium is not installed (apt-get install chromium)")

CSV = (
    b"sample_id,name,moisture [%],protein,fat [g/100 g as is],available carbohydrate [g/100 g as is],"
    b"total dietary fibre [g/100 g as is],ash [g/100 g as is],gross energy [kJ/100 g as is]\n"
    b"007,own loaf,40,9.6,2.4,39,7,2,1123\n"
)


@pytest.fixture(scope="module")
def address():
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    command = [sys.executable, "-m", "streamlit", "run", "app.py", "--server.port", str(port)]
    server = subprocess.Popen(
        command, cwd=ROOT, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, env=os.environ.copy()
    )
    for _ in range(120):
        try:
            with urllib.request.urlopen(f"http://127.0.0.1:{port}/_stcore/health", timeout=2):
                break
        except OSError:
            time.sleep(0.5)
    yield f"http://127.0.0.1:{port}"
    server.terminate()
    server.wait(timeout=30)


@pytest.fixture(scope="module")
def browser():
    flags = ["--no-sandbox", "--disable-dev-shm-usage", "--disable-background-networking"]
    with sync_playwright() as play:
        running = play.chromium.launch(executable_path=CHROMIUM, args=flags)
        yield running
        running.close()


@pytest.fixture(params=[1440, 800])
def page(request, browser, address):
    context = browser.new_context(viewport={"width": request.param, "height": 1600}, reduced_motion="reduce")
    fresh = context.new_page()
    fresh.goto(address)
    ready(fresh, "Bench")
    yield fresh
    context.close()


def ready(page, heading):
    page.get_by_role("heading", name=heading, exact=True).wait_for(timeout=90_000)
    expect(page.get_by_test_id("stApp")).to_have_attribute("data-test-script-state", "notRunning", timeout=90_000)


def fits(page, folder, name):
    """Nothing sticks out of the window sideways, no screen shows a traceback, and there is something to see."""
    expect(page.get_by_test_id("stApp")).to_have_attribute("data-test-script-state", "notRunning", timeout=90_000)
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")
    assert page.get_by_test_id("stException").count() == 0
    picture = page.screenshot(path=folder / f"{name}_{page.viewport_size['width']}.png")
    assert len(picture) > 20_000


def test_verdicts_stand_on_the_first_screen(page, tmp_path):
    page.set_viewport_size({"width": page.viewport_size["width"], "height": 900})
    expect(page.get_by_text("Invented demo data")).to_be_in_viewport(timeout=60_000)
    expect(page.get_by_text("concordant", exact=False).first).to_be_in_viewport(timeout=60_000)
    expect(page.get_by_test_id("stDataFrame").first).to_be_in_viewport()
    fits(page, tmp_path, "bench")


def test_a_planted_slip_is_told_and_opens_its_sample(page, tmp_path):
    # the board's own cell holds the words as well, once it is drawn: what is read here is the sentence below it
    sentence = page.get_by_test_id("stMarkdown").filter(has_text="looks like kilocalories entered as kilojoules")
    expect(sentence.first).to_be_visible(timeout=60_000)
    page.get_by_role("button", name="Open F01").click()
    ready(page, "Sample")
    expect(page.get_by_text("✕ discordant", exact=True)).to_be_visible(timeout=60_000)
    fits(page, tmp_path, "slip")


def test_from_an_upload_without_a_unit_to_the_energy_partition(page, tmp_path):
    page.get_by_text("Load your own table").click()
    page.locator('input[type="file"]').set_input_files({"name": "own.csv", "mimeType": "text/csv", "buffer": CSV})
    expect(page.get_by_text("What the headers do not say")).to_be_visible(timeout=60_000)
    fits(page, tmp_path, "mapping")
    page.get_by_role("combobox", name="Unit and basis of 'protein'").click()
    page.get_by_role("option", name="g/100 g as is", exact=True).click()
    page.get_by_role("button", name="Use these units").click()
    expect(page.get_by_text("1 sample:").first).to_be_visible(timeout=60_000)
    page.get_by_role("link", name="Sample", exact=True).click()
    ready(page, "Sample")
    for words in ("What does the bomb say?", "Bomb route", "Composition route", "The difference in three parts"):
        expect(page.get_by_text(words, exact=True).first).to_be_visible(timeout=60_000)
    bomb, composition = (page.get_by_test_id("stTable").nth(k) for k in (0, 1))
    # by hand, Regulation (EU) 1169/2011 Annex XIV: 9.6 x 17 + 2.4 x 37 + 39 x 17 + 7 x 8 = 971.0 kJ per 100 g
    expect(composition.get_by_role("row", name="metabolizable energy")).to_contain_text("971.0")
    expect(bomb.get_by_role("row", name="gross energy", exact=False).first).to_contain_text("1123.0")
    for part in ("measurement", "heats", "convention"):
        expect(page.get_by_role("cell", name=part, exact=True)).to_be_visible()
    expect(
        page.locator('[data-testid="stVegaLiteChart"] canvas, [data-testid="stVegaLiteChart"] svg').first
    ).to_be_visible()
    fits(page, tmp_path, "sample")


def test_an_equation_is_typeset(page, tmp_path):
    page.get_by_role("link", name="Equations", exact=True).click()
    ready(page, "Equations")
    expect(page.locator(".katex").first).to_be_visible(timeout=60_000)
    fits(page, tmp_path, "equations")


def test_evidence_can_be_taken_away(page):
    with page.expect_download(timeout=60_000) as download:
        page.get_by_role("button", name="Evidence (HTML)").click()
    assert "Energy evidence" in Path(download.value.path()).read_text(encoding="utf-8")


def test_a_demo_of_feeds_from_the_board_to_every_loss(page, tmp_path):
    page.get_by_role("combobox", name="Demo table").click()
    page.get_by_role("option", name="feeds growing pig", exact=True).click()
    expect(page.get_by_text("Net energy: 6 samples").first).to_be_visible(timeout=60_000)
    expect(page.get_by_role("combobox", name="Species or use")).to_have_value("growing pig (in the table)")
    fits(page, tmp_path, "feeds")
    page.get_by_role("link", name="Sample", exact=True).click()
    ready(page, "Sample")
    bomb = page.get_by_test_id("stTable").nth(0)
    for step in ("energy in faeces", "energy in urine and gas", "heat increment", "net energy"):
        expect(bomb.get_by_role("row", name=step, exact=False).first).to_be_visible(timeout=60_000)
    fits(page, tmp_path, "feed_sample")


def test_a_chain_is_typeset_one_step_a_line(page, tmp_path):
    page.get_by_role("link", name="Equations", exact=True).click()
    ready(page, "Equations")
    page.get_by_label("Title, source, country or id holds").fill("nrc_2006_chain_cat_composition")
    page.keyboard.press("Enter")
    expect(page.get_by_text("1 entry", exact=True)).to_be_visible(timeout=60_000)
    expect(page.locator(".katex").first).to_contain_text("87.9")
    expect(page.get_by_role("row", name="steps", exact=False).first).to_be_visible()
    fits(page, tmp_path, "chain")
