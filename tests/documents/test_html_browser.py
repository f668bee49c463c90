"""The HTML page in a real browser, and under a strict reader of HTML."""

import json
import re
from html import unescape
from pathlib import Path

import pytest

from markov.documents.html import write_html
from tests.documents.sample import sample
from tests.documents.tools import module, program, run

pytestmark = pytest.mark.documents

PROBE = """<script>
const said = [];
const part = document.querySelector('svg [data-target="state-3"]');
part.dispatchEvent(new MouseEvent("click", {bubbles: true, cancelable: true}));
const panel = document.getElementById("picked");
said.push("open " + !panel.hidden, "title " + panel.querySelector("h2").textContent);
for (const table of panel.querySelectorAll("table")) {
  const rows = [...table.tBodies[0].rows].map((row) => row.cells[0].textContent + ", " + row.cells[1].textContent);
  said.push(table.caption.textContent + ": " + rows.join("; "));
}
said.push("picked " + document.querySelectorAll("[data-target].picked").length);
document.dispatchEvent(new KeyboardEvent("keydown", {key: "Escape"}));
said.push("closed " + panel.hidden, "back " + (document.activeElement === part));
const field = document.getElementById("search");
field.value = "FITTERS 14.25";
field.dispatchEvent(new Event("input"));
said.push("found " + document.querySelectorAll("main tbody tr:not([hidden])").length);
said.push(document.getElementById("count").textContent);
location.hash = "#state-2";
window.dispatchEvent(new HashChangeEvent("hashchange"));
said.push("all " + document.querySelectorAll("main tbody tr[hidden]").length);
document.body.dataset.said = JSON.stringify(said);
</script></body>"""


def visit(browser: str, page: Path) -> tuple[str, list[str]]:
    """Open a page without a display; return what stands in it after its scripts, and what the console says."""
    command = [browser, "--headless", "--no-sandbox", "--disable-gpu", f"--user-data-dir={page.parent / 'profile'}"]
    done = run([*command, "--enable-logging=stderr", "--dump-dom", page.as_uri()], page.parent)
    assert done.stdout.startswith("<!DOCTYPE html>"), done.stderr
    return done.stdout, [line for line in done.stderr.splitlines() if ":CONSOLE" in line]


@pytest.fixture
def browser(request: pytest.FixtureRequest) -> str:
    return program(request, "chromium", "chromium-browser", "google-chrome", package="chromium")


def test_a_browser_has_nothing_to_complain_of(browser: str, tmp_path: Path) -> None:
    page = tmp_path / "report.html"
    page.write_text(write_html(sample(states=40)), encoding="utf-8")
    shown, console = visit(browser, page)
    assert console == []
    assert re.search(r'<html lang="en" class="live">', shown), "the script did not run to its end"


def test_a_state_shows_its_arrows_and_the_search_its_rows(browser: str, tmp_path: Path) -> None:
    text = re.sub(r'<meta http-equiv="Content-Security-Policy"[^>]*>', "", write_html(sample(states=5)))
    page = tmp_path / "probe.html"
    page.write_text(text.replace("</body>", PROBE), encoding="utf-8")
    shown, console = visit(browser, page)
    assert console == []
    said = re.search(r'data-said="(.*?)"', shown)
    assert said is not None
    assert json.loads(unescape(said.group(1))) == [
        "open true",
        "title 3 up",
        "Table 1 (1): 3, 3 of 5 failed",
        "Table 2 · From: 3 up (2): 3, 2; 3, 4",
        "Table 2 · To: 3 up (2): 2, 3; 4, 3",
        "picked 1",
        "closed true",
        "back true",
        "found 1",
        "1 / 36 rows",
        "all 0",
    ]


def test_the_policy_of_the_page_stops_a_script_that_is_not_its_own(browser: str, tmp_path: Path) -> None:
    page = tmp_path / "foreign.html"
    page.write_text(write_html(sample()).replace("</body>", "<script>document.title = 'x';</script></body>"))
    _, console = visit(browser, page)
    assert len(console) == 1
    assert "Content Security Policy" in console[0]


def test_the_page_is_valid_html(request: pytest.FixtureRequest) -> None:
    module(request, "html5lib", package="html5lib")
    import html5lib

    html5lib.HTMLParser(strict=True).parse(write_html(sample(states=10)))
