"""The report in a real browser, on a screen, a phone and paper.

Chromium is Debian's (`apt-get install chromium`); `.ci/run` installs it, and then asks for these
tests by SDEBENCH_TOOLS=required. Rules of accessibility are those of axe-core (WCAG 2.2 AA).
"""

import os
import shutil
from collections.abc import Iterator
from pathlib import Path

import pypdf
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Browser, Page, sync_playwright
from sdebench.reports.report import write_report

import sdebench as sb

CHROMIUM = shutil.which("chromium")
pytestmark = pytest.mark.skipif(
    CHROMIUM is None and os.environ.get("SDEBENCH_TOOLS") != "required",
    reason="no Chromium here; .ci/run installs one",
)
FLAGS = [
    *("--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run"),
    *("--disable-background-networking", "--disable-component-update", "--disable-sync"),
]
RULES = {"runOnly": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]}
SIZES = {"desktop": (1280, 900), "phone": (390, 844)}


@sb.scheme(strong=1.0, weak=1.0)
def uncorrected_step_of_the_operations_desk_of_the_island_grid(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@pytest.fixture(scope="module")
def refuted() -> sb.Evidence:
    return sb.measure(
        uncorrected_step_of_the_operations_desk_of_the_island_grid, on="gbm", looks=1, threads=1
    )


@pytest.fixture(scope="module")
def report(tmp_path_factory, refuted) -> Path:
    """Return the page of the default run, with a refuted scheme among the others."""
    default = sb.measure(looks=1, threads=1)
    return write_report([refuted, default], tmp_path_factory.mktemp("gallery") / "out")


@pytest.fixture(scope="module")
def small(tmp_path_factory, refuted) -> Path:
    """Return a page with two pairs, which has an element of every kind and is checked sooner."""
    sound = sb.measure("milstein", on="ramped-noise", looks=1, threads=1)
    return write_report([refuted, sound], tmp_path_factory.mktemp("small") / "out")


@pytest.fixture(scope="module")
def browser() -> Iterator[Browser]:
    with sync_playwright() as playwright:
        started = playwright.chromium.launch(executable_path=CHROMIUM, args=FLAGS)
        yield started
        started.close()


@pytest.fixture(scope="module", params=SIZES)
def opened(request, browser, report) -> Iterator[tuple[Page, list[str]]]:
    """Return the page, open, with what it asked for and complained of."""
    width, height = SIZES[request.param]
    context = browser.new_context(viewport={"width": width, "height": height})
    page, said = context.new_page(), []
    page.on("console", lambda message: said.append(f"console: {message.text}"))
    page.on("pageerror", lambda error: said.append(f"error: {error}"))
    page.on("request", lambda request: said.append(f"request: {request.url}"))
    page.goto(report.as_uri())
    yield page, said
    context.close()


def test_nothing_is_asked_for_but_the_page_and_nothing_is_complained_of(opened, report):
    _, said = opened
    assert [each for each in said if not each.startswith("request: data:")] == [
        f"request: {report.as_uri()}"
    ]


def test_nothing_is_wider_than_the_screen(opened):
    page, _ = opened
    width = page.evaluate("document.documentElement.clientWidth")
    assert page.evaluate("document.documentElement.scrollWidth") == width
    wide = """width => [...document.querySelectorAll("body *")].filter(each =>
        !each.closest(".scroll, svg, .skip") && each.getBoundingClientRect().right > width + 1
    ).map(each => each.outerHTML.slice(0, 80))"""
    assert page.evaluate(wide, width) == []


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("colours", ["light", "dark"])
def test_the_rules_of_accessibility_are_kept(browser, small, size, colours):
    width, height = SIZES[size]
    page = browser.new_page(viewport={"width": width, "height": height}, color_scheme=colours)
    page.goto(small.as_uri())
    found = Axe().run(page, options=RULES)
    page.close()
    assert [v["id"] for v in found.response["violations"]] == [], found.generate_report()
    assert found.response["passes"]


def test_every_link_leads_somewhere(opened, report):
    page, _ = opened
    links = page.eval_on_selector_all("a", "all => all.map(a => a.getAttribute('href'))")
    assert len(links) > 100
    for link in links:
        if link.startswith("#"):
            assert page.locator(f'[id="{link[1:]}"]').count() == 1, link
        else:
            assert (report.parent / link).is_file(), link


def test_no_two_elements_share_an_id(opened):
    page, _ = opened
    ids = page.eval_on_selector_all("[id]", "all => all.map(each => each.id)")
    assert len(ids) == len(set(ids)) > 100


def test_every_figure_has_words_for_what_it_shows(opened):
    page, _ = opened
    said = page.eval_on_selector_all("figure > svg", "all => all.map(s => s.ariaLabel)")
    assert len(said) == len(set(said)) > 40
    assert all(said)


def test_figures_follow_light_and_dark(opened):
    """The text of an axis is drawn in the ink of the page."""
    page, _ = opened
    seen = {}
    for colours in ("light", "dark"):
        page.emulate_media(color_scheme=colours)
        seen[colours] = page.evaluate(
            """() => [getComputedStyle(document.querySelector("figure svg text")).fill,
                      getComputedStyle(document.body).color]"""
        )
    assert seen["light"][0] == seen["light"][1] != seen["dark"][0] == seen["dark"][1]


def test_the_contents_are_reached_by_the_keyboard(opened):
    page, _ = opened
    page.evaluate("document.activeElement.blur(); window.scrollTo(0, 0)")
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.className") == "skip"
    page.keyboard.press("Enter")
    assert page.evaluate("location.hash") == "#claims"
    page.keyboard.press("Tab")
    assert page.evaluate("document.activeElement.closest('table, section') !== null")


def test_the_verdict_and_what_is_refuted_come_first(opened):
    page, _ = opened
    assert page.locator("h1").inner_text().startswith("Of 32 claims of 4 schemes on 7 problems, ")
    heads = page.eval_on_selector_all("h2", "all => all.map(h => h.textContent)")
    assert heads[:3] == ["What is not supported", "Claims", "Contents"]
    assert "One-step evidence, term dw²" in page.locator(".faults").inner_text()


@pytest.mark.parametrize("paper", ["A4", "Letter"])
def test_no_table_is_cut_and_no_heading_is_left_alone_on_paper(browser, small, paper, tmp_path):
    """Headings of sections are followed on their sheet by their sentences; captions by a row."""
    page = browser.new_page()
    page.goto(small.as_uri())
    titles = page.eval_on_selector_all("section.pair h2", "all => all.map(h => h.textContent)")
    captions = page.eval_on_selector_all(
        "table:has(caption)",
        """all => all.map(t => [t.caption.firstChild.textContent.trim(),
                                t.rows[t.rows.length - 1].textContent])""",
    )
    page.pdf(path=tmp_path / "page.pdf", format=paper)
    page.close()
    sheets = [sheet.extract_text() for sheet in pypdf.PdfReader(tmp_path / "page.pdf").pages]
    assert 3 < len(sheets) < 12
    packed = ["".join(sheet.split()) for sheet in sheets]
    for title in titles:
        head = "".join(title.split())
        (sheet,) = [text for text in packed if f"{head}strong" in text or f"{head}weak" in text]
        assert "Lines:theslopeofthe" in sheet, "its figures are on the sheet of a heading"
    assert captions
    for caption, last in captions:
        ends = ["".join(text.split()) for text in (caption, last)]
        assert any(all(end in sheet for end in ends) for sheet in packed), caption
    for sheet in sheets:
        lines = [line.strip() for line in sheet.splitlines() if line.strip()]
        assert lines[-1] not in titles
        assert not lines[-1].startswith(("Strong error", "Weak error", "Sample that"))
        assert not lines[-1].startswith(("steps h error", "of steps h"))
