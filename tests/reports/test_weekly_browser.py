"""The page laid out by headless Chromium: nothing sticks out at phone widths, and it prints on A4."""

from __future__ import annotations

import html
import json
import re
import subprocess
from pathlib import Path

import pytest

from service.application.audits import WeeklyList
from service.reports import weekly_html

pytestmark = pytest.mark.browser

FLAGS = (
    *("--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update", "--disable-sync"),
    "--hide-scrollbars",  # a phone lays them over the page
)

# The page itself runs nothing; the test's own page around it measures it in a frame of a phone's width.
AROUND = """<!DOCTYPE html><iframe width="{width}" height="600" srcdoc="{page}"></iframe><pre></pre><script>
const frame = document.querySelector("iframe");
frame.onload = () => {{
  const page = frame.contentDocument;
  const out = [...page.querySelectorAll("body *")].filter(
    one => one.getBoundingClientRect().right > {width} || one.scrollWidth > one.clientWidth + 1
      && one.clientWidth > 0).map(one => one.outerHTML.slice(0, 120));
  document.querySelector("pre").textContent = JSON.stringify({{
    scroll: page.documentElement.scrollWidth, out, text: page.body.innerText.length,
    columns: getComputedStyle(page.querySelector("table")).tableLayout}});
}};
</script>"""


def chromium(home: Path, *arguments: str) -> str:
    """What Chromium prints. It must be there: .ci/run installs it."""
    command = ["chromium", *FLAGS, f"--user-data-dir={home}", *arguments]
    return subprocess.run(command, check=True, capture_output=True, text=True, timeout=120).stdout


@pytest.fixture
def stretched(found: WeeklyList) -> WeeklyList:
    """The longest names that the register takes, without a place to break."""
    found.sections[0]["section"] = found.sections[0]["findings"][0]["section"] = "T" * 40
    found.sections[1]["title"] = "W" * 200
    found.sections[1]["findings"][0]["response"]["action"] = "x" * 400
    found.sections[3]["findings"][0]["verdict"]["clause"] = "9." * 60
    late = next(section for section in found.sections if section["section"] == "TV160")
    late["section"] = "S" * 40
    return found


@pytest.mark.parametrize("width", [320, 360, 390])
def test_nothing_sticks_out_on_a_phone(stretched: WeeklyList, tmp_path: Path, width: int) -> None:
    around = tmp_path / "around.html"
    page = html.escape(weekly_html.write(stretched))
    around.write_text(AROUND.format(width=width, page=page), encoding="utf-8")
    dom = chromium(tmp_path / "home", "--virtual-time-budget=5000", "--dump-dom", around.as_uri())
    found = re.search(r"<pre>(.+?)</pre>", dom, re.DOTALL)
    assert found is not None
    measured = json.loads(html.unescape(found.group(1)))
    assert measured["out"] == []
    assert measured["scroll"] <= width
    assert measured["columns"] == "fixed"  # the style was applied: its own policy lets it
    assert measured["text"] > 3000


def test_it_prints_on_a4(found: WeeklyList, tmp_path: Path) -> None:
    """595 × 842 points are A4 (ISO 216: 210 × 297 mm)."""
    source, printed = tmp_path / "list.html", tmp_path / "list.pdf"
    source.write_text(weekly_html.write(found), encoding="utf-8")
    chromium(tmp_path / "home", "--no-pdf-header-footer", f"--print-to-pdf={printed}", source.as_uri())
    boxes = re.findall(rb"/MediaBox\s*\[\s*0 0 ([0-9.]+) ([0-9.]+)\s*\]", printed.read_bytes())
    assert 3 <= len(boxes) <= 8
    for width, height in boxes:
        assert float(width) == pytest.approx(210 / 25.4 * 72, abs=1)
        assert float(height) == pytest.approx(297 / 25.4 * 72, abs=1)
