"""The report in a real browser: drawn, turned, switched, printed, narrow, without WebGL, and heard."""

import base64
import io
import json
import re
import shutil
import subprocess
import time

import numpy as np
import pytest
from made_evidence import with_evidence
from PIL import Image

from layout.outputs.report.page import report_html

CHROMIUM, DRIVER = shutil.which("chromium"), shutil.which("chromedriver")
pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(not (CHROMIUM and DRIVER), reason="no browser here"),
]
QUIET = (
    "--headless --no-sandbox --disable-background-networking --disable-component-update --disable-sync --no-first-run"
)
DRAWS = "--use-angle=swiftshader --enable-unsafe-swiftshader"  # WebGL without a graphics card
DRAWS_NOT = "--disable-gpu --disable-3d-apis"


@pytest.fixture(scope="module")
def evident(result):
    return with_evidence(result)


@pytest.fixture(scope="module")
def path(evident, pictures, tmp_path_factory):
    path = tmp_path_factory.mktemp("report") / "report.html"
    path.write_text(report_html(evident, pictures, ["ranking.csv"]), encoding="utf-8")
    return path


def start(flags, folder):
    from selenium import webdriver

    options = webdriver.ChromeOptions()
    options.binary_location = CHROMIUM
    for flag in f"{QUIET} {flags} --window-size=1280,1000 --user-data-dir={folder}".split():
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL", "performance": "ALL"})
    return webdriver.Chrome(options=options, service=webdriver.ChromeService(DRIVER))


@pytest.fixture(scope="module")
def opened(path, tmp_path_factory):
    """The browser with the page in it, the seconds that took, and its logs up to then."""
    driver = start(DRAWS, tmp_path_factory.mktemp("user"))
    try:
        driver.get("about:blank")
        began = time.monotonic()
        driver.get(path.as_uri())
        drawn(driver, more_than=0)
        yield driver, time.monotonic() - began, driver.get_log("browser"), driver.get_log("performance")
    finally:
        driver.quit()


@pytest.fixture
def page(opened, path):
    """The page as first opened, at desktop size."""
    driver = opened[0]
    driver.execute_cdp_cmd("Emulation.clearDeviceMetricsOverride", {})
    driver.get(path.as_uri())
    drawn(driver, more_than=0)
    return driver


def count(driver):
    return int(driver.execute_script("return document.getElementById('head').dataset.drawn || 0"))


def drawn(driver, more_than):
    """Wait until the head was drawn again."""
    until = time.monotonic() + 60
    while count(driver) <= more_than:
        assert time.monotonic() < until, "the head was not drawn"
        time.sleep(0.05)


def one(driver, choice):
    return driver.find_element("css selector", choice)


def head_pixels(driver):
    head = one(driver, "#head")
    driver.execute_script("arguments[0].scrollIntoView({block: 'start'})", head)
    png = head.screenshot_as_png
    return np.asarray(Image.open(io.BytesIO(png)).convert("RGB"), int)


def changed(before, after):
    return (np.abs(before - after).sum(axis=2) > 30).mean()


def doing(driver, action):
    """How much of the picture an action changes, after it was drawn again."""
    before, so_far = head_pixels(driver), count(driver)
    action()
    drawn(driver, so_far)
    return changed(before, head_pixels(driver))


def seen_sites(driver):
    return driver.execute_script(
        "return [...document.querySelectorAll('.panel')].filter(p => p.offsetParent).map(p => [p.id,"
        " [...p.querySelectorAll('table')[2].querySelectorAll('tbody tr')].map(r => r.cells[1].textContent)])"
    )


def test_opens_quietly_without_asking_anyone(opened):
    _, seconds, console, network = opened
    assert console == []
    asked = [json.loads(entry["message"])["message"] for entry in network]
    sent = [e["params"] for e in asked if e["method"] == "Network.requestWillBeSent"]
    urls = [one["request"]["url"] for one in sent if one["documentURL"].startswith("file:")]  # not the browser's own
    assert any(url.endswith("report.html") for url in urls)
    assert [url[:100] for url in urls if not re.match("file:|data:|about:", url)] == []
    assert seconds < 10


def test_the_head_is_really_drawn(page, evident):
    pixels = head_pixels(page)
    assert len(np.unique(pixels.reshape(-1, 3), axis=0)) > 1000
    orange = np.abs(pixels - (0xE6, 0x9F, 0x00)).sum(axis=2) < 90  # the first region's colour, shaded
    assert 0.0005 < orange.mean() < 0.2
    numbers = [int(disc.text) for disc in page.find_elements("css selector", ".disc:not(.far)")]
    assert 3 < len(numbers) <= len(evident.layouts[0].sensors)


def test_numbers_sit_where_the_picture_has_their_sensors(page):
    """From the top, right, left, front and back on the page are those of the head."""
    doing(page, lambda: one(page, "[data-view=top]").click())
    centre = page.execute_script(
        "return Object.fromEntries([...document.querySelectorAll('.landmark')].map(m => {"
        " const r = m.getBoundingClientRect(); return [m.textContent, [r.x + r.width / 2, r.y + r.height / 2]]; }))"
    )
    assert centre["LPA"][0] < centre["nasion"][0] - 50 < centre["RPA"][0] - 100
    assert centre["nasion"][1] < centre["LPA"][1] - 50 < centre["inion"][1] - 100


@pytest.mark.parametrize("way", ["click", "keys"])
def test_switching_changes_picture_and_tables(page, evident, way):
    from selenium.webdriver.common.keys import Keys

    (first, names) = seen_sites(page)[0]
    assert first == "panel-1"
    switch = {
        "click": lambda: one(page, "#tab-3").click(),
        "keys": lambda: one(page, "#tab-1").send_keys(Keys.ARROW_LEFT),
    }[way]
    assert doing(page, switch) > 0.001
    [(third, others)] = seen_sites(page)
    assert third == "panel-3"
    assert others != names
    assert [name.split()[0] for name in others[2:]] == [row.site.split()[0] for row in evident.layouts[2].sensors[2:]]
    assert one(page, "[data-row][aria-current=true] th").text == "3"
    assert page.switch_to.active_element.get_attribute("id") == "tab-3"


def test_turning_by_keys_and_buttons(page):
    from selenium.webdriver.common.keys import Keys

    for key in (Keys.ARROW_LEFT, Keys.ARROW_UP, "+"):
        assert doing(page, lambda key=key: one(page, "#head").send_keys(key)) > 0.01
    for button in ("[data-view=back]", "[data-view=top]", "[data-turn='[20, 0]']", "[data-turn='[0, 0, -1]']"):
        assert doing(page, lambda button=button: one(page, button).click()) > 0.01


def test_turning_by_hand(page):
    from selenium.webdriver.common.action_chains import ActionChains

    chain = ActionChains(page).click_and_hold(one(page, "#head")).move_by_offset(80, 30).release()
    assert doing(page, chain.perform) > 0.01


def test_layers_and_sensitivity(page):
    for layer in ("scalp", "cortex", "candidates"):
        assert doing(page, lambda layer=layer: one(page, f"input[value={layer}]").click()) > 0.001, layer
    doing(page, lambda: one(page, "input[value=cortex]").click())
    assert doing(page, lambda: one(page, "input[value=sensitivity]").click()) > 0.02
    assert "signal-to-noise" in one(page, "#key-sensitivity").text


def test_pointing_or_focusing_tells_about_a_sensor(page, evident):
    from selenium.webdriver.common.action_chains import ActionChains

    def card():
        return " ".join(one(page, "#card").text.split())

    assert "Point at a sensor" in card()
    disc = next(d for d in page.find_elements("css selector", ".disc:not(.far)") if page.execute_script(
        "const r = arguments[0].getBoundingClientRect();"
        "return document.elementFromPoint(r.x + r.width / 2, r.y + r.height / 2) === arguments[0]", d))  # fmt: skip
    number = int(disc.text)
    ActionChains(page).move_to_element(disc).perform()
    assert card().startswith(f"{number} at ")
    assert f"{evident.layouts[0].sensors[number - 1].worth:.3f} bits" in card()
    other = next(row for row in evident.layouts[0].sensors if row.number not in (number, 3))
    page.execute_script("arguments[0].focus()", one(page, f"[data-sensor='1-{other.number}'].chip"))
    assert card().startswith(f"{other.number} at ")
    assert "along the scalp" in card()
    assert "best substitutes" in card()
    assert one(page, ".chip[aria-pressed=true]").text == str(other.number)


def test_a_sensor_on_the_far_side_is_turned_into_sight(page):
    far = one(page, ".disc.far").get_attribute("data-sensor")
    page.execute_script("arguments[0].click()", one(page, f".chip[data-sensor='{far}']"))
    drawn(page, count(page) - 1)
    page.execute_async_script("requestAnimationFrame(() => requestAnimationFrame(arguments[0]))")
    assert "far" not in one(page, f".disc[data-sensor='{far}']").get_attribute("class").split()


def test_the_methods_are_copied_or_marked(page, evident):
    one(page, "#copy").click()
    for _ in range(100):
        if one(page, "#said").text:
            break
        time.sleep(0.05)
    assert re.match("Copied|Marked", one(page, "#said").text)


def test_a_phone_never_scrolls_sideways(page):
    size = {"width": 360, "height": 740, "deviceScaleFactor": 2, "mobile": True}
    page.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
    for tab in ("#tab-1", "#tab-2"):
        page.execute_script("arguments[0].click()", one(page, tab))
        assert page.execute_script("return [document.documentElement.scrollWidth, innerWidth]") == [360, 360]
    small = page.execute_script(
        "return [...document.querySelectorAll('button')].filter(b => b.offsetParent)"
        ".map(b => b.getBoundingClientRect()).filter(r => r.width < 24 || r.height < 24).length"
    )
    assert small == 0  # WCAG 2.2, 2.5.8: targets of 24 px or more


@pytest.mark.skipif(shutil.which("pdfimages") is None, reason="no poppler here")
def test_print_holds_every_layout(page, evident, tmp_path):
    printed = page.execute_cdp_cmd("Page.printToPDF", {"paperWidth": 8.27, "paperHeight": 11.69})
    (tmp_path / "report.pdf").write_bytes(base64.b64decode(printed["data"]))
    run = {"capture_output": True, "text": True, "check": True, "cwd": tmp_path}
    table = subprocess.run(["pdfimages", "-list", "report.pdf"], **run).stdout.splitlines()[2:]
    wide = [row for row in table if row.split()[2] == "image" and int(row.split()[3]) > 900]
    assert len(wide) == len(evident.layouts)
    text = subprocess.run(["pdftotext", "-layout", "report.pdf", "-"], **run).stdout
    for layout in evident.layouts:
        assert re.search(rf"^\s*Layout {layout.rank}$", text, flags=re.MULTILINE)
        assert f"Sensors of layout {layout.rank}." in text
    assert "Look from" not in text
    assert "Copy the text" not in text


CONTRAST = """
const parse = c => { const m = c.match(/[\\d.]+/g).map(Number); return m.length < 4 ? [...m, 1] : m; };
const linear = v => v <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4;
const light = c => { const [r, g, b] = c.map(v => linear(v / 255));
  return 0.2126 * r + 0.7152 * g + 0.0722 * b; };
const ground = e => { for (; e; e = e.parentElement) { const c = parse(getComputedStyle(e).backgroundColor);
  if (c[3] > 0.99) return c; } return [255, 255, 255, 1]; };
const out = [];
for (const e of document.querySelectorAll('body *')) {
  const own = [...e.childNodes].some(n => n.nodeType === 3 && n.textContent.trim());
  if (!own || !e.offsetParent || e.closest('svg, .landmark, script')) continue;
  const style = getComputedStyle(e), a = light(parse(style.color)), b = light(ground(e));
  const size = parseFloat(style.fontSize), big = size >= 24 || (size >= 18.66 && style.fontWeight >= 700);
  const ratio = (Math.max(a, b) + 0.05) / (Math.min(a, b) + 0.05);
  if (ratio < (big ? 3 : 4.5)) out.push([e.tagName, e.className, ratio, e.textContent.slice(0, 30)]);
}
return out;"""


def test_all_text_stands_out_from_its_ground(page):
    page.execute_script("arguments[0].focus()", one(page, ".chip"))
    assert page.execute_script(CONTRAST) == []


def test_everything_that_acts_has_a_name(page):
    """As the browser tells it to a screen reader."""
    nodes = page.execute_cdp_cmd("Accessibility.getFullAXTree", {})["nodes"]
    roles = {"button", "link", "tab", "image", "table", "checkbox", "radio", "application", "tabpanel", "region"}
    found = [
        (n["role"]["value"], n.get("name", {}).get("value", "")) for n in nodes if not n["ignored"] and "role" in n
    ]
    acting = [(role, name) for role, name in found if role in roles]
    assert all(name.strip() for _, name in acting), [role for role, name in acting if not name.strip()]
    assert {"tab", "tabpanel", "application", "table", "radio"} <= {role for role, _ in acting}
    assert ("tab", "Layout 1 10.333 bits") in acting
    assert any(role == "application" and "layout 1" in name for role, name in acting)


def test_without_webgl_it_is_flat_and_says_so(path, tmp_path):
    driver = start(DRAWS_NOT, tmp_path)
    try:
        driver.get(path.as_uri())
        assert one(driver, ".flat-note").is_displayed()
        assert "no WebGL" in one(driver, ".flat-note").text
        assert not one(driver, "#stage").is_displayed()
        assert one(driver, "#panel-1 .picture img").is_displayed()
        one(driver, "#tab-2").click()
        assert one(driver, "#panel-2 .picture img").is_displayed()
        assert not one(driver, "#panel-1").is_displayed()
        errors = [entry for entry in driver.get_log("browser") if "webgl" not in entry["message"].lower()]
        assert errors == []
    finally:
        driver.quit()
