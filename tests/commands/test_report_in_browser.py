"""The page in headless Chromium, opened from its file: what a reader does with mouse, keyboard and paper."""

import base64
import json
import re
import shutil
import zlib

import pandas as pd
import pytest
from selenium import webdriver
from selenium.webdriver.chrome.service import Service
from selenium.webdriver.common.by import By
from selenium.webdriver.common.keys import Keys
from selenium.webdriver.support.select import Select
from selenium.webdriver.support.wait import WebDriverWait

import morphotone
from morphotone.showing.page import page as page_of
from tests.commands.folders import SOUND, fill
from tests.showing.mornings import away_of, cells_of, findings_of, morning_of

CHROMIUM, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(not (CHROMIUM and DRIVER), reason="chromium and chromedriver are not on PATH"),
]
FLAGS = (
    *("--headless=new", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update", "--disable-sync"),
    "--window-size=1200,900",
)
#: One grey dot.
PNG = base64.b64decode(
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAAAAAA6fptVAAAACklEQVR4nGNoAAAAggCBd81ytgAAAABJRU5ErkJggg=="
)
NAMES = ["plain", "deep/in/a folder", "<img src=x onerror=document.title='broken'>", "</script>", "שלום"]


@pytest.fixture(scope="module")
def driver(tmp_path_factory):
    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM
    for flag in (*FLAGS, f"--user-data-dir={tmp_path_factory.mktemp('profile')}"):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    driver = webdriver.Chrome(options=options, service=Service(DRIVER))
    yield driver
    driver.quit()


@pytest.fixture(scope="module")
def page(tmp_path_factory):
    """A page of 40 cells in two groups, five with names of all kinds, two with pictures."""
    folder = fill(tmp_path_factory.mktemp("field"), {"a.swc": SOUND})
    results = folder / "results"
    columns = morphotone.survey(folder, results).cells  # of a real survey; the cells are invented
    names = [*NAMES, *(f"cell_{number:02}" for number in range(5, 40))]
    cells = pd.concat([columns] * 40, ignore_index=True).assign(**cells_of(40, names))
    cells.loc[5, "R_in_MOhm"], cells.loc[6, "X_tips_mean"] = 9000.0, None
    cells.loc[7, "grade"] = "doubtful"
    findings = findings_of([{"file": "cell_07.swc", "code": "flat", "severity": "doubtful"}])
    fill(results / "maps", {"figures/0.png": PNG, "thumbnails/0.png": PNG})
    rows = [f"{name}.swc,figures/0.png,thumbnails/0.png" for name in ("plain", "cell_05")]
    (results / "maps" / "maps.csv").write_text("\n".join(["file,figure,thumbnail", *rows]), encoding="utf-8")
    cells.to_csv(results / "cells.csv", index=False)
    findings.assign(grade="doubtful").to_csv(results / "findings.csv", index=False)
    away_of([["w.swc", "empty", "w.swc: empty"]]).to_csv(results / "turned_away.csv", index=False)
    record = json.loads((results / "run.json").read_text(encoding="utf-8"))
    record |= {"folder": "field", "counts": {**record["counts"], "found": 41}}
    (results / "run.json").write_text(json.dumps(record), encoding="utf-8")
    groups = cells[["cell"]].assign(kind=["odd", "even"] * 20)
    morphotone.report(results, groups, "kind", into=results / "report.html")
    return results / "report.html"


@pytest.fixture
def opened(driver, page):
    driver.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})
    driver.get("about:blank")
    driver.get_log("browser")
    driver.get_log("performance")  # the browser's own first page
    driver.get(page.as_uri())
    yield driver
    assert driver.get_log("browser") == []
    asked_for(driver)
    assert driver.title == "Survey of field, Morphotone"
    driver.execute_script("localStorage.clear()")


def asked_for(driver):
    """Return the addresses the browser asked for since this was last called; none but of files."""
    messages = [json.loads(entry["message"])["message"] for entry in driver.get_log("performance")]
    sent = [one["params"] for one in messages if one["method"] == "Network.requestWillBeSent"]
    addresses = [one["request"]["url"] for one in sent]
    assert {address.partition(":")[0] for address in addresses} <= {"file"}
    return addresses


def shown(driver):
    """Return the names in the rows that are seen, top to bottom."""
    return driver.execute_script(
        "return [...document.querySelectorAll('#table tbody tr[id^=cell-]')].filter(row => !row.hidden)"
        ".map(row => row.cells[0].querySelector('bdi').textContent)"
    )


def column(driver, index):
    return driver.execute_script(
        "return [...document.querySelectorAll('#table tbody tr[id^=cell-]')]"
        ".map(row => row.cells[arguments[0]].textContent)",
        index,
    )


def head(driver, words):
    (found,) = [
        one
        for one in driver.find_elements(By.CSS_SELECTOR, "#table thead button")
        if one.text.startswith(words)
    ]
    return found


def click(driver, element):
    driver.execute_script("arguments[0].scrollIntoView({block: 'center'})", element)
    element.click()


def test_it_loads_whole_and_asks_for_nothing(opened):
    assert len(shown(opened)) == 40
    assert shown(opened)[0] == "plain"
    assert "a folder" in shown(opened)
    assert set(NAMES[2:]) <= {*shown(opened), "</script>"}
    assert [address.rpartition("/")[2] for address in asked_for(opened)] == ["report.html"]
    assert opened.find_elements(By.TAG_NAME, "img") == []


def test_a_heading_sorts_and_sorts_back_with_empty_cells_last(opened):
    click(opened, head(opened, "X of the tips"))
    place = [cell.text for cell in opened.find_elements(By.CSS_SELECTOR, "#table thead th")]
    index = next(number for number, text in enumerate(place) if text.startswith("X of the tips"))
    up = column(opened, index)
    assert up[-1] == ""
    assert [float(text) for text in up[:-1]] == sorted(float(text) for text in up[:-1])
    assert (
        head(opened, "X of the tips").find_element(By.XPATH, "..").get_attribute("aria-sort") == "ascending"
    )
    click(opened, head(opened, "X of the tips"))
    assert column(opened, index) == [*reversed(up[:-1]), ""]
    click(opened, head(opened, "Cell"))
    assert shown(opened)[-1] == "שלום"
    assert len(opened.find_elements(By.CSS_SELECTOR, "[aria-sort]")) == 1


def test_choosing_rows(opened):
    text = opened.find_element(By.ID, "text")
    text.send_keys("CELL_1")
    assert shown(opened) == [f"cell_{number}" for number in range(10, 20)]
    assert opened.find_element(By.ID, "count").text == "10 of 40 cells"
    Select(opened.find_element(By.ID, "group")).select_by_visible_text("even")
    assert shown(opened) == [f"cell_{number}" for number in range(11, 20, 2)]
    click(opened, opened.find_element(By.ID, "all"))
    assert len(shown(opened)) == 40
    Select(opened.find_element(By.ID, "grade")).select_by_visible_text("doubtful")
    assert shown(opened) == ["cell_07"]
    click(opened, opened.find_element(By.ID, "all"))
    click(opened, opened.find_element(By.CSS_SELECTOR, ".kind summary"))
    click(opened, opened.find_element(By.CSS_SELECTOR, ".pick"))
    assert shown(opened) == ["cell_07"]


def test_an_opened_row_shows_its_picture_and_findings_and_only_then_asks_for_it(opened):
    asked_for(opened)
    button = opened.find_element(By.CSS_SELECTOR, "#cell-5 th button")
    click(opened, button)
    assert button.get_attribute("aria-expanded") == "true"
    image = opened.find_element(By.CSS_SELECTOR, "#more-5 img")
    WebDriverWait(opened, 5).until(lambda driver: image.get_property("complete"))
    assert image.get_property("naturalWidth") == 1
    assert image.get_attribute("alt") == "Attenuation map of cell_05.swc"
    assert [address.rpartition("/maps/")[2] for address in asked_for(opened)] == ["thumbnails/0.png"]
    link = opened.find_element(By.LINK_TEXT, "figure")
    assert link.get_attribute("href").endswith("/maps/figures/0.png")
    click(opened, button)
    assert opened.find_elements(By.CSS_SELECTOR, "tr.more") == []
    click(opened, opened.find_element(By.CSS_SELECTOR, "#cell-7 th button"))
    more = opened.find_element(By.ID, "more-7").text
    assert "doubtful, no depth" in more
    assert "No figure" in more


@pytest.mark.parametrize("row", range(2, 5))
def test_names_with_markup_open_as_text(opened, row):
    click(opened, opened.find_element(By.CSS_SELECTOR, f"#cell-{row} th button"))
    assert f"{NAMES[row]}.swc" in opened.find_element(By.ID, f"more-{row}").text
    assert opened.find_elements(By.CSS_SELECTOR, "#more-2 img") == []


def test_links_lead_to_rows_and_entries_even_if_these_are_folded_or_not_chosen(opened):
    opened.find_element(By.ID, "text").send_keys("plain")
    click(opened, opened.find_element(By.CSS_SELECTOR, ".looks a[href='#cell-5']"))
    WebDriverWait(opened, 5).until(lambda driver: driver.find_elements(By.ID, "more-5"))
    assert opened.switch_to.active_element.text == "cell_05"
    assert len(shown(opened)) == 40
    opened.execute_script("document.getElementById('away-0').closest('details').open = false")
    opened.execute_script("location.hash = 'away-0'")
    WebDriverWait(opened, 5).until(lambda driver: driver.find_element(By.ID, "away-0").is_displayed())
    for link in opened.find_elements(By.CSS_SELECTOR, "nav a"):
        target = link.get_attribute("href").partition("#")[2]
        assert opened.find_element(By.ID, target).tag_name == "h2"


def test_the_dots_of_a_drawing_lead_to_their_cells(opened):
    dot = opened.find_element(By.CSS_SELECTOR, "circle[data-row='5']")
    assert opened.execute_script("return arguments[0].textContent", dot) == "cell_05.swc"
    opened.execute_script("arguments[0].dispatchEvent(new Event('click'))", dot)
    WebDriverWait(opened, 5).until(lambda driver: driver.find_elements(By.ID, "more-5"))


def test_the_keyboard_alone_does(opened):
    """Tab to the skip link, the switch, a heading, a row; Enter and Space do what a click does."""
    focus = opened.switch_to.active_element
    focus.send_keys(Keys.TAB)
    assert opened.switch_to.active_element.text == "Skip to the page"
    opened.switch_to.active_element.send_keys(Keys.TAB)
    assert opened.switch_to.active_element.get_attribute("id") == "theme"
    opened.switch_to.active_element.send_keys(Keys.ENTER)
    assert opened.find_element(By.TAG_NAME, "html").get_attribute("data-theme") == "dark"
    for _ in range(150):
        opened.switch_to.active_element.send_keys(Keys.TAB)
        if opened.switch_to.active_element.text == "Cell":
            break
    opened.switch_to.active_element.send_keys(Keys.ENTER)
    assert (
        opened.switch_to.active_element.find_element(By.XPATH, "..").get_attribute("aria-sort") == "ascending"
    )
    while opened.switch_to.active_element.get_attribute("aria-expanded") is None:
        opened.switch_to.active_element.send_keys(Keys.TAB)
    outline = opened.switch_to.active_element.value_of_css_property("outline-style")
    assert outline == "solid"
    opened.switch_to.active_element.send_keys(Keys.SPACE)
    assert len(opened.find_elements(By.CSS_SELECTOR, "tr.more")) == 1


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_text_stands_out_from_what_is_behind_it(opened, theme):
    """Contrast of at least 4.5 to 1 after WCAG 2.2, 1.4.3, for every colour of text that the page has."""
    if opened.execute_script("return matchMedia('(prefers-color-scheme: dark)').matches") != (
        theme == "dark"
    ):
        opened.find_element(By.ID, "theme").click()
    opened.execute_script("document.querySelectorAll('details').forEach(each => { each.open = true; })")
    opened.execute_script("document.querySelector('#cell-7 th button').click()")
    pairs = opened.execute_script("""
        const behind = element => {
          for (let each = element; each; each = each.parentElement) {
            const colour = getComputedStyle(each).backgroundColor;
            if (colour !== "rgba(0, 0, 0, 0)") return colour;
          }
          return "none";
        };
        const seen = new Set();
        for (const each of document.querySelectorAll("body, body *:not(script, title)")) {
          if (![...each.childNodes].some(node => node.nodeType === 3 && node.data.trim())) continue;
          const style = getComputedStyle(each);
          seen.add((each.namespaceURI.endsWith("svg") ? style.fill : style.color) + "|" + behind(each));
        }
        return [...seen];""")
    contrasts = {pair: contrast(*pair.split("|")) for pair in pairs}
    assert len(contrasts) > 5
    assert {pair: value for pair, value in contrasts.items() if value < 4.5} == {}


def contrast(one, other):
    """WCAG 2.2, relative luminance and contrast ratio."""
    bright, dim = sorted((luminance(one), luminance(other)), reverse=True)
    return (bright + 0.05) / (dim + 0.05)


def luminance(colour):
    parts = [int(part) / 255 for part in re.findall(r"\d+", colour)[:3]]
    linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
    return sum(weight * part for weight, part in zip((0.2126, 0.7152, 0.0722), linear, strict=True))


def test_the_switch_is_kept_for_the_next_time(opened, page):
    before = opened.execute_script("return getComputedStyle(document.body).backgroundColor")
    switch = opened.find_element(By.ID, "theme")
    switch.click()
    after = opened.execute_script("return getComputedStyle(document.body).backgroundColor")
    assert {before, after} == {"rgb(255, 255, 255)", "rgb(21, 24, 27)"}
    opened.get(page.as_uri())
    assert opened.execute_script("return getComputedStyle(document.body).backgroundColor") == after
    assert opened.find_element(By.ID, "theme").get_attribute("aria-pressed") == "true"


@pytest.mark.parametrize("width", [320, 600, 1600])
def test_the_page_itself_never_scrolls_sideways(opened, width):
    metrics = {"width": width, "height": 700, "deviceScaleFactor": 1, "mobile": False}
    opened.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", metrics)
    opened.execute_script("document.querySelectorAll('details').forEach(each => { each.open = true; })")
    opened.execute_script("document.querySelector('#cell-7 th button').click()")
    assert opened.execute_script("return innerWidth") == width
    wide = opened.execute_script("return document.documentElement.scrollWidth")
    assert wide <= opened.execute_script("return document.documentElement.clientWidth")


def test_of_many_cells_the_first_are_shown_until_more_are_asked_for(driver, tmp_path):
    path = tmp_path / "many.html"
    path.write_text(page_of(morning_of(cells_of(600))), encoding="utf-8")
    driver.get(path.as_uri())
    names = [f"cell_{number:04}" for number in range(600)]
    assert shown(driver) == names[:250]
    assert driver.find_element(By.ID, "count").text == "600 of 600 cells, the first 250 shown"
    click(driver, head(driver, "Cell"))
    click(driver, head(driver, "Cell"))
    assert shown(driver) == names[:-251:-1]
    driver.execute_script("location.hash = 'cell-3'")
    WebDriverWait(driver, 5).until(lambda driver: driver.find_elements(By.ID, "more-3"))
    assert len(shown(driver)) == 600
    driver.find_element(By.ID, "text").send_keys("cell_00")
    assert shown(driver) == names[99::-1]
    click(driver, driver.find_element(By.ID, "all"))
    click(driver, driver.find_element(By.ID, "rest"))
    assert len(shown(driver)) == 600
    assert not driver.find_element(By.ID, "rest").is_displayed()
    click(driver, driver.find_element(By.ID, "all"))
    driver.execute_script(
        "addEventListener('beforeprint', () => { window.printed = "
        "document.querySelectorAll('#table tr:not([hidden])').length })"
    )
    driver.execute_cdp_cmd("Page.printToPDF", {})
    assert driver.execute_script("return window.printed") == 601
    assert len(shown(driver)) == 250


def test_on_paper_it_is_light_whole_and_without_controls(opened):
    click(opened, opened.find_element(By.ID, "theme"))
    opened.execute_script("document.querySelector('#cell-0 th button').click()")
    opened.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": "print"})
    for hidden in ("#theme", ".choose", "nav", "#more-0 img"):
        assert not opened.find_element(By.CSS_SELECTOR, hidden).is_displayed()
    assert (
        opened.execute_script("return getComputedStyle(document.body).backgroundColor")
        == "rgb(255, 255, 255)"
    )
    region = opened.find_element(By.CSS_SELECTOR, ".tall")
    assert region.value_of_css_property("max-height") == "none"
    opened.execute_cdp_cmd("Emulation.setEmulatedMedia", {"media": ""})
    open_before = len(opened.find_elements(By.CSS_SELECTOR, "details[open]"))
    opened.execute_script(
        "window.most = 0; addEventListener('beforeprint', () => {"
        "window.most = document.querySelectorAll('details:not([open])').length })"
    )
    printed = base64.b64decode(opened.execute_cdp_cmd("Page.printToPDF", {})["data"])
    assert pages_in(printed) > 2
    assert opened.execute_script("return window.most") == 0
    assert len(opened.find_elements(By.CSS_SELECTOR, "details[open]")) == open_before


def pages_in(pdf):
    """Count the pages of a PDF, also where they stand in compressed streams."""
    streams = re.findall(rb"stream\r?\n(.*?)\r?\nendstream", pdf, re.DOTALL)
    plain = [zlib.decompressobj().decompress(one) for one in streams if one[:1] == b"\x78"]
    return sum(len(re.findall(rb"/Type\s*/Page\b", part)) for part in [pdf, *plain])
