"""The page in a real browser, at a phone's, a tablet's and a laptop's width, in light and dark.

Nothing overflows, no formula is empty or broken, the embedded font is the one in use, nothing is fetched, everything
that can be focused has a name.  The browser measures; the page sends what it measured to the frame around it.
"""

from __future__ import annotations

import json
import re
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

from derive.record.said import Report
from derive.report import write

from . import gallery
from .sample import demo, every_verdict
from .test_hostile import hostile

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="chromium is not installed")

FLAGS = (
    "--headless", "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--hide-scrollbars",
    "--disable-background-networking", "--disable-component-update", "--disable-sync", "--virtual-time-budget=4000",
)
WIDTHS = (390, 800, 1280)
REPORTS: dict[str, Callable[[], Report]] = {
    "demo": demo, "verdicts": every_verdict, "gallery": gallery.report, "hostile": hostile,
}

MEASURE = """
document.fonts.ready.then(() => {
  const box = e => e.getBoundingClientRect(), all = s => [...document.querySelectorAll(s)];
  const folded = e => e.closest('details:not([open])') && !e.closest('summary');
  const maths = all('math').filter(m => !folded(m));
  const scrolls = e => { const r = e.closest('.equation, .numbers'); return r && r.tabIndex === 0; };
  const report = {
    width: innerWidth, scroll: document.scrollingElement.scrollWidth, maths: maths.length,
    empty: maths.filter(m => box(m).width < 2 || box(m).height < 2).map(m => m.getAttribute('alttext')),
    errors: all('merror').length,
    sticking: maths.filter(m => box(m).right > innerWidth + 1 && !scrolls(m)).map(m => m.getAttribute('alttext')),
    font: [...document.fonts].map(f => f.status).join(),
    fetched: performance.getEntriesByType('resource').map(r => r.name).filter(n => !n.startsWith('data:'))
      .concat(all('[src], link, object, embed').map(e => e.outerHTML)),
    nameless: all('[tabindex], a, button, summary').filter(
      e => !(e.getAttribute('aria-label') || e.textContent.trim())).length,
    buttons: all('button.copy').length, latex: all('details.latex').length,
    ink: getComputedStyle(document.body).color, paper: getComputedStyle(document.documentElement).backgroundColor,
    forced: matchMedia('(forced-colors: active)').matches,
    rings: all('figure svg use').map(e => getComputedStyle(e).stroke),
    rules: all('.seam').map(s => s.classList[1] + ' ' + [...s.querySelectorAll('.rule, .rule i')].map(r => {
      const c = getComputedStyle(r);
      return ['Top', 'Right', 'Bottom', 'Left'].map(d => c[`border${d}Width`] + c[`border${d}Style`]).join();
    }).join(' ')),
    roots: all('msqrt').filter(m => !folded(m)).map(m => box(m).height),
    aligned: all('mtable.chain').filter(t => !folded(t)).every(t => {
      const lefts = [...t.children].map(r => Math.round(box(r.lastElementChild.firstElementChild).left));
      return lefts.every(x => Math.abs(x - lefts[0]) <= 1);
    }),
    columns: all('.entry').map(e => [box(e.querySelector('.derived')), box(e.querySelector('.measured'))])
      .filter(([a, b]) => b.width > 0 && a.right > b.left + 1 && a.bottom > b.top + 1).length,
  };
  parent.postMessage(JSON.stringify(report), '*');
});
"""
FRAME = """<!DOCTYPE html><meta charset="utf-8"><style>body{margin:0}iframe{border:0;width:%dpx;height:900px}</style>
<iframe src="page.html"></iframe><pre id="said"></pre>
<script>addEventListener('message', e => { document.getElementById('said').textContent = e.data; });</script>"""


def measured(html: str, width: int, folder: Path, *extra: str) -> dict:
    """What the browser sees of the page at this width.  The test's own script needs the policy out of the way."""
    open_page = re.sub(r'<meta http-equiv="Content-Security-Policy"[^>]*>', "", html)
    (folder / "page.html").write_text(open_page.replace("</body>", f"<script>{MEASURE}</script></body>"), "utf-8")
    (folder / "frame.html").write_text(FRAME % width, "utf-8")
    command = [CHROMIUM or "chromium", *FLAGS, f"--user-data-dir={folder / 'profile'}", "--window-size=1400,1000",
               *extra, "--dump-dom", (folder / "frame.html").as_uri()]
    done = subprocess.run(command, capture_output=True, timeout=120)
    said = re.search(r'<pre id="said">(\{.*?\})</pre>', done.stdout.decode("utf-8"), re.S)
    assert said, done.stderr.decode("utf-8", "replace")[-500:]
    return json.loads(said.group(1).replace("&amp;", "&").replace("&lt;", "<").replace("&gt;", ">"))


def page(name: str) -> str:
    return write(REPORTS[name]())["report.html"].decode("utf-8")


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", REPORTS)
def test_page_stands(name: str, width: int, tmp_path: Path) -> None:
    seen = measured(page(name), width, tmp_path)
    assert seen["width"] == width and seen["maths"] > 20
    assert seen["scroll"] <= width, "the page is wider than the window"
    assert seen["empty"] == [] and seen["errors"] == 0 and seen["sticking"] == []
    assert seen["font"] == "loaded" and seen["fetched"] == [] and seen["nameless"] == 0
    assert seen["aligned"] and seen["columns"] == 0
    assert seen["buttons"] == seen["latex"] > 0


def test_dark_is_dark(tmp_path: Path) -> None:
    light = measured(page("demo"), 800, tmp_path)
    (tmp_path / "dark").mkdir()
    dark = measured(page("demo"), 800, tmp_path / "dark", "--blink-settings=preferredColorScheme=0")
    assert light["paper"] == "rgb(251, 250, 246)" and dark["paper"] == "rgb(23, 22, 20)"


def test_forced_colours_lose_nothing(tmp_path: Path) -> None:
    """In the system's own colours the five seams keep five shapes, and rings in figures are as dark as the text."""
    usual = measured(page("verdicts"), 800, tmp_path)
    (tmp_path / "forced").mkdir()
    seen = measured(page("verdicts"), 800, tmp_path / "forced", "--force-high-contrast")
    assert seen["forced"] and not usual["forced"]
    assert seen["rules"] == usual["rules"] and len(set(seen["rules"])) == 5
    assert seen["ink"] in seen["rings"] and "rgb(74, 58, 160)" not in seen["rings"]
    assert "rgb(74, 58, 160)" in usual["rings"]


def test_measuring_sees_faults(tmp_path: Path) -> None:
    """A formula without content, a wide block, a lost font and a picture from elsewhere are all noticed."""
    bad = page("demo").replace("<footer>", (
        '<math alttext="gone"></math><div style="width:3000px">x</div><a href="#x"></a>'
        '<img src="elsewhere.png"><footer>'
    ))
    seen = measured(bad.replace("data:font/woff2;base64,", "data:font/woff2;base64,AAAA"), 800, tmp_path)
    assert "gone" in seen["empty"] and seen["scroll"] > 800 and seen["nameless"] == 1
    assert seen["font"] != "loaded" and seen["fetched"]
