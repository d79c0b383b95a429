"""A page in a real browser without a screen; the tests that need one are skipped without it."""

from __future__ import annotations

import html
import json
import re
import shutil
import subprocess
from pathlib import Path
from typing import Any

import pytest

BROWSER = next(filter(None, map(shutil.which, ("chromium", "chromium-browser", "chrome"))), None)
needs_browser = pytest.mark.skipif(BROWSER is None, reason="no chromium here")

# Runs before anything else of the page, and after all of it.
_BEFORE = """
<script>
var probe = { errors: [] };
window.addEventListener("error", function (e) { probe.errors.push(String(e.message)); });
</script>
"""
_AFTER = """
<script>
(function () {
  var root = document.documentElement;
  probe.sideways = root.scrollWidth - root.clientWidth;
  probe.cut = [];
  document.querySelectorAll("h1, h2, p, li, td, th, figcaption").forEach(function (e) {
    if (e.scrollWidth > e.clientWidth + 1) { probe.cut.push(e.textContent.slice(0, 60)); }
  });
  var parts = "main h2, main p, main figure, main .wide, nav";
  var blocks = Array.from(document.querySelectorAll(parts))
    .filter(function (e) { return !e.closest("figure") || e.tagName === "FIGURE"; })
    .map(function (e) { return [e, e.getBoundingClientRect()]; })
    .filter(function (b) { return b[1].height > 0; });
  probe.covered = [];
  blocks.forEach(function (b, i) {
    var next = blocks[i + 1];
    if (next && next[1].top < b[1].bottom - 1) {
      probe.covered.push(next[0].textContent.slice(0, 60));
    }
  });
  var told = document.getElementById("pointing");
  if (told) {
    var map = document.querySelector("#figure-map .drawing"), size = map.getBoundingClientRect();
    var box = JSON.parse(document.getElementById("pointing-data").textContent).panels[0].box;
    probe.unpointed = told.textContent;
    map.dispatchEvent(new PointerEvent("pointermove", {
      clientX: size.left + size.width * (box[0] + box[2] / 2),
      clientY: size.top + size.height * (box[1] + box[3] / 2)
    }));
    probe.pointed = told.textContent;
    var mark = map.querySelector(".pointed").getBoundingClientRect();
    probe.marked = [
      ((mark.left + mark.right) / 2 - size.left) / size.width,
      ((mark.top + mark.bottom) / 2 - size.top) / size.height
    ];
    map.dispatchEvent(new KeyboardEvent("keydown", { key: "ArrowRight" }));
    probe.stepped = told.textContent;
  }
  var out = document.createElement("pre");
  out.id = "probe";
  out.textContent = JSON.stringify(probe);
  document.body.appendChild(out);
}());
</script>
"""


def _run(folder: Path, page: str, *options: str) -> tuple[str, list[str]]:
    """What the browser prints, and the lines of its console."""
    file = folder / "page.html"
    file.write_text(page, encoding="utf-8")
    own = ("--headless", "--no-sandbox", "--disable-gpu", f"--user-data-dir={folder / 'own'}")
    done = subprocess.run(
        [str(BROWSER), *own, "--enable-logging=stderr", *options, file.as_uri()],
        capture_output=True,
        text=True,
        timeout=120,
        check=True,
    )
    return done.stdout, [line for line in done.stderr.splitlines() if "CONSOLE" in line]


def probed(page: str, folder: Path, width: int) -> tuple[dict[str, Any], list[str]]:
    """What a page does in a window so wide, and the lines of the console.

    errors: of scripts. sideways: pixels by which the page is wider than the window. cut: texts
    wider than their place. covered: parts that begin before the one above has ended. unpointed,
    pointed, stepped: what stands below the map before it is pointed at, with its middle pointed at,
    and a key further to the right. marked: where the mark of the place pointed at lies, in shares
    of the map from its upper left corner.
    """
    whole = page.replace("<head>", f"<head>{_BEFORE}", 1).replace("</body>", f"{_AFTER}</body>")
    shown, console = _run(folder, whole, f"--window-size={width},2000", "--dump-dom")
    (found,) = re.findall(r'<pre id="probe">(.*?)</pre>', shown, flags=re.DOTALL)
    return json.loads(html.unescape(found)), console


def printed(page: str, folder: Path) -> bytes:
    """A page as PDF."""
    out = folder / "page.pdf"
    _run(folder, page, f"--print-to-pdf={out}", "--no-pdf-header-footer")
    return out.read_bytes()
