"""The page in headless Chromium: it opens without a word on the console and without a request, zooms, and reads values.

Outside reference: the browser itself; the values under the cursor are those that the run was made from.
"""

import os
import re
import shutil

import pytest

from transim.report.panels import MOST_POINTS

OPTIONS = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking", "--disable-component-update", "--disable-sync", "--disable-default-apps"]
#: Whether the cursor is seen in each panel, and where.
CURSORS = """Bokeh.documents[0].roots().map((plot) => {
const cursor = plot.toolbar.tools.find((tool) => tool.type === "CrosshairTool").overlay;
return [cursor.visible, Number(cursor.location.toPrecision(5))]; })"""
TITLE = "<script>alert(1)</script>"


def _chromium() -> str:
    found = shutil.which("chromium") or shutil.which("chromium-browser")
    if found is None:
        reason = "no chromium on PATH: apt-get install chromium"
        (pytest.fail if os.environ.get("CI") else pytest.skip)(reason)
    return str(found)


@pytest.fixture(scope="module")
def browser():
    """Return a browser without a network of its own."""
    path = _chromium()
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        browser = playwright.chromium.launch(executable_path=path, args=OPTIONS)
        yield browser
        browser.close()


@pytest.fixture
def opened(browser, page_of, tmp_path):
    """Return a function that opens the page of a run, and what the page said, asked for and popped up."""
    contexts = []

    def open_page(width=1280, **options):
        file = tmp_path / "page.html"
        file.write_text(page_of(f"'{TITLE}'", MOST_POINTS), encoding="utf-8")
        context = browser.new_context(viewport={"width": width, "height": 900}, **options)
        contexts.append(context)
        page = context.new_page()
        seen = []
        page.on("console", lambda message: seen.append((message.type, message.text)))
        page.on("pageerror", lambda error: seen.append(("error", str(error))))
        page.on("dialog", lambda dialog: (seen.append(("dialog", dialog.message)), dialog.dismiss()))
        page.on("request", lambda request: seen.append(("request", request.url)))
        page.goto(file.as_uri())
        page.wait_for_function("window.Bokeh && Bokeh.documents.length && Bokeh.documents[0].is_idle")
        return page, seen, file.as_uri()

    yield open_page
    for context in contexts:
        context.close()


def _range(page):
    return page.evaluate("(() => { const r = Bokeh.documents[0].get_model_by_name('time'); return [r.start, r.end]; })()")


def _frame(page, number):
    """Bring a panel into sight; return left, top, width and height of the area within its axes."""
    page.locator("figure").nth(number).scroll_into_view_if_needed()
    page.wait_for_timeout(100)
    return page.evaluate(
        """(k) => { const view = Bokeh.index.get_by_id(Bokeh.documents[0].roots()[k].id);
        const box = view.el.getBoundingClientRect(), inner = view.frame.bbox;
        return [box.x + inner.left, box.y + inner.top, inner.width, inner.height]; }""",
        number,
    )


def test_it_opens_in_silence(opened):
    page, seen, address = opened()
    assert [url for kind, url in seen if kind == "request"] == [address]
    assert [entry for entry in seen if entry[0] in ("error", "warning", "assert", "dialog")] == []
    assert page.locator("h1").inner_text() == TITLE
    assert page.title().startswith(TITLE)
    assert page.locator("figure").count() >= 6
    drawn = page.evaluate("Bokeh.documents[0].roots().map((p) => Bokeh.index.get_by_id(p.id).frame.bbox.width)")
    assert min(drawn) > 900


def test_dragging_and_buttons_zoom_all_panels(opened):
    page, seen, _ = opened()
    first, last = _range(page)
    left, top, width, height = _frame(page, 1)
    page.mouse.move(left + 0.25 * width, top + 0.5 * height)
    page.mouse.down()
    page.mouse.move(left + 0.4 * width, top + 0.5 * height, steps=4)
    page.mouse.move(left + 0.5 * width, top + 0.5 * height, steps=4)
    page.mouse.up()
    start, end = _range(page)
    assert start == pytest.approx(first + 0.25 * (last - first), abs=0.01 * (last - first))
    assert end == pytest.approx(first + 0.5 * (last - first), abs=0.01 * (last - first))
    shown = page.evaluate("Bokeh.documents[0].roots().map((plot) => plot.x_range.start)")
    assert set(shown) == {start}
    page.get_by_role("button", name="zoom in").click()
    assert _range(page)[1] - _range(page)[0] == pytest.approx((end - start) / 2.0)
    page.get_by_role("button", name="off edge").click()
    # the command falls after 2 us, the page counts in us
    assert _range(page)[0] < 2.0 < _range(page)[1] < last
    page.get_by_role("button", name="whole cycle").click()
    assert _range(page) == pytest.approx([first, last])
    assert [entry for entry in seen if entry[0] in ("error", "warning")] == []


def test_the_cursor_reads_values(opened):
    page, _, _ = opened()
    names = page.locator("figcaption").all_inner_texts()
    first, last = _range(page)
    for name, expected in (("command", {"command": 3.3}), ("driver output current", {"slow": 10.0, "quick": 10.0})):
        left, top, width, height = _frame(page, names.index(name))
        page.mouse.move(left + (1.0 - first) / (last - first) * width, top + 0.5 * height)
        page.wait_for_function("!document.getElementById('reading').hidden")
        page.wait_for_timeout(100)
        words = page.locator("#reading span").all_inner_texts()
        assert float(words[0].removesuffix(" us")) == pytest.approx(1.0, abs=0.01)
        read = {text.split(": ")[0]: float(re.search(r": (\S+) ", text)[1]) for text in words[1:]}
        assert read == pytest.approx(expected, rel=1e-6)
        assert page.evaluate(CURSORS) == [[True, float(words[0].removesuffix(" us"))]] * len(names)


def test_a_driver_can_be_hidden(opened):
    page, _, _ = opened()
    page.get_by_label("quick").uncheck()
    visible = page.evaluate(
        "Bokeh.documents[0].roots()[0].renderers.filter((r) => r.tags[0] === 'trace').map((r) => r.visible)"
    )
    assert visible == [True, False]


@pytest.mark.parametrize("touch", [False, True])
def test_it_fits_a_phone(opened, touch):
    page, _, _ = opened(400, has_touch=touch, is_mobile=touch)
    assert page.evaluate("document.documentElement.scrollWidth") <= 400
    left, _, width, _ = _frame(page, 0)
    assert 0 < left < left + width <= 400
    if touch:
        # a finger scrolls the page, and a tap reads values
        page.wait_for_function("Bokeh.documents[0].roots().every((plot) => plot.toolbar.active_drag === null)")
        names = page.locator("figcaption").all_inner_texts()
        left, top, width, height = _frame(page, names.index("command"))
        page.touchscreen.tap(left + 0.2 * width, top + 0.5 * height)
        page.wait_for_function("!document.getElementById('reading').hidden")
        assert "command: 3.3 V" in page.locator("#reading").inner_text()
