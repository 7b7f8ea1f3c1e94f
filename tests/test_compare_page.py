"""The comparison's page: one document that loads nothing, by mouse, touch and keyboard, in any light.

What it does is seen in headless Chromium, driven by Playwright; where either is missing these tests are
skipped and say so.
"""

import base64
import hashlib
import io
import os
import re
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from live_browser import browser as opened
from live_browser import chromium
from PIL import Image

import pinsim
from pinsim import Camera, Film, Hole, Scene

# Playwright leaves its pipe to the interpreter's end.
pytestmark = pytest.mark.filterwarnings("ignore::ResourceWarning")

NAME = 'Yard <b>&"quoted"</b>'
PATCH = (0.3, 0.7)  # a red patch in a grey place, shares of the picture


def box(hole_mm):
    return Camera(
        name=f"Box & {hole_mm:g}",
        focal_length_mm=20.0,
        hole=Hole(diameter_mm=hole_mm),
        film=Film(width_mm=8.0, height_mm=6.0),
    )


def compared(*holes_mm):
    """Stripes that a small hole draws and a large one does not, and a red patch."""
    light = np.where(np.arange(640) // 8 % 2, 0.9, 0.1).astype(np.float32)
    light = np.repeat(np.repeat(light[None, :, None], 480, axis=0), 3, axis=2)
    # The film sees 22.6 of the photo's 40 degrees across: its frame is this share of the photo.
    share = 0.2 / np.tan(np.radians(20.0))
    column, row = ((0.5 + share * (one - 0.5)) for one in PATCH)
    row = 0.5 + share * (PATCH[1] - 0.5) * (6.0 / 8.0) / (480.0 / 640.0)
    light[
        round(480 * row) - 24 : round(480 * row) + 24,
        round(640 * column) - 24 : round(640 * column) + 24,
    ] = (0.9, 0.05, 0.05)
    scene = Scene.from_light(light, horizontal_view_deg=40.0, name=NAME)
    return pinsim.compare(scene, [box(one) for one in holes_mm], wavelength_nm=550.0)


@pytest.fixture(scope="module")
def two():
    return compared(0.12, 1.0)


@pytest.fixture(scope="module")
def files(two, tmp_path_factory):
    folder = tmp_path_factory.mktemp("pages")
    two.save_page(folder / "two.html")
    compared(0.12, 0.4, 1.0).save_page(folder / "three.html")
    return {number: folder / f"{number}.html" for number in ("two", "three")}


# The document -------------------------------------------------------------------------------------


class Elements(HTMLParser):
    """Every element with its attributes, and the text of scripts and styles."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.found, self.inside = [], {"script": "", "style": ""}
        self._open = None
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.found.append((tag, dict(attrs)))
        self._open = tag

    def handle_endtag(self, tag):
        self._open = None

    def handle_data(self, data):
        if self._open in self.inside:
            self.inside[self._open] += data

    def all(self, tag):
        return [attributes for name, attributes in self.found if name == tag]


@pytest.fixture(scope="module")
def elements(two):
    return Elements(two.html())


def test_the_document_names_nothing_outside_itself(two, elements):
    text = two.html()
    assert not re.search(r"(?:https?:)?//[a-z]", re.sub(r"base64,[A-Za-z0-9+/=]+", "", text))
    for _, attributes in elements.found:
        for key in ("src", "href"):
            assert attributes.get(key, "data:").startswith("data:")
        assert "style" not in attributes  # the policy would not let it act
        assert not any(key.startswith("on") for key in attributes)


def test_the_policy_lets_only_this_style_and_this_script_act(elements):
    """CSP Level 3: 'sha256-' and the base64 digest of the element's text, as UTF-8."""
    policy = next(
        one["content"]
        for one in elements.all("meta")
        if one.get("http-equiv") == "Content-Security-Policy"
    )
    assert "unsafe" not in policy
    assert policy.startswith("default-src 'none'; ")
    for kind in ("script", "style"):
        digest = hashlib.sha256(elements.inside[kind].encode()).digest()
        assert f"{kind}-src 'sha256-{base64.b64encode(digest).decode()}'" in policy


def test_the_document_can_be_read_aloud(two, elements):
    """Language, one first heading, texts for all pictures, a real table (WCAG 2.2, 1.1.1 and 1.3.1)."""
    assert elements.all("html")[0]["lang"] == "en"
    levels = [int(tag[1]) for tag, _ in elements.found if re.fullmatch("h[1-6]", tag)]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert set(levels) == {1, 2}
    assert all(one["alt"] for one in elements.all("img"))
    assert elements.all("caption")
    assert all(one["scope"] in {"col", "row", "rowgroup"} for one in elements.all("th"))
    assert two.verdict in two.html().replace("&#x27;", "'")
    ids = [attributes["id"] for _, attributes in elements.found if "id" in attributes]
    assert len(ids) == len(set(ids))


def test_names_are_words_and_not_markup(two, elements):
    assert "<b>&" not in two.html()
    assert any(NAME in one["alt"] for one in elements.all("img"))


def test_all_pictures_are_of_one_size(elements):
    sizes = []
    for one in elements.all("img")[:2]:
        data = base64.b64decode(one["src"].removeprefix("data:image/jpeg;base64,"))
        with Image.open(io.BytesIO(data)) as image:
            sizes.append(image.size)
            assert image.size == (int(one["width"]), int(one["height"]))
    assert sizes[0] == sizes[1]


def test_the_page_is_smaller_than_six_megabytes(files):
    for file in files.values():
        assert file.stat().st_size < 6_000_000


# In a browser -------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def browser():
    if chromium() is None:
        pytest.skip("Chromium is not on this machine (Debian: apt-get install chromium)")
    pytest.importorskip(
        "playwright.sync_api", reason="Playwright is not installed (pip install playwright)"
    )
    with opened() as started:
        yield started


@pytest.fixture
def visit(browser, files):
    """Return a function that opens a page; at the end nothing was asked for and nothing complained."""
    contexts, asked, said = [], [], []

    def go(number="two", *, width=1280, height=900, **options):
        context = browser.new_context(viewport={"width": width, "height": height}, **options)
        contexts.append(context)

        def answer(route):
            url = route.request.url
            if url == files[number].as_uri():
                route.continue_()
                return
            asked.append(url)
            route.abort()

        context.route("**/*", answer)
        page = context.new_page()
        page.on("console", lambda one: said.append(one.text) if one.type == "error" else None)
        page.on("pageerror", lambda error: said.append(str(error)))
        page.goto(files[number].as_uri())
        page.wait_for_function("document.documentElement.classList.contains('live')")
        page.evaluate("Promise.all([...document.images].map((one) => one.decode()))")
        page.wait_for_timeout(150)
        return page

    go.said = said
    yield go
    for context in contexts:
        context.close()
    assert asked == []
    assert said == []


def value(page):
    return int(page.locator("#divider").get_attribute("aria-valuenow"))


def stage_box(page):
    return page.locator("#stage").bounding_box()


def shot(page):
    """Return the stage as it is on the screen, (rows, columns, 3)."""
    with Image.open(io.BytesIO(page.locator("#stage").screenshot())) as image:
        return np.asarray(image.convert("RGB")).astype(int)


def drag(page, to):
    box = stage_box(page)
    y = box["y"] + 0.5 * box["height"]
    handle = page.locator("#divider").bounding_box()
    # At an end half of the handle lies outside the picture, and only the other half can be taken.
    middle = handle["x"] + 0.5 * handle["width"]
    page.mouse.move(min(max(middle, box["x"] + 5), box["x"] + box["width"] - 5), y)
    page.mouse.down()
    page.mouse.move(box["x"] + to * box["width"], y, steps=5)
    page.mouse.up()


def loupe(page):
    """Return the middle of both loupe pictures: mean red, green, blue of each."""
    return page.evaluate(
        """["loupe-left", "loupe-right"].map((id) => {
            const canvas = document.getElementById(id), size = canvas.width;
            const part = canvas.getContext("2d").getImageData(size * 0.45, size * 0.45, 8, 8).data;
            const sum = [0, 0, 0];
            for (let i = 0; i < part.length; i += 4) for (const k of [0, 1, 2]) sum[k] += part[i + k];
            return sum.map((one) => one / 64);
        })"""
    )


def test_the_divider_is_dragged_across_the_pictures(visit):
    page = visit()
    drag(page, 1.2)
    assert value(page) == 100
    first = shot(page)
    drag(page, -0.2)
    assert value(page) == 0
    second = shot(page)
    drag(page, 0.25)
    assert value(page) == 25
    both = shot(page)
    columns = both.shape[1]
    left, right = slice(40, columns // 5 - 10), slice(columns * 2 // 5, columns - 60)
    rows = slice(60, both.shape[0] - 60)
    assert np.abs(first[rows, right] - second[rows, right]).mean() > 20.0  # they are unlike
    np.testing.assert_allclose(both[rows, left], first[rows, left], atol=2)
    np.testing.assert_allclose(both[rows, right], second[rows, right], atol=2)


def test_the_divider_is_moved_by_keys(visit):
    """The keys of a slider (WAI-ARIA Authoring Practices: arrows, Page Up and Down, Home, End)."""
    page = visit()
    page.locator("#divider").focus()
    for key, expected in (
        *(("ArrowRight", 51), ("ArrowUp", 52), ("ArrowLeft", 51), ("ArrowDown", 50)),
        *(("Shift+ArrowRight", 60), ("PageUp", 70), ("PageDown", 60), ("End", 100)),
        *(("ArrowRight", 100), ("Home", 0), ("ArrowLeft", 0), ("Escape", 50)),
    ):
        page.keyboard.press(key)
        assert value(page) == expected, key
    page.keyboard.press("ArrowRight")
    text = page.locator("#divider").get_attribute("aria-valuetext")
    assert text == "51 percent A, 49 percent B"


def test_arrow_keys_move_the_divider_before_anything_has_the_focus(visit):
    page = visit()
    page.keyboard.press("ArrowLeft")
    assert value(page) == 49
    page.keyboard.press("2")  # a letter or number is for who is in the viewer
    assert page.locator("button[aria-pressed=true]").count() == 0


def test_the_pointer_shows_the_same_place_of_both_under_the_loupe(visit):
    page = visit()
    start = loupe(page)
    box = stage_box(page)
    page.mouse.move(box["x"] + PATCH[0] * box["width"], box["y"] + PATCH[1] * box["height"])
    for (red, green, blue), before in zip(loupe(page), start, strict=True):
        assert red > 120.0
        assert max(green, blue) < 0.5 * red
        assert abs(before[0] - before[1]) < 12.0  # where it stood at first nothing is red
    assert page.locator("#ring").is_visible()
    ring = page.locator("#ring").bounding_box()
    middle = (ring["x"] + 0.5 * ring["width"] - box["x"]) / box["width"]
    assert middle == pytest.approx(PATCH[0], abs=0.01)
    page.locator("#stage").click(position={"x": 10, "y": 10})
    page.keyboard.press("Escape")
    assert not page.locator("#ring").is_visible()


def test_keys_step_through_the_details(visit):
    page = visit()
    page.locator("#divider").focus()
    pressed = page.locator("button[aria-pressed=true]")
    names = page.locator("button[data-place]").all_inner_texts()
    assert len(names) == 3
    order = [("n", 0), ("n", 1), ("n", 2), ("n", 0), ("p", 2), ("2", 1), ("p", 0), ("3", 2)]
    for key, number in order:
        page.keyboard.press(key)
        assert pressed.all_inner_texts() == [names[number]], key
        assert "cycles per degree" in page.locator("#status").inner_text()
    page.keyboard.press("9")
    assert pressed.all_inner_texts() == [names[2]]
    wide = page.locator("#ring").bounding_box()["width"]
    page.keyboard.press("+")
    assert page.locator("#ring").bounding_box()["width"] < wide
    page.keyboard.press("Escape")
    assert pressed.count() == 0
    assert page.locator("#status").inner_text() == "Point at the picture, or choose a detail."


def test_buttons_do_what_the_keys_do(visit):
    page = visit()
    page.get_by_role("button", name="corner").click()
    assert page.locator("button[aria-pressed=true]").inner_text().endswith("corner")
    page.keyboard.press("ArrowLeft")  # the button has the focus, not the divider
    page.get_by_role("button", name="Back to the start").click()
    assert page.locator("button[aria-pressed=true]").count() == 0


def test_fingers_drag_the_divider_and_move_the_loupe(visit):
    page = visit(width=380, height=800, has_touch=True, is_mobile=True)
    page.locator("#stage").scroll_into_view_if_needed()
    box = stage_box(page)
    page.touchscreen.tap(box["x"] + PATCH[0] * box["width"], box["y"] + PATCH[1] * box["height"])
    red, green, _ = loupe(page)[0]
    assert red > 2.0 * green
    touch = page.context.new_cdp_session(page)
    y = box["y"] + 0.3 * box["height"]
    for kind, share in (("Start", 0.5), ("Move", 0.6), ("Move", 0.8)):
        point = {"x": box["x"] + share * box["width"], "y": y}
        touch.send("Input.dispatchTouchEvent", {"type": f"touch{kind}", "touchPoints": [point]})
    touch.send("Input.dispatchTouchEvent", {"type": "touchEnd", "touchPoints": []})
    assert value(page) == pytest.approx(80, abs=1)


def test_a_screen_reader_finds_slider_table_and_verdict(visit, two):
    page = visit()
    tree = page.locator("main").aria_snapshot()
    assert 'slider "Divider: how much of the left picture is seen"' in tree
    assert 'columnheader "A 0.12 mm"' in tree
    assert 'rowheader "centre"' in tree
    assert re.search(r'cell ".*finer"', tree)
    assert two.verdict in tree
    assert tree.count('heading "') >= 6
    assert re.search(r'img "A: .*Box & 0.12', tree)


ROOT = Path(__file__).parent.parent
AXE = Path(os.environ.get("AXE_CORE", ROOT / ".ci/node/node_modules/axe-core/axe.min.js"))


@pytest.mark.skipif(not AXE.exists(), reason="axe-core is not here (npm install axe-core)")
@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("number", ["two", "three"])
def test_the_rules_of_accessibility_are_kept(visit, number, scheme):
    """The rules of axe-core for WCAG 2.2, A and AA, and its good practice."""
    page = visit(number, color_scheme=scheme)
    page.evaluate(AXE.read_text("utf-8"))
    broken = page.evaluate("axe.run().then((found) => found.violations)")
    assert [(one["id"], one["nodes"][0]["html"][:200]) for one in broken] == []


@pytest.mark.parametrize("number", ["two", "three"])
@pytest.mark.parametrize("width", [380, 1280, 2200])
def test_nothing_reaches_beyond_the_window(visit, number, width):
    page = visit(number, width=width)
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    stage, window = stage_box(page), page.viewport_size
    assert stage["width"] <= window["width"]
    assert stage["height"] <= window["height"]
    # A detail is square, whatever the window.
    for image in page.locator(".details img").all():
        size = image.bounding_box()
        assert size["width"] == pytest.approx(size["height"], abs=1.0)


def luminance(colour):
    """WCAG 2.2, relative luminance."""
    channels = [int(one) / 255.0 for one in re.findall(r"\d+", colour)[:3]]
    red, green, blue = (
        one / 12.92 if one <= 0.04045 else ((one + 0.055) / 1.055) ** 2.4 for one in channels
    )
    return 0.2126 * red + 0.7152 * green + 0.0722 * blue


@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_words_stand_out_from_their_ground(visit, scheme):
    """WCAG 2.2, 1.4.3: a contrast of 4.5 at least."""
    page = visit(color_scheme=scheme)
    grounds = []
    for place in (".verdict", ".faint", ".mark", ".letter", "td", "caption", "button", "h2"):
        colour, ground = page.evaluate(
            """(place) => {
                let one = document.querySelector(place), ground = "";
                const colour = getComputedStyle(one).color;
                while (one && (!ground || ground === "rgba(0, 0, 0, 0)")) {
                    ground = getComputedStyle(one).backgroundColor;
                    one = one.parentElement;
                }
                return [colour, ground];
            }""",
            place,
        )
        light, dark = sorted((luminance(colour), luminance(ground)), reverse=True)
        assert (light + 0.05) / (dark + 0.05) >= 4.5, place
        grounds.append(luminance(ground))
    assert (grounds[0] < 0.1) == (scheme == "dark")


def test_nothing_moves_by_itself_for_who_asked_for_less_motion(visit):
    for motion, expected in (("no-preference", "0.12s, 0.12s"), ("reduce", "0s")):
        page = visit(reduced_motion=motion)
        style = "getComputedStyle(document.querySelector('button')).transitionDuration"
        assert page.evaluate(style) == expected


def test_two_of_three_designs_are_chosen(visit):
    page = visit("three")
    assert page.locator("#tag-left").inner_text() == "A"
    before = shot(page)
    page.get_by_label("Right:").select_option(index=2)
    assert page.locator("#tag-right").inner_text() == "C"
    assert np.abs(shot(page) - before).max() > 10
    # The same on both sides would show nothing: they change places.
    page.get_by_label("Left:").select_option(index=2)
    assert page.locator("#tag-left").inner_text() == "C"
    assert page.locator("#tag-right").inner_text() == "A"
    assert page.get_by_label("Right:").input_value() == "0"


def test_the_policy_stops_what_does_not_belong(visit):
    """Neither a request nor a script that somebody added would act."""
    page = visit()
    page.evaluate(
        """() => {
            const script = document.createElement("script");
            script.textContent = "window.added = true";
            document.body.append(script);
        }"""
    )
    assert page.evaluate("window.added") is None
    assert "violates the following Content Security Policy" in visit.said.pop()


def test_without_its_script_the_page_still_shows_everything(browser, files):
    context = browser.new_context(java_script_enabled=False)
    page = context.new_page()
    page.goto(files["three"].as_uri())
    for image in page.locator("#stage img").all():
        assert image.is_visible()
    assert page.locator("table").is_visible()
    assert not page.locator("#divider").is_visible()
    context.close()
