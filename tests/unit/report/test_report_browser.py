"""The report in a real Chromium: no sideways scrolling, nothing loaded, no complaint."""

from __future__ import annotations

import html
import json
import re
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from PIL import Image

import invented_dossiers as invented
from topovet.report.figures import build_figures
from topovet.report.html import render_report
from topovet.report.material import ReportMaterial

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
CASES = [invented.strong, invented.sheet, invented.undetermined, invented.hostile]

pytestmark = [
    pytest.mark.browser,
    pytest.mark.skipif(CHROMIUM is None, reason="no chromium on this machine"),
]

WIDTHS = (1280, 390)

# Measures the report inside a frame of the wanted width: what sticks out of it without a box of
# its own to scroll in, with all details open.
FRAME = '<iframe width="{width}" height="900" style="border:0" srcdoc="{page}"></iframe>'
MEASURE = """
<!DOCTYPE html><meta charset="utf-8">
{frames}
<pre id="out">pending</pre>
<script>
function measured(frame) {{
  const page = frame.contentDocument;
  page.querySelectorAll("details").forEach((d) => {{ d.open = true; }});
  const width = page.documentElement.clientWidth;
  const boxed = (e) => e.closest(".scroll, svg, .skip") !== null;
  const out = [...page.body.querySelectorAll("*")].filter(
    (e) => !boxed(e) && e.getBoundingClientRect().right > width + 1);
  return {{
    width, scroll: page.documentElement.scrollWidth,
    out: out.map((e) => e.tagName + " " + e.textContent.slice(0, 40)),
    sections: page.querySelectorAll("section").length,
    loaded: frame.contentWindow.performance.getEntriesByType("resource").length,
  }};
}}
window.addEventListener("load", () => {{
  const frames = [...document.querySelectorAll("iframe")];
  document.getElementById("out").textContent = JSON.stringify(frames.map(measured));
}});
</script>
"""


def _chromium(profile: Path, *options: str) -> subprocess.CompletedProcess[str]:
    command = [
        str(CHROMIUM),
        *("--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking"),
        *("--hide-scrollbars", f"--user-data-dir={profile}", "--enable-logging=stderr"),
        *options,
    ]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, check=True)


def _written(build: Callable[[], ReportMaterial], folder: Path) -> Path:
    material = build()
    path = folder / "report.html"
    path.write_text(render_report(material, build_figures(material)), encoding="utf-8")
    return path


def _measured(page: str, folder: Path) -> list[dict[str, Any]]:
    """What the browser finds of the page at each width."""
    inside = html.escape(page, quote=True)
    frames = "\n".join(FRAME.format(width=width, page=inside) for width in WIDTHS)
    frame = folder / "frame.html"
    frame.write_text(MEASURE.format(frames=frames), encoding="utf-8")
    done = _chromium(folder / "profile", "--virtual-time-budget=4000", "--dump-dom", frame.as_uri())
    found = re.search(r'<pre id="out">(.*?)</pre>', done.stdout, re.DOTALL)
    assert found, done.stdout[-500:]
    results: list[dict[str, Any]] = json.loads(html.unescape(found[1]))
    return results


@pytest.mark.parametrize("build", CASES)
def test_nothing_sticks_out(build: Callable[[], ReportMaterial], tmp_path: Path) -> None:
    page = _written(build, tmp_path).read_text(encoding="utf-8")
    for width, measured in zip(WIDTHS, _measured(page, tmp_path), strict=True):
        assert measured["width"] == width
        assert measured["scroll"] <= width
        assert measured["out"] == []
        assert measured["sections"] == 12
        assert measured["loaded"] == 0


def test_the_measurement_notices_what_sticks_out(tmp_path: Path) -> None:
    page = _written(invented.undetermined, tmp_path).read_text(encoding="utf-8")
    wide = page.replace("<footer>", '<footer><div style="width:800px">too wide</div>')
    desk, phone = _measured(wide, tmp_path)
    assert desk["out"] == []
    assert phone["scroll"] > 390
    assert any("too wide" in name for name in phone["out"])


@pytest.mark.parametrize("width", WIDTHS)
def test_pictures_are_drawn_and_the_console_is_silent(width: int, tmp_path: Path) -> None:
    report = _written(invented.strong, tmp_path)
    picture = tmp_path / "picture.png"
    done = _chromium(
        tmp_path / "profile",
        f"--window-size={width},3000",
        f"--screenshot={picture}",
        report.as_uri(),
    )
    assert "CONSOLE" not in done.stderr
    with Image.open(picture) as image:
        assert image.size == (width, 3000)
        colours = image.convert("RGB").getcolors(maxcolors=1 << 20)
    assert colours is not None
    ink = sum(n for n, (r, g, b) in colours if r + g + b < 200)
    assert 0.005 < ink / (width * 3000) < 0.3


def test_it_prints(tmp_path: Path) -> None:
    report = _written(invented.strong, tmp_path)
    paper = tmp_path / "report.pdf"
    _chromium(tmp_path / "profile", f"--print-to-pdf={paper}", report.as_uri())
    pages = len(re.findall(rb"/Type\s*/Page\b", paper.read_bytes()))
    assert 4 <= pages <= 14
