"""The report in a real browser: nothing is fetched, nothing runs, everyone can read it.

Needed are Chromium (Debian package ``chromium``, or ``SIMIMG_CHROMIUM`` with its path), the Python
package playwright that steers it, and for the rules of accessibility axe-core (npm, or
``SIMIMG_AXE`` with the path of its axe.min.js). Without them these tests skip and say so.
"""

import functools
import os
import shutil
import subprocess
from pathlib import Path

import pytest

from simimg.show.report import report
from tests.show.pages import Page
from tests.show.test_report import TITLE, hostile_scene

WIDTHS = (1280, 390)
PAPER = 680  # dots of a screen on a sheet of A4 between its margins


def chromium():
    """Path of Chromium, or None."""
    return os.environ.get("SIMIMG_CHROMIUM") or shutil.which("chromium")


@functools.cache
def axe_script():
    """axe-core's script; None where it is not installed."""
    places = [Path(__file__).resolve().parents[2] / "node_modules"]
    if shutil.which("npm"):
        asked = subprocess.run(["npm", "root", "-g"], capture_output=True, text=True, check=False)
        places.append(Path(asked.stdout.strip()))
    files = [place / "axe-core" / "axe.min.js" for place in places]
    if "SIMIMG_AXE" in os.environ:
        files.insert(0, Path(os.environ["SIMIMG_AXE"]))
    return next((file.read_text() for file in files if file.is_file()), None)


@pytest.fixture(scope="module")
def browser():
    driver = pytest.importorskip("playwright.sync_api", reason="needs the package playwright")
    path = chromium()
    if path is None:
        pytest.skip("needs Chromium (Debian package chromium)")
    with driver.sync_playwright() as started:
        one = started.chromium.launch(
            executable_path=path, args=["--no-sandbox", "--disable-dev-shm-usage"]
        )
        yield one
        one.close()


@pytest.fixture(scope="module")
def html():
    return report(hostile_scene(), trials=3).html


@pytest.fixture(scope="module")
def file(html, tmp_path_factory):
    path = tmp_path_factory.mktemp("page") / "report.html"
    path.write_text(html, encoding="utf-8")
    return path


class Watched:
    """A page, what it said on the console, and what it asked for."""

    def __init__(self, browser, file, width=1280):
        self.said, self.asked = [], []
        self.page = browser.new_page(viewport={"width": width, "height": 900})
        self.page.on("console", lambda message: self.said.append(message.text))
        self.page.on("pageerror", lambda error: self.said.append(str(error)))
        self.page.on("request", lambda request: self.asked.append(request.url))
        self.page.goto(file.as_uri(), wait_until="networkidle")

    def axe(self):
        """Serious and critical findings of axe-core."""
        script = axe_script()
        if script is None:
            pytest.skip("needs axe-core (npm install -g axe-core)")
        # The page's own policy forbids scripts; the driver's tools stand outside of it.
        self.page.evaluate(script)
        found = self.page.evaluate("axe.run()")
        assert len(found["passes"]) > 10
        return [one for one in found["violations"] if one["impact"] in ("serious", "critical")]


@pytest.fixture(scope="module", params=WIDTHS)
def watched(request, browser, file):
    one = Watched(browser, file, width=request.param)
    yield one
    one.page.close()


def test_no_error_and_no_request(watched, file):
    assert watched.said == []
    assert {one for one in watched.asked if not one.startswith("data:")} == {file.as_uri()}
    assert watched.page.title() == " ".join(TITLE.split())


def test_every_picture_is_drawn_and_has_its_words(watched):
    found = watched.page.evaluate(
        "[...document.querySelectorAll('img, svg')].map(one => "
        "[one.alt || one.getAttribute('aria-label') || '', one.naturalWidth, one.clientWidth])"
    )
    assert len(found) == 4
    for words, drawn, shown in found:
        assert len(words) > 40
        assert drawn > 300
        assert shown > 300


def test_the_page_is_no_wider_than_the_screen(watched):
    width, screen = watched.page.evaluate("[document.documentElement.scrollWidth, innerWidth]")
    assert width == screen
    # Tables scroll within their own boxes, and some must on a phone.
    boxes = watched.page.evaluate(
        "[...document.querySelectorAll('.scroll')].map(box => box.scrollWidth > box.clientWidth)"
    )
    assert any(boxes) or screen > 390


def test_letters_are_large_enough(watched):
    least = watched.page.evaluate(
        "Math.min(...[...document.querySelectorAll('p, li, td, th, figcaption, pre, a')]"
        ".map(one => parseFloat(getComputedStyle(one).fontSize)))"
    )
    assert least >= 12.0


def test_axe_finds_nothing_serious(watched):
    assert [(one["id"], one["nodes"][0]["html"]) for one in watched.axe()] == []


def test_axe_would_find_what_is_wrong(browser, html, tmp_path):
    spoilt = html.replace('lang="en"', "").replace(' alt="', ' data-alt="')
    path = tmp_path / "spoilt.html"
    path.write_text(spoilt, encoding="utf-8")
    one = Watched(browser, path)
    assert {"html-has-lang", "image-alt"} <= {finding["id"] for finding in one.axe()}
    one.page.close()


def test_the_policy_holds_what_slips_in(browser, html, tmp_path):
    trap = (
        "<script>document.title = 'caught'</script>"
        "<img src='https://saltmarsh.invalid/x.png' alt='x' onerror=\"document.title='caught'\">"
        "<p style='position: fixed'>styled</p></main>"
    )
    path = tmp_path / "trap.html"
    path.write_text(html.replace("</main>", trap), encoding="utf-8")
    one = Watched(browser, path)
    assert one.page.title() != "caught"
    assert len([text for text in one.said if "Content Security Policy" in text]) >= 3
    assert one.page.evaluate("getComputedStyle(document.querySelector('main > p')).position") == (
        "static"
    )
    one.page.close()


def test_the_files_are_saved_under_their_names(browser, html, file, tmp_path):
    one = Watched(browser, file)
    files = Page(html).files()
    links = one.page.locator("a[download]")
    assert links.count() == len(files)
    for place, (name, content) in enumerate(files.items()):
        if place % 8 == 7:
            one.page.reload()  # Chromium holds back the eleventh file that one page gives in a row
        with one.page.expect_download() as waiting:
            links.nth(place).click()
        assert waiting.value.suggested_filename == name
        saved = tmp_path / name
        waiting.value.save_as(saved)
        assert saved.read_bytes() == content
    one.page.close()


def test_by_the_keyboard(browser, file):
    one = Watched(browser, file)

    def focused(what):
        return one.page.evaluate(f"document.activeElement.{what}")

    one.page.keyboard.press("Tab")
    assert focused("textContent") == "Skip to the content"
    left = one.page.evaluate("document.activeElement.getBoundingClientRect().left")
    assert left >= 0.0, "what has the focus must be seen"
    assert one.page.evaluate("getComputedStyle(document.activeElement).outlineStyle") == "solid"
    one.page.keyboard.press("Enter")
    assert focused("id") == "content"
    # From there every table's box can be reached, and scrolled.
    for _ in range(3):
        one.page.keyboard.press("Tab")
        if focused("className") == "scroll":
            break
    assert focused("tagName") == "DIV"
    one.page.close()


def test_on_paper(browser, file):
    one = Watched(browser, file, width=PAPER)
    one.page.emulate_media(media="print")
    width, paper = one.page.evaluate("[document.documentElement.scrollWidth, innerWidth]")
    assert width == paper, "a printer would cut off what is wider"
    shown = "one => getComputedStyle(one).display"
    assert one.page.locator("nav").evaluate(shown) == "none"
    assert one.page.locator("p.files").first.evaluate(shown) == "none"
    assert one.page.locator("h1").evaluate(shown) == "block"
    assert one.page.locator(".stamp").evaluate(shown) != "none"
    assert one.page.pdf(format="A4").startswith(b"%PDF")
    one.page.close()
