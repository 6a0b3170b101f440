"""The page: self-contained, safe with hostile text, and readable in a real browser."""

import re
from dataclasses import replace

import pytest

from texture.report import CAUTIONS, result_picture, versions_line, write_page

pytestmark = pytest.mark.slow

QUIET = ["--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
         "--disable-component-update", "--disable-sync"]  # fmt: skip
HOSTILE = "<script>document.title='taken'</script> =1+1 \u202eright to left " + "x" * 500


@pytest.fixture(scope="module")
def page(plain):
    return (plain.found.recipe.output / "report.html").read_text(encoding="utf-8")


def test_page_asks_for_nothing_from_outside(page):
    assert len(page.encode()) < 8_000_000
    body = re.sub(r"<script>.*?</script>", "", page, flags=re.DOTALL)
    assert not re.search(r"""(?:src|href)\s*=\s*["']?(?:https?:)?//""", body)
    assert not re.search(r"<script[^>]+src", page)
    assert "@import" not in body


def test_page_says_what_matters(page, plain):
    assert plain.answer().split(";")[0] in page
    for caution in CAUTIONS:
        assert caution.split("'")[0] in page
    assert "parts sum to 1.37, expected 1 ± 0.02" in page
    assert "KB87-077" in page
    assert "river inlet, not rimmed" in page
    body = re.sub(r"<script>.*?</script>", "", page, flags=re.DOTALL)
    assert all(re.search(r'alt="[^"]{20,}"', tag) for tag in re.findall(r"<img[^>]*>", body))


def test_hostile_text_is_shown_as_text(plain):
    recipe = plain.found.recipe.model_copy(update={"title": HOSTILE})
    hostile = replace(plain, found=replace(plain.found, recipe=recipe))
    page = write_page(hostile, result_picture(plain), HOSTILE, versions_line(plain))
    body = re.sub(r"<script>.*?</script>", "", page, flags=re.DOTALL)
    assert "<script>document.title" not in page
    assert body.count("&lt;script&gt;") >= 3  # title, heading, settings


@pytest.mark.browser
def test_page_in_a_browser(plain, need_tool):
    from playwright.sync_api import sync_playwright

    chromium = need_tool("chromium", "chromium-browser", "google-chrome")
    address = (plain.found.recipe.output / "report.html").as_uri()
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=chromium, args=QUIET)
        for width, scheme in ((1440, "light"), (390, "dark")):
            context = browser.new_context(viewport={"width": width, "height": 900}, color_scheme=scheme)
            view = context.new_page()
            problems, requests = [], []
            view.on(
                "console", lambda m, found=problems: found.append(m.text) if m.type in ("error", "warning") else None
            )
            view.on("pageerror", lambda error, found=problems: found.append(str(error)))
            view.on("request", lambda request, found=requests: found.append(request.url))
            view.goto(address)
            assert view.title() == "Kestrel Bight, starting bed"
            view.wait_for_selector("select", timeout=10_000)
            view.wait_for_timeout(500)
            assert problems == []
            assert [r for r in requests if not r.startswith(("file:", "data:"))] == []
            assert view.evaluate("document.documentElement.scrollWidth") <= width
            assert view.evaluate("[...document.images].every(i => i.complete && i.naturalWidth > 0)")
            # The two schemes differ, and text stands out from its ground by at least 4.5 : 1 (WCAG AA).
            assert view.evaluate(CONTRAST) >= 4.5
            context.close()
        browser.close()


@pytest.mark.browser
def test_map_switches_layers_and_shows_values(plain, need_tool):
    from playwright.sync_api import sync_playwright

    chromium = need_tool("chromium", "chromium-browser", "google-chrome")
    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=chromium, args=QUIET)
        view = browser.new_page(viewport={"width": 1280, "height": 1400})
        view.goto((plain.found.recipe.output / "report.html").as_uri())
        view.wait_for_selector("select", timeout=10_000)
        choice = view.locator("select").first
        area = view.locator(".explorer").bounding_box()
        seen = {}
        for label in choice.locator("option").all_text_contents():
            choice.select_option(label=label)
            view.wait_for_timeout(250)
            seen[label] = view.screenshot(clip={**area, "y": area["y"] + 120, "height": 600})
        assert len(seen) >= 10
        assert len(set(seen.values())) == len(seen)  # every layer changes pixels
        words = _point_at_a_station(view, plain)
        assert "KB16-001" in words
        assert "lab_2016.xlsx, Weights, row" in words
        assert "held out, predicted" in words
        assert "supported by samples" in words  # the cell below, read out beside it
        browser.close()


def _point_at_a_station(view, plain):
    """Move the pointer to where one station must be drawn, and read what the page shows."""
    import pyproj

    table = plain.found.stations.table
    station = table[table["id"] == "KB16-001"].iloc[0]
    x, y = pyproj.Transformer.from_crs(4326, 32626, always_xy=True).transform(station["longitude"], station["latitude"])
    place = view.evaluate(
        """([x, y]) => {
          const views = Object.values(Bokeh.index.roots ?? {}).length ? [...Bokeh.index.roots] : Object.values(Bokeh.index);
          const find = v => v.model?.type === 'Figure' ? v : (v.child_views ?? []).map(find).find(Boolean);
          const plot = views.map(find).find(Boolean);
          const box = plot.el.getBoundingClientRect(), frame = plot.frame;
          return [box.left + frame.x_scale.compute(x), box.top + frame.y_scale.compute(y)];
        }""",
        [x / 1000, y / 1000],
    )
    view.mouse.move(*place)
    view.wait_for_timeout(600)
    return view.evaluate(
        """() => { const texts = []; const walk = n => { if (n.nodeType === 3) texts.push(n.data);
          if (n.shadowRoot) walk(n.shadowRoot); n.childNodes.forEach(walk); };
          walk(document.body); return texts.join(' '); }"""
    )


CONTRAST = """() => {
  const light = c => { const v = c.match(/[\\d.]+/g).slice(0, 3).map(x => x / 255)
      .map(x => x <= 0.03928 ? x / 12.92 : ((x + 0.055) / 1.055) ** 2.4);
    return 0.2126 * v[0] + 0.7152 * v[1] + 0.0722 * v[2]; };
  const ground = light(getComputedStyle(document.body).backgroundColor);
  const ratios = [...document.querySelectorAll('p, td, th, li, h1, h2, figcaption, caption, summary')].map(e => {
    const ink = light(getComputedStyle(e).color);
    return (Math.max(ink, ground) + 0.05) / (Math.min(ink, ground) + 0.05); });
  return Math.min(...ratios);
}"""
