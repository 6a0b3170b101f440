"""The page in a real browser: quiet, offline, readable, and every layer, hover and search at work."""

import re
from dataclasses import replace

import pytest

from texture.report import result_picture, versions_line, write_page

pytestmark = [pytest.mark.slow, pytest.mark.browser]

QUIET = ["--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
         "--disable-component-update", "--disable-sync"]  # fmt: skip
HOSTILE = "<script>document.title='taken'</script><b>=HYPERLINK(1)</b> \u202eright to left " + "x" * 10_000


@pytest.fixture(scope="module")
def browser(need_browser):
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=need_browser, args=QUIET)
        yield browser
        browser.close()


@pytest.fixture(scope="module")
def need_browser():
    import shutil

    found = next((p for n in ("chromium", "chromium-browser", "google-chrome") if (p := shutil.which(n))), None)
    if found is None:
        pytest.skip("needs chromium, which this machine does not have")
    return found


@pytest.fixture(scope="module")
def address(plain):
    return (plain.found.recipe.output / "report.html").as_uri()


def opened(browser, address, **context):
    """Open a page; return it with the lists of its complaints and of what it asked for."""
    view = browser.new_context(**context).new_page()
    problems, requests = [], []
    view.on("console", lambda m: problems.append(m.text) if m.type in ("error", "warning") else None)
    view.on("pageerror", lambda error: problems.append(str(error)))
    view.on("request", lambda request: requests.append(request.url))
    view.goto(address)
    view.wait_for_selector("select", timeout=10_000)
    view.wait_for_timeout(500)
    return view, problems, requests


@pytest.mark.parametrize(("width", "scheme"), [(1440, "light"), (390, "dark"), (390, "light"), (1440, "dark")])
def test_page_is_quiet_offline_and_readable(browser, address, width, scheme):
    view, problems, requests = opened(browser, address, viewport={"width": width, "height": 900}, color_scheme=scheme)
    assert view.title() == "Kestrel Bight, starting bed"
    assert problems == []
    assert [r for r in requests if not r.startswith(("file:", "data:"))] == []
    assert view.evaluate("document.documentElement.scrollWidth") <= width
    assert view.evaluate("[...document.images].every(i => i.complete && i.naturalWidth > 0)")
    assert view.evaluate(CONTRAST) >= 4.5  # WCAG 2.1 AA for text
    view.context.close()


def test_print_shows_pictures_instead_of_the_map_to_explore(browser, address):
    view, problems, _ = opened(browser, address)
    view.emulate_media(media="print")
    assert not view.locator(".explorer").is_visible()
    assert not view.locator(".find").first.is_visible()
    pdf = view.pdf(format="A4")
    assert pdf.startswith(b"%PDF")
    assert 4 <= len(re.findall(rb"/Type\s*/Page\b", pdf)) <= 40
    assert problems == []
    view.context.close()


def test_essentials_are_readable_without_scripts(browser, address, plain):
    view = browser.new_context(java_script_enabled=False).new_page()
    view.goto(address)
    assert plain.answer().split(";")[0] in view.locator(".answer").inner_text()
    assert view.get_by_text("parts sum to 1.37").is_visible()
    assert view.locator("img").first.is_visible()
    assert not view.locator(".find").first.is_visible()  # nothing is offered that would not work
    view.context.close()


def test_search_finds_a_row_that_was_set_aside(browser, address):
    view, _, _ = opened(browser, address)
    rows = view.locator("details:has(#find-aside) tbody tr")
    everything = rows.count()
    assert everything > 3
    view.fill("#find-aside", "kb87-077 1.37")
    shown = [row.inner_text() for row in rows.all() if row.is_visible()]
    assert len(shown) == 1
    assert "parts sum to 1.37" in shown[0]
    assert view.locator(".find [role=status]").inner_text() == f"1 of {everything} rows"
    view.fill("#find-aside", "no such row")
    assert not any(row.is_visible() for row in rows.all())
    view.fill("#find-aside", "")
    assert all(row.is_visible() for row in rows.all())
    view.context.close()


def test_keyboard_reaches_layers_search_details_and_wide_tables(browser, address):
    view, _, _ = opened(browser, address)
    reached = set()
    for _ in range(120):
        view.keyboard.press("Tab")
        reached.add(view.evaluate(FOCUSED))
    assert {"A", "SELECT", "INPUT", "SUMMARY", "DIV"} <= reached
    view.locator("select").first.focus()
    before = view.locator("select").first.input_value()
    view.keyboard.press("ArrowDown")
    assert view.locator("select").first.input_value() != before
    view.context.close()


def test_map_switches_layers_and_shows_values(browser, address, plain):
    view, problems, _ = opened(browser, address, viewport={"width": 1280, "height": 1500})
    choice = view.locator("select").first
    area = view.locator(".explorer canvas").first.bounding_box()
    seen = {}
    for label in choice.locator("option").all_text_contents():
        choice.select_option(label=label)
        view.wait_for_timeout(250)
        seen[label] = view.screenshot(clip={**area, "height": 500})
    assert len(seen) >= 10
    assert len(set(seen.values())) == len(seen)  # every layer changes pixels
    last = view.screenshot(clip={**area, "height": 500})
    for name in ("coast", "stations", "hard ground"):
        view.get_by_label(name, exact=True).uncheck()
        view.wait_for_timeout(250)
        now = view.screenshot(clip={**area, "height": 500})
        assert now != last, name
        last = now
    view.get_by_label("stations", exact=True).check()
    words = point_at(view, plain, "KB16-001")
    row = plain.found.stations.table.set_index("id").loc["KB16-001"]
    for text in (
        "KB16-001", f"lab_2016.xlsx, Weights, row {row['row']}", "held out, predicted", "held-out error",
        f"mud {row['mud']:.2f}, sand {row['sand']:.2f}, gravel {row['gravel']:.2f}",
        "supported by samples",  # the cell below, read out beside it
    ):  # fmt: skip
        assert text in words
    assert problems == []
    view.context.close()


def test_hostile_cells_are_text_in_tables_and_under_the_pointer(browser, plain, tmp_path):
    stations = plain.found.stations
    table, ledger = stations.table.copy(), stations.ledger.copy()
    table["id"] = table["id"].mask(table["id"] == "KB16-001", HOSTILE)
    aside = ledger.index[ledger["fate"] == "set_aside"][0]
    ledger.loc[aside, ["id", "reason"]] = HOSTILE
    hostile = replace(plain, found=replace(plain.found, stations=replace(stations, table=table, ledger=ledger)))
    path = tmp_path / "hostile.html"
    path.write_text(write_page(hostile, result_picture(plain), HOSTILE, versions_line(plain)), encoding="utf-8")
    view, problems, _ = opened(browser, path.as_uri(), viewport={"width": 1280, "height": 1500})
    words = point_at(view, plain, "KB16-001")
    assert view.title() == "Kestrel Bight, starting bed"
    assert "<script>document.title='taken'</script><b>" in words
    assert view.evaluate("document.documentElement.scrollWidth") <= 1280
    assert view.locator("details:has(#find-aside) td b").count() == 0
    assert problems == []
    view.context.close()


def point_at(view, result, station):
    """Move the pointer to where one station must be drawn, and read what the page shows."""
    import pyproj

    table = result.found.stations.table
    row = table[table["id"] == station].iloc[0]
    x, y = pyproj.Transformer.from_crs(4326, 32626, always_xy=True).transform(row["longitude"], row["latitude"])
    view.locator(".explorer").scroll_into_view_if_needed()
    place = view.evaluate(PLACE, [x / 1000, y / 1000])
    view.mouse.move(*place)
    view.wait_for_timeout(600)
    return view.evaluate(TEXT)


PLACE = """([x, y]) => {
  const views = Object.values(Bokeh.index.roots ?? {}).length ? [...Bokeh.index.roots] : Object.values(Bokeh.index);
  const find = v => v.model?.type === 'Figure' ? v : (v.child_views ?? []).map(find).find(Boolean);
  const plot = views.map(find).find(Boolean);
  const box = plot.el.getBoundingClientRect(), frame = plot.frame;
  return [box.left + frame.x_scale.compute(x), box.top + frame.y_scale.compute(y)];
}"""
TEXT = """() => { const texts = []; const walk = n => { if (n.nodeType === 3) texts.push(n.data);
  if (n.shadowRoot) walk(n.shadowRoot); n.childNodes.forEach(walk); };
  walk(document.body); return texts.join(' '); }"""
FOCUSED = """() => { let e = document.activeElement; while (e?.shadowRoot?.activeElement) e = e.shadowRoot.activeElement;
  return e?.tagName ?? ''; }"""
CONTRAST = """() => {
  const light = c => { const v = c.match(/[\\d.]+/g).slice(0, 3).map(x => x / 255)
      .map(x => x <= 0.03928 ? x / 12.92 : ((x + 0.055) / 1.055) ** 2.4);
    return 0.2126 * v[0] + 0.7152 * v[1] + 0.0722 * v[2]; };
  const ground = e => { for (; e; e = e.parentElement) { const c = getComputedStyle(e).backgroundColor;
      if (!/, 0\\)$|transparent/.test(c)) return light(c); } return 1; };
  const ratios = [...document.querySelectorAll('p, td, th, li, a, h1, h2, pre, label, figcaption, caption, summary')].map(e => {
    const ink = light(getComputedStyle(e).color), below = ground(e);
    return (Math.max(ink, below) + 0.05) / (Math.min(ink, below) + 0.05); });
  return Math.min(...ratios);
}"""
