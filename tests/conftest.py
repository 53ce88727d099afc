"""In CI a skipped test is a failure: what was meant to be checked was not."""

import os
from pathlib import Path

import pytest
from hypothesis import settings

# how long one example takes says nothing of the law it tests, and much of what else the machine is doing
settings.register_profile("unhurried", deadline=None)
settings.load_profile("unhurried")


@pytest.hookimpl(hookwrapper=True)
def pytest_runtest_makereport(item, call):
    outcome = yield
    report = outcome.get_result()
    if report.skipped and os.environ.get("ENERGY_NO_SKIPS"):
        report.outcome = "failed"
        report.longrepr = f"{item.nodeid} was skipped, which counts as a failure here: {report.longrepr}"


@pytest.fixture
def open_screen(monkeypatch):
    """Opens a screen of the application, by the name of its page, in Streamlit's own test client."""

    def opened(page):
        from streamlit.testing.v1 import AppTest

        root = Path(__file__).parent.parent
        monkeypatch.chdir(root)
        at = AppTest.from_file(str(root / "app.py"), default_timeout=60)
        at.run()
        at.switch_page(f"energy/pages/{page}.py").run()
        assert not at.exception
        return at

    return opened


@pytest.fixture
def said():
    """Everything a screen says, in one text."""

    def text(at):
        kinds = ("markdown", "warning", "error", "info", "caption", "subheader")
        tables = [" ".join(map(str, table.value.to_numpy().ravel())) for table in (*at.table, *at.dataframe)]
        return " ".join([*(str(e.value) for kind in kinds for e in at.get(kind)), *tables]).replace("\\", "")

    return text
