"""The few kernels a picture is drawn with, read on its grid, against the transfer function itself.

`light_ray_otf` is checked elsewhere against summed Rayleigh-Sommerfeld waves (Born & Wolf, Principles
of Optics, 8.11.2; tests/test_optics_anywhere.py) and against prysm; here each colour's mean and modes,
sampled, decomposed and read through two tables, have to give it back at any film point.
"""

import math

import numpy as np
import pytest

from pinsim.camera import Camera, Film, Hole
from pinsim.optics import Light, Traced
from pinsim.optics.sharpness import light_ray_otf
from pinsim.render.frequencies import Frequencies
from pinsim.render.kernels import PICTURE_RMS, SINGLE_OTF, chebyshev_values
from pinsim.render.plan import plan_for

FILM = Film(width_mm=56.0, height_mm=40.0)
BENT = Film(width_mm=120.0, height_mm=56.0, bend_radius_mm=60.0)


def _corner() -> Traced:
    """Return a square hole of 0.4 mm without a quarter, whose transfer function is complex."""
    mask = np.ones((96, 96), bool)
    mask[:48, 48:] = False
    return Traced(clear=np.pad(mask, 4).astype(float), cell_mm=0.4 / 96)


CAMERAS = {
    "thin round": Camera(focal_length_mm=60.0, hole=Hole(diameter_mm=0.3), film=FILM),
    "thick round, shifted": Camera(
        focal_length_mm=60.0,
        hole=Hole(diameter_mm=0.4, plate_thickness_mm=0.1),
        film=Film(width_mm=56.0, height_mm=40.0, shift_right_mm=9.0, shift_up_mm=-4.0),
    ),
    "far too large": Camera(focal_length_mm=60.0, hole=Hole(diameter_mm=1.0), film=FILM),
    "round, bent film": Camera(focal_length_mm=60.0, hole=Hole(diameter_mm=0.3), film=BENT),
    "oval, thick": Camera(
        focal_length_mm=60.0, hole=Hole.oval(0.25, 0.4, plate_thickness_mm=0.05), film=FILM
    ),
    "slit": Camera(focal_length_mm=60.0, hole=Hole.slit(0.2, 0.35), film=FILM),
    "no mirror image": Camera(focal_length_mm=60.0, hole=Hole.traced(_corner()), film=FILM),
}


def _at_point(plan, u_mm, v_mm):
    """Return each channel's kernel at a film point, (channels, rows, columns), and its frequencies."""
    kernels = plan.kernels
    span, fields = kernels.range, kernels.fields
    across = chebyshev_values(fields.shape[1], *span.u_mm, np.array([u_mm]))[0]
    down = chebyshev_values(fields.shape[2], *span.v_mm, np.array([v_mm]))[0]
    weights = np.einsum("ruv,u,v->r", fields[..., 0], across, down)
    grid = Frequencies(plan, len(fields), compensate=False)
    totals = np.zeros((len(plan.material.channels), *grid.shape), np.complex64)
    ones = np.ones(grid.shape, np.complex64)
    for mode in range(-1, len(fields)):
        scale = ones if mode < 0 else ones * np.float32(weights[mode])
        transforms = {(mode, band): scale for band in range(3)}
        for strip in grid.strips:
            grid.add(strip, totals, [mode], [grid.tables(mode)], transforms)
    down_cycles = -np.fft.fftfreq(plan.padded[0], plan.pitch_mm)
    across_cycles = np.fft.rfftfreq(plan.padded[1], plan.pitch_mm)
    return totals, np.stack(np.meshgrid(across_cycles, down_cycles), axis=-1)


@pytest.mark.parametrize("name", CAMERAS)
@pytest.mark.parametrize("place", [(0.0, 0.0), (0.45, 0.0), (-0.4, 0.45)])
@pytest.mark.parametrize("width_px", [160, 480])
def test_mean_and_modes_give_the_transfer_function_back(name, place, width_px):
    camera = CAMERAS[name]
    film = camera.film
    u_mm = film.shift_right_mm + place[0] * film.width_mm
    v_mm = film.shift_up_mm + place[1] * film.height_mm
    plan = plan_for((math.inf, math.inf), camera, None, width_px, False)
    kernels, frequency = _at_point(plan, u_mm, v_mm)
    inside = np.hypot(frequency[..., 0], frequency[..., 1]) < 0.98 * plan.kernels.radii[-1]
    picked = np.flatnonzero(inside)[:: max(1, np.count_nonzero(inside) // 500)]
    for number, channel in enumerate(plan.material.channels):
        weights = channel.weights.sum(axis=1)
        light = Light(wavelengths_nm=channel.wavelengths_nm, shares=weights / weights.sum())
        exact = light_ray_otf(
            frequency.reshape(-1, 2)[picked],
            rays=camera.surface.chief_rays(u_mm, v_mm),
            opening=camera.opening,
            plate_thickness_mm=camera.plate_thickness_mm,
            light=light,
        )
        apart = np.abs(kernels[number].ravel()[picked] - exact)
        # The bound holds where kernels are sampled; between those points and directions a little more.
        assert float(apart.max()) < 1.5 * SINGLE_OTF
        # Ordinary scenes' contrast falls as 1/nu; this rms is over all frequencies alike.
        assert float(np.sqrt(np.mean(apart**2))) < 20.0 * PICTURE_RMS


@pytest.mark.parametrize("shape", [(5, 7), (4, 6), (1, 1), (3, 1)])
def test_codes_are_turned_to_light_two_at_a_time(shape):
    """Numpy's own take is the reference; odd sizes have one code left over."""
    from pinsim.scene.photo import Photo

    rng = np.random.default_rng(5)
    codes = rng.integers(0, 256, (*shape, 3), dtype=np.uint8)
    decode = np.sort(rng.random(256).astype(np.float32))
    photo = Photo(codes=codes, decode=decode)
    np.testing.assert_array_equal(photo.linear(), decode[codes])
    np.testing.assert_array_equal(photo.linear(slice(0, 1), slice(0, 1)), decode[codes[:1, :1]])
