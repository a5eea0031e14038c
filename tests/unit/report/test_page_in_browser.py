"""The page in a real browser: no network, no error, no sideways scrolling, text stays text."""

from __future__ import annotations

import html
import json
import re
import shutil
import subprocess
from pathlib import Path
from typing import Any

import pytest

from bayeslca.report.write import write_report

pytestmark = pytest.mark.browser

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
OPTIONS = [
    "--headless", "--no-sandbox", "--disable-gpu", "--no-first-run", "--enable-logging=stderr",
    "--disable-background-networking", "--disable-component-update", "--disable-sync",
    "--disable-extensions", "--disable-dev-shm-usage", "--host-resolver-rules=MAP * ~NOTFOUND",
    "--virtual-time-budget=5000", "--dump-dom",
]  # fmt: skip

FRAME = """<!DOCTYPE html><meta charset="utf-8"><title>frame</title>
<iframe id="page" style="border:0" width="{width}" height="900" srcdoc="{page}"></iframe>
<pre id="seen"></pre>
<script>
const frame = document.getElementById("page");
frame.addEventListener("load", () => {{
  const inside = frame.contentDocument, root = inside.documentElement;
  for (const folded of inside.querySelectorAll("details")) folded.open = true;
  const wide = [...inside.querySelectorAll("body *")].filter(
    (e) => !e.closest(".scroll, svg") && e.getBoundingClientRect().right > root.clientWidth + 1);
  document.getElementById("seen").textContent = JSON.stringify({{
    width: root.clientWidth, needs: root.scrollWidth,
    wide: wide.map((e) => e.outerHTML.slice(0, 80)),
    scripts: inside.scripts.length,
    loaded: frame.contentWindow.performance.getEntriesByType("resource").length,
    headings: inside.querySelectorAll("h2").length, text: inside.body.textContent,
    drawn: [...inside.querySelectorAll("svg text")].map((e) => e.textContent),
    flat: [...inside.querySelectorAll("svg")].filter(
      (e) => e.getBoundingClientRect().height < 50).length,
  }});
}});
</script>"""


@pytest.fixture(scope="module")
def report(mixed: Any, tmp_path_factory: pytest.TempPathFactory, made: Any) -> Path:
    if CHROMIUM is None:
        print("chromium is not installed: the page was not opened in a browser")
        pytest.skip("chromium is not installed")
    content = made.content(
        mixed,
        comparison=None,
        study_text="x = '" + "y" * 300 + "'",
        checks=mixed.predictive_checks(replicates=100),
    )
    return write_report(content, tmp_path_factory.mktemp("browser")).page


def open_page(page: Path, width: int, folder: Path) -> tuple[dict[str, Any], list[str]]:
    """Open the page in a frame of a given width; return what was seen and the console's lines."""
    framed = folder / "frame.html"
    source = html.escape(page.read_text(encoding="utf-8"), quote=True)
    framed.write_text(FRAME.format(width=width, page=source), encoding="utf-8")
    done = subprocess.run(
        [str(CHROMIUM), *OPTIONS, f"--user-data-dir={folder / 'profile'}", framed.as_uri()],
        capture_output=True, text=True, timeout=120, check=False,
    )  # fmt: skip
    found = re.search(r'<pre id="seen">(.*?)</pre>', done.stdout, flags=re.DOTALL)
    assert found is not None, done.stderr[-2000:]
    console = [line for line in done.stderr.splitlines() if "CONSOLE" in line]
    return json.loads(html.unescape(found[1])), console


@pytest.mark.parametrize("width", [360, 1280])
def test_page_fits_loads_nothing_and_shows_text_as_text(
    report: Path, tmp_path: Path, width: int
) -> None:
    seen, console = open_page(report, width, tmp_path)
    assert console == []
    assert seen["headings"] == 12
    assert seen["loaded"] == 0
    assert seen["scripts"] == 0
    assert seen["width"] <= width
    assert seen["needs"] <= seen["width"], seen["wide"]
    assert seen["wide"] == []
    assert seen["flat"] == 0
    assert "<script>alert(1)</script>" in seen["text"]
    assert "<script>alert(1)</script>" in seen["drawn"]
    assert "Costs $5 or $10 & more" in seen["drawn"]


def test_the_frame_would_see_a_script_and_a_console_error(report: Path, tmp_path: Path) -> None:
    broken = tmp_path / "broken.html"
    text = report.read_text(encoding="utf-8").replace(
        "</main>", '<div style="width:5000px">x</div><script>1</script></main>'
    )
    broken.write_text(text, encoding="utf-8")
    seen, console = open_page(broken, 360, tmp_path)
    assert seen["scripts"] == 1
    assert seen["needs"] > seen["width"]
    assert any("Content Security Policy" in line for line in console)
