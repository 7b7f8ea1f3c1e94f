"""What is kept between looks changes time only, never a picture."""

import gc
import weakref
from dataclasses import replace

import numpy as np
import pytest

import pinsim
from pinsim.camera import Camera, Film, Hole
from pinsim.render import kept
from pinsim.render.plan import FAMILY_STEP, make_plan
from pinsim.scene import Scene

CAMERA = Camera(
    focal_length_mm=60.0,
    hole=Hole(diameter_mm=0.3, plate_thickness_mm=0.05),
    film=Film(width_mm=40.0, height_mm=30.0),
)


@pytest.fixture(autouse=True)
def _nothing_kept():
    kept.forget()
    yield
    kept.forget()


def scene() -> Scene:
    light = np.random.default_rng(8).random((240, 320, 3), np.float32)
    return Scene.from_light(light, horizontal_view_deg=50.0)


def with_hole(diameter_mm: float) -> Camera:
    return replace(CAMERA, hole=replace(CAMERA.hole, diameter_mm=diameter_mm))


@pytest.mark.parametrize("diameter_mm", [0.22, 0.28, 0.34])
def test_a_second_look_is_the_same_as_a_first(diameter_mm: float) -> None:
    """Bit by bit: else what one sees would depend on what one had looked at before."""
    place = scene()
    pinsim.preview(place, CAMERA, width_px=300, averaged=True)
    again = pinsim.preview(place, with_hole(diameter_mm), width_px=300, averaged=True)
    assert kept._last[0].spectra
    kept.forget()
    first = pinsim.preview(place, with_hole(diameter_mm), width_px=300, averaged=True)
    np.testing.assert_array_equal(again.exposure, first.exposure)
    assert again.notes == first.notes


def test_a_second_look_transforms_nothing_again(monkeypatch: pytest.MonkeyPatch) -> None:
    from pinsim.render import preview as road
    from pinsim.render import spread

    place = scene()
    pinsim.preview(place, with_hole(0.28), width_px=300, averaged=True)

    def never(*_args: object, **_kept: object) -> None:
        raise AssertionError("made again")

    monkeypatch.setattr(road, "project", never)
    monkeypatch.setattr(spread, "rfft2", never)
    pinsim.preview(place, with_hole(0.31), width_px=300, averaged=True)


def test_another_scene_or_box_is_looked_at_anew() -> None:
    place, other = scene(), Scene.from_light(np.ones((60, 80)), horizontal_view_deg=50.0)
    pinsim.preview(place, CAMERA, width_px=300, averaged=True)
    white = pinsim.preview(other, CAMERA, width_px=300, averaged=True)
    assert float(white.exposure[110:120, 145:155].min()) > 0.98
    deeper = replace(CAMERA, focal_length_mm=80.0)
    kept_before = list(kept._last)
    seen = pinsim.preview(place, deeper, width_px=300, averaged=True)
    kept.forget()
    np.testing.assert_array_equal(
        seen.exposure, pinsim.preview(place, deeper, width_px=300, averaged=True).exposure
    )
    assert kept_before


def test_a_scene_no_longer_used_is_let_go() -> None:
    place = scene()
    pinsim.preview(place, CAMERA, width_px=300, averaged=True)
    watched = weakref.ref(place)
    del place
    gc.collect()
    assert watched() is None


def test_too_much_to_keep_is_not_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(kept, "MOST_BYTES", 1 << 20)
    pinsim.preview(scene(), CAMERA, width_px=300, averaged=True)
    assert not kept._last


def test_the_classical_best_holes_are_one_family() -> None:
    """Petzval 1.414, Rayleigh 1.897 times sqrt(lambda f) (Mielenz 1999, abstract): one grid for all."""
    plans = [
        make_plan(scene(), with_hole(k * np.sqrt(550e-6 * 60.0)), averaged_px=300)
        for k in (1.4142, 1.8974, 0.99 * FAMILY_STEP)
    ]
    assert len({(plan.padded, plan.family) for plan in plans}) == 1
    assert plans[0].kernels.like is plans[1].kernels.like is plans[2].kernels.like is not None
