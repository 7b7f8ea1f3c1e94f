"""The server of `pinsim live`: who may ask, what is answered, and that it outlasts whatever is asked.

Most tests talk to a real process over loopback, as a browser does.
"""

import asyncio
import base64
import contextlib
import io
import json
import math
import os
import random
import re
import signal
import socket
import struct
import subprocess
import sys
import tempfile
import threading
import time
import zlib
from pathlib import Path

import httpx
import numpy as np
import pytest
from PIL import Image

import pinsim
from pinsim.camera import Camera
from pinsim.cli import main
from pinsim.live import app as live_app
from pinsim.live.app import Server
from pinsim.live.designs import Given
from pinsim.live.folder import private_folder
from pinsim.live.guard import TOKEN_HEADER, Keys
from pinsim.live.refused import RefusedError, SupersededError
from pinsim.live.run import listening
from pinsim.live.shelf import Shelf
from pinsim.live.state import read_state
from pinsim.live.studio import Studio
from pinsim.live.work import Desk
from pinsim.samples import names

ROOT = Path(__file__).resolve().parents[1]
SAMPLES = names("scene")
# A scene at one distance, so that tests of the server do not wait for hidden parts to be drawn.
FAR = {"scene": "sample:lane", "distance_mm": "infinity"}
FIVE_S = 5.0


class Live:
    """A running `pinsim live`, and a client that holds its cookie."""

    def __init__(self, *arguments, folder=None):
        environment = {**os.environ, "OPENBLAS_NUM_THREADS": "1"}
        if folder is not None:
            environment["TMPDIR"] = str(folder)
        self.process = subprocess.Popen(
            [sys.executable, "-m", "pinsim", "live", "--no-browser", *arguments],
            cwd=ROOT,
            env=environment,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
        )
        line = self.process.stdout.readline()
        found = re.search(r"(http://127\.0\.0\.1:(\d+))/open\?token=(\S+)", line)
        assert found, line + self.process.stderr.read()
        self.base, self.port, self.token = found[1], int(found[2]), found[3]
        self.client = httpx.Client(base_url=self.base, timeout=60)
        assert self.client.get(f"/open?token={self.token}").status_code == 303

    def post(self, path, **body):
        return self.client.post(f"/api/{path}", json=body)

    def state(self, **changes):
        return {**FAR, **changes}

    def end(self, number=signal.SIGTERM):
        self.client.close()
        if self.process.poll() is None:
            self.process.send_signal(number)
        out, error = self.process.communicate(timeout=20)
        return self.process.returncode, out, error


@pytest.fixture(scope="module")
def live():
    server = Live()
    yield server
    code, _, error = server.end()
    assert (code, error) == (0, "")


@pytest.fixture
def studio(tmp_path):
    return Studio(tmp_path, Given())


# Who may ask ---------------------------------------------------------------------------------


def test_nothing_is_told_without_the_token(live):
    """OWASP ASVS 4.0, V3.5 and V4: every route asks who it is that asks."""
    with httpx.Client(base_url=live.base) as stranger:
        for path in ("/", "/index.html", "/api/start", "/open", "/open?token=guess", "/nothing"):
            answer = stranger.get(path)
            assert answer.status_code == 403, path
            assert "pinsim live" in answer.text
        assert stranger.post("/api/picture", json={"state": {}}).status_code == 403
        assert stranger.get("/api/start", headers={TOKEN_HEADER: "guess"}).status_code == 403
        cookie = {"Cookie": f"pinsim-{live.port}=guess"}
        assert stranger.get("/api/start", headers=cookie).status_code == 403
        assert stranger.get("/api/start", headers={TOKEN_HEADER: live.token}).status_code == 200


def test_the_token_becomes_a_cookie_that_no_script_and_no_other_site_gets(live):
    """HttpOnly and SameSite=Strict: RFC 6265bis, 5.5 and 5.6.7 (draft-ietf-httpbis-rfc6265bis)."""
    with httpx.Client(base_url=live.base) as fresh:
        answer = fresh.get(f"/open?token={live.token}")
        assert (answer.status_code, answer.headers["location"]) == (303, "/")
        told = answer.headers["set-cookie"]
        assert "HttpOnly" in told
        assert "SameSite=Strict" in told
        assert fresh.get("/").status_code == 200


def test_a_code_opens_the_page_once():
    keys = Keys()
    query = f"once={keys.new_code()}".encode()
    assert keys.opens(query)
    assert not keys.opens(query)
    assert not keys.opens(b"once=")
    assert keys.opens(f"token={keys.token}".encode())
    assert keys.opens(f"token={keys.token}".encode())


@pytest.mark.parametrize(
    "headers",
    [
        {"Host": "example.org"},
        {"Host": "example.org:{port}"},
        {"Host": "127.0.0.1"},
        {"Host": "127.0.0.1:1"},
        {"Origin": "http://example.org"},
        {"Origin": "null"},
        {"Origin": "http://127.0.0.1:1"},
        {"Origin": "https://127.0.0.1:{port}"},
        {"Sec-Fetch-Site": "cross-site"},
        {"Sec-Fetch-Site": "same-site"},
    ],
    ids=str,
)
def test_who_comes_from_elsewhere_is_refused_even_with_the_token(live, headers):
    """A name that was made to point here (DNS rebinding) shows in Host: RFC 9110, 7.2.

    Other pages show in Origin (RFC 6454, 7) and in W3C's Fetch Metadata.
    """
    headers = {key: value.format(port=live.port) for key, value in headers.items()}
    assert live.client.get("/api/start", headers=headers).status_code == 403
    own = {"Origin": live.base, "Sec-Fetch-Site": "same-origin"}
    assert live.client.get("/api/start", headers=own).status_code == 200


def test_every_answer_forbids_what_the_page_does_not_need(live):
    """Content Security Policy, W3C; the other heads as OWASP's Secure Headers Project has them."""
    for answer in (live.client.get("/"), live.client.get("/api/start"), live.client.get("/x")):
        policy = answer.headers["content-security-policy"]
        assert "default-src 'self'" in policy
        assert "unsafe" not in policy
        assert "http" not in policy
        assert "frame-ancestors 'none'" in policy
        assert answer.headers["cache-control"] == "no-store"
        assert answer.headers["x-content-type-options"] == "nosniff"
        assert answer.headers["cross-origin-opener-policy"] == "same-origin"
        assert answer.headers["cross-origin-resource-policy"] == "same-origin"
        assert answer.headers["referrer-policy"] == "no-referrer"
        assert not any(name.startswith("access-control") for name in answer.headers)


def test_only_this_machine_can_connect(live):
    with contextlib.closing(listening(0)) as found:
        assert found.getsockname()[0] == "127.0.0.1"
    # Another address of the same machine's own network is not listened on.
    with pytest.raises(ConnectionRefusedError):
        socket.create_connection(("127.0.0.2", live.port), timeout=FIVE_S)


@pytest.mark.parametrize(
    "path",
    [
        "/../app.py",
        "/..%2fapp.py",
        "/%2e%2e/app.py",
        "/page/../../app.py",
        "//etc/passwd",
        "/app.py",
    ],
)
def test_only_the_pages_own_files_are_handed_out(live, path):
    with socket.create_connection(("127.0.0.1", live.port), timeout=FIVE_S) as raw:
        lines = (f"GET {path} HTTP/1.1", f"Host: 127.0.0.1:{live.port}", "Connection: close")
        token = f"{TOKEN_HEADER}: {live.token}"
        raw.sendall("\r\n".join((*lines, token, "", "")).encode())
        answer = b"".join(iter(lambda: raw.recv(65536), b""))
    assert answer.startswith(b"HTTP/1.1 404"), answer[:200]


def test_the_page_and_its_scripts_are_served_with_their_kinds(live):
    answer = live.client.get("/")
    assert answer.headers["content-type"] == "text/html; charset=utf-8"
    for name in re.findall(r'(?:src|href)="/?([\w./-]+\.(?:js|css|svg))"', answer.text):
        file = live.client.get(f"/{name}")
        assert file.status_code == 200, name
        assert file.headers["content-type"].split(";")[0] in {
            "text/javascript",
            "text/css",
            "image/svg+xml",
        }


# What is answered ----------------------------------------------------------------------------


def test_the_picture_is_the_one_of_preview(live):
    """Bit by bit: the page shows what the command line would write."""
    camera = Camera.load("sample:square-box").with_hole(0.35)
    scene = pinsim.Scene.load("sample:lane", distance_mm=math.inf)
    picture = pinsim.preview(scene, camera, width_px=160, averaged=True, look="screen")
    keys = live.client.get("/api/start").json()["state"]
    state = {**keys, **FAR, "hole_mm": "0.35 mm", "look": "screen"}
    answer = live.post("picture", state=state, width_px=160, format="png")
    assert answer.headers["content-type"] == "image/png"
    shown = np.asarray(Image.open(io.BytesIO(answer.content)))
    np.testing.assert_array_equal(shown, picture.codes())
    about = json.loads(answer.headers["x-pinsim"])
    assert (about["width_px"], about["height_px"], about["look"]) == (160, 160, "screen")
    assert about["notes"] == list(picture.notes)


@pytest.mark.parametrize("kind", ["jpeg", "webp"])
def test_small_pictures_come_in_a_kind_that_every_browser_shows(live, kind):
    answer = live.post("picture", state=live.state(), width_px=100, format=kind)
    assert answer.headers["content-type"] == f"image/{kind}"
    assert Image.open(io.BytesIO(answer.content)).size == (100, 100)


def test_a_material_with_one_layer_a_time_and_grain_are_drawn(live):
    state = live.state(material="panchromatic-100", time="auto", light="sun", grain_seed=3)
    answer = live.post("picture", state=state, width_px=100)
    about = json.loads(answer.headers["x-pinsim"])
    assert Image.open(io.BytesIO(answer.content)).mode == "L"
    assert about["ev"] == 15.0
    assert about["time_s"] == about["auto_time_s"] > 0.0


@pytest.mark.parametrize("camera", sorted(names("camera")))
def test_figures_are_those_of_the_command_line(live, camera, capsys):
    assert main(["numbers", f"sample:{camera}", "--json"]) == 0
    told = json.loads(capsys.readouterr().out)
    designs = live.client.get("/api/start").json()["designs"]
    state = next(one["state"] for one in designs if one["id"] == f"sample:{camera}")
    answer = live.post("numbers", state=live.state(**state)).json()
    assert answer["figures"] == told
    quick = live.post("numbers", state=live.state(**state), part="quick").json()["figures"]
    assert quick["advice"] is None
    assert {**quick, **{key: told[key] for key in ("advice", "places", "distances")}} == told


def test_the_time_is_that_of_the_exposure_command(live, capsys):
    line = [
        "exposure",
        "sample:square-box",
        "--material",
        "panchromatic-100",
        "--light",
        "open-shade",
    ]
    assert main([*line, "--json"]) == 0
    told = json.dumps(json.loads(capsys.readouterr().out))
    start = live.client.get("/api/start").json()["state"]
    state = {**start, "material": "panchromatic-100", "light": "open-shade"}
    found = live.post("numbers", state=state, part="quick").json()["exposure"]
    assert found["ev"] == 12.0
    assert f'"{found["text"]}"' in told
    # N^2 / t = 2^EV S / 100, ISO 2720; the box is f/200.
    assert found["metered_s"] == pytest.approx(200.0**2 / 2.0**12, rel=1e-9)


def test_curves_start_at_1_and_fall_to_20_percent_where_the_figures_say(live):
    state = live.state(hole_mm=0.3, depth_mm=60, plate_mm=0)
    curves = live.post("curves", state=state).json()
    detail = live.post("numbers", state=state, part="quick").json()["figures"]["distances"][0]
    middle = next(one for one in curves["places"] if one["name"] == "centre")
    frequency, contrast = np.array(middle["curves"]["outwards"]).T
    assert contrast[0] == 1.0
    fallen = np.interp(detail["detail_cycles_mm"], frequency, contrast)
    assert fallen == pytest.approx(0.2, abs=0.01)
    png = base64.b64decode(middle["spot"]["png"].partition(",")[2])
    image = np.asarray(Image.open(io.BytesIO(png)))
    assert image.max() == 255
    np.testing.assert_array_equal(
        image, image[::-1, ::-1]
    )  # a round hole's point is its own mirror


def test_the_pointer_tells_direction_and_distance(live, tmp_path):
    """A pinhole's ray: tan(angle) = film coordinate / depth (Young, Appl. Opt. 10 (1971) 2763)."""
    state = live.state(frame=None, width_mm=60, height_mm=40, depth_mm=30, distance_mm="4 m")
    found = live.post("point", state=state, x=1.0, y=0.25).json()
    assert found["right_mm"] == pytest.approx(30.0)
    assert found["up_mm"] == pytest.approx(10.0)
    assert found["right_deg"] == pytest.approx(45.0)
    assert found["up_deg"] == pytest.approx(math.degrees(math.atan(1.0 / 3.0)))
    assert found["distance_mm"] == 4000.0
    # cos^4 on flat film: Gardner, J. Res. NBS 39 (1947) 213, from memory.
    fourth = math.cos(math.atan(math.hypot(30.0, 10.0) / 30.0)) ** 4
    assert found["falloff_stops"] == pytest.approx(-math.log2(fourth))
    # The same place of the scene, pointed at on a screen that shows it turned.
    turned = live.post("point", state={**state, "look": "screen"}, x=0.0, y=0.75).json()
    assert turned == found


def test_the_pointer_reads_the_map_of_distances(live, tmp_path):
    """The sample's map: one code is 1 mm, 0 infinitely far; its scene file says so."""
    codes = np.asarray(Image.open(SAMPLES["lane"].parent / "distance.png"))
    start = live.client.get("/api/start").json()["state"]
    state = {**start, "scene": "sample:lane"}
    for x, y in ((0.5, 0.5), (0.2, 0.8), (0.7, 0.6), (0.5, 0.05)):
        found = live.post("point", state=state, x=x, y=y).json()
        code = codes[round(found["photo"]["row"]), round(found["photo"]["column"])]
        expected = "infinity" if code == 0 else pytest.approx(float(code), rel=1e-5)
        assert found["distance_mm"] == expected


def test_in_a_panorama_the_camera_looks_where_it_is_turned(live):
    sphere = Image.fromarray(np.full((256, 512, 3), 120, np.uint8))
    file = io.BytesIO()
    sphere.save(file, "JPEG")
    told = live.client.put("/api/photo?name=round.jpg", content=file.getvalue()).json()
    state = {"scene": told["id"], "projection": "equirectangular", "yaw_deg": 30, "pitch_deg": -10}
    found = live.post("point", state=state, x=0.5, y=0.5).json()
    assert found["yaw_deg"] == pytest.approx(30.0)
    assert found["pitch_deg"] == pytest.approx(-10.0)
    # 512 columns are 360 deg, the middle is straight ahead.
    assert found["photo"]["column"] == pytest.approx(255.5 + 30.0 * 512.0 / 360.0)
    assert live.post("picture", state=state, width_px=64).status_code == 200
    flat = live.post("picture", state={**FAR, "yaw_deg": 30}, width_px=64)
    assert flat.status_code == 422
    assert flat.json()["field"] == "yaw_deg"


@pytest.mark.parametrize("name", sorted(names("camera")))
def test_a_design_goes_to_a_file_and_back(live, name, tmp_path):
    text = names("camera")[name].read_text()
    opened = live.post("open", toml=text, file_name=f"{name}.toml").json()
    written = live.post("design", state=live.state(**opened["state"])).json()
    file = tmp_path / written["file_name"]
    file.write_text(written["toml"])
    assert Camera.load(file) == Camera.load(f"sample:{name}")
    again = live.post("open", toml=written["toml"]).json()
    assert again["state"] == opened["state"]


def test_two_states_are_told_apart_in_words(live):
    """Twice the diameter is four times the area: two stops."""
    told = live.post("difference", state=live.state(hole_mm=0.4), other=live.state(hole_mm=0.2))
    assert "2.0 stops more light" in told.json()["sentences"]
    same = live.post("difference", state=live.state(), other=live.state()).json()
    assert same["sentences"] == []


@pytest.mark.parametrize(
    ("kind", "suffix", "head"),
    [
        ("picture", ".png", b"\x89PNG"),
        ("picture", ".tif", b"II*\0"),
        ("numbers", ".jpg", b"\xff\xd8\xff"),
        ("comparison", ".png", b"\x89PNG"),
        ("contact", ".pdf", b"%PDF"),
    ],
)
def test_files_are_made_to_keep(live, kind, suffix, head):
    state = live.state(frame=None, width_mm=24, height_mm=16, depth_mm=40)
    answer = live.post(
        "save",
        state=state,
        other={**state, "hole_mm": 0.2},
        holes_mm=[0.2, "0.3 mm"] if kind == "contact" else None,
        kind=kind,
        format=suffix,
    )
    assert answer.status_code == 200, answer.text
    assert answer.content.startswith(head)
    name = json.loads(answer.headers["x-pinsim"])["file_name"]
    assert name.endswith(suffix)
    assert f'filename="{name}"' in answer.headers["content-disposition"]


def test_the_start_tells_what_can_be_chosen(live):
    start = live.client.get("/api/start").json()
    chosen = [one["id"] for one in start["scenes"] if one["kind"] == "sample"]
    assert chosen == [f"sample:{name}" for name in SAMPLES]
    assert start["state"]["hole_mm"] == 0.3
    assert start["texts"]["hole_mm"] == "0.3 mm"
    assert {"name": "6x6", "width_mm": 56.0, "height_mm": 56.0} in start["frames"]
    settled = live.post("check", state=start["state"]).json()
    assert settled["settled"] == start["state"]
    assert settled["scene"]["view_deg"] == 84.0  # courtyard/scene.toml
    again = live.post("check", state=settled["settled"]).json()
    assert again == settled


def test_typed_texts_are_read_with_their_units(live):
    """1 inch is 25.4 mm exactly (the international inch of 1959)."""
    assert live.post("parse", kind="length", text="1/64 in").json()["value"] == 25.4 / 64.0
    assert live.post("parse", kind="light", text="f/16 1/128 ISO 100").json()["value"] == 15.0
    assert live.post("parse", kind="distance", text="infinity").json()["value"] == "infinity"
    wrong = live.post("parse", kind="length", text="0,3mm", field="hole_mm")
    assert (wrong.status_code, wrong.json()["field"]) == (422, "hole_mm")


# What is refused -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("changes", "field", "says"),
    [
        ({"hole_mm": "0.3"}, "hole_mm", "no unit"),
        ({"hole_mm": 40}, "hole_mm", "too large"),
        ({"hole_mm": -1}, "hole_mm", "0.01 to 100"),
        ({"hole_mm": True}, "hole_mm", "number"),
        ({"hole_mm": [0.3]}, "hole_mm", "number"),
        ({"hole_mm": "9" * 500}, "hole_mm", "letters"),
        ({"shape": "oval", "hole_h_mm": 200}, "hole_h_mm", "0.01 to 100"),
        ({"shape": "star"}, "shape", "must be one of"),
        ({"shape": "traced"}, "traced", "no traced hole"),
        ({"plate_mm": "60 mm"}, "plate_mm", "0 to 50"),
        ({"depth_mm": 1}, "depth_mm", "2 to 20000"),
        ({"frame": "6x5"}, "frame", "Did you mean"),
        ({"frame": "6x6", "width_mm": 50}, "frame", "exclude each other"),
        ({"frame": None, "width_mm": 50}, "height_mm", "missing"),
        ({"bend_mm": 8}, "bend_mm", "half turn"),
        ({"rise_mm": "9 km"}, "rise_mm", "5000"),
        ({"material": "colr"}, "material", "Did you mean 'colour'"),
        ({"materials_of": "given-2"}, "materials_of", "known to this server"),
        ({"light": "fog"}, "light", "Known: "),
        ({"light": 99}, "light", "-10 to 25"),
        ({"time": "8"}, "time", "'auto'"),
        ({"time": -1}, "time", "1e-06"),
        ({"wavelength_nm": 5000}, "wavelength_nm", "nm"),
        ({"grain_seed": 1}, "grain_seed", "a time"),
        ({"look": "sideways"}, "look", "upright"),
        ({"view_deg": 0}, "view_deg", "0.5"),
        ({"distance_mm": "-4 m"}, "distance_mm", "more than 0"),
        ({"distance_mm": "4 m", "map": "map-1"}, "distance_mm", "exclude"),
        ({"scene": "photo-99"}, "scene", "choose one"),
        ({"portrait": "yes"}, "portrait", "true or false"),
        ({"hole_m": 1}, None, "Did you mean 'hole_mm'"),
    ],
    ids=str,
)
def test_a_wrong_value_is_told_beside_its_field(live, changes, field, says):
    state = {**FAR, **changes}
    answer = live.post("picture", state=state, width_px=64)
    assert answer.status_code == 422, answer.text
    told = answer.json()
    assert told["field"] == field, told
    assert says in told["error"]
    assert told["error"].isascii()
    assert "\n" not in told["error"]


def test_all_wrong_fields_are_told_at_once(live):
    told = live.post("check", state={"hole_mm": "x", "depth_mm": "y", "light": "z"}).json()
    assert set(told["errors"]) == {"hole_mm", "depth_mm", "light"}


def test_what_is_missing_is_named(live):
    photo = _jpeg(80, 60)
    told = live.client.put("/api/photo?name=plain.jpg", content=photo).json()
    assert (told["needs"], told["width_px"], told["height_px"]) == ("view", 80, 60)
    state = {"scene": told["id"]}
    refused = live.post("picture", state=state, width_px=64)
    assert refused.status_code == 422
    assert (refused.json()["needs"], refused.json()["field"]) == ("view", "view_deg")
    assert "--view" not in refused.json()["error"]
    state["view_deg"] = "65 deg"
    assert live.post("picture", state=state, width_px=64).status_code == 200
    # and still, after it was once drawn with one
    assert live.post("picture", state={"scene": told["id"]}, width_px=64).status_code == 422
    no_light = live.post("picture", state={**state, "time": "auto"}, width_px=64).json()
    assert (no_light["needs"], no_light["field"]) == ("light", "light")
    gone = live.post("check", state={"scene": "photo-77"}).json()
    assert gone["needs"] == "scene"


def test_a_photo_that_tells_its_angle_of_view_needs_nothing(live):
    """28 mm in 35 mm film: 2 atan(36 / 56) is 65.5 deg across a 3:2 picture; Exif 2.32."""
    image = Image.new("RGB", (90, 60), (90, 120, 150))
    exif = Image.Exif()
    exif.get_ifd(0x8769)[0xA405] = 28
    file = io.BytesIO()
    image.save(file, "JPEG", exif=exif)
    told = live.client.put("/api/photo?name=phone.jpg", content=file.getvalue()).json()
    assert told["needs"] is None
    assert told["view_deg"] == pytest.approx(2.0 * math.degrees(math.atan(36.0 / 56.0)), abs=0.1)


def test_a_map_dropped_beside_a_photo_needs_its_meaning(live):
    photo = live.client.put("/api/photo?name=near.jpg", content=_jpeg(60, 40)).json()
    file = io.BytesIO()
    Image.fromarray(np.full((40, 60), 50, np.uint8)).save(file, "PNG")
    told = live.client.put("/api/map?name=near.png", content=file.getvalue()).json()
    assert (told["width_px"], told["highest"], told["kind_of_numbers"]) == (60, 50.0, "codes")
    state = {"scene": photo["id"], "view_deg": 60, "map": told["id"]}
    wrong = live.post("picture", state=state, width_px=64).json()
    assert (wrong["needs"], wrong["field"]) == ("map", "map_step")
    state["map_step"] = "2 cm"
    found = live.post("point", state=state, x=0.5, y=0.5).json()
    assert found["distance_mm"] == pytest.approx(1000.0)
    assert live.client.delete(f"/api/file/{told['id']}").json() == {}
    assert live.post("picture", state=state, width_px=64).json()["field"] == "map"
    assert live.client.delete(f"/api/file/{told['id']}").status_code == 404


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "empty"),
        ("focal_length = ", "not valid TOML"),
        ('focal_length = "60 mm"\n[hole]\ndiametr = "0.3 mm"', "Did you mean 'diameter'"),
        ('focal_length = 60\n[hole]\ndiameter = "0.3 mm"', "without a unit"),
        ('photo = "a.jpg"', "scene file"),
        (
            'focal_length = "60 mm"\n[hole]\nshape = "traced"\nimage = "/etc/hostname"\ndpi = 100\n'
            '[film]\nframe = "6x6"',
            "may not have read",
        ),
        (
            'focal_length = "60 mm"\n[hole]\ndiameter = "0.3 mm"\n[film]\nframe = "6x6"\n'
            'materials = "../../secret.toml"',
            "may not have read",
        ),
        ("a = " + "[" * 3000, "TOML"),
    ],
    ids=range(8),
)
def test_a_wrong_design_is_told_by_its_own_name(live, text, says):
    answer = live.post("open", toml=text, file_name="../odd/box.toml")
    assert answer.status_code == 422
    told = answer.json()["error"]
    assert says in told
    assert "box.toml" in told
    assert "pinsim-live" not in told  # no private path


def test_a_design_with_files_can_be_had_by_starting_with_it(tmp_path):
    """Its traced hole and its own materials are there, saved and opened again; other files are not."""
    hole = np.full((200, 200), 20, np.uint8)
    rows, columns = np.mgrid[:200, :200]
    hole[np.hypot(rows - 99.5, columns - 99.5) < 60] = 230
    Image.fromarray(hole).save(tmp_path / "scan.png")
    (tmp_path / "mine.toml").write_text('[slow]\nlike = "panchromatic-100"\nspeed_iso = 12\n')
    design = tmp_path / "own.toml"
    design.write_text(
        'name = "Own"\nfocal_length = "60 mm"\n[hole]\nshape = "traced"\nimage = "scan.png"\n'
        'pixel_size = "2.5 um"\n[film]\nframe = "6x6"\nmaterial = "slow"\nmaterials = "mine.toml"\n'
    )
    speed = "speed_iso" if "speed_iso" in (tmp_path / "mine.toml").read_text() else "speed"
    with contextlib.suppress(pinsim.DesignError):
        Camera.load(design)
        speed = None
    if speed:
        (tmp_path / "mine.toml").write_text('[slow]\nlike = "panchromatic-100"\nspeed = 12\n')
    camera = Camera.load(design)
    server = Live("sample:lane", str(design))
    try:
        start = server.client.get("/api/start").json()
        assert start["state"]["shape"] == "traced"
        assert "slow" in [one["name"] for one in start["materials"]]
        state = {**start["state"], "distance_mm": "infinity"}
        assert server.post("picture", state=state, width_px=64).status_code == 200
        written = server.post("design", state=state).json()["toml"]
        saved = tmp_path / "elsewhere" / "saved.toml"
        saved.parent.mkdir()
        saved.write_text(written)
        again = Camera.load(saved)
        assert again.hole.diameter_mm == camera.hole.diameter_mm
        assert again.material.speed_iso == camera.material.speed_iso
        opened = server.post("open", toml=written, file_name="saved.toml")
        assert opened.status_code == 200, opened.text
        foreign = written.replace("scan.png", "other.png")
        assert server.post("open", toml=foreign).status_code == 422
    finally:
        server.end()


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (b"", "empty"),
        (b"not a picture", "not a picture"),
        (b"\x89PNG\r\n\x1a\n" + b"\0" * 50, "png"),
    ],
)
def test_a_file_that_is_no_photo_is_refused_by_its_own_name(live, content, says):
    answer = live.client.put("/api/photo?name=../../odd.png", content=content)
    assert answer.status_code == 422
    assert says in answer.json()["error"].lower()
    assert "pinsim-live" not in answer.json()["error"]


def test_a_scene_file_is_refused_as_it_names_others(live):
    answer = live.client.put("/api/photo?name=scene.toml", content=b'photo = "/etc/passwd"')
    assert answer.status_code == 422
    assert "names other files" in answer.json()["error"]


def test_a_picture_that_claims_too_many_pixels_is_refused_unread(live):
    """A small file that unpacks to gigabytes: PNG, W3C 2003, 11.2.2, gives its size in the head."""
    header = struct.pack(">IIBBBBB", 60_000, 60_000, 8, 2, 0, 0, 0)
    chunk = b"IHDR" + header
    bomb = (
        b"\x89PNG\r\n\x1a\n" + struct.pack(">I", 13) + chunk + struct.pack(">I", zlib.crc32(chunk))
    )
    packed = zlib.compress(b"\0" * 1000)
    chunk = b"IDAT" + packed
    bomb += struct.pack(">I", len(packed)) + chunk + struct.pack(">I", zlib.crc32(chunk))
    answer = live.client.put("/api/photo?name=bomb.png", content=bomb)
    assert answer.status_code == 422
    assert "3600 megapixels is more than" in answer.json()["error"]


@pytest.mark.parametrize("told", [True, False])
def test_an_upload_that_is_too_large_is_cut_off_and_removed(studio, told):
    """With its length told it is refused before a byte of it is read."""
    studio.most_upload_bytes = 2 << 20
    read = 0

    async def parts():
        nonlocal read
        for _ in range(64):
            read += 65536
            yield b"\0" * 65536

    async def ask():
        server = Server(lambda: studio)
        transport = httpx.ASGITransport(server.app)
        async with httpx.AsyncClient(transport=transport, base_url="http://here") as client:
            headers = {"content-length": str(64 * 65536)} if told else {}
            answer = await client.put("/api/photo?name=a.jpg", content=parts(), headers=headers)
        server.end()
        return answer

    answer = asyncio.run(ask())
    assert answer.status_code == 413
    assert "larger than the 2 MB" in answer.json()["error"]
    assert read <= (0 if told else (2 << 20) + 65536)
    assert [one for one in studio.shelf.folder.iterdir() if one.is_file()] == []


def test_uploads_have_our_names_and_only_this_user_reads_them(tmp_path):
    server = Live(folder=tmp_path)
    try:
        told = server.client.put("/api/photo?name=..%2F..%2Fa b.jpg", content=_jpeg(60, 40)).json()
        (folder,) = tmp_path.glob("pinsim-live-*")
        assert folder.stat().st_mode & 0o777 == 0o700
        files = [one for one in folder.iterdir() if one.is_file()]
        assert [one.name for one in files] == [f"{told['id']}.jpg"]
        assert files[0].stat().st_mode & 0o777 == 0o600
        assert told["name"] == "a b.jpg"
    finally:
        server.end()


@pytest.mark.parametrize(
    ("body", "kind", "status"),
    [
        (b"{", "application/json", 400),
        (b"[]", "application/json", 400),
        (b'{"state": NaN}', "application/json", 400),
        (b"\xff\xfe", "application/json", 400),
        (b"[" * 100_000, "application/json", 400),
        (b'{"state": {"hole_mm": 1e999}}', "application/json", 422),
        (b'{"state": ' + b"1" * 5000 + b"}", "application/json", 400),
        (b'{"state": {}}', "text/plain", 415),
        (b'{"state": {}, "width_px": 15}', "application/json", 422),
        (b'{"state": {}, "width_px": 100000}', "application/json", 422),
        (b'{"state": {}, "format": "gif"}', "application/json", 422),
        (b'{"state": {}, "format": ["png"]}', "application/json", 422),
        (b'{"state": {}, "lane": "a b"}', "application/json", 400),
        (b'{"a": "' + b"x" * 400_000 + b'"}', "application/json", 413),
    ],
    ids=range(14),
)
def test_a_request_that_cannot_be_read_is_refused(live, body, kind, status):
    answer = live.client.post("/api/picture", content=body, headers={"Content-Type": kind})
    assert answer.status_code == status, answer.text[:200]
    assert answer.json()["error"]


def test_a_port_that_is_taken_is_told_in_one_line(live, capsys):
    assert main(["live", "--no-browser", "--port", str(live.port)]) == 2
    told = capsys.readouterr().err
    assert f"port {live.port} cannot be served" in told
    assert told.count("\n") == 1


@pytest.mark.parametrize(
    ("line", "says"),
    [
        (["no-such.jpg"], "no such file"),
        (["sample:lan"], "Did you mean 'lane'"),
        (["sample:lane", "no-such.toml"], "no such file"),
        (["sample:lane", "--hole", "0,3mm"], "cannot read"),
        (["sample:lane", "--map-step", "5cm"], "needs a distance map"),
        (["sample:lane", "--distance", "0.1mm"], "at least 1 mm"),
        (["sample:lane", "--distance-map", "none.png"], "no such file"),
    ],
)
def test_a_wrong_line_is_refused_before_anything_is_served(line, says, capsys):
    assert main(["live", "--no-browser", *line]) == 2
    assert says in capsys.readouterr().err


def test_options_of_the_line_are_the_state_to_begin_with(tmp_path):
    Image.new("RGB", (60, 40)).save(tmp_path / "place.jpg")
    arguments = ("--view", "70deg", "--distance", "4m", "--hole", "0.2mm", "--focal-length", "50mm")
    light = ("--light", "f/16 1/125 ISO 100", "--time", "auto")
    server = Live(str(tmp_path / "place.jpg"), *arguments, *light)
    try:
        start = server.client.get("/api/start").json()
        state = start["state"]
        assert (state["scene"], state["view_deg"], state["distance_mm"]) == ("given", 70.0, 4000.0)
        assert (state["hole_mm"], state["depth_mm"], state["time"]) == (0.2, 50.0, "auto")
        assert state["light"] == "f/16, 1/125 s, ISO 100"
        assert start["scenes"][0]["name"] == "place"
        told = server.post("check", state=state).json()
        assert told["settled"] == state
        assert told["scene"]["width_px"] == 60
    finally:
        server.end()


# Slow work, and too much of it --------------------------------------------------------------


def test_of_a_lane_only_the_newest_waits():
    desk = Desk("test")
    begun, go = threading.Event(), threading.Event()
    done = []

    def slow(check):
        begun.set()
        go.wait(FIVE_S)
        check()
        done.append("first")

    first = desk.take(("page", "now"), slow)
    other = desk.take(("page", "a"), lambda check: "other lane")
    assert begun.wait(FIVE_S)
    second = desk.take(("page", "now"), lambda check: done.append("second"))
    third = desk.take(("page", "now"), lambda check: "newest")
    with pytest.raises(SupersededError):
        second.future.result(FIVE_S)
    go.set()
    with pytest.raises(SupersededError):  # stopped at its next step
        first.future.result(FIVE_S)
    assert third.future.result(FIVE_S) == "newest"
    assert other.future.result(FIVE_S) == "other lane"
    assert done == []
    desk.end(FIVE_S)
    with pytest.raises(RefusedError, match="too many"):
        desk.take(("page", "now"), lambda check: None)


def test_a_failure_leaves_the_desk_at_work():
    desk = Desk("test")

    def fail(check):
        raise RuntimeError("broken")

    with pytest.raises(RuntimeError, match="broken"):
        desk.take(("page", "now"), fail).future.result(FIVE_S)
    assert desk.take(("page", "now"), lambda check: 7).future.result(FIVE_S) == 7
    desk.end(FIVE_S)


def test_of_many_pictures_of_one_page_the_newest_is_drawn(live):
    """Twenty at once from one hand: the last is answered, older ones are drawn or superseded."""

    async def ask():
        headers = {TOKEN_HEADER: live.token, "X-Pinsim-Client": "hand"}
        async with httpx.AsyncClient(base_url=live.base, headers=headers, timeout=60) as client:
            waiting = []
            for step in range(20):
                body = {"state": live.state(hole_mm=0.3 + 0.005 * step), "width_px": 320}
                waiting.append(asyncio.create_task(client.post("/api/picture", json=body)))
                await asyncio.sleep(0.01)
            return await asyncio.gather(*waiting)

    answers = asyncio.run(ask())
    assert answers[-1].status_code == 200
    told = [one.status_code for one in answers]
    assert set(told) == {200, 409}
    assert told.count(409) >= 10
    assert all(one.json()["superseded"] for one in answers if one.status_code == 409)


def test_figures_do_not_wait_for_pictures(live):
    """A pinned picture has a lane of its own, and figures a thread of their own."""

    async def ask():
        headers = {TOKEN_HEADER: live.token, "X-Pinsim-Client": "two"}
        async with httpx.AsyncClient(base_url=live.base, headers=headers, timeout=60) as client:
            return await asyncio.gather(
                client.post("/api/picture", json={"state": live.state(), "width_px": 240}),
                client.post(
                    "/api/picture",
                    json={"state": live.state(hole_mm=0.41), "width_px": 240, "lane": "a"},
                ),
                client.post("/api/numbers", json={"state": live.state()}),
                client.post("/api/curves", json={"state": live.state()}),
            )

    assert [one.status_code for one in asyncio.run(ask())] == [200, 200, 200, 200]


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="memory is read from /proc")
def test_it_outlasts_a_crowd_and_a_thousand_wrong_requests():
    """Two hundred at once, half of them cancelled, then nonsense: good ones are answered as before."""
    server = Live("sample:lane", "--distance", "infinity")
    rng = random.Random(7)
    try:
        start = server.client.get("/api/start").json()["state"]
        asyncio.run(_crowd(server, start, rng, 40, 8))
        _nonsense(server, start, rng, 100)  # odd uploads load libraries for good, once
        _everyday(server, start)
        before = _resident(server.process.pid)
        told = asyncio.run(_crowd(server, start, rng, 200, 20))
        assert told.count("cancelled") >= 80
        assert set(told) <= {"cancelled", 200, 409, 503}
        assert told.count(200) >= 10
        _nonsense(server, start, rng, 1000)
        _everyday(server, start)
        after = _resident(server.process.pid)
        assert after < 1.2 * before, f"{before >> 20} MB before, {after >> 20} MB after"
    finally:
        code, _, error = server.end()
    assert (code, error) == (0, "")


def _everyday(server, start):
    """Look around as people do; what is kept afterwards is the same each time."""
    for other in ({"ground": "2 m", "distance_mm": None}, {"scene": "sample:courtyard"}, {}):
        assert server.post("check", state={**start, **other}).status_code == 200
    for hole in (0.2, 0.3, 0.4):
        state = {**start, "hole_mm": hole}
        answer = server.post("picture", state=state, width_px=200, lane="everyday")
        assert answer.status_code == 200
    assert server.post("numbers", state=start).status_code == 200


async def _crowd(server, start, rng, count, clients):
    """Ask for pictures all at once; half of those who ask go away. Return what each was told."""
    limits = httpx.Limits(max_connections=None)
    options = {"base_url": server.base, "headers": {TOKEN_HEADER: server.token}, "timeout": 60}

    async def one(client, number):
        state = {**start, "hole_mm": round(rng.uniform(0.2, 0.45), 3)}
        name = {"X-Pinsim-Client": f"client-{number % clients}"}
        body = {"state": state, "width_px": rng.choice((120, 160)), "lane": f"lane-{number % 3}"}
        asked = asyncio.create_task(client.post("/api/picture", json=body, headers=name))
        if number % 2 == 0:
            await asyncio.sleep(rng.uniform(0.0, 0.05))  # before most can have been answered
            asked.cancel()
        try:
            return (await asked).status_code
        except asyncio.CancelledError:
            return "cancelled"

    async with httpx.AsyncClient(limits=limits, **options) as client:
        return await asyncio.gather(*(one(client, number) for number in range(count)))


def _nonsense(server, start, rng, count):
    """Ask for what cannot be; nothing but a refusal, or rarely a lucky picture, may come of it."""
    values = (
        *(None, True, -1, 0, 1e308, -1e-9, 10**30, "", "x", "0.3 mm", "9e99 m", "nan", "inf"),
        *("\0", "\N{SNOWMAN}", "a" * 300, [], {}, [1, 2], {"a": 1}, "../../etc/passwd", "1/0 mm"),
    )
    routes = ("picture", "numbers", "curves", "check", "design", "point", "save", "difference")
    refused = 0
    for number in range(count):
        key = rng.choice((*start, "unknown", ""))
        value = rng.choice(values)
        kind = number % 5
        if kind == 0:
            body = bytes(rng.randrange(256) for _ in range(rng.randrange(200)))
            headers = {"Content-Type": rng.choice(("application/json", "text/plain", "x"))}
            path = f"/api/{rng.choice(routes)}"
            answer = server.client.post(path, content=body, headers=headers)
        elif kind == 1:
            body = bytes(rng.randrange(256) for _ in range(rng.randrange(300)))
            head = rng.choice((b"", b"\xff\xd8\xff", b"II*\0", b"PK\x03\x04", b"\x93NUMPY\x01\0"))
            path = rng.choice(("photo", "map"))
            name = rng.choice(("a.jpg", "a.npz", "a.nef", "%00", "..", "a.toml"))
            answer = server.client.put(f"/api/{path}?name={name}", content=head + body)
        elif kind == 2:
            answer = server.post(
                "open", toml=f"{key} = {value!r}\n[hole]\n{value!r}", file_name=value
            )
        else:
            body = {"state": {**start, key: value}, "width_px": 32, "x": value, "y": 0.5}
            route = rng.choice(("picture", "check", "design", "point"))
            answer = server.client.post(
                f"/api/{route}",
                content=json.dumps(body).encode(),
                headers={"Content-Type": "application/json"},
            )
        assert answer.status_code < 500, (key, value, answer.text[:300])
        refused += answer.status_code >= 400
    assert refused > 0.6 * count


def _resident(pid):
    """Return a process's resident memory in bytes, once it has come to rest."""
    last = None
    for _ in range(12):
        time.sleep(1.2)  # memory is given back after a second of rest
        text = Path(f"/proc/{pid}/status").read_text()
        now = int(re.search(r"VmRSS:\s+(\d+) kB", text)[1]) << 10
        if last is not None and abs(now - last) < 1 << 20:
            break
        last = now
    return now


# The end ------------------------------------------------------------------------------------


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT, signal.SIGHUP])
def test_at_the_end_nothing_is_left(tmp_path, number):
    server = Live(folder=tmp_path)
    server.client.put("/api/photo?name=a.jpg", content=_jpeg(60, 40))
    assert len(list(tmp_path.iterdir())) == 1
    code, _, error = server.end(number)
    assert (code, error) == (0, "")
    assert list(tmp_path.iterdir()) == []


def test_it_ends_while_a_picture_is_being_drawn(tmp_path):
    server = Live(folder=tmp_path)
    body = {"state": {"scene": "sample:courtyard"}, "width_px": 2000}
    drawing = threading.Thread(target=_ask_in_vain, args=(server, body))
    drawing.start()
    time.sleep(0.5)
    start = time.perf_counter()
    server.process.send_signal(signal.SIGTERM)
    assert server.process.wait(20) == 0
    assert time.perf_counter() - start < 10.0
    drawing.join()
    server.end()
    assert list(tmp_path.iterdir()) == []


def _ask_in_vain(server, body):
    with contextlib.suppress(httpx.HTTPError):
        httpx.post(
            f"{server.base}/api/picture",
            json=body,
            headers={TOKEN_HEADER: server.token},
            timeout=30,
        )


def test_folders_of_servers_that_were_killed_are_swept_up(tmp_path, monkeypatch):
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    done = subprocess.run(
        [sys.executable, "-c", "import os; print(os.getpid())"], capture_output=True, check=True
    )
    dead = tmp_path / f"pinsim-live-{int(done.stdout)}-abc"
    alive = tmp_path / f"pinsim-live-{os.getppid()}-abc"
    other = tmp_path / "pinsim-live-notes"
    for one in (dead, alive, other):
        one.mkdir()
    made = private_folder()
    assert made.stat().st_mode & 0o777 == 0o700
    assert {one.name for one in tmp_path.iterdir()} == {alive.name, other.name, made.name}


# Pieces -------------------------------------------------------------------------------------


def test_a_state_says_itself_again():
    state = read_state({"hole_mm": "0.012 in", "light": "sun", "time": "1/4 s"}, {}, "sample:lane")
    again = read_state(state.settled, {}, "elsewhere")
    assert again.settled == state.settled
    assert again.camera == state.camera
    assert (again.time_s, again.ev) == (0.25, 15.0)
    assert state.camera.hole.diameter_mm == pytest.approx(0.3048)


def test_the_shelf_keeps_only_so_much(tmp_path, monkeypatch):
    shelf = Shelf(tmp_path)
    monkeypatch.setattr("pinsim.live.shelf.MOST_KEPT_BYTES", 100)
    (tmp_path / "photo-0.jpg").write_bytes(b"\0" * 200)
    with pytest.raises(RefusedError, match="too many photos"):
        shelf.new_file("photo", "a.jpg")


def test_a_second_look_at_the_same_scene_decodes_nothing(studio, monkeypatch):
    """Another hole, another distance, another direction: the photo is read once."""
    state = studio.state(FAR)
    studio.shelf.scene(state.place)

    def never(*_args, **_options):
        raise AssertionError("read again")

    monkeypatch.setattr(pinsim.Scene, "load", never)
    nearer = studio.shelf.scene(studio.state({**FAR, "distance_mm": "3 m"}).place)
    assert nearer.distance == 3000.0
    wider = studio.shelf.scene(studio.state({**FAR, "view_deg": 90}).place)
    assert wider.horizontal_view_deg == 90.0
    assert studio.shelf.scene(state.place) is studio.shelf.scene(studio.state(FAR).place)


def test_a_foreign_name_never_reaches_the_page(tmp_path):
    assert live_app._KINDS.keys() >= {".html", ".js", ".css"}
    assert all(
        path.suffix in live_app._KINDS for path in live_app._PAGE.rglob("*") if path.is_file()
    )


def _jpeg(columns, rows):
    rng = np.random.default_rng(3)
    file = io.BytesIO()
    Image.fromarray(rng.integers(0, 255, (rows, columns, 3), np.uint8)).save(file, "JPEG")
    return file.getvalue()
