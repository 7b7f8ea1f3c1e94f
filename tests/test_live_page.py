"""The page of pinsim live, used as a builder uses it: in a real browser, against the real server.

References: the figures of `pinsim numbers --json` for the same design, designs read back by
Camera.load, pictures read back by Pillow, the accessibility rules of axe-core (WCAG 2.2 A and AA),
the ID-1 card of ISO/IEC 7810 (85.60 mm). Needs Chromium and Playwright; axe-core too for the audit.
"""

import base64
import io
import json
import os
import re
from pathlib import Path

import numpy as np
import pytest
from conftest import landscape_codes
from live_browser import browser, chromium, drawn, live, settled
from PIL import Image

from pinsim import Camera

pytest.importorskip("playwright.sync_api", reason="the page's checks need playwright")
pytest.importorskip("starlette", reason="the page's checks need pinsim[live]")
pytestmark = [
    pytest.mark.skipif(chromium() is None, reason="the page's checks need chromium"),
    # Playwright leaves its pipe to the interpreter's end.
    pytest.mark.filterwarnings("ignore::ResourceWarning"),
]

CARD_MM = 85.60  # ISO/IEC 7810, ID-1
ROOT = Path(__file__).parent.parent
AXE = Path(os.environ.get("AXE_CORE", ROOT / ".ci/node/node_modules/axe-core/axe.min.js"))


@pytest.fixture(scope="module")
def address(tmp_path_factory):
    with live(folder=tmp_path_factory.mktemp("live")) as found:
        yield found


@pytest.fixture(scope="module")
def chrome():
    with browser() as started:
        yield started


class Looker:
    """A page, with everything it said on its console and asked of the network."""

    def __init__(self, chrome, address, **options):
        self.address = address
        self.context = chrome.new_context(
            **{"viewport": {"width": 1440, "height": 900}, "accept_downloads": True, **options}
        )
        self.context.set_default_timeout(15_000)
        self.page = self.context.new_page()
        self.complaints = []
        self.asked = []
        self.page.on("console", self._heard)
        self.page.on("pageerror", lambda error: self.complaints.append(str(error)))
        self.page.on("request", lambda request: self.asked.append(request.url))

    def _heard(self, message):
        # A refusal is told on the page; the browser writes its status to the console by itself.
        refused = re.search(r"status of (4\d\d)", message.text)
        if message.type in ("error", "warning") and not refused:
            self.complaints.append(message.text)

    def open(self, state="#hole_mm=0.3"):
        # One distance unless the test is about distances: that draws faster.
        quick = "" if "distance_mm" in state else "&distance_mm=infinity"
        self.page.goto(self.address + state + quick)
        drawn(self.page)
        return self.page

    def close(self):
        self.context.close()
        # Every test ends with this: nothing complained, nothing was asked of another machine.
        assert self.complaints == []
        own = self.address.split("/open")[0]
        assert [
            url for url in self.asked if not url.startswith((own, "blob:" + own, "data:"))
        ] == []


@pytest.fixture
def look(chrome, address):
    looker = Looker(chrome, address)
    yield looker
    looker.close()


def state_of(page):
    return page.evaluate("pinsimState()")


def pixels(page, canvas="picture"):
    """Return what is on a canvas, (rows, columns, 3)."""
    url = page.evaluate("(id) => document.getElementById(id).toDataURL('image/png')", canvas)
    data = base64.b64decode(url.partition(",")[2])
    return np.asarray(Image.open(io.BytesIO(data)).convert("RGB"), np.float32)


def unsharp(page):
    """Return how much neighbouring pixels differ: more in a sharper picture."""
    return float(np.abs(np.diff(pixels(page), axis=1)).mean())


def field(page, label):
    return page.get_by_label(label, exact=True)


def type_in(page, label, text):
    """Type something new into a field, and wait until it is drawn."""
    before = json.dumps(state_of(page))
    field(page, label).fill(text)
    field(page, label).press("Enter")
    page.wait_for_function(
        "(before) => JSON.stringify(pinsimState()) !== JSON.stringify(JSON.parse(before))",
        arg=before,
    )
    drawn(page)


def test_opens_with_a_picture_and_the_command_lines_figures(look, run):
    page = look.open("#shape=round&hole_mm=0.27&depth_mm=75&frame=4x5&material=panchromatic-100")
    settled(page)
    code, out, _ = run("numbers", "--hole", "0.27mm", "--focal-length", "75mm", "--film", "4x5",
                       "--material", "panchromatic-100", "--json")  # fmt: skip
    assert code == 0
    told = json.loads(out)
    figures = page.evaluate(
        """async () => {
          const body = JSON.stringify({state: pinsimState()});
          const headers = {"Content-Type": "application/json"};
          return (await (await fetch("/api/numbers", {method: "POST", headers, body})).json()).figures;
        }"""
    )
    assert figures | {"name": ""} == told | {"name": ""}

    def shown(name):
        text = page.locator(f'[data-figure="{name}"]').inner_text()
        return [float(number) for number in re.findall(r"\d+(?:\.\d+)?", text)]

    assert shown("f-number") == [pytest.approx(told["f_number"], rel=5e-3)]
    assert shown("view")[0] == pytest.approx(told["horizontal_view_deg"], abs=0.5)
    assert shown("detail") == [pytest.approx(told["distances"][0]["detail_cycles_mm"], rel=5e-3)]
    assert shown("corner") == [pytest.approx(told["corner_falloff_stops"], abs=0.05)]
    best = next(b for b in told["advice"]["best"] if b["contrast"] == 0.2)
    assert shown("best") == [pytest.approx(best["frame_mm"], abs=6e-4)]
    assert pixels(page).std() > 10.0


def test_a_hole_changed_by_key_typing_and_drag(look):
    page = look.open("#hole_mm=0.3")
    slider = field(page, "Diameter, slider")
    slider.focus()
    before = pixels(page)
    slider.press("ArrowRight")
    drawn(page)
    by_key = state_of(page)["hole_mm"]
    assert by_key > 0.3
    assert pixels(page).shape == before.shape
    assert (pixels(page) != before).any()

    type_in(page, "Diameter", "0.04 in")
    assert state_of(page)["hole_mm"] == pytest.approx(1.016)
    blurred = unsharp(page)

    box = slider.bounding_box()
    # A screen reader is told once the hand rests.
    page.wait_for_function(
        "() => document.getElementById('live').textContent.startsWith('Hole 1.02 mm, picture drawn.')"
    )
    # The thumb is found where it is; 0.05 to 3 mm on a logarithmic scale.
    share = float(slider.input_value()) / 1000
    y = box["y"] + box["height"] / 2
    page.mouse.move(box["x"] + 12 + share * (box["width"] - 24), y)
    page.mouse.down()
    for part in np.linspace(share, 0.4, 12):
        page.mouse.move(box["x"] + 12 + part * (box["width"] - 24), y)
    page.mouse.up()
    drawn(page)
    assert state_of(page)["hole_mm"] < 0.35
    assert unsharp(page) > 1.3 * blurred


def test_pictures_follow_the_hand_and_never_go_back(look):
    page = look.open("#hole_mm=0.1")
    page.evaluate(
        """() => { const canvas = document.getElementById("picture"); window.drawn = [];
        new MutationObserver(() => window.drawn.push(JSON.parse(canvas.dataset.state).hole_mm))
          .observe(canvas, {attributes: true, attributeFilter: ["data-shown"]}); }"""
    )
    slider = field(page, "Diameter, slider")
    slider.focus()
    # The keys do not wait for pictures; on a slow machine it takes more of them until some were drawn.
    for _ in range(500):
        slider.press("ArrowRight")
        if page.evaluate("window.drawn.length") > 4:
            break
    slider.press("ArrowRight")
    drawn(page)
    holes = page.evaluate("window.drawn")
    assert holes == sorted(holes)
    assert holes[-1] == state_of(page)["hole_mm"]
    assert len(holes) > 4


def test_the_drawing_of_the_box_is_dragged(look):
    page = look.open("#depth_mm=60&hole_mm=0.3")
    handle = page.locator('[data-part="depth"] .hit')
    handle.scroll_into_view_if_needed()
    box = handle.bounding_box()
    page.mouse.move(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    page.mouse.down()
    page.mouse.move(box["x"] + box["width"] / 2 + 40, box["y"] + box["height"] / 2, steps=6)
    page.mouse.up()
    drawn(page)
    assert state_of(page)["depth_mm"] > 65
    rise = page.get_by_role("slider", name="Rise, drag")
    rise.focus()
    rise.press("ArrowUp")
    drawn(page)
    assert state_of(page)["rise_mm"] == 1
    # The keyboard stays on the handle it moves.
    assert page.evaluate("document.activeElement.dataset.part") == "rise"


def test_two_at_once(look):
    page = look.open("#hole_mm=0.2")
    page.get_by_role("button", name="Pin as A").click()
    type_in(page, "Diameter", "0.4 mm")
    page.locator("#pinned[data-quality=fine]").wait_for()
    assert (pixels(page, "pinned") != pixels(page)).any()
    divider = page.get_by_role("slider", name="Divider")
    divider.focus()
    divider.press("ArrowRight")
    assert divider.get_attribute("aria-valuenow") == "52"
    # Twice the diameter is four times the area: two stops.
    page.locator("#difference li").first.wait_for()
    assert "2.0 stops more light" in page.locator("#difference").inner_text()
    page.get_by_role("button", name="Swap").click()
    drawn(page)
    assert state_of(page)["hole_mm"] == 0.2
    page.get_by_role("button", name="Take A away").click()
    assert not divider.is_visible()


def test_undo_redo_and_the_address(look, chrome, address):
    page = look.open("#hole_mm=0.3")
    for text in ("0.35 mm", "0.4 mm"):
        type_in(page, "Diameter", text)
    page.locator("#paper").focus()
    page.keyboard.press("Control+z")
    assert state_of(page)["hole_mm"] == 0.35
    page.keyboard.press("Control+z")
    assert state_of(page)["hole_mm"] == 0.3
    page.keyboard.press("Control+Shift+z")
    page.get_by_role("button", name="Redo").click()
    assert state_of(page)["hole_mm"] == 0.4
    assert page.get_by_role("button", name="Redo").is_disabled()
    page.get_by_role("button", name="Pin as A").click()
    page.get_by_text("From behind", exact=True).click()
    page.get_by_label("Held upright").check()
    page.get_by_label("Name of the design").fill("Tea caddy")
    page.get_by_label("Name of the design").press("Tab")
    drawn(page)
    page.wait_for_function("() => location.hash.includes('Tea')")
    kept = page.evaluate("location.hash"), state_of(page), pixels(page)
    other = Looker(chrome, address)
    again = other.open(kept[0])
    assert state_of(again) == kept[1]
    assert np.array_equal(pixels(again), kept[2])
    assert again.get_by_role("slider", name="Divider").is_visible()
    assert state_of(again)["look"] == "screen"
    again.locator("#pinned[data-quality=fine]").wait_for()
    pinned = json.loads(again.locator("#pinned").get_attribute("data-state"))
    assert (pinned["portrait"], pinned["name"]) == (False, "camera")
    other.close()


def test_a_design_is_saved_and_opened_again(look, tmp_path):
    page = look.open(
        "#hole_mm=0.31&depth_mm=72&plate_mm=0.05&frame=6x9&rise_mm=4&material=orthochromatic-80&name=Attic%20box"
    )
    page.get_by_role("button", name="Save ...").click()
    with page.expect_download() as download:
        page.get_by_role("button", name="Save design").click()
    path = tmp_path / "kept.toml"
    download.value.save_as(path)
    page.get_by_role("button", name="Done").click()
    camera = Camera.load(path)
    assert camera.name == "Attic box"
    assert camera.hole.diameter_mm == pytest.approx(0.31)
    assert camera.focal_length_mm == pytest.approx(72)
    assert camera.film.shift_up_mm == pytest.approx(4)
    before = state_of(page)
    type_in(page, "Diameter", "0.5 mm")
    type_in(page, "Hole to film", "80 mm")
    field(page, "Frame").select_option("6x6")
    drawn(page)
    page.locator("#design-file").set_input_files(path)
    page.wait_for_function("() => pinsimState().depth_mm === 72")
    drawn(page)
    assert state_of(page) == before


def drop(page, *files):
    """Drop files, (name, bytes), on the page as a hand does."""
    data = page.evaluate_handle(
        """(files) => { const data = new DataTransfer();
        for (const [name, bytes] of files) data.items.add(new File([new Uint8Array(bytes)], name));
        return data; }""",
        [[name, list(content)] for name, content in files],
    )
    for event in ("dragenter", "dragover", "drop"):
        page.dispatch_event("#stage", event, {"dataTransfer": data})


def test_a_photo_is_dropped(look, photo, tmp_path):
    page = look.open()
    drop(page, ("my place.png", photo.read_bytes()))
    dialog = page.get_by_role("dialog", name="Your photo")
    dialog.wait_for()
    dialog.get_by_label("Angle of view").fill("200 parsecs")
    dialog.get_by_role("button", name="Use this photo").click()
    dialog.get_by_role("alert").wait_for()
    dialog.get_by_label("Angle of view").fill("60 deg")
    dialog.get_by_label("How far everything is").fill("3 m")
    dialog.get_by_role("button", name="Use this photo").click()
    dialog.wait_for(state="hidden")
    drawn(page)
    state = state_of(page)
    assert (state["scene"][:6], state["view_deg"], state["distance_mm"]) == ("photo-", 60, 3000)
    # The place has a sky above (bluish) and ground below, whatever the hole does to it.
    seen = pixels(page)
    rows = len(seen)
    above, below = seen[rows * 2 // 5].mean(axis=0), seen[rows * 3 // 5].mean(axis=0)
    assert above[2] > above[0] > below[2]


def test_a_photo_and_its_map_are_dropped_together(look, photo, tmp_path):
    page = look.open()
    # Everything has the code 40; at 5 cm each that is 2 m.
    Image.fromarray(np.full(landscape_codes().shape[:2], 40, np.uint16)).save(tmp_path / "m.png")
    drop(
        page,
        ("my place.png", photo.read_bytes()),
        ("my place depth.png", (tmp_path / "m.png").read_bytes()),
    )
    dialog = page.get_by_role("dialog", name="Your photo")
    dialog.get_by_label("Angle of view").fill("60 deg")
    assert not dialog.get_by_label("How far everything is").is_visible()
    dialog.get_by_role("button", name="Use this photo").click()
    dialog.wait_for(state="hidden")
    assert state_of(page)["map"].startswith("map-")
    type_in(page, "One value of the map means", "5cm")
    box = page.locator("#paper").bounding_box()
    page.mouse.move(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    page.wait_for_function("() => document.getElementById('probe').textContent.includes('axis')")
    assert page.locator("#probe").inner_text().startswith("2 m ")


def test_bad_files_and_bad_words_leave_the_last_good_picture(look):
    page = look.open("#hole_mm=0.3")
    before = pixels(page)
    drop(page, ("broken.jpg", b"this is no picture"))
    page.locator("#error").wait_for()
    assert "broken.jpg" in page.locator("#error").inner_text()
    drop(page, ("broken.toml", b"hole = "))
    page.get_by_text(re.compile(r"^broken\.toml")).wait_for()
    typed = field(page, "Diameter")
    typed.fill("0.3 elephants")
    typed.press("Enter")
    page.get_by_text(re.compile("elephants")).first.wait_for()
    assert typed.get_attribute("aria-invalid") == "true"
    assert typed.input_value() == "0.3 elephants"  # stays, to be mended
    described = page.locator(f"#{typed.get_attribute('aria-describedby')}")
    assert "elephants" in described.inner_text()
    typed.fill("400 mm")
    typed.press("Enter")
    page.locator("#error").wait_for()
    assert np.array_equal(pixels(page), before)
    assert state_of(page)["scene"] == "sample:courtyard"
    page.get_by_role("button", name="Undo").click()
    drawn(page)
    assert page.locator("#error").is_hidden()


def test_files_are_saved_from_the_page(look, tmp_path):
    page = look.open(
        "#hole_mm=0.3&a=1&a.hole_mm=0.6&frame=&width_mm=24&height_mm=24&shape=round&depth_mm=60&plate_mm=0&shift_mm=0&rise_mm=0"
    )
    page.get_by_role("button", name="Save ...").click()
    page.get_by_label("Picture and comparison as").select_option(".jpg")
    for name in ("Save picture", "Save comparison"):
        with page.expect_download() as download:
            page.get_by_role("button", name=name).click()
        path = tmp_path / download.value.suggested_filename
        download.value.save_as(path)
        with Image.open(path) as image:
            assert image.format == "JPEG"
            shape = image.size
        assert shape[0] > 200
    assert shape[0] > 1.5 * shape[1] or shape[0] > 800  # two side by side
    page.get_by_label("A contact sheet").fill("0.2 mm, 0.5 mm")
    page.get_by_label("Sheet as").select_option(".pdf")
    with page.expect_download() as download:
        page.get_by_role("button", name="Save contact sheet").click()
    download.value.save_as(tmp_path / "sheet.pdf")
    assert (tmp_path / "sheet.pdf").read_bytes().startswith(b"%PDF")


def test_true_size_after_a_card_was_laid_on_the_screen(look):
    page = look.open("#frame=6x6&hole_mm=0.3")
    page.get_by_role("button", name="True size").click()
    slider = page.get_by_label("Width of the bar")
    slider.focus()
    slider.fill("428")
    page.get_by_role("button", name="It fits").click()
    # 5 page pixels on each mm of the card, so a 56 mm frame is 280 of them wide.
    assert page.locator("#paper").bounding_box()["width"] == pytest.approx(
        56 * 428 / CARD_MM, abs=1
    )
    page.reload()
    drawn(page)
    page.get_by_role("button", name="True size").click()
    assert page.locator("#paper").bounding_box()["width"] == pytest.approx(
        56 * 428 / CARD_MM, abs=1
    )


def test_under_the_pointer(look):
    page = look.open("#hole_mm=0.3&depth_mm=60&frame=6x6&distance_mm=4000")
    paper = page.locator("#paper")
    box = paper.bounding_box()
    page.mouse.move(box["x"] + box["width"] * 0.999, box["y"] + box["height"] / 2)
    page.wait_for_function("() => document.getElementById('probe').textContent.includes('right')")
    probe = page.locator("#probe").inner_text()
    # The frame's edge is 28 mm from the axis of a 60 mm deep box: atan(28/60) = 25 deg.
    assert "4 m" in probe
    assert "25 deg right" in probe
    page.get_by_role("button", name="Loupe").click()
    page.mouse.move(box["x"] + box["width"] * 0.4, box["y"] + box["height"] / 2)
    assert page.locator("#loupe").is_visible()
    assert pixels(page, "loupe").std() > 3


def test_a_panorama_is_looked_around_in(look, tmp_path):
    page = look.open("#hole_mm=0.3&frame=6x6")
    codes = np.zeros((180, 360, 3), np.uint8) + 90
    codes[:, :180] = (200, 60, 40)  # the left half of the turn is red
    Image.fromarray(codes).save(tmp_path / "round.png")
    drop(page, ("round.png", (tmp_path / "round.png").read_bytes()))
    dialog = page.get_by_role("dialog", name="Your photo")
    dialog.wait_for()
    dialog.get_by_label("Angle of view").fill("360 deg")
    dialog.get_by_role("button", name="Use this photo").click()
    page.wait_for_function("() => pinsimState().projection === 'equirectangular'")
    drawn(page)
    box = page.locator("#paper").bounding_box()
    red = (pixels(page)[..., 0] > 150).mean()
    x, y = box["x"] + box["width"] / 2, box["y"] + box["height"] / 2
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + box["width"] / 2, y, steps=2)  # pulls in what is on the left
    page.mouse.up()
    drawn(page)
    assert -35 < state_of(page)["yaw_deg"] < -15
    assert (pixels(page)[..., 0] > 150).mean() > red + 0.3
    page.locator("#paper").focus()
    page.keyboard.press("Shift+ArrowUp")
    drawn(page)
    assert state_of(page)["pitch_deg"] > 0


def test_the_best_hole_is_taken(look, run):
    page = look.open("#hole_mm=0.5&depth_mm=60&frame=6x6")
    settled(page)
    page.get_by_label("Detail that is").select_option("0.5")
    settled(page)
    button = page.locator("#best-answer .best-line button")
    taken = float(button.get_attribute("data-hole"))
    button.click()
    drawn(page)
    assert state_of(page)["hole_mm"] == taken
    code, out, _ = run(
        "numbers", "--hole", "0.5mm", "--focal-length", "60mm", "--film", "6x6", "--json"
    )
    assert code == 0
    best = next(b for b in json.loads(out)["advice"]["best"] if b["contrast"] == 0.5)
    assert taken == pytest.approx(best["frame_mm"], abs=6e-4)


def test_the_keyboard_alone_reaches_everything(look):
    page = look.open("#hole_mm=0.3")
    settled(page)
    reached = set()
    for _ in range(120):
        page.keyboard.press("Tab")
        found = page.evaluate(
            """() => { const e = document.activeElement, s = getComputedStyle(e);
            return [e.id || e.dataset.part || e.className, e === document.body]; }"""
        )
        if found[1]:
            break
        reached.add(found[0])
    assert {
        "paper",
        "true-size",
        "pin",
        "depth",
        "rise",
        "hole",
        "need",
        "cautions-open",
    } <= reached
    assert any(name.startswith("field-hole_mm") for name in reached)
    page.locator("#cautions-open").focus()
    page.keyboard.press("Enter")
    assert "sun" in page.get_by_role("dialog", name="Cautions").inner_text()
    page.keyboard.press("Escape")
    assert page.evaluate("document.activeElement.id") == "cautions-open"


@pytest.mark.parametrize(
    ("width", "theme"), [(380, "dark"), (900, "light"), (1440, "light"), (2400, "dark")]
)
def test_audit_of_layout_and_accessibility(chrome, address, width, theme):
    looker = Looker(
        chrome,
        address,
        viewport={"width": width, "height": 900},
        color_scheme=theme,
        reduced_motion="reduce",
        bypass_csp=True,  # lets the audit's own script in
    )
    page = looker.open("#hole_mm=0.3&a=1&a.hole_mm=0.5")
    settled(page)
    page.locator("#difference li").first.wait_for()
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    too_small = page.evaluate(
        """() => [...document.querySelectorAll("button, select, input[type=text], input[type=range]")]
        .filter((e) => e.offsetParent && e.getBoundingClientRect().height < 44)
        .map((e) => e.outerHTML.slice(0, 90))"""
    )
    assert too_small == []
    if not AXE.is_file():
        looker.close()
        pytest.skip("the audit needs axe-core")
    page.add_script_tag(path=AXE)

    def found():
        tags = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"]
        result = page.evaluate("(tags) => axe.run({runOnly: tags})", tags)
        return [
            (rule["id"], [node["html"][:120] for node in rule["nodes"][:3]])
            for rule in result["violations"]
            if rule["impact"] in {"serious", "critical"}
        ]

    assert found() == []
    page.get_by_role("button", name="Cautions").click()
    assert found() == []
    looker.close()
