"""One browser for all tests of this folder; without it they fail, and are never skipped."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from driver import HOSTILE, Browser

from synth.answer import Answer
from synth.present.page import to_html
from synth.solve import find
from synth.stage import Stage


@pytest.fixture(scope="session")
def started() -> Iterator[Browser]:
    with Browser() as browser:
        yield browser


@pytest.fixture
def browser(started: Browser) -> Browser:
    """The browser as a desk would show it, whatever the test before left."""
    started.scripts(on=True)
    started.size(1280, 1000)
    started.media()
    return started


@pytest.fixture(scope="session")
def answer() -> Answer:
    """Candidates of several networks for an instrument of a tide-gauge buoy (invented)."""
    stage = Stage(
        name="tide-gauge level sensor", network=("divider", "collector_divider"), resistors_re_use="either",
        supply="12 V ± 5 %", ic="1 mA ± 30 %", vce="5 V", type="BC847B",
        tolerance="1 %", series="E6", resistors_style="0603", derating="half_power",
    )  # fmt: skip
    found = find(stage, top=24)
    assert len({c.network for c in found.candidates}) > 1
    return found


@pytest.fixture(scope="session")
def page(answer: Answer, tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("pages") / "answer.html"
    path.write_text(to_html(answer), encoding="utf-8")
    return path


@pytest.fixture(scope="session")
def hostile_page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    stage = Stage(name=HOSTILE, supply="12 V", ic="1 mA", vce="5 V", hfe="110 : 450", tolerance="1 %", series="E24")
    path = tmp_path_factory.mktemp("pages") / "hostile.html"
    path.write_text(to_html(find(stage, top=2, command=f"restpoint find --name '{HOSTILE}'")), encoding="utf-8")
    return path
