"""Look at a report: every page in headless Chromium at 1280 and 1920 px, light and dark, with what overlaps or runs over the edge.

python tests/flows/reports/screenshots.py REPORT_FOLDER OUT_FOLDER [PAGE ...]
"""

from __future__ import annotations

import html
import json
import re
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence

WIDTHS = (1280, 1920)
TALLEST = 15000
PROBE = """
<script>
const shown = [...document.querySelectorAll('svg text')].filter(item => item.textContent.trim() && item.checkVisibility());
const overlaps = [];
for (const figure of new Set(shown.map(item => item.ownerSVGElement))) {
  const boxes = shown.filter(item => item.ownerSVGElement === figure).map(item => [item.textContent, item.getBoundingClientRect()]);
  for (let one = 0; one < boxes.length; one++)
    for (let other = one + 1; other < boxes.length; other++) {
      const [a, b] = [boxes[one][1], boxes[other][1]];
      const wide = Math.min(a.right, b.right) - Math.max(a.left, b.left), high = Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top);
      if (wide > 1 && high > 4) overlaps.push([figure.querySelector('title')?.textContent, boxes[one][0], boxes[other][0]]);
    }
}
const outside = [];
for (const item of shown) {
  const frame = item.ownerSVGElement.getBoundingClientRect(), box = item.getBoundingClientRect();
  if (box.left < frame.left - 2 || box.right > frame.right + 2 || box.top < frame.top - 2 || box.bottom > frame.bottom + 2)
    outside.push([item.ownerSVGElement.querySelector('title')?.textContent, item.textContent]);
}
const small = shown.filter(item => item.getScreenCTM().a * parseFloat(getComputedStyle(item).fontSize) < 11).length;
const root = document.documentElement;
document.title = JSON.stringify({height: root.scrollHeight, too_wide: root.scrollWidth > innerWidth, overlaps, outside, small});
</script>
"""


def chromium() -> str | None:
    """Return the path of a Chromium on this machine, or None."""
    return next((path for name in ("chromium", "chromium-browser", "google-chrome") if (path := shutil.which(name))), None)


def run_chromium(*words: str, page: Path, width: int, height: int = 900) -> str:
    """Open a page without a window and return what Chromium prints."""
    program = chromium()
    if program is None:
        message = "no Chromium was found on this machine"
        raise FileNotFoundError(message)
    with tempfile.TemporaryDirectory() as profile:
        command = [program, "--headless", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage", "--disable-background-networking"]
        command += ["--disable-component-update", "--disable-sync", "--no-first-run", "--hide-scrollbars", f"--user-data-dir={profile}"]
        done = subprocess.run(
            [*command, f"--window-size={width},{height}", *words, page.as_uri()], check=True, capture_output=True, text=True, timeout=120
        )
    return done.stdout


def measure(page: Path, width: int) -> dict[str, Any]:
    """Return the height of a page, whether it is too wide, and texts in figures that overlap, leave their figure or are too small."""
    base = f'<head><base href="{page.parent.as_uri()}/">'
    with tempfile.TemporaryDirectory() as folder:
        copy = Path(folder) / "probe.html"
        copy.write_text(page.read_text(encoding="utf-8").replace("<head>", base, 1).replace("</body>", f"{PROBE}</body>"), encoding="utf-8")
        printed = run_chromium("--dump-dom", page=copy, width=width)
    found = re.search(r"<title>(\{.*?\})</title>", printed, re.DOTALL)
    assert found, "the page could not be measured"
    measured: dict[str, Any] = json.loads(html.unescape(found[1]))
    return measured


def main(report: Path, out: Path, only: Sequence[str] = ()) -> None:
    """Write a picture of every page (or of those named), width and colour scheme, and print what is wrong with each page."""
    out.mkdir(parents=True, exist_ok=True)
    for page in [p for p in sorted(report.resolve().rglob("*.html")) if not only or p.stem in only]:
        for width in WIDTHS:
            measured = measure(page, width)
            print(page.name, width, {key: value for key, value in measured.items() if value})  # noqa: T201
            for scheme, number in (("light", 1), ("dark", 0)):
                picture = out / f"{page.stem}-{width}-{scheme}.png"
                words = (f"--screenshot={picture.resolve()}", f"--blink-settings=preferredColorScheme={number}")
                run_chromium(*words, page=page, width=width, height=min(measured["height"], TALLEST))


if __name__ == "__main__":
    main(Path(sys.argv[1]), Path(sys.argv[2]), sys.argv[3:])
