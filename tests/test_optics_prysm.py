"""The point image of round, oval and ragged holes on the axis, against a general optics library.

prysm 0.21.1 (MIT) propagates the wave in the hole to the film by a matrix Fourier transform; the
missing focus is a quadratic phase in the hole. Its accuracy was measured against quadrature: 2e-5
of the unobstructed wave on this kind of grid. Nothing of pinsim is on that side.
"""

from functools import cache

import numpy as np
import pytest
from reference import rayleigh_sommerfeld as rs

import pinsim
from pinsim.optics import Traced, film_otf

propagation = pytest.importorskip("prysm.propagation")

OF_THE_PEAK = 1e-3
CELLS = 501  # odd, so that a cell and a film sample lie on the axis on both sides
SAMPLES = 81
SIDE_MM = 0.52
PERIOD_MM = 12.0


def outline(kind: str, angle: np.ndarray) -> np.ndarray:
    """Return the hole's radius, mm, in a direction seen from behind, counter-clockwise from right."""
    if kind == "round":
        return np.full_like(angle, 0.15)
    if kind == "oval":
        return 0.21 * 0.12 / np.hypot(0.12 * np.cos(angle), 0.21 * np.sin(angle))
    # A drilled hole with burrs: bumps of seeded height and place, unlike its own mirror image.
    rng = np.random.default_rng(11)
    ragged = np.full_like(angle, 0.15)
    for order in range(1, 12):
        height, phase = 0.02 * rng.standard_normal() / np.sqrt(order), rng.uniform(0, 2 * np.pi)
        ragged += height * np.cos(order * angle + phase)
    return ragged


@cache
def clear_cells(kind: str, cells: int, fine: int = 16) -> np.ndarray:
    """Return the open share of each cell of a square grid, row 0 up."""
    cell = SIDE_MM / cells
    place = (np.arange(cells) - (cells - 1) / 2) * cell
    x, y = np.meshgrid(place, -place)
    depth = outline(kind, np.arctan2(y, x)) - np.hypot(x, y)
    clear = (depth > 0).astype(float)
    # Only the cells near the edge are looked at closely; the outline is nowhere steeper than 3.
    near = np.abs(depth) < 4 * cell
    part = ((np.arange(fine) + 0.5) / fine - 0.5) * cell
    fine_x = x[near][:, None, None] + part[None, None, :]
    fine_y = y[near][:, None, None] + part[None, :, None]
    inside = np.hypot(fine_x, fine_y) < outline(kind, np.arctan2(fine_y, fine_x))
    clear[near] = inside.mean(axis=(1, 2))
    return clear


@pytest.fixture(scope="module", params=["round", "oval", "ragged"])
def kind_and_cells(request):
    return request.param, clear_cells(request.param, CELLS)


def drawn_by_prysm(clear, *, focal_length_mm, distance_mm, wavelength_nm, step_mm):
    """Return the point image, upright, 1/mm^2, of unit energy over the whole film."""
    cell = SIDE_MM / CELLS
    place = (np.arange(CELLS) - CELLS // 2) * cell
    square = place[None, :] ** 2 + place[:, None] ** 2
    wavelength_mm = wavelength_nm * rs.NM
    curvature = 1 / focal_length_mm + 1 / distance_mm
    wave = clear * np.exp(1j * np.pi / wavelength_mm * curvature * square)
    field = propagation.focus_fixed_sampling(
        wave,
        input_dx=cell,
        prop_dist=focal_length_mm,
        wavelength=wavelength_nm * 1e-3,
        output_dx=step_mm * 1e3,
        output_samples=SAMPLES,
        method="mdft",
    )
    image = np.abs(field) ** 2
    # It is not normalised: on the axis the integral is a plain sum. Irradiance over the wave's power
    # through the hole is |integral|^2/(lambda z)^2 / area.
    middle = np.abs(wave.sum() * cell**2 / (wavelength_mm * focal_length_mm)) ** 2
    image *= middle / image[SAMPLES // 2, SAMPLES // 2] / (clear.sum() * cell**2)
    # The film as it lies in the box, seen from behind, is the picture turned by 180 degrees.
    return image[::-1, ::-1]


def hole_of(kind):
    if kind == "round":
        return pinsim.Hole(diameter_mm=0.3)
    if kind == "oval":
        return pinsim.Hole.oval(0.42, 0.24)
    # A grid of its own, coarser than prysm's.
    return pinsim.Hole.traced(Traced(clear=clear_cells(kind, 256), cell_mm=SIDE_MM / 256))


@pytest.mark.parametrize(
    ("focal_length_mm", "distance_mm", "wavelength_nm"),
    [(50.0, np.inf, 550.0), (100.0, np.inf, 550.0), (100.0, 300.0, 550.0), (60.0, 200.0, 450.0)],
)
def test_the_point_image_is_the_one_a_general_optics_library_finds(
    kind_and_cells, focal_length_mm, distance_mm, wavelength_nm
):
    kind, clear = kind_and_cells
    step_mm = 0.015
    expected = drawn_by_prysm(
        clear,
        focal_length_mm=focal_length_mm,
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
        step_mm=step_mm,
    )
    camera = pinsim.Camera(focal_length_mm=focal_length_mm, hole=hole_of(kind))
    highest = camera.hole.greatest_mm / (wavelength_nm * rs.NM * focal_length_mm)
    count = int(np.ceil(1.01 * highest * PERIOD_MM))
    frequency = np.arange(-count, count + 1) / PERIOD_MM
    otf = film_otf(
        frequency[None, :],
        frequency[:, None],
        camera=camera,
        film_point_mm=(0.0, 0.0),
        distance_mm=distance_mm,
        wavelength_nm=wavelength_nm,
    )
    place = (np.arange(SAMPLES) - SAMPLES // 2) * step_mm
    # prysm's rows run down the picture.
    seen = rs.image_of_otf(otf, period_mm=PERIOD_MM, du_mm=place, dv_mm=-place)
    assert np.abs(seen - expected).max() <= OF_THE_PEAK * expected.max()
    if kind == "ragged":  # the comparison can tell a turned or mirrored hole
        for other in (expected[::-1, ::-1], expected[::-1], expected[:, ::-1], expected.T):
            assert np.abs(other - expected).max() > 20 * OF_THE_PEAK * expected.max()
