"""The page in a real browser: no request, no error, readable by everybody, in light, dark and print."""

import importlib.util
import os
import pathlib
import re
import shutil

import pytest
from campaigns_made import PLAN, append, lay_out, records, runaudit

ARGUMENTS = (
    "--no-sandbox", "--disable-gpu", "--disable-quic", "--no-first-run", "--disable-background-networking",
    "--disable-component-update", "--disable-sync",
)  # fmt: skip
WCAG_2_2_AA = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]
HOSTILE = "</svg><script>fetch('http://192.0.2.1/')</script><img src=x onerror=alert(1)>\"'$x^{2}$\u202e"


@pytest.fixture(scope="module")
def browser():
    """Chromium from the system's packages; a laptop may lack it, the continuous run may not."""
    path = shutil.which("chromium")
    if path is None:
        reason = "no chromium on the path (Debian: apt-get install --no-install-recommends chromium)"
        if os.environ.get("CI") == "true":
            pytest.fail(reason)
        pytest.skip(reason)
    from playwright.sync_api import sync_playwright

    with sync_playwright() as driver:
        opened = driver.chromium.launch(executable_path=path, headless=True, args=list(ARGUMENTS))
        yield opened
        opened.close()


@pytest.fixture(scope="module")
def report(tmp_path_factory):
    """The page of a campaign with a fault, an answer, a look, refused records and hostile names."""
    folder = tmp_path_factory.mktemp("browser")
    plan = lay_out(folder, PLAN.replace("Lattice relaxation", "<b>Lattice</b> & 'relaxation'"))
    runs = records(260, seed=3, step_at=120, failing=range(40, 50))
    for run in runs[60:]:
        if run["env"]["host"] == "h3":
            run["env"]["host"] = HOSTILE
    append(folder, [*runs, {"id": HOSTILE}])
    assert runaudit(plan, "gather").returncode == 0
    assert runaudit(plan, "compare").returncode == 0
    assert runaudit(plan, "answer", "W1", HOSTILE).returncode == 0
    path = folder / "report.html"
    done = runaudit(plan, "report", "-o", str(path))
    assert done.returncode == 0, done.stderr
    return path


class Opened:
    """A page opened, with everything that it asked for and complained of."""

    def __init__(self, browser, path, **context):
        self.context = browser.new_context(**context)
        self.page = self.context.new_page()
        self.requests, self.complaints = [], []
        self.page.on("request", lambda request: self.requests.append(request.url))
        self.page.on("console", lambda message: self.complaints.append(message.text))
        self.page.on("pageerror", lambda error: self.complaints.append(str(error)))
        self.page.on("dialog", lambda dialog: self.complaints.append(dialog.message))
        self.page.goto(path.as_uri())


@pytest.fixture(scope="module")
def opened(browser, report):
    return Opened(browser, report, viewport={"width": 1280, "height": 900})


def test_the_page_asks_the_network_for_nothing_and_complains_of_nothing(opened, report):
    """Only the file itself is loaded; no console message, no error, no dialog, hostile names or not."""
    assert opened.requests == [report.as_uri()]
    assert opened.complaints == []


def test_hostile_names_are_text(opened):
    """What a run is called is shown, never run or set as mark-up."""
    assert opened.page.locator("main script, main img, main iframe, main object").count() == 0
    assert "<script>fetch(" in opened.page.locator("main").inner_text()
    assert "\u202e" not in opened.page.content()
    assert opened.page.title() == "<b>Lattice</b> & 'relaxation': report"


def test_the_policy_forbids_script_and_requests(browser, report):
    """Neither a script nor an image put into the page runs or loads: the policy is in force."""
    page = Opened(browser, report)
    page.page.evaluate(
        """() => { const s = document.createElement('script'); s.textContent = 'window.ran = 1';
        document.body.append(s); const i = new Image(); i.src = 'http://192.0.2.1/x.png';
        document.body.append(i); }"""
    )
    page.page.wait_for_timeout(200)
    assert page.page.evaluate("() => window.ran") is None
    assert len(page.complaints) == 2
    assert all("Content Security Policy" in complaint for complaint in page.complaints)
    page.context.close()


def axe_source():
    """The engine's script, as a package of the registry ships it."""
    place = importlib.util.find_spec("axe_playwright_python").submodule_search_locations[0]
    return (pathlib.Path(place) / "axe.min.js").read_text(encoding="utf-8")


@pytest.mark.slow
@pytest.mark.parametrize(("scheme", "width"), [("light", 1600), ("dark", 400)])
def test_nothing_violates_wcag_2_2_aa(browser, report, scheme, width):
    """Axe-core finds no violation of WCAG 2.2 A and AA, details of one response and of the record open.

    The other responses' details are made by the same lines of the template.
    """
    page = Opened(browser, report, color_scheme=scheme, viewport={"width": width, "height": 900}).page
    page.evaluate(axe_source())
    page.evaluate(
        """() => document.querySelectorAll(
        'section:nth-of-type(2) details, section:nth-of-type(n + 6) details')
        .forEach(one => { one.open = true; })"""
    )
    assert page.locator("details[open] table").count() > 6
    found = page.evaluate(
        "tags => axe.run(document, {runOnly: {type: 'tag', values: tags}, resultTypes: ['violations']})",
        WCAG_2_2_AA,
    )
    shown = [(one["id"], [node["html"][:200] for node in one["nodes"][:3]]) for one in found["violations"]]
    assert shown == []
    assert len(found["passes"]) > 10
    page.context.close()


def test_axe_would_find_a_violation(opened, browser, report):
    """The check can fail: a picture without its text is found."""
    page = Opened(browser, report).page
    page.evaluate(axe_source())
    page.evaluate(
        """() => { const svg = document.querySelector('svg'); svg.removeAttribute('aria-labelledby');
        svg.querySelector('title').remove(); }"""
    )
    found = page.evaluate("() => axe.run(document, {runOnly: {type: 'rule', values: ['svg-img-alt']}})")
    assert "svg-img-alt" in [one["id"] for one in found["violations"]]
    page.context.close()


def test_every_picture_has_words_and_numbers(opened):
    """Each drawing names a title and a finding that are there, and has a table behind it."""
    pictures = opened.page.evaluate(
        """() => [...document.querySelectorAll('svg')].map(svg => ({
          words: svg.getAttribute('aria-labelledby').split(' ')
            .map(id => document.getElementById(id).textContent),
          rows: svg.closest('figure').querySelectorAll('tbody tr').length,
          says: svg.closest('figure').querySelector('figcaption p').textContent }))"""
    )
    assert len(pictures) > 10
    for picture in pictures:
        title, finding = picture["words"]
        assert title
        assert finding == picture["says"]
        assert picture["rows"] > 0


def test_everything_is_reached_by_keyboard(opened):
    """Tab stops at every link, detail and scrolled part, and each shows that it has the focus."""
    expected = opened.page.evaluate(
        """() => [...document.querySelectorAll('a[href], summary, [tabindex="0"]')]
        .filter(one => one.checkVisibility()).length"""
    )
    seen = 0
    opened.page.evaluate("() => document.body.focus()")
    for _ in range(expected):
        opened.page.keyboard.press("Tab")
        style = opened.page.evaluate("() => getComputedStyle(document.activeElement).outlineStyle")
        tag = opened.page.evaluate("() => document.activeElement.tagName")
        if tag == "BODY":
            break
        assert style == "solid", tag
        seen += 1
    assert seen == expected
    opened.page.evaluate("() => document.querySelector('summary').focus()")
    opened.page.keyboard.press("Enter")
    assert opened.page.evaluate("() => document.querySelector('details').open")


@pytest.mark.parametrize("media", ["light", "dark", "print"])
def test_colours_follow_the_reader(browser, report, media):
    """Light on dark where the reader wants it, dark on light otherwise and always on paper."""
    page = Opened(browser, report, color_scheme="light" if media == "light" else "dark").page
    if media == "print":
        page.emulate_media(media="print")
    paper, ink, drawn = page.evaluate(
        """() => [getComputedStyle(document.body).backgroundColor, getComputedStyle(document.body).color,
        getComputedStyle(document.querySelector('svg .f-ink')).fill]"""
    )
    brightness = [sum(map(int, re.findall(r"\d+", colour)[:3])) for colour in (paper, ink, drawn)]
    assert (brightness[0] > brightness[1]) == (media != "dark")
    assert ink == drawn
    page.context.close()


@pytest.mark.parametrize("width", [320, 400, 1600])
def test_the_page_never_scrolls_sideways(browser, report, width):
    """At any width only tables and wide drawings scroll, within themselves."""
    page = Opened(browser, report, viewport={"width": width, "height": 800}).page
    page.evaluate("() => document.querySelectorAll('details').forEach(one => { one.open = true; })")
    assert page.evaluate("() => document.documentElement.scrollWidth") <= width
    page.context.close()
