"""The report: drawn without crossing itself needlessly, escaped everywhere, and usable in a real browser."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from samesum.cli.main import main
from samesum.outputs.report.layers import Box, draw
from support import hostile

if TYPE_CHECKING:
    from selenium.webdriver import Chrome

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
DRIVER = shutil.which("chromedriver")
# The only tests that may be left out: a browser is no Python package, and the README promises tests without one.
browser_needed = pytest.mark.skipif(
    CHROMIUM is None or DRIVER is None,
    reason="the page is tried in a browser, and Debian's chromium and chromium-driver are not installed",
)


@pytest.fixture(autouse=True)
def own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


# --- drawing ---------------------------------------------------------------------------------

names = st.integers(0, 14).map(lambda number: f"n{number}")


@given(st.lists(st.tuples(names, names), max_size=40), st.integers(1, 15))
def test_boxes_never_overlap_and_lines_lead_from_box_to_box(edges: list[tuple[str, str]], count: int) -> None:
    boxes = [Box(f"n{number}", 60.0 + 7 * (number % 5), 20.0 + 9 * (number % 4)) for number in range(count)]
    wanted = [(source, target, "value") for source, target in edges]
    drawing = draw(boxes, wanted)
    assert drawing == draw(boxes, wanted)
    for number, one in enumerate(drawing.boxes):
        assert one.x >= 0 and one.y >= -1e-6
        assert one.x + one.box.width <= drawing.width + 1e-6 and one.y + one.box.height <= drawing.height + 1e-6
        for other in drawing.boxes[number + 1 :]:
            beside = one.x + one.box.width <= other.x or other.x + other.box.width <= one.x
            above = one.y + one.box.height <= other.y + 1e-6 or other.y + other.box.height <= one.y + 1e-6
            assert beside or above
    known = {placed.box.id: placed for placed in drawing.boxes}
    kept = [edge for edge in wanted if edge[0] in known and edge[1] in known and edge[0] != edge[1]]
    assert sorted((line.source, line.target) for line in drawing.lines) == sorted(edge[:2] for edge in kept)
    for line in drawing.lines:
        ends = {line.points[0], line.points[-1]}
        for id in (line.source, line.target):
            placed = known[id]
            middle = placed.y + placed.box.height / 2
            assert ends & {(placed.x, middle), (placed.x + placed.box.width, middle)}


def test_without_cycles_every_line_leads_to_the_right() -> None:
    boxes = [Box(name, 80.0, 30.0) for name in "abcdef"]
    edges = [("a", "b", ""), ("b", "c", ""), ("a", "c", ""), ("c", "f", ""), ("d", "f", ""), ("e", "d", "")]
    drawing = draw(boxes, edges)
    x = {placed.box.id: placed.x for placed in drawing.boxes}
    assert all(x[source] < x[target] for source, target, _ in edges)
    assert x["d"] == x["c"], "as near to what it leads to as it can stand"


# --- the page as text ------------------------------------------------------------------------


class Page(HTMLParser):
    """Every tag with its attributes, and all text outside script and style."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.open: list[str] = []
        self.texts: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag in ("script", "style"):
            self.open.append(tag)

    def handle_endtag(self, tag: str) -> None:
        if self.open and self.open[-1] == tag:
            self.open.pop()

    def handle_data(self, data: str) -> None:
        if not self.open:
            self.texts.append(data)


def report(tmp_path: Path, rulebook: Path, inputs: Path | None = None, *words: str) -> Path:
    out = tmp_path / "report.html"
    given_inputs = ["--inputs", str(inputs)] if inputs is not None else []
    assert main(["report", str(rulebook), *given_inputs, "-o", str(out), "--projects", "2000", *words]) == 0
    return out


def bad_report(tmp_path: Path) -> Path:
    rulebook, cases = tmp_path / "bad.rulebook", tmp_path / "bad.cases.yaml"
    rulebook.write_text(hostile.TEXT, encoding="utf-8")
    cases.write_text(hostile.CASES, encoding="utf-8")
    words = ["--decide", "stock", "accepted", "--reason", hostile.REASON, "--by", hostile.SCRIPT]
    assert main(["register", str(rulebook), *words]) == 0
    return report(tmp_path, rulebook, cases)


def test_hostile_texts_stay_texts(tmp_path: Path) -> None:
    text = bad_report(tmp_path).read_text(encoding="utf-8")
    page = Page(text)
    assert [tag for tag, _ in page.tags].count("script") == 1
    assert not [tag for tag, _ in page.tags if tag in ("img", "iframe", "object")]
    for _, attributes in page.tags:
        assert not [name for name in attributes if name.startswith("on")]
        for name in ("href", "src", "xlink:href"):
            assert (attributes.get(name) or "#").startswith(("#", "data:,"))
    said = "".join(page.texts)
    assert "<script>document.title='taken'</script>" in said and "=cmd|" in said
    assert hostile.obeyed(text) == []


def test_the_largest_sample_makes_a_page_that_needs_nothing_else(tmp_path: Path) -> None:
    name = SAMPLES / "coastal_wetland"
    out = report(tmp_path, name.with_suffix(".rulebook"), name.with_suffix(".cases.yaml"))
    text = out.read_text(encoding="utf-8")
    assert len(text.encode()) < 2 * 1024 * 1024
    page = Page(text)
    assert not [tag for tag, _ in page.tags if tag in ("img", "iframe", "audio", "video")]
    assert "@import" not in text and "url(" not in text
    ids = [attributes["id"] for _, attributes in page.tags if "id" in attributes]
    assert len(ids) == len(set(ids))
    targets = {(attributes.get("href") or "")[1:] for tag, attributes in page.tags if tag == "a"}
    assert targets <= set(ids)
    assert {"map", "places", "cases", "programme", "closing", "counts", "each", "origins"} <= set(ids)
    labelled = {attributes.get("aria-labelledby") for tag, attributes in page.tags if tag == "section"} - {None}
    assert labelled <= set(ids)


# --- the page in a browser -------------------------------------------------------------------


@pytest.fixture
def browser(tmp_path: Path) -> Iterator[Chrome]:
    from selenium import webdriver

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM or ""
    for argument in ("--headless=new", "--no-sandbox", "--disable-gpu", f"--user-data-dir={tmp_path / 'profile'}"):
        options.add_argument(argument)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=webdriver.ChromeService(DRIVER))
    yield driver
    driver.quit()


def show(browser: Chrome, page: Path, width: int = 1280, height: int = 900, scheme: str = "light") -> None:
    browser.execute_cdp_cmd(
        "Emulation.setDeviceMetricsOverride",
        {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": width < 700},
    )
    media = [{"name": "prefers-reduced-motion", "value": "reduce"}, {"name": "prefers-color-scheme", "value": scheme}]
    browser.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": media})
    browser.get(page.as_uri())


def asked_for(browser: Chrome) -> set[str]:
    """Every address that the page asked for."""
    found = set()
    for entry in browser.get_log("performance"):
        message: dict[str, Any] = json.loads(entry["message"])["message"]
        if message["method"] == "Network.requestWillBeSent":
            found.add(message["params"]["request"]["url"])
    return {address for address in found if not address.startswith(("chrome:", "data:"))}  # its own first page


def shown_rows(browser: Chrome) -> list[str]:
    found: list[str] = browser.execute_script(
        "return [...document.querySelectorAll('tbody tr')].filter(row => !row.hidden)"
        ".map(row => row.querySelector('th span').textContent)"
    )
    return found


@browser_needed
def test_the_page_filters_sorts_and_opens_a_branch_point(tmp_path: Path, browser: Chrome) -> None:
    from selenium.webdriver.common.by import By
    from selenium.webdriver.common.keys import Keys
    from selenium.webdriver.support.ui import Select

    name = SAMPLES / "coastal_wetland"
    page = report(tmp_path, name.with_suffix(".rulebook"), name.with_suffix(".cases.yaml"))
    show(browser, page)
    everything = shown_rows(browser)
    assert len(everything) == 25
    search = browser.find_element(By.CSS_SELECTOR, "[data-search]")
    search.send_keys("isotopes")
    assert shown_rows(browser) == ["elsewhere_carbon"]
    assert browser.find_element(By.CSS_SELECTOR, "[data-shown]").text == "1 of 25 shown"
    search.clear()
    search.send_keys(" ")
    Select(browser.find_element(By.CSS_SELECTOR, "[data-who]")).select_by_visible_text("verifier")
    assert set(shown_rows(browser)) == {"insignificant", "room_to_migrate", "methane/3", "buffer/otherwise"}
    Select(browser.find_element(By.CSS_SELECTOR, "[data-who]")).select_by_visible_text("all")
    heads = {each.text.split("\u00a0")[0]: each for each in browser.find_elements(By.CSS_SELECTOR, "thead th button")}
    heads["Swing"].click()
    assert shown_rows(browser)[0] == "biomass_end"
    assert heads["Swing"].find_element(By.XPATH, "..").get_attribute("aria-sort") == "descending"
    heads["Clause"].click()
    assert shown_rows(browser)[0] == "gwp_methane"  # 6.2 comes before 10.4
    heads["Branch point"].click()
    assert shown_rows(browser) == everything

    panel = browser.find_element(By.CSS_SELECTOR, "[data-panel]")
    assert not panel.is_displayed()
    entry = browser.find_element(By.CSS_SELECTOR, 'a.entry[aria-label^="soil_gain:"]')
    entry.send_keys(Keys.ENTER)  # by keyboard, as by mouse
    assert panel.is_displayed()
    said = panel.text
    for text in (
        "soil_gain",
        "Clause 8.1",
        "dated cores",
        "regional",
        "error 35 %",
        "swing",
        "over-issuance",
        "Decision",
    ):
        assert text in said
    browser.find_element(By.TAG_NAME, "body").send_keys(Keys.ESCAPE)
    assert not panel.is_displayed()
    assert browser.execute_script("return document.activeElement === arguments[0]", entry)
    entry.click()
    assert panel.is_displayed()

    size = "return document.querySelector('svg.chart').width.baseVal.value"
    before = browser.execute_script(size)
    browser.execute_script("document.querySelector('#map').scrollIntoView()")
    browser.find_element(By.CSS_SELECTOR, "[data-zoom=in]").click()
    assert browser.execute_script(size) > before
    assert browser.get_log("browser") == []
    assert asked_for(browser) == {page.as_uri()}


@browser_needed
@pytest.mark.parametrize("width", [1280, 390])
def test_nothing_sticks_out_at_the_side(width: int, tmp_path: Path, browser: Chrome) -> None:
    name = SAMPLES / "coastal_wetland"
    show(browser, report(tmp_path, name.with_suffix(".rulebook"), name.with_suffix(".cases.yaml")), width)
    wide, room = browser.execute_script(
        "const top = document.documentElement; return [top.scrollWidth, top.clientWidth]"
    )
    assert wide == room
    small = browser.execute_script(
        "return [...document.querySelectorAll('p, li, td, dd, blockquote')].filter(e => e.offsetParent"
        " && parseFloat(getComputedStyle(e).fontSize) < 12).map(e => e.outerHTML.slice(0, 80))"
    )
    assert small == []


CONTRAST = """
const ink = [...document.querySelectorAll('main *, header *, nav *')].filter(e => e.getClientRects().length &&
  [...e.childNodes].some(n => n.nodeType === 3 && n.textContent.trim()));
const parse = c => c.match(/[\\d.]+/g).map(Number);
const linear = v => v <= .04045 ? v / 12.92 : ((v + .055) / 1.055) ** 2.4;
const light = c => {
  const [r, g, b] = parse(c).map(v => linear(v / 255));
  return .2126 * r + .7152 * g + .0722 * b;
};
const filled = (e, inside) => {
  const fill = getComputedStyle(e.querySelector(inside)).fill;
  return fill === 'none' || parse(fill)[3] === 0 ? '' : fill;
};
const behind = e => {
  for (let at = e; at; at = at.parentElement) {
    const fill = at.matches('a.entry') ? filled(at, '.hit') : at.matches('g.node') ? filled(at, '.box') : '';
    if (fill) return fill;
    const colour = getComputedStyle(at).backgroundColor;
    if (parse(colour)[3] !== 0) return colour;
  }
  return 'rgb(255, 255, 255)';
};
return ink.map(e => {
  const style = getComputedStyle(e);
  const text = e instanceof SVGElement ? style.fill : style.color;
  const [a, b] = [light(text), light(behind(e))].sort((x, y) => y - x);
  return [(a + .05) / (b + .05), e.outerHTML.slice(0, 120)];
}).filter(each => each[0] < 4.5);
"""


@browser_needed
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_all_text_has_contrast(scheme: str, tmp_path: Path, browser: Chrome) -> None:
    """At least 4.5 to 1: WCAG 2.2, success criterion 1.4.3 (formula: its "relative luminance")."""
    name = SAMPLES / "coastal_wetland"
    page = report(tmp_path, name.with_suffix(".rulebook"), name.with_suffix(".cases.yaml"))
    show(browser, page, scheme=scheme)
    assert browser.execute_script(CONTRAST) == []


@browser_needed
def test_hostile_texts_do_nothing_in_a_browser(tmp_path: Path, browser: Chrome) -> None:
    page = bad_report(tmp_path)
    show(browser, page)
    browser.execute_script(
        "document.querySelectorAll('[data-place]').forEach(each =>"
        " each.dispatchEvent(new MouseEvent('click', {bubbles: true, cancelable: true})))"
    )
    assert "taken'" in browser.title and browser.title != "taken"
    assert browser.get_log("browser") == []
    assert asked_for(browser) == {page.as_uri()}


@browser_needed
def test_a_large_rulebook_begins_with_its_clauses(tmp_path: Path, browser: Chrome) -> None:
    from selenium.webdriver.common.by import By

    rulebook = tmp_path / "large.rulebook"
    rulebook.write_text(large(150), encoding="utf-8")
    page = report(tmp_path, rulebook, None, "--projects", "0")
    assert page.stat().st_size < 2 * 1024 * 1024
    show(browser, page)
    charts = [each for each in browser.find_elements(By.CSS_SELECTOR, ".canvas") if each.is_displayed()]
    assert len(charts) == 1 and len(charts[0].find_elements(By.CSS_SELECTOR, ".node")) == 11
    assert charts[0].find_elements(By.CSS_SELECTOR, "a.entry") == []
    charts[0].find_elements(By.CSS_SELECTOR, "a.opens")[3].click()
    (opened,) = [each for each in browser.find_elements(By.CSS_SELECTOR, ".canvas") if each.is_displayed()]
    assert opened.id != charts[0].id
    assert 10 <= len(opened.find_elements(By.CSS_SELECTOR, "a.entry")) <= 40
    letters = browser.execute_script(
        "return [...arguments[0].querySelectorAll('a.entry text.says')].map(e => e.getBoundingClientRect().height)",
        opened,
    )
    assert min(letters) >= 9, "readable as it is first shown"
    assert browser.get_log("browser") == []


def large(points: int) -> str:
    """A rulebook of ten clauses with so many choices, each leading to the next and to the one after it."""
    lines = ['rulebook "Large", draft "1"', "result total [t], rounded down to 1, clause 20"]
    for number in range(points):
        before = "".join(f" + q{number - back} / 9" for back in (1, 2) if number >= back)
        lines += [f"quantity q{number} [t], clause {number * 10 // points + 4}.{number}", "    choice by developer"]
        lines += [
            "        option measured",
            f"            = 1 [t]{before}",
            "        option modelled",
            "            = 2 [t]",
        ]
    lines += ["quantity total [t], clause 20", f"    = q{points - 1} + q{points - 2}"]
    return "\n".join(lines) + "\n"
