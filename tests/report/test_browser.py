"""The page in a real browser: Debian's Chromium, headless, driven by Playwright."""

import dataclasses
import os
import re
import shutil
from pathlib import Path

import pytest

from yieldsim import report
from yieldsim.report.marks import mark

CHROMIUM = os.environ.get("CHROMIUM") or shutil.which("chromium") or shutil.which("chromium-browser")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no chromium here: apt-get install chromium")

AXE = Path(__file__).with_name("axe.min.js")  # axe-core 4.14.1, MPL-2.0, unchanged: a checker of accessibility
PLACE_CHARTS = [
    "monthly",
    "factors",
    "ledger",
    "hours",
    "spectrum",
    "chance-range",
    "duel",
    "ranks",
    "causes",
    "worth-chart",
]
HOSTILE = ["<script>alert(1)</script>", "\"'><img src=x onerror=alert(1)>", "🌞 مرحبا &amp;", "x" * 200]


@pytest.fixture(scope="session")
def browser():
    sync_api = pytest.importorskip("playwright.sync_api", reason="no browser driver: pip install playwright")
    with sync_api.sync_playwright() as driver:
        flags = ["--no-sandbox", "--disable-gpu", "--disable-background-networking"]
        browser = driver.chromium.launch(executable_path=CHROMIUM, args=flags)
        yield browser
        browser.close()


@pytest.fixture(scope="session")
def folder(tmp_path_factory, full):
    folder = tmp_path_factory.mktemp("study")
    report.write(full, folder, {"monthly"})
    return folder


def _open(browser, path, width=1280, **options):
    """Open a page; the tab keeps what it asked for and what it said."""
    tab = browser.new_context(viewport={"width": width, "height": 900}, **options).new_page()
    tab.asked, tab.said = [], []
    tab.on("request", lambda request: tab.asked.append(request.url))
    tab.on("console", lambda message: tab.said.append(message.text))
    tab.on("pageerror", lambda error: tab.said.append(str(error)))
    tab.on("dialog", lambda dialog: (tab.said.append(f"dialog: {dialog.message}"), dialog.dismiss()))
    tab.goto((path / "report.html").as_uri())
    return tab


@pytest.fixture
def opened(browser, folder):
    """Open pages that a test may change."""
    tabs = []

    def open_page(width=1280, path=folder, **options):
        tabs.append(_open(browser, path, width, **options))
        return tabs[-1]

    yield open_page
    for tab in tabs:
        tab.context.close()


@pytest.fixture(scope="module")
def shown(browser, folder):
    """One page for tests that leave its choices alone: opening takes longer than looking."""
    tab = _open(browser, folder)
    yield tab
    tab.context.close()


def _drawn(tab, id_):
    return tab.locator(f"#{id_} .stage").inner_html()


def test_it_asks_for_nothing_but_itself_and_says_nothing(opened):
    tab = opened()
    tab.select_option("#choose-place", "2")
    for box in tab.locator("select").all():
        for value in box.locator("option").evaluate_all("all => all.map((one) => one.value)")[-2:]:
            box.select_option(value)
    asked = [url for url in tab.asked if not url.startswith("data:")]
    assert len(asked) == 1
    assert asked[0].startswith("file://")
    assert tab.said == []


def test_every_chart_is_drawn_and_named(shown, full):
    tab = shown
    charts = tab.locator("figure.chart")
    assert charts.count() == 15
    for chart in charts.all():
        svg = chart.locator(".stage svg")
        assert svg.get_attribute("role") == "img"
        assert len(svg.get_attribute("aria-label")) > 20
        assert svg.locator("path, rect, circle").count() > 5
        assert "NaN" not in svg.inner_html()


def test_the_answer_s_numbers_are_those_of_the_table(shown, folder):
    import csv

    with (folder / "annual.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    tab = shown
    said = tab.locator("#answer-winner").inner_text()
    named = re.findall(r"([\w. ]+?) at ([^;]*?)(?:;|$)", said.split(": ", 1)[1])
    checked = 0
    for best, where in named:
        for site, lead in re.findall(r"([A-Z][\w ]+?) \(by ([\d.]+) %\)", where):
            energy = sorted((float(r["energy_kwh_m2"]), r["absorber"]) for r in rows if r["site"] == site)
            assert energy[-1][1] == best.strip()
            assert lead == f"{100 * (energy[-1][0] / energy[-2][0] - 1):.1f}"
            checked += 1
    assert checked == len({row["site"] for row in rows})
    first = [r for r in rows if r["absorber"] == "silicon"]
    cells = tab.locator("#glance-table tbody tr").first.locator("td b").all_inner_texts()
    assert cells[1:] == [f"{float(row['energy_kwh_m2']):,.1f}" for row in first]


def test_another_place_changes_its_charts_and_their_tables(opened, full):
    tab = opened()
    tab.locator("#monthly details summary").click()
    before = {id_: _drawn(tab, id_) for id_ in PLACE_CHARTS}
    tab.select_option("#choose-place", "3")
    for id_ in PLACE_CHARTS:
        assert _drawn(tab, id_) != before[id_], id_
    site = full.annual["site"].unique()[3]
    monthly = full.monthly[(full.monthly["site"] == site) & (full.monthly["absorber"] == "silicon")]
    cells = tab.locator("#monthly .numbers tbody tr").first.locator("td").all_inner_texts()
    assert cells == [f"{value:.4f}" for value in monthly["spectral_factor"]]


def test_fewer_absorbers_draw_fewer_lines(opened):
    tab = opened()
    lines = lambda: tab.locator("#monthly g[data-mark=line]").count()  # noqa: E731
    all_of_them = lines()
    assert all_of_them == 8
    tab.locator("#absorber-3").uncheck()
    assert lines() == 7
    for i in (0, 1, 2, 4, 5, 6, 7):
        tab.locator(f"#absorber-{i}").uncheck()
    assert lines() == 0
    assert tab.said == []


def test_a_day_an_hour_and_an_absorber_show_their_spectrum(opened, full):
    tab = opened()
    dataset = next(iter(full.spectra.values()))
    tab.select_option("#choose-day", "12")
    tab.locator("#choose-hour").fill("2")
    light = dataset.isel(time=dataset["month"].values == 7)
    light = light.isel(time=light["day_kind"].values == "clear")["plane_of_array"].values[0, 2].sum()
    assert f"on the plane {light:,.0f} W/m²" in tab.locator("#spectrum .live").inner_text()
    before = _drawn(tab, "spectrum")
    tab.select_option("#choose-taker", "4")
    assert _drawn(tab, "spectrum") != before


def test_hovering_gives_a_number_with_its_unit(shown):
    tab = shown
    stage = tab.locator("#gap_sweep .stage svg")
    stage.scroll_into_view_if_needed()
    box = stage.bounding_box()
    tab.mouse.move(box["x"] + 0.4 * box["width"], box["y"] + 0.25 * box["height"])
    tip = stage.locator("g[aria-label=tip]")
    assert re.search(r"kWh/m² at \d\.\d\d eV", tip.text_content())


def test_the_keyboard_reaches_every_value(shown):
    tab = shown
    tab.locator("#factors .stage").focus()
    seen = set()
    for _ in range(3):
        tab.keyboard.press("ArrowRight")
        seen.add(tab.locator("#factors .live").inner_text())
    assert len(seen) == 3
    assert all(re.search(r"\w+: .* factor \d\.\d{4}, ", text) for text in seen)
    assert tab.locator("#factors .stage circle").count() == 1
    tab.keyboard.press("Tab")
    assert tab.locator("#factors .stage circle").count() == 0


def test_the_numbers_of_a_chart_can_be_saved(shown):
    tab = shown
    with tab.expect_download() as waiting:
        tab.locator("#factors .save").click()
    text = Path(waiting.value.path()).read_text(encoding="utf-8")
    assert waiting.value.suggested_filename == "factors.csv"
    assert text.splitlines()[0].startswith("absorber,optical factor,")
    assert len(text.splitlines()) == 9


@pytest.mark.parametrize("width", [380, 1280])
def test_no_element_is_wider_than_the_window(opened, width):
    tab = opened(width)
    for summary in tab.locator("summary").all():
        summary.click()
    wide = tab.evaluate(
        """() => Array.from(document.querySelectorAll("body, body *"))
        .filter((one) => !one.closest(".skip, .numbers, .unseen, caption, svg g, .plot svg"))
        .map((one) => [one.tagName + "." + one.className, one.getBoundingClientRect()])
        .filter(([, box]) => box.width && (box.right > innerWidth + 0.5 || box.left < -0.5))
        .map(([name, box]) => `${name} ${box.left} ${box.right}`)"""
    )
    assert wide == []
    assert tab.evaluate("document.documentElement.scrollWidth") <= width
    # Charts fit their box.
    for svg in tab.locator(".plot svg.drawing").all():
        assert svg.bounding_box()["width"] <= width


@pytest.mark.parametrize(("scheme", "width"), [("light", 1280), ("dark", 380)])
def test_axe_finds_nothing_to_blame(opened, scheme, width):
    tab = opened(width, color_scheme=scheme)
    tab.locator("#monthly details summary").click()
    tab.add_script_tag(content=AXE.read_text(encoding="utf-8"))
    found = tab.evaluate(
        """() => axe.run(document, {runOnly: ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]})
        .then((r) => r.violations.flatMap((v) => v.nodes.slice(0, 3).map((n) => `${v.id}: ${n.target.join(" ")}`)))"""
    )
    assert found == []


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_lines_stand_out_from_their_ground(opened, scheme):
    tab = opened(color_scheme=scheme)
    colours = tab.evaluate(
        """() => { const style = getComputedStyle(document.documentElement);
        return Object.fromEntries(["--raised", "--ink", ...Array.from({length: 7}, (_, i) => `--s${i}`)]
            .map((name) => [name, style.getPropertyValue(name).trim()])); }"""
    )
    ground = colours.pop("--raised")
    for name, colour in colours.items():
        # WCAG 2.2, success criterion 1.4.11: 3 to 1 for what a drawing needs to be understood
        assert _contrast(colour, ground) >= 3.0, name


def _contrast(one, other):
    def light(colour):
        parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    high, low = sorted([light(one), light(other)], reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_series_look_alike_on_page_and_in_pictures(shown):
    tab = shown
    dashes = [tab.evaluate(f"look({i}).dash") for i in range(28)]
    assert [dash is None for dash in dashes] == [mark(i).dash == () for i in range(28)]


def test_it_prints_on_a4_with_nothing_cut(opened):
    tab = opened()
    pdf = tab.pdf(prefer_css_page_size=True)
    boxes = set(re.findall(rb"/MediaBox\s*\[([^\]]*)\]", pdf))
    # A4 is 595.28 x 841.89 points; browsers round to pixels of 0.75 points
    for box in boxes:
        left, bottom, right, top = map(float, box.split())
        assert (left, bottom) == (0, 0)
        assert abs(right - 595.28) < 1
        assert abs(top - 841.89) < 1
    tab.emulate_media(media="print")
    tab.set_viewport_size({"width": 688, "height": 900})  # A4 less the margins of the page, at 96 pixels an inch
    tab.evaluate("window.dispatchEvent(new Event('beforeprint'))")
    assert tab.evaluate("document.documentElement.scrollWidth") <= 688
    assert not tab.locator("nav").is_visible()
    assert tab.locator("details.site").first.get_attribute("open") is not None


def test_hostile_names_are_text_on_the_page_and_in_its_charts(opened, factory, tmp_path):
    made = factory.make(HOSTILE, {name: 1.0 + 0.2 * i for i, name in enumerate(HOSTILE)}, full=True)
    report.write(dataclasses.replace(made, study=HOSTILE[0]), tmp_path, {"monthly"})
    tab = opened(380, tmp_path)
    for i in range(len(HOSTILE)):
        tab.select_option("#choose-place", str(i))
    for summary in tab.locator("summary").all():
        summary.click()
    assert tab.said == []
    assert [url for url in tab.asked if not url.startswith("data:")] == [(tmp_path / "report.html").as_uri()]
    assert tab.locator("img").count() == 0
    assert tab.title().startswith(HOSTILE[0])
    assert tab.locator("#choose-place option").all_text_contents() == HOSTILE
    assert tab.evaluate("document.documentElement.scrollWidth") <= 380


def test_a_study_with_one_place_and_one_absorber_works(opened, factory, tmp_path):
    report.write(factory.make(["Only"], {"silicon": 1.12}), tmp_path, {"monthly"})
    tab = opened(path=tmp_path)
    assert tab.said == []
    assert tab.locator("#choose-place").count() == 0


def test_several_mountings_are_places_of_their_own(opened, factory, tmp_path):
    made = factory.make(["One", "Two"], {"a": 1.1, "b": 1.5}, ("fixed", "tracker"))
    report.write(made, tmp_path, {"monthly"})
    tab = opened(path=tmp_path)
    names = tab.locator("#choose-place option").all_text_contents()
    assert names == ["One (fixed)", "One (tracker)", "Two (fixed)", "Two (tracker)"]
    before = _drawn(tab, "spectrum")
    tab.select_option("#choose-place", "1")
    assert _drawn(tab, "spectrum") != before
    assert tab.said == []


def test_without_scripts_the_tables_still_answer(opened):
    tab = opened(java_script_enabled=False)
    assert tab.locator("#glance-table tbody tr").count() == 8
    assert "need JavaScript" in tab.locator("noscript").inner_text()
