"""Panoramas: their light on the film, where they lie on the sphere, and what their metadata say.

The scene here is a function on the sphere. Its pictures are means over pixels; the film is summed from
dense points of it by the kernel that projection promises (a sinc cut off at 0.8 of the film grid's
Nyquist frequency under a Kaiser window of 12 periods and parameter 5, see pinsim/render/resample.py).
Directions are elementary trigonometry. "Computed independently" stands for that.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from PIL import Image, PngImagePlugin
from reference.bent_film import BentFilm

from pinsim.errors import SceneError
from pinsim.render.plan import make_plan
from pinsim.render.preview import preview
from pinsim.render.project import project
from pinsim.scene import DistanceMap, Scene
from pinsim.scene.panorama import PanoramaPlace, settled_place
from pinsim.scene.panorama_fields import NAMESPACE, panorama_of
from pinsim.scene.photo import photo_from_linear

LARGEST_ERROR = 0.004
LEAST_PSNR_DB = 55.0  # of encoded values; an eighth of an 8-bit step is 66 dB
FILMS = {
    "flat": BentFilm(20.0, 16.0, 12.0),
    "flat, raised and moved aside": BentFilm(20.0, 16.0, 12.0, math.inf, "vertical", 9.0, 12.0),
    "flat to 70 degrees": BentFilm(8.0, 34.0, 28.0),
    "arc about the hole": BentFilm(20.0, 44.0, 12.0, 20.0),
    "round tin": BentFilm(20.0, 40.0, 12.0, 10.0),
    "round tin, lying": BentFilm(20.0, 12.0, 40.0, 10.0, "horizontal"),
}


def looked_at(direction, yaw_deg, pitch_deg, roll_deg):
    """Turn camera directions to level ones: roll clockwise first, then up, then to the right."""
    x, y, z = np.moveaxis(direction, -1, 0)
    roll, pitch, yaw = np.radians([roll_deg, pitch_deg, yaw_deg])
    # Rolled clockwise, the camera's right side points down and its top to the right.
    x, y = x * math.cos(roll) + y * math.sin(roll), y * math.cos(roll) - x * math.sin(roll)
    y, z = y * math.cos(pitch) + z * math.sin(pitch), z * math.cos(pitch) - y * math.sin(pitch)
    x, z = x * math.cos(yaw) + z * math.sin(yaw), z * math.cos(yaw) - x * math.sin(yaw)
    return np.stack([x, y, z], axis=-1)


def waves(finest):
    """Return a smooth scene of 24 plane waves, up to `finest` cycles per radian, on the sphere."""
    rng = np.random.default_rng(7)
    normals = rng.normal(size=(24, 3))
    normals /= np.linalg.norm(normals, axis=1)[:, None]
    vectors = 2.0 * math.pi * finest * rng.uniform(0.1, 1.0, 24)[:, None] * normals
    phases = rng.uniform(0.0, 2.0 * math.pi, 24)

    def light(direction):
        unit = direction / np.linalg.norm(direction, axis=-1, keepdims=True)
        total = np.zeros(unit.shape[:-1])
        for vector, phase in zip(vectors, phases, strict=True):
            total += np.cos(unit @ vector + phase)
        return 0.5 + 0.02 * total  # 24 waves together stay below 1

    return light


def sphere_of(light, rows, sub=2):
    """Return an equirectangular picture of a scene, each pixel the mean of sub x sub points."""
    columns = 2 * rows
    azimuth = ((np.arange(columns * sub) + 0.5) / (rows * sub) - 1.0) * math.pi
    picture = np.empty((rows, columns))
    for row in range(rows):
        height = 0.5 * math.pi - (row + (np.arange(sub)[:, None] + 0.5) / sub) / rows * math.pi
        direction = np.stack(
            np.broadcast_arrays(
                np.cos(height) * np.sin(azimuth), np.sin(height), np.cos(height) * np.cos(azimuth)
            ),
            axis=-1,
        )
        picture[row] = light(direction).reshape(sub, columns, sub).mean(axis=(0, 2))
    return picture


def panorama_scene(picture, **more):
    return Scene(
        name="panorama",
        photo=photo_from_linear(np.asarray(picture, np.float32)),
        horizontal_view_deg=360.0,
        projection="equirectangular",
        **more,
    )


def kernel(distance):
    window = np.i0(5.0 * np.sqrt(np.maximum(1.0 - (distance / 6.0) ** 2, 0.0))) / np.i0(5.0)
    return np.where(np.abs(distance) < 6.0, np.sinc(distance) * window, 0.0)


def summed(light, film, plan, look_at, rows, columns, sub=4):
    """Return the film light of some grid rows and columns, from sub x sub points per pixel."""

    def axis(coordinates, picked):
        place = np.arange((picked[0] - 8) * sub, (picked[-1] + 9) * sub)
        place = (place + 0.5) / sub - 0.5
        step = coordinates[1] - coordinates[0]
        weights = kernel((place - picked[:, None]) * 0.8)
        return coordinates[0] + place * step, weights / weights.sum(axis=1, keepdims=True)

    up, down = axis(plan.up_mm(), rows)
    right, across = axis(plan.right_mm(), columns)
    direction = looked_at(FILMS[film].points_mm(right[None, :], up[:, None]), *look_at)
    return down @ light(direction) @ across.T


def encoded(light):
    """The sRGB curve, IEC 61966-2-1."""
    return np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1 / 2.4) - 0.055)


def psnr_db(one, other):
    return -10.0 * np.log10(np.mean((encoded(one) - encoded(other)) ** 2))


def windows(plan, size=40):
    """Return rows and columns of the frame's middle, a corner and the middle of an edge."""
    top, left = plan.margin
    height, width = plan.shape
    for down, across in ((0.5, 0.5), (0.0, 0.0), (1.0, 0.5)):
        row = top + round(down * (height - size))
        column = left + round(across * (width - size))
        yield np.arange(row, row + size), np.arange(column, column + size)


LOOKS = [
    (0.0, 0.0, 0.0),
    (180.0, 0.0, 0.0),
    (25.0, 90.0, 0.0),
    (-70.0, -88.0, 0.0),
    (60.0, 40.0, 35.0),
]


@pytest.mark.parametrize(
    ("film", "look_at"),
    [
        *(("flat", look) for look in LOOKS),
        *((film, look) for film in list(FILMS)[1:] for look in (LOOKS[2], LOOKS[4])),
    ],
)
def test_finer_panoramas_are_averaged_right(film, look_at):
    """Computed independently. At most 70 dB is left by the picture's own pixels."""
    camera = FILMS[film].camera()
    light = waves(12.0)
    scene = panorama_scene(sphere_of(light, 500), look_at_deg=look_at)
    plan = make_plan(scene, camera, wavelength_nm=550.0)
    got = project(scene, plan).light[..., 1]
    for rows, columns in windows(plan):
        expected = summed(light, film, plan, look_at, rows, columns)
        assert psnr_db(got[np.ix_(rows, columns)], expected) > LEAST_PSNR_DB
        # Nowhere, as at a pole, may a few pixels hide in the mean.
        assert np.abs(got[np.ix_(rows, columns)] - expected).max() < LARGEST_ERROR


@pytest.mark.parametrize("look_at", LOOKS, ids=["ahead", "behind", "zenith", "nadir", "aslant"])
def test_coarser_panoramas_are_interpolated_smoothly(look_at):
    """Computed independently: a scene of at most 1/6 cycle per pixel comes through."""
    camera = FILMS["flat"].camera()
    light = waves(6.0)
    scene = panorama_scene(sphere_of(light, 180), look_at_deg=look_at)
    plan = make_plan(scene, camera, wavelength_nm=550.0)
    assert 180 / math.pi < 0.5 * 20.0 / plan.pitch_mm  # photo pixels twice as large as the film's
    got = project(scene, plan).light[..., 1]
    # The picture's own pixels dim its waves; compare with waves as dim.
    for rows, columns in windows(plan):
        expected = summed(light, "flat", plan, look_at, rows, columns)
        assert psnr_db(got[np.ix_(rows, columns)], expected) > 50.0
        assert np.abs(got[np.ix_(rows, columns)] - expected).max() < LARGEST_ERROR


@pytest.mark.parametrize(
    ("times", "slant_deg"),
    [(1.3, 0.0), (1.3, 90.0), (1.5, 45.0), (1.7, 0.0), (2.3, 45.0)],
)
@pytest.mark.parametrize("look_at", [(0.0, 0.0), (0.0, 90.0), (40.0, 55.0)])
def test_a_grating_finer_than_the_film_leaves_nothing(times, slant_deg, look_at):
    """What the film grid cannot carry must not come back as a coarse wave, least at a pole.

    Sampling theorem: a wave above the Nyquist frequency looks like one below it unless it is taken
    out first. times : its frequency over Nyquist's. The picture's pixels are samples here, as means of
    pixels would dim it unevenly where they are wedges round a pole.
    """
    camera = FILMS["flat"].camera(1.5)
    blank = panorama_scene(np.ones((4, 8)))
    pitch = make_plan(blank, camera, wavelength_nm=550.0).pitch_mm
    cycles_per_rad = times * 0.5 / pitch * 20.0
    look = (*look_at, 0.0)
    slant = math.radians(slant_deg)
    along = looked_at(np.array([math.cos(slant), math.sin(slant), 0.0]), *look)
    rows = math.ceil(3.2 * cycles_per_rad * math.pi)  # 3.2 photo pixels for a period

    def light(direction):
        return 0.5 + 0.4 * np.cos(2.0 * math.pi * cycles_per_rad * (direction @ along))

    scene = panorama_scene(sphere_of(light, rows, sub=1), look_at_deg=look)
    plan = make_plan(scene, camera, wavelength_nm=550.0)
    got = project(scene, plan).light[..., 1]
    row, column = (margin + size // 2 for margin, size in zip(plan.margin, plan.shape, strict=True))
    middle = got[row - 12 : row + 12, column - 12 : column + 12]
    assert np.abs(middle - 0.5).max() < 0.005 * 0.4


def test_a_pinwheel_round_the_zenith_fades():
    """Spokes as many as columns allow, which crowd at the pole: too fine for the film, they are grey.

    Sampling theorem again: within r pixels of the pole, m spokes have more than m/(2 pi r) cycles per
    pixel, here 1.3 times the Nyquist frequency and more.
    """
    camera = FILMS["flat"].camera(1.5)
    reach_px, spokes = 16, 82

    def light(direction):
        azimuth = np.arctan2(direction[..., 0], direction[..., 2])
        return 0.5 + 0.4 * np.cos(spokes * azimuth)

    scene = panorama_scene(sphere_of(light, 900, sub=1), look_at_deg=(0.0, 90.0, 0.0))
    plan = make_plan(scene, camera, wavelength_nm=550.0)
    got = project(scene, plan).light[..., 1]
    away = np.hypot(plan.right_mm()[None, :], plan.up_mm()[:, None]) / plan.pitch_mm
    assert spokes / (2.0 * math.pi * reach_px) > 1.3 * 0.5
    assert np.abs(got[away < reach_px] - 0.5).max() < 0.01 * 0.4
    assert got[(away > 3 * reach_px) & (away < 5 * reach_px)].std() > 0.1  # farther out they stand


@pytest.mark.parametrize("look_at", LOOKS, ids=["ahead", "behind", "zenith", "nadir", "aslant"])
@pytest.mark.parametrize("film", ["flat to 70 degrees", "round tin"])
@pytest.mark.parametrize("rows", [31, 100, 601])
def test_a_plain_wall_stays_plain(film, look_at, rows):
    """Averages of one value are that value, also over the poles and behind."""
    scene = panorama_scene(np.full((rows, 2 * rows), 0.37), look_at_deg=look_at)
    plan = make_plan(scene, FILMS[film].camera(1.5), wavelength_nm=550.0)
    view = project(scene, plan)
    np.testing.assert_allclose(view.light[plan.inside], 0.37, atol=1e-5)
    assert view.covered.all()


# Where it looks --------------------------------------------------------------------------------


def spot_at(azimuth_deg, height_deg, rows=360):
    """Return a sphere with a soft spot, by the cosine of the angle from it."""
    there = looked_at(np.array([0.0, 0.0, 1.0]), azimuth_deg, height_deg, 0.0)
    return sphere_of(lambda d: 0.01 + np.exp((d @ there - 1.0) / 2e-4), rows, sub=1)


def brightest_mm(picture):
    spot = picture.exposure[..., 1].astype(float)
    spot[spot < 0.3 * spot.max()] = 0.0
    rows, columns = spot.shape
    x = (np.arange(columns) - 0.5 * (columns - 1)) * picture.pitch_mm
    y = (0.5 * (rows - 1) - np.arange(rows)) * picture.pitch_mm
    return spot.sum(0) @ x / spot.sum(), spot.sum(1) @ y / spot.sum()


@pytest.mark.parametrize(
    ("spot", "look_at", "expected_deg"),
    [
        ((40.0, 20.0), (40.0, 20.0), (0.0, 0.0)),
        ((-175.0, 0.0), (178.0, 0.0), (7.0, 0.0)),
        ((10.0, 0.0), (0.0, 0.0), (10.0, 0.0)),  # right of the middle is right on the film
        ((0.0, 50.0), (0.0, 40.0), (0.0, 10.0)),  # above is above
        ((0.0, 85.0), (180.0, 85.0), (0.0, 10.0)),  # over the zenith
        ((10.0, 0.0), (0.0, 0.0, 90.0), (0.0, 10.0)),  # rolled clockwise, right is up
    ],
)
def test_look_at_turns_the_camera(spot, look_at, expected_deg):
    """On flat film a ray at an angle from the axis lands at z tan of it."""
    scene = panorama_scene(spot_at(*spot), look_at_deg=(*look_at, 0.0)[:3])
    found = brightest_mm(preview(scene, FILMS["flat"].camera(), wavelength_nm=550.0))
    expected = [20.0 * math.tan(math.radians(angle)) for angle in expected_deg]
    assert found == pytest.approx(expected, abs=0.02)


def test_a_leaning_panorama_is_levelled():
    """A camera that pitched up by 12 degrees has the horizon 12 degrees below its middle."""
    place = PanoramaPlace(full_width_px=720.0, full_height_px=360.0, pitch_deg=12.0)
    scene = panorama_scene(spot_at(0.0, -12.0), panorama=place)
    assert brightest_mm(
        preview(scene, FILMS["flat"].camera(), wavelength_nm=550.0)
    ) == pytest.approx((0.0, 0.0), abs=0.02)


def test_a_rolled_panorama_is_levelled():
    """As roll increases, the horizon turns counterclockwise in the picture (from memory)."""
    place = PanoramaPlace(full_width_px=720.0, full_height_px=360.0, roll_deg=90.0)
    # The horizon's right side has turned up: what is really 10 degrees to the right is at the top.
    scene = panorama_scene(spot_at(0.0, 10.0), panorama=place)
    found = brightest_mm(preview(scene, FILMS["flat"].camera(), wavelength_nm=550.0))
    assert found == pytest.approx((20.0 * math.tan(math.radians(10.0)), 0.0), abs=0.02)


# Parts of a sphere -----------------------------------------------------------------------------


@pytest.mark.parametrize("beyond", ["extend", "mirror", "black"])
def test_a_part_shows_what_the_whole_does(beyond):
    """Cutting the picture changes nothing but what is beyond the cut."""
    whole = sphere_of(waves(10.0), 360, sub=1)
    part = whole[60:260, 300:520]
    place = PanoramaPlace(full_width_px=720.0, full_height_px=360.0, left_px=300.0, top_px=60.0)
    look_at = (10.0, 15.0, 0.0)
    full = panorama_scene(whole, look_at_deg=look_at)
    cut = Scene(
        name="part",
        photo=photo_from_linear(part),
        horizontal_view_deg=110.0,
        projection="equirectangular",
        panorama=place,
        look_at_deg=look_at,
        beyond=beyond,
    )
    plan = make_plan(full, FILMS["arc about the hole"].camera(2.5), wavelength_nm=550.0)
    seen = project(cut, plan)
    assert 0.5 < seen.covered_share < 0.999
    expected = project(full, plan).light[plan.inside]
    # Kernels of 6 photo pixels and of 9 of the film: farther inside nothing from beyond reaches.
    reach = math.ceil(9 + 6 * 20.0 / plan.pitch_mm / (360 / math.pi))
    shrunk = seen.covered.copy()
    for axis in (0, 1):
        for step in range(-reach, reach + 1):
            shrunk &= np.roll(seen.covered, step, axis)
    assert shrunk.any()
    difference = np.abs(seen.light[plan.inside] - expected)[shrunk]
    assert difference.max() < 2e-3
    if beyond == "black":
        dark = ~seen.covered
        for axis in (0, 1):
            for step in range(-reach, reach + 1):
                dark &= np.roll(~seen.covered, step, axis)
        assert dark.any()
        assert np.abs(seen.light[plan.inside][dark]).max() < 1e-3


def test_a_view_centres_a_part_on_the_horizon():
    scene = Scene(
        name="part",
        photo=photo_from_linear(np.ones((100, 300))),
        horizontal_view_deg=180.0,
        projection="equirectangular",
    )
    place = scene.place
    assert (place.full_width_px, place.full_height_px) == (600.0, 300.0)
    assert (place.left_px, place.top_px) == (150.0, 100.0)
    assert scene.vertical_view_deg == pytest.approx(60.0)


# Distances -------------------------------------------------------------------------------------


def near_above(near_mm=60.0, far_mm=1000.0):
    """Return a map of a panorama: near above the horizon, far below it."""
    distances = np.full((90, 180), near_mm)
    distances[45:] = far_mm
    return DistanceMap.from_distances(distances, along="ray")


def test_distances_of_a_panorama_are_along_its_rays():
    """At r along a ray is r cos(angle) along the hole's axis, so 1/zo = 1/(r cos)."""
    scene = panorama_scene(np.ones((90, 180)), distance=near_above())
    plan = make_plan(scene, FILMS["flat"].camera(2.0), wavelength_nm=550.0)
    inverse = project(scene, plan).inverse_distance
    right, up = plan.right_mm()[None, :], plan.up_mm()[:, None]
    cosine = 20.0 / np.sqrt(right**2 + up**2 + 400.0)
    expected = np.where(up > 0.0, 1.0 / 60.0, 1.0 / 1000.0) / cosine
    off = np.abs(up[:, 0]) > 0.1  # the horizon itself is either
    np.testing.assert_allclose(inverse[off], expected[off], rtol=1e-5)


def test_film_behind_the_holes_plane_sees_nothing_near():
    camera = FILMS["round tin"].camera(2.5)
    far = panorama_scene(np.ones((90, 180)))
    # Kernels for every distance take long on a bent film and are not looked at here.
    plan = replace(make_plan(far, camera, wavelength_nm=550.0), varied=True)
    inverse = project(replace(far, distance=near_above()), plan).inverse_distance
    ahead = FILMS["round tin"].points_mm(plan.right_mm(), 0.0)[:, 2]
    behind = ahead <= 0.0
    assert (inverse[:, behind] == 0.0).all()
    assert np.isfinite(inverse).all()
    above = plan.up_mm() > 0.0
    assert (inverse[np.ix_(above, ahead > 1.0)] >= 1.0 / 60.0).all()


# Metadata --------------------------------------------------------------------------------------

HEAD = '<x:xmpmeta xmlns:x="adobe:ns:meta/"><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">'
TAIL = "</rdf:RDF></x:xmpmeta>"
CROP = {
    "ProjectionType": "equirectangular",
    "FullPanoWidthPixels": "800",
    "FullPanoHeightPixels": "400",
    "CroppedAreaImageWidthPixels": "400",
    "CroppedAreaImageHeightPixels": "100",
    "CroppedAreaLeftPixels": "200",
    "CroppedAreaTopPixels": "120",
}
WHOLE = {"ProjectionType": "equirectangular"}


def packet(fields, form="attributes", prefix="GPano"):
    """Return an XMP packet; the form is free, as is the prefix (XML namespaces)."""
    if form == "attributes":
        inner = "".join(f' {prefix}:{name}="{value}"' for name, value in fields.items())
        body = f'<rdf:Description rdf:about="" xmlns:{prefix}="{NAMESPACE}"{inner}/>'
    else:
        inner = "".join(f"<{prefix}:{n}>{v}</{prefix}:{n}>" for n, v in fields.items())
        body = f'<rdf:Description xmlns:{prefix}="{NAMESPACE}">{inner}</rdf:Description>'
    return f'<?xpacket begin="" id="x"?>{HEAD}{body}{TAIL}  <?xpacket end="w"?>'.encode()


@pytest.mark.parametrize("form", ["attributes", "elements"])
def test_the_place_is_read_from_xmp(form):
    """Names as in the published field reference; the view is 360 x 400/800 degrees."""
    place, _, notes = panorama_of(packet(CROP, form), (100, 400))
    assert notes == ()
    assert place == PanoramaPlace(
        full_width_px=800.0, full_height_px=400.0, left_px=200.0, top_px=120.0
    )


def test_the_prefix_and_the_encoding_do_not_matter():
    text = packet(CROP, prefix="p").decode()
    for encoding in ("utf-8", "utf-16"):
        place, *_ = panorama_of(text.encode(encoding), (100, 400))
        assert place is not None, encoding
        assert place.left_px == 200.0


def test_a_picture_made_smaller_keeps_its_place():
    place, *_ = panorama_of(packet(CROP), (50, 200))
    assert place == PanoramaPlace(
        full_width_px=400.0, full_height_px=200.0, left_px=100.0, top_px=60.0
    )


def test_pose_is_read_and_said():
    fields = {
        **WHOLE,
        "PoseHeadingDegrees": "350.5",
        "PosePitchDegrees": "-3",
        "PoseRollDegrees": "2",
    }
    place, _, notes = panorama_of(packet(fields), (100, 200))
    assert place is not None
    assert (place.pitch_deg, place.roll_deg, place.heading_deg) == (-3.0, 2.0, 350.5)
    assert notes == ("levelled by its XMP data: pitch -3 deg, roll 2 deg",)


ODD = {
    "contradicts itself": ({**CROP, "CroppedAreaLeftPixels": "700"}, "does not fit in a full 800"),
    "no 2 to 1": ({**CROP, "FullPanoHeightPixels": "800"}, "not twice as wide as high"),
    "absurd": ({**CROP, "FullPanoWidthPixels": "1e30"}, "a full sphere of 1e+30"),
    "negative": ({**CROP, "CroppedAreaImageWidthPixels": "-4"}, "a cropped area of -4"),
    "no number": ({**CROP, "FullPanoWidthPixels": "wide"}, "'wide', no number"),
    "not finite": ({**CROP, "FullPanoWidthPixels": "nan"}, "'nan', no number"),
    "cropped since": ({**CROP, "CroppedAreaImageHeightPixels": "300"}, "it was cropped since"),
    "no place": (
        {k: v for k, v in CROP.items() if k != "CroppedAreaTopPixels"},
        "does not say where",
    ),
    "other kind": ({"ProjectionType": "cylindrical"}, "of kind 'cylindrical'"),
    "pitch": ({**CROP, "PosePitchDegrees": "123"}, "PosePitchDegrees in its XMP data is 123"),
}


@pytest.mark.parametrize("name", ODD)
def test_odd_fields_are_left_out_with_a_word(name):
    fields, words = ODD[name]
    place, why, notes = panorama_of(packet(fields), (100, 400))
    assert any(words in note for note in (why, *notes)), (why, notes)
    if name == "pitch":
        assert place is not None
        assert place.pitch_deg == 0.0
    elif name in {"no number", "not finite"}:
        assert place is not None  # half as wide as the height told twice over
        assert place.full_width_px == 800.0
    else:
        assert place is None


HOSTILE = {
    "nothing but a type": b"<!DOCTYPE a>",
    "entities": b'<!DOCTYPE a [<!ENTITY b "equirectangular"><!ENTITY c "&b;&b;&b;">]>',
    "outside entity": b'<!DOCTYPE a [<!ENTITY b SYSTEM "file:///etc/passwd">]>',
    "in small letters": b"<!doctype a>",
}


@pytest.mark.parametrize("name", HOSTILE)
def test_a_document_type_is_refused_unread(name):
    """XML 1.0: entities can be declared in a document type only."""
    place, _, notes = panorama_of(HOSTILE[name] + packet(CROP), (100, 400))
    assert place is None
    assert len(notes) == 1
    assert "XMP data are not used" in notes[0]


@pytest.mark.parametrize(
    "data", [b"", b"\0\0", b"<a>", packet(CROP)[:-40], packet(CROP) + b"<", b"\xff" * 99]
)
def test_a_damaged_packet_is_no_panorama(data):
    place, *_ = panorama_of(data, (100, 400))
    assert place is None
    long = NAMESPACE.encode() + b" " * 2_000_000
    assert panorama_of(long, (100, 400))[2][0].startswith(
        "its XMP data are not used: they are 2000"
    )


def test_an_endless_field_stays_short():
    place, _, notes = panorama_of(packet({"ProjectionType": "x" * 90_000}, "elements"), (100, 400))
    assert place is None
    assert len(notes[0]) < 400


# Files and the line ----------------------------------------------------------------------------


def save(path, fields, size=(400, 100)):
    image = Image.new("RGB", size, (120, 130, 140))
    xmp = packet(fields)
    if path.suffix == ".png":
        info = PngImagePlugin.PngInfo()
        info.add_itxt("XML:com.adobe.xmp", xmp.decode())
        image.save(path, pnginfo=info)
    elif path.suffix == ".tif":
        image.save(path, tiffinfo={700: xmp})
    else:
        image.save(path, xmp=xmp)
    return path


@pytest.mark.parametrize("suffix", [".jpg", ".png", ".tif", ".webp"])
def test_a_photo_that_says_it_is_a_panorama_needs_no_projection(tmp_path, suffix):
    scene = Scene.load(save(tmp_path / f"round{suffix}", CROP))
    assert scene.projection == "equirectangular"
    assert scene.horizontal_view_deg == 180.0
    assert scene.vertical_view_deg == pytest.approx(45.0)
    assert any("taken as a panorama, 12 % of a sphere" in note for note in scene.notes)


def test_a_part_cut_from_a_panorama_is_asked_for_its_place(run, tmp_path):
    save(tmp_path / "round.jpg", {**CROP, "CroppedAreaImageHeightPixels": "300"})
    code, _, err = run("preview", "round.jpg", *CAMERA)
    assert code == 2
    assert "it was cropped since. Say how wide it sees (--view 200deg" in err
    code, out, err = run("preview", "round.jpg", *CAMERA, "--view", "90deg")
    assert (code, err) == (0, "")
    assert "taken as a panorama, 3 % of a sphere" in out


def test_what_is_typed_comes_before_the_metadata(tmp_path):
    photo = save(tmp_path / "round.jpg", CROP)
    flat = Scene.load(photo, projection="rectilinear", horizontal_view_deg=60.0)
    assert flat.projection == "rectilinear"
    wider = Scene.load(photo, horizontal_view_deg=200.0)
    assert wider.place.full_width_px == pytest.approx(720.0)
    assert any("angle of view as given" in note for note in wider.notes)


def test_a_scene_file_tells_the_place(tmp_path):
    Image.new("RGB", (400, 100)).save(tmp_path / "part.png")
    file = tmp_path / "scene.toml"
    text = 'photo = "part.png"\nlook_at = ["30 deg", "-10 deg"]\n'
    file.write_text(text + "[panorama]\nfull_width = 800\nleft = 200\ntop = 120\n")
    scene = Scene.load(file)
    assert scene.look_at_deg == (30.0, -10.0, 0.0)
    assert scene.place == PanoramaPlace(
        full_width_px=800.0, full_height_px=400.0, left_px=200.0, top_px=120.0
    )
    file.write_text(text + 'horizontal_view = "180 deg"\n[panorama]\nhorizon_row = 80\n')
    # 800 px are 360 degrees, so the whole is 400 px high and 200 above the horizon.
    assert Scene.load(file).place.top_px == pytest.approx(120.0)
    assert Scene.load(file, look_at_deg=(1.0, 2.0, 3.0)).look_at_deg == (1.0, 2.0, 3.0)


WRONG_TABLES = {
    "[panorama]\nfull_width = 800\n": "left is missing",
    "[panorama]\nleft = 5\n": "need the full size",
    "[panorama]\nfull_width = 800\nleft = 500\ntop = 0\n": "does not fit in a full 800",
    "[panorama]\nfull_width = 800\nfull_height = 300\nleft = 0\ntop = 0\n": "not twice as wide",
    '[panorama]\nfull_width = "800 px"\n': "plain number of the photo's pixels",
    "[panorama]\nhorizon_row = 40\n": "needs the angle",
    "[panorama]\nhorizon_row = 40\nleft = 3\n": "exclude each other",
    "[panorama]\nfull_widht = 800\n": "Did you mean 'full_width'",
    'projection = "rectilinear"\n[panorama]\nfull_width = 800\n': "belongs to projection",
    'projection = "equirectangular"\n': "a whole sphere is twice as wide as high",
    'projection = "equirectangular"\nlook_at = "30 deg"\n': "must be a list",
    'projection = "equirectangular"\nlook_at = ["30 deg"]\n': "has 1 angles",
    'projection = "equirectangular"\nlook_at = ["30 deg", "95 deg"]\n': "must be -90 to 90 deg",
    'look_at = ["30 deg", "5 deg"]\nhorizontal_view = "60 deg"\n': "this photo is rectilinear",
}


@pytest.mark.parametrize("text", WRONG_TABLES)
def test_a_wrong_table_is_refused(tmp_path, text):
    Image.new("RGB", (400, 100)).save(tmp_path / "part.png")
    file = tmp_path / "scene.toml"
    file.write_text('photo = "part.png"\n' + text)
    with pytest.raises(SceneError) as caught:
        Scene.load(file)
    message = str(caught.value)
    assert WRONG_TABLES[text] in message
    assert "\n" not in message


def test_a_place_needs_something_that_tells_it():
    with pytest.raises(SceneError, match="x is 300 x 100 pixels: a whole sphere"):
        settled_place((100, 300), view_deg=None, told=None, from_file=None, why="", name="x")


CAMERA = ("--hole", "0.8mm", "--focal-length", "20mm", "--film", "16mmx12mm", "-o", "out.png")


@pytest.mark.parametrize("look", ["30,-10", "30deg,-0.2rad", "-30,10,5"])
def test_the_line_says_where_to_look(run, tmp_path, look):
    save(tmp_path / "round.jpg", WHOLE, (400, 200))
    code, out, err = run("preview", "round.jpg", *CAMERA, "--look-at", look)
    assert (code, err) == (0, "")
    assert "taken as a panorama, a whole sphere, by its XMP data" in out


WRONG_LINES = {
    "30": "write yaw and pitch",
    "30,": "cannot read",
    "30,100": "look-at pitch is 100 deg; it must be -90 to 90 deg",
    "500,0": "look-at yaw is 500 deg",
    "30,5m": "the unit of '5m' is not one of deg, rad",
}


@pytest.mark.parametrize("look", WRONG_LINES)
def test_a_wrong_direction_is_one_line(run, tmp_path, look):
    save(tmp_path / "round.jpg", WHOLE, (400, 200))
    code, out, err = run("preview", "round.jpg", *CAMERA, "--look-at", look)
    assert (code, out) == (2, "")
    assert WRONG_LINES[look] in err
    assert err.count("\n") == 1


def test_looking_around_in_a_flat_photo_is_refused(run, tmp_path):
    Image.new("RGB", (400, 200)).save(tmp_path / "flat.png")
    code, _, err = run("preview", "flat.png", "--view", "60deg", *CAMERA, "--look-at", "0,0")
    assert code == 2
    assert "look-at turns the camera round in a panorama; this photo is rectilinear" in err
    assert not (tmp_path / "out.png").exists()
