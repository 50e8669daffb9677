"""Reports in a browser: they open, say all that is drawn, ask for nothing, and fit a narrow screen."""

from __future__ import annotations

import shutil

import pytest

playwright = pytest.importorskip("playwright.sync_api", reason="playwright is not installed; .ci/run installs it")

CHROMIUM = next((found for name in ("chromium", "chromium-browser") if (found := shutil.which(name))), None)
pytestmark = pytest.mark.skipif(CHROMIUM is None, reason="no Chromium on this machine")

FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)
KINDS = ("cross-section", "k-coefficient", "profile", "alone")


@pytest.fixture(scope="module")
def browser():
    with playwright.sync_playwright() as started:
        opened = started.chromium.launch(executable_path=CHROMIUM, args=list(FLAGS))
        yield opened
        opened.close()


@pytest.fixture
def shown(browser, pages):
    """Open a report as a reader would, with what went wrong and what was asked for noted."""
    contexts = []

    def show(kind, width=1000, scheme="light"):
        context = browser.new_context(viewport={"width": width, "height": 800}, color_scheme=scheme)
        contexts.append(context)
        page = context.new_page()
        page.faults, page.asked = [], []
        page.on("console", lambda message: page.faults.append(message.text))
        page.on("pageerror", lambda error: page.faults.append(str(error)))
        page.on("request", lambda request: page.asked.append(request.url))
        page.goto(pages[kind].as_uri())
        page.wait_for_load_state("networkidle")
        return page

    yield show
    for context in contexts:
        context.close()


@pytest.mark.parametrize("kind", KINDS)
def test_it_opens_without_a_fault_and_asks_for_nothing(shown, pages, kind):
    page = shown(kind)
    assert page.faults == []
    assert page.asked == [pages[kind].as_uri()]
    assert page.title()


@pytest.mark.parametrize("kind", KINDS)
def test_every_picture_has_a_name_and_is_seen(shown, kind):
    page = shown(kind)
    pictures = page.locator("svg[role=img]")
    assert pictures.count() >= 3
    for place in range(pictures.count()):
        picture = pictures.nth(place)
        box = picture.bounding_box()
        assert box["width"] > 500
        assert box["height"] > 80
        assert len(picture.locator("desc").text_content()) > 40
    named = page.get_by_role("img")
    assert named.count() == pictures.count()


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("width", [320, 400, 1000])
def test_nothing_hangs_over_the_edge(shown, kind, width):
    page = shown(kind, width)
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    # Pictures may be scrolled within their own frames; no text may hang over the page.
    over = page.evaluate(
        f"""[...document.querySelectorAll('p,dd,dt,td,th,pre,h1,h2,h3,figcaption,li')]
        .filter(one => one.getBoundingClientRect().right > {width} && !one.closest('thead')).length"""
    )
    assert over == 0


@pytest.mark.parametrize("kind", KINDS)
def test_words_in_a_picture_stay_inside_it_and_apart(shown, kind):
    page = shown(kind)
    found = page.evaluate(
        """[...document.querySelectorAll('svg[role=img]')].flatMap(svg => {
        const frame = svg.getBoundingClientRect();
        const words = [...svg.querySelectorAll('text')].filter(one => one.textContent);
        const boxes = words.map(one => [one.textContent, one.getBoundingClientRect()]);
        const out = boxes.filter(([_, b]) => b.left < frame.left - 1 || b.right > frame.right + 1
            || b.top < frame.top - 1 || b.bottom > frame.bottom + 1).map(([word, _]) => 'outside: ' + word);
        for (let i = 0; i < boxes.length; i++) for (let j = 0; j < i; j++) {
            const [a, b] = [boxes[i][1], boxes[j][1]];
            const wide = Math.min(a.right, b.right) - Math.max(a.left, b.left);
            const high = Math.min(a.bottom, b.bottom) - Math.max(a.top, b.top);
            if (wide > 2 && high > 3) out.push(boxes[i][0] + ' over ' + boxes[j][0]);
        }
        return out; })"""
    )
    assert found == []


def _luminance(colour: str) -> float:
    parts = [float(one) / 255.0 for one in colour[colour.index("(") + 1 : -1].split(",")[:3]]
    linear = [one / 12.92 if one <= 0.04045 else ((one + 0.055) / 1.055) ** 2.4 for one in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_words_stand_out_on_light_and_on_dark(shown, scheme):
    """Contrast as the Web Content Accessibility Guidelines 2.1 define it: 4.5 for text, 3 for what is drawn."""
    page = shown("cross-section", scheme=scheme)

    def colour(selector, name):
        script = "([selector, name]) => getComputedStyle(document.querySelector(selector))[name]"
        return _luminance(page.evaluate(script, [selector, name]))

    paper = colour("body", "backgroundColor")
    assert (paper < 0.05) is (scheme == "dark")

    def contrast(other):
        return (max(paper, other) + 0.05) / (min(paper, other) + 0.05)

    assert contrast(colour("body", "color")) > 7.0
    for selector in (".soft", ".agrees", "figcaption", "dt"):
        assert contrast(colour(selector, "color")) > 4.5, selector
    curves = page.evaluate(
        "[...new Set([...document.querySelectorAll('svg .curve')].map(one => getComputedStyle(one).stroke))]"
    )
    assert len(curves) >= 2
    for one in curves:
        assert contrast(_luminance(one)) > (3.0 if scheme == "dark" else 2.5), one


def test_on_paper_it_is_dark_on_white(shown):
    page = shown("cross-section", scheme="dark")
    page.emulate_media(media="print")
    assert page.evaluate("getComputedStyle(document.body).backgroundColor") == "rgb(255, 255, 255)"
    assert page.evaluate("getComputedStyle(document.body).color") == "rgb(0, 0, 0)"
    assert len(page.pdf(format="A4")) > 20_000
