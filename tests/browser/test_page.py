"""The page in a browser: switching, sorting, filtering, printing, refusing, and being read without mouse or script."""

from __future__ import annotations

import re as regex
import subprocess
import threading
from http.server import BaseHTTPRequestHandler
from itertools import pairwise
from pathlib import Path
from socketserver import ThreadingTCPServer
from xml.etree import ElementTree

import pytest
from driver import HOSTILE, Browser, BrowserFailed

import synth
from synth.answer import Answer
from synth.boards import Board
from synth.boards.file import BoardStage
from synth.explain import percent
from synth.present.page import board_to_html, refit_to_html, to_html
from synth.solve import check
from synth.stage import Stage

SHOWN = "return [...document.querySelectorAll('article.candidate')].filter(a => a.getClientRects().length).map(a => a.id)"
ORDER = "return [...document.querySelectorAll('#candidates tbody tr')].filter(r => !r.hidden).map(r => Number(r.dataset.key))"
CONTRAST = (Path(__file__).parent / "contrast.js").read_text(encoding="utf-8")
POINTS_PER_CM = 72.0 / 2.54


def text_of(browser: Browser, css: str) -> str:
    return " ".join(str(browser.run("return document.querySelector(arguments[0]).innerText", css)).split())


def test_a_page_opens_without_complaint_or_request(browser: Browser, page: Path) -> None:
    browser.open(page)
    assert browser.logged("browser") == []
    assert browser.requests() == [page.as_uri()]
    assert browser.run("return document.title") == "tide-gauge level sensor"
    assert browser.run(SHOWN) == ["candidate-1"]


def test_a_row_switches_every_panel_by_mouse(browser: Browser, page: Path, answer: Answer) -> None:
    browser.open(page)
    for rank in (3, 17):
        browser.click(f"#candidates tr[data-key='{rank}'] td:nth-child(4)")
        assert browser.run(SHOWN) == [f"candidate-{rank}"]
        c = answer.candidate(rank)
        text = text_of(browser, f"#candidate-{rank}")
        assert percent(c.drift.q_point) in text
        for title in ("Load line", "Q-point", "Meter readings", "Budget of IC", "Limits and windows", "Stress of every part", "Explanation"):
            assert title in text
        assert " ".join(c.explanation[1].split()) in text
        assert f"Candidate {rank} " in browser.run("return document.querySelector('article.shown .load-line svg').ariaLabel")
        assert browser.run("return document.querySelector('input[name=chosen]:checked').id") == f"choose-{rank}"
        assert browser.run("return location.hash") == f"#candidate-{rank}"
    assert browser.logged("browser") == []


def test_rows_switch_by_keyboard_alone(browser: Browser, page: Path) -> None:
    browser.open(page)
    for _ in range(80):
        browser.press("tab")
        if browser.run("return document.activeElement.name") == "chosen":
            break
    assert browser.run("return document.activeElement.id") == "choose-1"
    # The ring of the focus is there to see.
    assert browser.run("return getComputedStyle(document.activeElement).outlineStyle") == "solid"
    browser.press("down", "down")
    assert browser.run(SHOWN) == ["candidate-3"]
    browser.press("up")
    assert browser.run(SHOWN) == ["candidate-2"]


def test_sorting_sorts_every_column_both_ways(browser: Browser, page: Path, answer: Answer) -> None:
    browser.open(page)
    by = {
        "RC": lambda c: c.resistors["rc"] if "rc" in c.resistors else float("inf"),
        "drift": lambda c: c.drift.q_point,
        "centring": lambda c: c.centring,
        "supply": lambda c: c.supply_current,
        "IC over the box": lambda c: c.worst.ic[0],
        "network": lambda c: c.network,
        "rank": lambda c: c.rank,
    }
    heads = browser.run("return [...document.querySelectorAll('#candidates thead th')].map(h => h.innerText.trim())")
    for name, key in by.items():
        css = f"#candidates thead th:nth-child({heads.index(name) + 1}) button"
        for down in (False, True):
            browser.click(css)
            # Of equal ones the better rank comes first, either way.
            expected = sorted(answer.candidates, key=lambda c: c.rank)
            expected.sort(key=key, reverse=down)
            assert browser.run(ORDER) == [c.rank for c in expected], (name, down)
            state = browser.run("return arguments[0].map(q => document.querySelector(q).closest('th').ariaSort)", [css])
            assert state == ["descending" if down else "ascending"]
    assert browser.run("return document.querySelectorAll('[aria-sort]').length") == 1


def test_sorting_works_by_keyboard(browser: Browser, page: Path, answer: Answer) -> None:
    browser.open(page)
    browser.run("[...document.querySelectorAll('#candidates thead button')].find(b => b.innerText.trim() === 'supply').focus()")
    browser.press("enter")
    expected = sorted(answer.candidates, key=lambda c: (c.supply_current, c.rank))
    assert browser.run(ORDER) == [c.rank for c in expected]
    browser.press("space")
    assert browser.run(ORDER)[0] == max(answer.candidates, key=lambda c: c.supply_current).rank


def test_filters_filter_and_tell_how_many_are_left(browser: Browser, page: Path, answer: Answer) -> None:
    browser.open(page)
    total = len(answer.candidates)
    network = answer.candidates[0].network
    every = {
        "filter-network": (network, [c.rank for c in answer.candidates if c.network == network]),
        "filter-drift": ("20", [c.rank for c in answer.candidates if c.drift.q_point <= 0.2]),
        "filter-text": ("4K7", [c.rank for c in answer.candidates if 4700.0 in c.resistors.values()]),
    }
    for name, (value, expected) in every.items():
        assert 0 < len(expected) < total, name
        browser.run("const f = document.getElementById(arguments[0]); f.value = arguments[1]; f.dispatchEvent(new Event('input'))", name, value)
        assert browser.run(ORDER) == expected, name
        assert text_of(browser, "#shown") == f"{len(expected)} of {total} listed"
        browser.run("const f = document.getElementById(arguments[0]); f.value = ''; f.dispatchEvent(new Event('input'))", name)
        assert len(browser.run(ORDER)) == total
    browser.type("#filter-text", "no such words")
    assert browser.run(ORDER) == []
    assert browser.run(SHOWN) == ["candidate-1"]


def test_two_candidates_stand_side_by_side(browser: Browser, page: Path) -> None:
    browser.open(page)
    browser.run("const s = document.getElementById('beside'); s.value = '5'; s.dispatchEvent(new Event('change'))")
    assert browser.run(SHOWN) == ["candidate-1", "candidate-5"]
    one, two = browser.run(
        "return ['1', '5'].map(r => { const b = document.getElementById('candidate-' + r).getBoundingClientRect(); return [b.left, b.right, b.top] })"
    )
    assert one[1] <= two[0]
    assert one[2] == two[2]
    browser.click("#candidates tr[data-key='2'] td:nth-child(3)")
    assert browser.run(SHOWN) == ["candidate-2", "candidate-5"]


def test_a_link_to_a_candidate_opens_it(browser: Browser, page: Path) -> None:
    browser.open(page)
    browser.run("location.hash = '#candidate-4'")
    browser.wait(f"return JSON.stringify((() => {{ {SHOWN} }})()) === '[\"candidate-4\"]'")


def test_nothing_leaves_even_when_asked(browser: Browser, page: Path, tmp_path: Path) -> None:
    """The policy holds: pictures, scripts, styles, frames, forms and calls to a server next door reach nothing."""
    seen: list[str] = []

    class Door(BaseHTTPRequestHandler):
        def do_GET(self) -> None:
            seen.append(self.path)
            self.send_response(204)
            self.end_headers()

        do_POST = do_GET

        def log_message(self, format: str, *arguments: object) -> None:
            pass

    # One thread a connection, since a browser opens some ahead and says nothing on them.
    server = ThreadingTCPServer(("127.0.0.1", 0), Door)
    server.daemon_threads = True
    thread = threading.Thread(target=server.serve_forever, daemon=True)
    thread.start()
    probe = """
        const root = arguments[0];
        for (const tag of ["img", "script", "iframe"]) {
            const e = document.createElement(tag); e.src = root + tag; document.body.append(e);
        }
        const link = document.createElement("link"); link.rel = "stylesheet"; link.href = root + "link"; document.head.append(link);
        fetch(root + "fetch", {mode: "no-cors"}).catch(() => {});
        navigator.sendBeacon(root + "beacon", "x");
        try { new WebSocket(root.replace("http", "ws")); } catch (error) {}
    """
    try:
        root = f"http://127.0.0.1:{server.server_address[1]}/"
        browser.open(page)
        browser.run(probe, root)
        browser.run("return new Promise(done => setTimeout(done, 400))")
        assert seen == []
        refused = [entry["message"] for entry in browser.logged("browser")]
        assert sum("Content Security Policy" in message for message in refused) >= 5
        # The same questions from a page without a policy arrive, so that their silence above means something.
        plain = tmp_path / "plain.html"
        plain.write_text("<!DOCTYPE html><title>plain</title><p>plain", encoding="utf-8")
        browser.open(plain)
        browser.run(probe, root)
        browser.run("return new Promise(done => setTimeout(done, 400))")
        assert {"/img", "/script", "/iframe", "/link", "/fetch", "/beacon"} <= set(seen)
    finally:
        server.shutdown()
        server.server_close()
        thread.join()


def test_markup_in_names_is_inert(browser: Browser, hostile_page: Path) -> None:
    browser.open(hostile_page)
    with pytest.raises(BrowserFailed, match="no such alert"):
        browser.call("GET", "/alert/text")
    assert browser.run("return document.querySelector('h1').textContent") == HOSTILE
    assert browser.run("return document.title") == HOSTILE
    assert HOSTILE in browser.run("return document.querySelector('footer code').textContent")
    assert browser.run("return [document.images.length, document.scripts.length]") == [0, 1]
    assert browser.logged("browser") == []


def test_a_narrow_screen_scrolls_tables_but_not_the_page(browser: Browser, page: Path) -> None:
    browser.size(380, 800)
    browser.open(page)
    for rank in (1, 9):
        browser.run("document.getElementById('choose-' + arguments[0]).click()", rank)
        assert browser.run("return document.documentElement.scrollWidth") <= 380
        outside = browser.run(
            "return [...document.querySelectorAll('body *')].filter(e => !e.closest('.scroll, .skip') && e.getClientRects().length"
            " && e.getBoundingClientRect().right > 380.5).map(e => e.outerHTML.slice(0, 80))"
        )
        assert outside == []
    # What scrolls can be reached without a mouse, and has a name.
    stuck = browser.run(
        "return [...document.querySelectorAll('.scroll')].filter(e => e.scrollWidth > e.clientWidth + 1"
        " && (e.tabIndex !== 0 || getComputedStyle(e).overflowX !== 'auto' || !(e.ariaLabel || e.getAttribute('aria-labelledby')))).length"
    )
    assert stuck == 0


def luminance(colour: list[float]) -> float:
    """Relative luminance (W3C WCAG 2.2, definition of relative luminance)."""
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in (x / 255.0 for x in colour)]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_contrast_is_that_of_level_aa(browser: Browser, page: Path, scheme: str) -> None:
    """4.5 to 1 for text, 3 to 1 for large text and for marks (W3C WCAG 2.2, criteria 1.4.3 and 1.4.11)."""
    browser.media(scheme=scheme)
    browser.open(page)
    browser.run("const s = document.getElementById('beside'); s.value = '2'; s.dispatchEvent(new Event('change'))")
    pairs = browser.run(CONTRAST)
    assert len(pairs) > 500
    dark = luminance(pairs[0][2]) < 0.1
    assert dark == (scheme == "dark")
    low = []
    for what, ink, paper, least in pairs:
        bright, dim = sorted((luminance(ink), luminance(paper)), reverse=True)
        ratio = (bright + 0.05) / (dim + 0.05)
        if ratio < least:
            low.append((what, round(ratio, 2), least))
    assert low == []


def test_everything_is_there_without_scripts(browser: Browser, page: Path, answer: Answer) -> None:
    browser.scripts(on=False)
    browser.open(page)
    assert browser.run(SHOWN) == [f"candidate-{c.rank}" for c in answer.candidates]
    assert browser.run("return document.querySelectorAll('#candidates tbody a').length") == len(answer.candidates)
    idle = browser.run("return [...document.querySelectorAll('input, select, button')].filter(e => e.getClientRects().length).length")
    assert idle == 0
    text = text_of(browser, "main")
    for c in answer.candidates:
        assert " ".join(c.explanation[1].split()) in text


def test_every_control_has_a_name_and_every_region_a_landmark(browser: Browser, page: Path) -> None:
    browser.open(page)
    nodes = browser.devtools("Accessibility.getFullAXTree")["nodes"]
    by_role: dict[str, list[str]] = {}
    for node in nodes:
        if not node.get("ignored"):
            by_role.setdefault(node["role"]["value"], []).append(node.get("name", {}).get("value", ""))
    assert {"banner", "navigation", "main", "contentinfo", "search"} <= by_role.keys()
    for role in ("radio", "button", "searchbox", "spinbutton", "combobox", "link", "image", "table", "region", "article", "heading"):
        assert by_role.get(role), role
        assert all(by_role[role]), role
    levels = browser.run("return [...document.querySelectorAll('h1,h2,h3,h4')].filter(h => h.getClientRects().length).map(h => Number(h.tagName[1]))")
    assert levels[0] == 1
    assert all(b - a <= 1 for a, b in pairwise(levels))
    assert browser.run("return document.documentElement.lang") == "en"
    bare = browser.run("return [...document.querySelectorAll('thead th, tbody th')].filter(h => !h.scope).length")
    assert bare == 0


def words_on_paper(path: Path) -> list[list[tuple[float, float, float, float, str]]]:
    """Words of each sheet with their places [pt], as pdftotext (package poppler-utils) finds them."""
    run = subprocess.run(["pdftotext", "-bbox", str(path), "-"], capture_output=True, text=True, check=True)
    # The characters below 32 that a form feed may leave are no XML.
    tree = ElementTree.fromstring(regex.sub(r"[\x00-\x08\x0b\x0c\x0e-\x1f]", "", run.stdout))
    space = "{http://www.w3.org/1999/xhtml}"
    return [
        [(*(float(word.attrib[key]) for key in ("xMin", "yMin", "xMax", "yMax")), word.text or "") for word in sheet.iter(f"{space}word")]  # type: ignore[misc]
        for sheet in tree.iter(f"{space}page")
    ]


@pytest.mark.parametrize(("width", "height"), [(21.0, 29.7), (21.59, 27.94)], ids=["A4", "Letter"])
def test_print_cuts_no_table(browser: Browser, page: Path, answer: Answer, tmp_path: Path, width: float, height: float) -> None:
    """ISO 216 A4 and ANSI Letter: every word within the margins, every row whole, every cell of what is shown printed."""
    browser.open(page)
    browser.run("const s = document.getElementById('beside'); s.value = '2'; s.dispatchEvent(new Event('change'))")
    cells = browser.run(
        "return [...document.querySelectorAll('main th, main td')].filter(c => c.getClientRects().length && !c.closest('thead'))"
        ".map(c => c.innerText)"
    )
    path = tmp_path / "page.pdf"
    browser.pdf(path, width, height)
    sheets = words_on_paper(path)
    assert len(sheets) >= 3
    for sheet in sheets:
        for left, top, right, bottom, word in sheet:
            # The margins of the style sheet are 13 mm at the sides and 14 mm above and below; a point of slack for glyphs.
            assert left >= 1.3 * POINTS_PER_CM - 1.0, word
            assert right <= (width - 1.3) * POINTS_PER_CM + 1.0, word
            assert top >= 1.4 * POINTS_PER_CM - 3.0, word
            assert bottom <= (height - 1.4) * POINTS_PER_CM + 3.0, word
    printed = "".join(word for sheet in sheets for *_, word in sheet)
    squeezed = regex.sub(r"\s", "", printed)
    missing = [cell for cell in cells if any(regex.sub(r"\s", "", word) not in squeezed for word in cell.split())]
    assert missing == []
    # A row of the list stands on one sheet, its cells on one line; its columns are repeated on top of every sheet.
    lines: dict[int, int] = {}
    for number, sheet in enumerate(sheets):
        for _, top, _, _, word in sheet:
            for c in answer.candidates:
                if word == str(c.rank) and any(abs(top - t) < 2.0 and w in ("pass", "fail") for _, t, _, _, w in sheet):
                    lines.setdefault(c.rank, number)
    assert lines.keys() == {c.rank for c in answer.candidates}
    for number in set(lines.values()):
        assert any(word == "centring" for *_, word in sheets[number])
    browser.media(kind="print")
    split = browser.run("return [...document.querySelectorAll('tr, figure, svg')].filter(e => e.getClientRects().length && getComputedStyle(e.closest('tr, figure')).breakInside !== 'avoid').length")
    assert split == 0


def test_print_is_dark_on_white_in_either_scheme(browser: Browser, page: Path) -> None:
    browser.media(scheme="dark", kind="print")
    browser.open(page)
    assert browser.run("return getComputedStyle(document.body).color") == "rgb(0, 0, 0)"
    assert browser.run("return getComputedStyle(document.body).backgroundColor") == "rgb(255, 255, 255)"


REFIT = {"supply": "12 V", "ic": "1.6 mA ± 15 %", "vce": ">= 2 V", "hfe": "110 : 220", "series": "E24", "tolerance": "1 %",
         "collector_share": "none", "bleeder_current": "none", "base_resistance": "none", "temperature": "25 °C"}  # fmt: skip


@pytest.mark.parametrize("kind", ["refit", "board"])
def test_pages_of_other_commands_switch_alike(browser: Browser, tmp_path: Path, kind: str) -> None:
    """A refit shows the recommended change beside today's resistors; a board its first stage (both invented)."""
    path = tmp_path / f"{kind}.html"
    if kind == "refit":
        fitted = {"r1": "100k", "r2": "27k", "rc": "4k7", "re": "1k"}
        path.write_text(refit_to_html(synth.refit(Stage(**REFIT, **fitted), to_hfe="420 : 800", top=2)), encoding="utf-8")
        first = ["candidate-1", "candidate-after"]
    else:
        stages = tuple(BoardStage(stage=Stage(**REFIT, name=name), allowance=0.05) for name in ("level", "pressure"))
        path.write_text(board_to_html(synth.board(Board(stages=stages), most=100)), encoding="utf-8")
        first = ["candidate-1"]
    browser.open(path)
    assert browser.logged("browser") == []
    assert browser.requests() == [path.as_uri()]
    assert browser.run(SHOWN) == first
    browser.click("#candidates tbody tr:nth-child(2) td:nth-child(2)")
    key = browser.run("return document.querySelector('#candidates tbody tr:nth-child(2)').dataset.key")
    assert browser.run(SHOWN)[0] == f"candidate-{key}"
    browser.size(380, 800)
    assert browser.run("return document.documentElement.scrollWidth") <= 380
    pdf = tmp_path / "page.pdf"
    browser.pdf(pdf, 21.0, 29.7)
    for sheet in words_on_paper(pdf):
        assert all(left >= 1.3 * POINTS_PER_CM - 1.0 and right <= 19.7 * POINTS_PER_CM + 1.0 for left, _, right, _, _ in sheet)


def test_the_verdict_on_fitted_resistors_needs_no_choice(browser: Browser, tmp_path: Path) -> None:
    stage = Stage(supply="12 V", ic="2 mA", vce="5 V", hfe="110 : 450", tolerance="1 %", r1="43k", r2="24k", rc="1k8", re="1k8")
    path = tmp_path / "check.html"
    path.write_text(to_html(check(stage)), encoding="utf-8")
    browser.open(path)
    assert browser.logged("browser") == []
    assert browser.run(SHOWN) == ["candidate-1"]
    assert browser.run("return document.querySelectorAll('input[type=radio], #beside').length") == 0
    assert text_of(browser, ".lead .verdict") == "PASS"
