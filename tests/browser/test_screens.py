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


def fits(page):
    """Nothing sticks out of the window sideways, and no screen shows a traceback."""
    assert page.evaluate("document.documentElement.scrollWidth <= window.innerWidth")
    assert page.get_by_test_id("stException").count() == 0


def test_verdicts_stand_on_the_first_screen(page, tmp_path):
    expect(page.get_by_text("26 concordant")).to_be_visible(timeout=60_000)
    fits(page)
    assert len(page.screenshot(path=tmp_path / "bench.png")) > 20_000


def test_from_an_upload_to_a_sample(page):
    page.get_by_text("Load a table").click()
    page.locator('input[type="file"]').set_input_files({"name": "own.csv", "mimeType": "text/csv", "buffer": CSV})
    expect(page.get_by_text("What the headers do not say")).to_be_visible(timeout=60_000)
    fits(page)
    page.get_by_role("combobox", name="Unit and basis of 'protein'").click()
    page.get_by_role("option", name="g/100 g as is", exact=True).click()
    page.get_by_role("button", name="Use these units").click()
    expect(page.get_by_text("1 sample:")).to_be_visible(timeout=60_000)
    page.get_by_role("link", name="Sample", exact=True).click()
    ready(page, "Sample")
    for words in ("Bomb route", "Composition route", "What does the bomb say?", "The difference in three parts"):
        expect(page.get_by_text(words, exact=True).first).to_be_visible(timeout=60_000)
    expect(page.get_by_text("metabolizable energy", exact=True)).to_have_count(2)
    expect(page.get_by_text("measurement part").first).to_be_visible()
    fits(page)


def test_an_equation_is_typeset(page):
    page.get_by_role("link", name="Equations", exact=True).click()
    ready(page, "Equations")
    expect(page.locator(".katex").first).to_be_visible(timeout=60_000)
    fits(page)


def test_evidence_can_be_taken_away(page):
    with page.expect_download(timeout=60_000) as download:
        page.get_by_role("button", name="Evidence (HTML)").click()
    assert "Energy evidence" in Path(download.value.path()).read_text(encoding="utf-8")
