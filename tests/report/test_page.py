"""The page as text: what it holds, that it asks for nothing, and that a design file cannot put markup into it.

Outside references: the HTML parser of the standard library reads the page; hashlib gives the hash of a deck.
"""

import hashlib
import re
import sys
from html.parser import HTMLParser

import numpy as np
import pytest

from transim.errors import OutputError
from transim.report.cycle import cycles_of
from transim.report.page import require_page
from transim.report.panels import MOST_POINTS, panels_of, thinned_note
from transim.report.places import Places

MEGABYTE = 1_000_000


class Reader(HTMLParser):
    """Collects what a browser would load, the elements, and the text outside of scripts and styles."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.loads: list[str] = []
        self.tags: list[str] = []
        self.text: list[str] = []
        self.feed(page)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.loads += [value for name, value in attrs if name in ("src", "href", "data", "poster") and value]

    def handle_data(self, data):
        if self.tags and self.tags[-1] in ("script", "style"):
            return
        self.text.append(data)

    def handle_endtag(self, tag):
        if tag in ("script", "style"):
            self.tags.append(f"/{tag}")


def test_page_has_its_parts_in_order(page_of):
    text = page_of()
    words = " ".join(" ".join(Reader(text).text).split())
    heads = re.findall(r"<h2>(.*?)</h2>", text)
    assert heads == [
        "Drivers",
        "Limits",
        "Waveforms",
        "All figures, drivers side by side",
        "Definitions and settings",
        "Design",
        "Decks",
    ]
    assert words.index("FAIL a limit is missed by slow") < words.index("Limits")
    assert "ngspice 39" in words
    assert hashlib.sha256(b"* deck of quick\n.end\n").hexdigest() in words
    assert 'on_for = "2 us"' in words


def test_page_loads_nothing(page_of):
    reader = Reader(page_of())
    assert [place for place in reader.loads if not place.startswith(("#", "data:,"))] == []
    style = re.findall(r"<style>(.*?)</style>", page_of(), flags=re.DOTALL)
    assert not re.search(r"@import|url\(", " ".join(style))


def test_a_design_file_cannot_put_markup_into_the_page(page_of):
    hostile = "</pre></script><script>alert(2)</script><img src=x onerror=alert(3)>{{ 7 * 7 }}"
    reader = Reader(page_of("'<script>alert(1)</script> & <b>'", 1500, f"# {hostile}"))
    assert reader.tags == Reader(page_of()).tags
    words = "".join(reader.text)
    assert "<script>alert(1)</script> & <b>" in words
    assert hostile in words


def test_page_stays_below_three_megabytes(invent, page_of):
    arguments = ("'<script>alert(1)</script>'", MOST_POINTS)
    outcome = invent(*arguments).outcome
    long = [trace for panel in panels_of(cycles_of(outcome)) for _, trace in panel.traces]
    assert sum(trace.time.size == MOST_POINTS for trace in long) >= 6
    assert len(page_of(*arguments).encode()) < 3 * MEGABYTE


def test_a_long_run_is_thinned_and_says_so(invent):
    cycles = cycles_of(invent(points=40_001).outcome)
    panels = panels_of(cycles)
    assert re.search(r"at most \d+ of up to \d+ samples", thinned_note(panels, cycles))
    for panel in panels:
        for _, trace in panel.traces:
            assert trace.time.size <= MOST_POINTS
    leakage = next(panel for panel in panels if panel.name == "voltage at p1")
    assert np.max(leakage.traces[0][1].value) == pytest.approx(0.1, rel=0.02)


def test_without_bokeh_it_says_what_to_install(monkeypatch):
    monkeypatch.setitem(sys.modules, "bokeh.embed", None)
    with pytest.raises(OutputError, match=r"transim\[report\]"):
        require_page()


def test_figures_and_page_may_lie_in_the_results(tmp_path):
    out = tmp_path / "out"
    with Places(out, out / "figures", out / "report.html") as places:
        places.figures.mkdir()
        (places.figures / "a.png").write_text("a")
        places.report.write_text("page")
        (places.results / "result.json").write_text("{}")
    assert (out / "files.txt").read_text().split() == ["figures/a.png", "report.html", "result.json", "files.txt"]


def test_figures_beside_the_results(tmp_path):
    with Places(tmp_path / "out", tmp_path / "figures", None) as places:
        (places.figures / "a.png").write_text("a")
        (places.results / "result.json").write_text("{}")
    assert (tmp_path / "figures" / "a.png").exists()
    assert (tmp_path / "out" / "result.json").exists()


def test_nothing_appears_after_an_error(tmp_path):
    def interrupted():
        with Places(tmp_path / "out", tmp_path / "figures", None) as places:
            (places.figures / "a.png").write_text("a")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        interrupted()
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("out", "figures", "report", "words"),
    [
        ("a/b", "a", None, "lies in the folder of figures"),
        (None, None, "missing/page.html", "there is no folder"),
        (None, None, ".", "a file is wanted"),
    ],
)
def test_places_that_cannot_be(tmp_path, out, figures, report, words):
    place = [None if name is None else tmp_path / name for name in (out, figures, report)]
    with pytest.raises(OutputError, match=words):
        Places(*place).check()
