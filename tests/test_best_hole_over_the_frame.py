"""The hole for a corner, for the whole frame, and how far it may be off.

Expected values come from Hopkins' integral in tests/reference, which shares no code with pinsim. Off
the axis of a flat film, for far objects and a thin plate, a slanted point sees the same integral at
a longer wave: lambda/cos^3 outwards and lambda/cos around; behind a round tin's hole lambda/cos and
lambda cos (geometry of the slanted ray, worked out in the tests that use it).
"""

import math
from dataclasses import replace
from functools import lru_cache

import numpy as np
import pytest
from reference import fresnel

from pinsim.best import CONTRASTS, FrameDetail, light_for
from pinsim.camera import Camera, Film, Hole
from pinsim.numbers import figures

GREEN_NM = 550.0
BOX = Camera(
    focal_length_mm=60.0,
    hole=Hole(diameter_mm=0.3),
    film=Film(width_mm=72.0, height_mm=48.0),
)
HALF_PERCENT = 0.005
ONE_PERCENT = 0.01


def frame_of(camera, *, wavelength_nm=GREEN_NM, material=None, distance_mm=math.inf):
    light = light_for(None if material else wavelength_nm, material)
    return FrameDetail(camera, light=light, distance_mm=distance_mm)


@lru_cache(maxsize=4096)
def finest_detail(diameter_mm, longer, contrast=0.2, focal_length_mm=60.0):
    """Return where Hopkins' integral first falls to a contrast, at GREEN_NM times `longer`."""
    hole = fresnel.Setup(
        diameter_mm=diameter_mm,
        focal_length_mm=focal_length_mm,
        wavelength_nm=GREEN_NM * longer,
    )
    frequency = np.linspace(0, 0.999 * hole.cutoff_per_mm, 400)
    otf = fresnel.hopkins_otf(frequency, hole, nodes=60)
    first = int(np.flatnonzero(otf <= contrast)[0])
    return float(
        np.interp(-contrast, -otf[first - 1 : first + 1], frequency[first - 1 : first + 1])
    )


def over_frame(camera, diameter_mm, contrast=0.2, count=6):
    """Return the geometric mean over both directions and a grid of midpoints in one quadrant."""
    at = (np.arange(count) + 0.5) / (2 * count)
    logs = []
    for across in at * camera.film.width_mm:
        for up in at * camera.film.height_mm:
            cosine = camera.focal_length_mm / math.hypot(across, up, camera.focal_length_mm)
            logs += [
                math.log(finest_detail(diameter_mm, cosine**-power, contrast)) for power in (3, 1)
            ]
    return math.exp(np.mean(logs))


@pytest.mark.parametrize("diameter_mm", [0.22, 0.30, 0.40])
def test_detail_over_the_frame_is_the_mean_of_what_hopkins_integral_gives(diameter_mm):
    found = frame_of(BOX).detail(diameter_mm)
    assert found == pytest.approx(over_frame(BOX, diameter_mm), rel=HALF_PERCENT)


@pytest.mark.parametrize("contrast", CONTRASTS)
def test_no_other_hole_is_better_over_the_frame(contrast):
    best = frame_of(BOX).best(contrast)
    at_best = over_frame(BOX, best.frame_mm, contrast, count=3)
    others = [over_frame(BOX, best.frame_mm * by, contrast, count=3) for by in (0.8, 0.9, 1.1, 1.2)]
    assert at_best > max(others)


@pytest.mark.parametrize("contrast", CONTRASTS)
@pytest.mark.parametrize("name", ["square-box", "wide-box", "paper-box", "body-cap"])
def test_the_compromise_lies_between_the_middles_hole_and_the_corners(name, contrast):
    camera = Camera.load(f"sample:{name}")
    best = frame_of(camera, material=camera.material_name).best(contrast)
    assert best.middle_mm < best.frame_mm < best.corner_mm


@pytest.mark.parametrize("contrast", CONTRASTS)
def test_the_corners_hole_is_the_best_that_an_independent_search_finds(contrast):
    """The poorer of both directions, searched over holes with Hopkins' integral."""
    cosine = 60.0 / math.hypot(36.0, 24.0, 60.0)

    def poorer(diameter):
        return min(finest_detail(diameter, cosine**-power, contrast) for power in (3, 1))

    holes = np.linspace(0.24, 0.52, 113).tolist()
    found = frame_of(BOX).best(contrast).corner_mm
    assert poorer(found) == pytest.approx(max(map(poorer, holes)), rel=ONE_PERCENT)
    assert found == pytest.approx(holes[int(np.argmax([poorer(d) for d in holes]))], rel=0.03)


def test_the_middle_of_a_narrow_frame_and_its_compromise_are_one():
    """A frame of 2 degrees has no corners to speak of."""
    narrow = replace(BOX, film=Film(width_mm=2.0, height_mm=2.0))
    best = frame_of(narrow).best(0.2)
    assert best.frame_mm == pytest.approx(best.middle_mm, rel=ONE_PERCENT)
    assert best.corner_mm == pytest.approx(best.middle_mm, rel=ONE_PERCENT)


@pytest.mark.parametrize("lost_share", [0.1, 0.2])
def test_a_hole_at_the_end_of_the_tolerance_loses_just_that_much(lost_share):
    tolerance = frame_of(BOX).tolerance(lost_share=lost_share)
    best = over_frame(BOX, tolerance.best_mm)
    assert tolerance.low_mm < tolerance.best_mm < tolerance.high_mm
    for end in (tolerance.low_mm, tolerance.high_mm):
        assert over_frame(BOX, end) / best == pytest.approx(1.0 - lost_share, abs=HALF_PERCENT)
    assert tolerance.smaller_share == pytest.approx(1 - tolerance.low_mm / tolerance.best_mm)
    assert tolerance.larger_share == pytest.approx(tolerance.high_mm / tolerance.best_mm - 1)


def test_blue_sensitive_paper_wants_a_smaller_hole_than_panchromatic_film():
    """d grows with the root of the wavelength: Petzval 1857; handbooks' ranges of sensitivity."""
    paper, film = (
        frame_of(BOX, material=name) for name in ("blue-sensitive-paper", "panchromatic-100")
    )
    for contrast, share in zip(CONTRASTS, (0.95, 0.95, 0.98), strict=True):
        assert paper.best(contrast).frame_mm < share * film.best(contrast).frame_mm
        assert paper.best(contrast).middle_mm < share * film.best(contrast).middle_mm


def test_near_objects_want_a_smaller_hole_by_rayleighs_conjugates():
    """r^2 (1/z + 1/zo) = N lambda (Rayleigh 1891, form from memory), near the middle of the film."""
    narrow = replace(BOX, film=Film(width_mm=4.0, height_mm=4.0))
    far, near = (frame_of(narrow, distance_mm=zo).best(0.2).frame_mm for zo in (math.inf, 180.0))
    assert near / far == pytest.approx(math.sqrt(180.0 / 240.0), rel=ONE_PERCENT)


# A tin: depth z across, film along the wall, hole in the wall. At the angle theta the film lies
# z cos(theta) away and is met at theta once more, so the hole's shift per frequency is
# lambda z/cos(theta) outwards and lambda z cos(theta) around; on a flat film 1/cos^3 and 1/cos.
@pytest.mark.parametrize("angle_deg", [20.0, 40.0])
def test_the_edge_of_a_round_tin_is_as_sharp_as_its_geometry_says(angle_deg):
    angle = math.radians(angle_deg)
    tin = replace(BOX, film=Film(width_mm=2 * 60.0 * angle, height_mm=20.0, bend_radius_mm=30.0))
    flat = replace(BOX, film=Film(width_mm=2 * 60.0 * math.tan(angle), height_mm=20.0))
    edges = [
        next(
            one
            for one in figures(camera, wavelength_nm=GREEN_NM).places
            if one.name == "right edge"
        )
        for camera in (tin, flat)
    ]
    for edge, powers in zip(edges, [(-1, 1), (-3, -1)], strict=True):
        assert edge.field_deg == pytest.approx(angle_deg, abs=1e-6)
        found = edge.tangential_cycles_mm, edge.sagittal_cycles_mm
        expected = [finest_detail(0.3, math.cos(angle) ** power) for power in powers]
        assert found == pytest.approx(expected, rel=HALF_PERCENT)
    # Both directions, not their poorer one: around the edge the tin's film is nearer than best.
    assert edges[0].tangential_cycles_mm > edges[1].tangential_cycles_mm
    assert min(edges[0].tangential_cycles_mm, edges[0].sagittal_cycles_mm) > min(
        edges[1].tangential_cycles_mm, edges[1].sagittal_cycles_mm
    )


def test_a_thick_plate_asks_for_a_wider_hole_in_the_corner():
    """It narrows the opening seen from there by t tan(theta): Gardner, J. Res. NBS 39 (1947) 213."""
    thick = replace(BOX, hole=Hole(diameter_mm=0.3, plate_thickness_mm=0.2))
    thin_best, thick_best = frame_of(BOX).best(0.2), frame_of(thick).best(0.2)
    assert thick_best.corner_mm > 1.1 * thin_best.corner_mm
    assert thick_best.frame_mm > thin_best.frame_mm
    assert thick_best.middle_mm == thin_best.middle_mm


def test_where_a_plate_like_a_pipe_leaves_only_the_middle_lit_the_middle_decides():
    pipe = Camera(
        focal_length_mm=10.0,
        hole=Hole(diameter_mm=0.3, plate_thickness_mm=2.0),
        film=Film(width_mm=245.0, height_mm=194.0),
    )
    best = frame_of(pipe).best(0.2)
    assert best.corner_mm is None
    assert best.frame_mm == pytest.approx(best.middle_mm, rel=ONE_PERCENT)
