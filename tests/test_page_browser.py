"""The page in a browser, on a phone and on a desk: everything drawn, nothing cut off, no error."""

import html
import json
import os
import re
import shutil
import subprocess

import pytest

from regimes.report import write_report
from regimes.report.figures import FIGURES
from regimes.report.figures.checks import HEIGHT
from regimes.report.figures.style import SIZE
from tests.report_fixture import demo_analysis, with_verdict

CHROMIUM = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "google-chrome"))), None)
WIDTHS = (360, 1280)

# Runs first in a copy of the page; what it finds replaces the page when everything is loaded.
PROBE = """
<script>
const trouble = [];
window.addEventListener("error", e => trouble.push(String(e.message || e.target.outerHTML)), true);
window.addEventListener("securitypolicyviolation", e => trouble.push(e.blockedURI));
for (const name of ["error", "warn"]) console[name] = (...words) => trouble.push(words.join(" "));
window.addEventListener("load", () => {
  const page = document.documentElement;
  const boxes = Array.from(document.querySelectorAll("figure > svg"), s => {
    const box = s.getBoundingClientRect();
    const drawn = s.querySelectorAll("path, use").length;
    const name = s.getAttribute("aria-labelledby");
    return {name, width: box.width, height: box.height, right: box.right, drawn};
  });
  const outside = Array.from(document.querySelectorAll("main *")).filter(e => !e.closest("svg, .scroll")
    && e.getBoundingClientRect().right > page.clientWidth + 0.5).map(e => e.outerHTML.slice(0, 80));
  const tables = Array.from(document.querySelectorAll(".scroll"), e => e.getBoundingClientRect().right);
  const size = parseFloat(getComputedStyle(document.querySelector("figcaption")).fontSize);
  const found = {width: page.clientWidth, scroll: page.scrollWidth, boxes, outside, tables, size, trouble};
  parent.postMessage(JSON.stringify(found), "*");
});
</script>
"""
# A headless window is never narrower than 500 pixels, so the page stands in a frame of the width that is asked for.
FRAME = """<!DOCTYPE html><body style="margin:0"><pre id="found">nothing</pre><script>
window.addEventListener("message", e => {{ document.getElementById("found").textContent = e.data; }});
</script><iframe src="copy.html" width="{width}" height="900" style="border:0"></iframe></body>"""


@pytest.fixture(scope="module", params=["supported", "undecided"])
def page_folder(request, tmp_path_factory):
    if CHROMIUM is None:
        if os.environ.get("CI"):
            pytest.fail("no Chromium found on a CI machine; install the package chromium")
        pytest.skip("no Chromium on this machine")
    analysis = demo_analysis()
    if request.param == "undecided":
        long = "a_very_long_word_without_any_place_to_break_it_" * 3
        analysis = with_verdict(analysis, decision="undecided", sentence=long, reasons=(long,), supported=())
    folder = tmp_path_factory.mktemp(request.param)
    text = write_report(analysis, folder / "report")["report.html"].read_text(encoding="utf-8")
    (folder / "report" / "copy.html").write_text(text.replace("<head>", "<head>" + PROBE, 1), encoding="utf-8")
    return folder


def measure(folder, width):
    """What a browser finds in a page of that width."""
    frame = folder / "report" / f"frame{width}.html"
    frame.write_text(FRAME.format(width=width), encoding="utf-8")
    command = [
        CHROMIUM, "--headless=new", "--no-sandbox", "--disable-gpu", "--disable-background-networking",
        f"--user-data-dir={folder / 'browser'}", f"--window-size={max(width, 800)},1000", "--virtual-time-budget=5000",
        "--dump-dom", frame.as_uri(),
    ]  # fmt: skip
    done = subprocess.run(command, capture_output=True, text=True, timeout=120, check=True, encoding="utf-8")
    found = re.search(r'<pre id="found">(.*?)</pre>', done.stdout, re.DOTALL)
    return json.loads(html.unescape(found.group(1)))


@pytest.fixture(scope="module", params=WIDTHS)
def seen(request, page_folder):
    return request.param, measure(page_folder, request.param)


def test_nothing_is_cut_off_or_scrolls_sideways(seen):
    width, found = seen
    assert found["width"] == pytest.approx(width, abs=20)  # a scroll bar may take some
    assert found["scroll"] <= found["width"]
    assert found["outside"] == []
    assert all(right <= found["width"] + 0.5 for right in found["tables"])


def test_every_figure_is_drawn(seen):
    width, found = seen
    assert len(found["boxes"]) == len(FIGURES)
    for box in found["boxes"]:
        assert box["width"] > 0.8 * min(width, 500)
        shape = box["height"] / box["width"]
        if box["name"] == "checks-words":  # eight panels in four rows, each as drawn
            assert shape == pytest.approx(4 * HEIGHT / SIZE[0], rel=0.01)
        else:
            assert 0.5 < shape < 1.2
        assert box["right"] <= found["width"]
        assert box["drawn"] > 20


def test_captions_are_readable(seen):
    _, found = seen
    assert found["size"] >= 14  # CSS pixels; common practice, no source


def test_browser_has_nothing_to_complain_about(seen):
    _, found = seen
    assert found["trouble"] == []


def test_the_probe_would_notice(page_folder):
    broken = page_folder / "report" / "copy.html"
    whole = broken.read_text(encoding="utf-8")
    wide = '<div style="width:3000px">x</div><img src="absent.png"><script>undefined_name</script></main>'
    try:
        broken.write_text(whole.replace("</main>", wide), encoding="utf-8")
        found = measure(page_folder, 360)
    finally:
        broken.write_text(whole, encoding="utf-8")
    assert found["scroll"] > found["width"]
    assert len(found["outside"]) >= 1
    assert any("undefined_name" in words for words in found["trouble"])
    assert any("absent.png" in words for words in found["trouble"])
