"""The page as a real browser lays it out: nothing is fetched, nothing overflows, figures are drawn.

A probe appended to a copy of the page measures in the browser and writes what it found into the document,
which Chromium prints. Skipped only where Chromium is not installed.
"""

from __future__ import annotations

import json
import re
import runpy
import shutil
import subprocess
from html import unescape
from pathlib import Path
from typing import Any

import pytest

from treering.report import build_files

GOLDEN = Path(__file__).parents[1] / "golden" / "report" / "make.py"
FLAGS = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--host-resolver-rules=MAP * ~NOTFOUND",
)
PROBE = """
<script>
addEventListener('load', () => {
  const all = selector => [...document.querySelectorAll(selector)];
  const found = {
    width: document.documentElement.clientWidth,
    overflow: document.documentElement.scrollWidth - document.documentElement.clientWidth,
    fetched: performance.getEntriesByType('resource').map(entry => entry.name),
    flat: all('svg').filter(svg => svg.getBoundingClientRect().height < 20).length,
    figures: all('figure svg').length,
    bare: all('table').filter(table => !table.caption || !table.caption.textContent.trim()).length,
    dead: all('a[href^="#"]').map(link => link.getAttribute('href').slice(1))
      .filter(id => id && !document.getElementById(id)),
    background: getComputedStyle(document.body).backgroundColor,
    ink: getComputedStyle(document.body).color,
  };
  const out = document.createElement('pre');
  out.id = 'probe';
  out.textContent = JSON.stringify(found);
  document.body.append(out);
});
</script>
"""


@pytest.fixture(scope="module")
def chromium() -> str:
    program = shutil.which("chromium") or shutil.which("chromium-browser")
    if program is None:
        pytest.skip("Chromium is not installed here")
    return program


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Path:
    files = build_files(runpy.run_path(str(GOLDEN))["golden_view"]())
    html = files["index.html"].decode()
    assert "<script" not in html
    path = tmp_path_factory.mktemp("page") / "index.html"
    path.write_text(html.replace("</body>", PROBE + "</body>"), encoding="utf-8")
    return path


def measured(chromium: str, page: Path, profile: Path, width: int, *more: str) -> dict[str, Any]:
    """Open the page at a width and return what the probe found."""
    command = [
        chromium,
        *FLAGS,
        *more,
        f"--user-data-dir={profile}",
        f"--window-size={width},900",
        "--virtual-time-budget=5000",
        "--dump-dom",
        page.as_uri(),
    ]
    done = subprocess.run(command, capture_output=True, text=True, timeout=120, check=True)
    (text,) = re.findall(r'<pre id="probe">(.*?)</pre>', done.stdout, flags=re.DOTALL)
    found: dict[str, Any] = json.loads(unescape(text))
    return found


@pytest.mark.parametrize("width", [1200, 700])
def test_the_page_stands_by_itself_and_fits(chromium: str, page: Path, tmp_path: Path, width: int) -> None:
    found = measured(chromium, page, tmp_path, width)
    assert found["fetched"] == []
    assert found["overflow"] <= 0
    assert found["figures"] >= 3
    assert (found["flat"], found["bare"], found["dead"]) == (0, 0, [])


def test_dark_style_turns_paper_and_ink_round(chromium: str, page: Path, tmp_path: Path) -> None:
    light = measured(chromium, page, tmp_path / "light", 1000)
    dark = measured(chromium, page, tmp_path / "dark", 1000, "--blink-settings=preferredColorScheme=0")

    def brightness(colour: str) -> int:
        return sum(int(part) for part in re.findall(r"\d+", colour)[:3])

    assert brightness(light["background"]) > brightness(light["ink"])
    assert brightness(dark["background"]) < brightness(dark["ink"])
