"""Pages in a browser: nothing overflows or overlaps, nothing is asked for, nothing is said on the console, accessible.

What lays out a page and judges its accessibility is a browser, so these tests need Chromium (`chromium` on the path); they are skipped
where there is none. The accessibility rules are those of axe-core, fetched with npm into a temporary folder; skipped without npm.
"""

import html as html_module
import json
import re
import shutil
import subprocess
from pathlib import Path

import pytest

from tests.drivers.report.conftest import COMMANDS

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
NPM = shutil.which("npm")
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium to lay the page out")
FLAGS = (
    *(
        "--headless",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-quic",
        "--no-first-run",
        "--disable-background-networking",
    ),
    *("--disable-component-update", "--disable-sync", "--hide-scrollbars", "--virtual-time-budget=20000"),
    "--host-resolver-rules=MAP * ~NOTFOUND",  # nothing gets out, whoever asks
)
WIDTHS = (380, 800, 1400)
TRIES = 3
"""A browser on a crowded machine may lose its page."""

SERIOUS = {"serious", "critical"}

# Without the policy that forbids scripts, so that a script of the test can measure; the page has none of its own.
POLICY = re.compile(r'<meta http-equiv="Content-Security-Policy"[^>]*>')
MEASURE = """
const found = {width: innerWidth, scroll: document.documentElement.scrollWidth, outside: [], overlaps: [], small: []};
for (const e of document.querySelectorAll('h1, h2, h3, p, dt, dd, figure, figcaption, pre, li, .scroll, footer')) {
  const box = e.getBoundingClientRect();
  if (box.right > innerWidth + 0.5 || box.left < -0.5) found.outside.push(e.outerHTML.slice(0, 80));
}
if (innerWidth <= 576) for (const e of document.querySelectorAll('table.said'))  // sentences are read without scrolling
  if (e.scrollWidth > e.parentElement.clientWidth + 1) found.outside.push(e.textContent.trim().slice(0, 80));
const meets = (a, b) => Math.min(a.right, b.right) - Math.max(a.left, b.left) > 1.5 && Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top) > 1.5;
const parts = 'h1, h2, h3, main > p, dl.facts > div, figure, .scroll, pre, li, footer p';
const blocks = [...document.querySelectorAll(parts)].map(e => [e, e.getBoundingClientRect()]);
for (let i = 0; i < blocks.length; i++) for (let j = i + 1; j < blocks.length; j++)
  if (meets(blocks[i][1], blocks[j][1])) found.overlaps.push([blocks[i][0].textContent.slice(0, 40), blocks[j][0].textContent.slice(0, 40)]);
for (const image of document.querySelectorAll('img')) {
  const holder = document.createElement('div');
  holder.style.cssText = `position:absolute;left:0;top:0;width:${image.clientWidth}px`;
  const bytes = Uint8Array.from(atob(image.src.split(',')[1]), c => c.charCodeAt(0));
  holder.innerHTML = new TextDecoder().decode(bytes).replace(/^[^]*?<svg/, '<svg');
  const svg = holder.querySelector('svg');
  document.body.append(holder);
  const frame = svg.getBoundingClientRect();
  const texts = [...svg.querySelectorAll('text')].map(t => [t.textContent.trim(), t.getBoundingClientRect(), t]);
  for (const [text, box] of texts)
    if (box.left < frame.left - 1 || box.right > frame.right + 1 || box.top < frame.top - 1 || box.bottom > frame.bottom + 1)
      found.outside.push(`${image.alt.slice(0, 40)}: ${text}`);
  for (let i = 0; i < texts.length; i++) for (let j = i + 1; j < texts.length; j++)
    if (texts[i][0] && texts[j][0] && meets(texts[i][1], texts[j][1])) found.overlaps.push([image.alt.slice(0, 60), texts[i][0], texts[j][0]]);
  const scale = frame.width / svg.viewBox.baseVal.width;
  for (const [text, , t] of texts) {
    const size = parseFloat(getComputedStyle(t).fontSize) * scale;
    if (text && size < 7.5) found.small.push(`${text}: ${size}`);
  }
  holder.remove();
}
tell(found);
"""
AXE = """
axe.run(document, {runOnly: ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'best-practice']}).then(result => {
  tell({passes: result.passes.length, dark: matchMedia('(prefers-color-scheme: dark)').matches,
    violations: result.violations.map(v => [v.id, v.impact, v.nodes.map(n => n.html.slice(0, 100)).slice(0, 3)])});
});
"""
TELL = """
const tell = found => {
  const note = parent.document.createElement('p');
  note.id = 'measured';
  note.textContent = JSON.stringify(found);
  parent.document.body.append(note);
};
"""
# A frame has the width that it is given; a window does not go below 500 pixels.
FRAME = (
    '<!DOCTYPE html><html lang="en"><title>frame</title><body style="margin:0">'
    '<iframe title="page" srcdoc="{}" style="border:0;width:{}px;height:4000px"></iframe></body></html>'
)


def chromium(folder: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    assert CHROMIUM is not None
    profile = folder / "profile"
    shutil.rmtree(profile, ignore_errors=True)
    command = [CHROMIUM, *FLAGS, f"--user-data-dir={profile}", *arguments]
    return subprocess.run(command, capture_output=True, text=True, timeout=120, check=True)


def measured(folder: Path, page: str, width: int, *scripts: str, dark: bool = False) -> dict:
    """What a script finds on a page of some width."""
    body = "".join(
        f"<script>{script.replace('</script', '<' + chr(92) + '/script')}</script>" for script in (TELL, *scripts)
    )
    inside = POLICY.sub("", page).replace("</body>", f"{body}</body>")
    copy = folder / "measured.html"
    copy.write_text(FRAME.format(html_module.escape(inside), width), encoding="utf-8")
    dark_mode = ["--blink-settings=preferredColorScheme=0"] if dark else []
    for _ in range(TRIES):
        run = chromium(folder, "--window-size=1500,1000", *dark_mode, "--dump-dom", copy.as_uri())
        found = re.search(r'<p id="measured">(.*?)</p>', run.stdout, re.S)
        if found is not None:
            return json.loads(html_module.unescape(found[1]))
    pytest.fail(f"nothing measured: {run.stderr}")


@pytest.mark.parametrize("width", WIDTHS)
@pytest.mark.parametrize("name", COMMANDS)
def test_nothing_overflows_or_overlaps(page, tmp_path, name, width):
    found = measured(tmp_path, page(name), width, MEASURE)
    assert found["scroll"] <= found["width"] <= width
    assert found["outside"] == []
    assert found["overlaps"] == []
    assert found["small"] == []  # pixels of letters in pictures


def hosts_asked(folder: Path, address: str) -> tuple[set[str], str]:
    """The hosts that a browser asks for while it shows a page, and what it says."""
    log = folder / "net.json"
    run = chromium(folder, "--enable-logging=stderr", f"--log-net-log={log}", "--dump-dom", address)
    return set(re.findall(r'"url":"(?:https?|wss?|ftp)://([^/"]*)', log.read_text(encoding="utf-8"))), run.stderr


@pytest.fixture(scope="session")
def own_hosts(tmp_path_factory) -> set[str]:
    """What the browser asks for itself, whatever it shows."""
    return hosts_asked(tmp_path_factory.mktemp("blank"), "about:blank")[0]


@pytest.mark.parametrize("name", COMMANDS)
def test_a_page_asks_for_nothing_and_says_nothing_on_the_console(pages, tmp_path, own_hosts, name):
    hosts, said = hosts_asked(tmp_path, pages[name].resolve().as_uri())
    assert hosts <= own_hosts
    assert "CONSOLE" not in said


def test_a_page_that_asks_for_something_is_caught(tmp_path, own_hosts):
    (tmp_path / "asks.html").write_text('<img src="http://somewhere.invalid/a.png"><script>console.log("x")</script>')
    hosts, said = hosts_asked(tmp_path, (tmp_path / "asks.html").as_uri())
    assert hosts - own_hosts == {"somewhere.invalid"}
    assert "CONSOLE" in said


@pytest.mark.parametrize("name", COMMANDS)
def test_a_page_prints_on_paper(pages, tmp_path, name):
    printed = tmp_path / "page.pdf"
    chromium(tmp_path, "--no-pdf-header-footer", f"--print-to-pdf={printed}", pages[name].resolve().as_uri())
    content = printed.read_bytes()
    assert content.startswith(b"%PDF")
    assert len(content) > 10_000


@pytest.fixture(scope="session")
def axe(tmp_path_factory) -> str:
    if NPM is None:
        pytest.skip("no npm to fetch the accessibility rules with")
    folder = tmp_path_factory.mktemp("axe")
    command = [NPM, "install", "--silent", "--no-audit", "--no-fund", "--prefix", str(folder), "axe-core"]
    if subprocess.run(command, capture_output=True, timeout=120, check=False).returncode != 0:
        pytest.skip("the accessibility rules could not be fetched")
    return (folder / "node_modules" / "axe-core" / "axe.min.js").read_text(encoding="utf-8")


@pytest.mark.parametrize("dark", [False, True], ids=["light", "dark"])
@pytest.mark.parametrize("name", COMMANDS)
def test_a_page_is_accessible(page, tmp_path, axe, name, dark):
    found = measured(tmp_path, page(name), 800, axe, AXE, dark=dark)
    assert found["dark"] is dark
    assert found["passes"] > 10
    assert [violation for violation in found["violations"] if violation[1] in SERIOUS] == []
