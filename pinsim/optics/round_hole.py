"""Transfer function and point image of a round hole on the axis, for one wavelength.

Geometric blur and diffraction are one integral here and are never computed apart: the opening is
overlapped with itself, shifted by the frequency's own distance, and the quadratic phase of the
missing focus is carried along (Hopkins, Proc. R. Soc. A 231 (1955) 91).
"""

import math
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

_BLOCK = 1 << 20  # values of an integrand held at once: 8 MB, whatever the size of the request


@lru_cache(maxsize=32)
def gauss_legendre(count: int) -> tuple[Array, Array]:
    """Return nodes and weights on [0, 1]."""
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return 0.5 * (nodes + 1.0), 0.5 * weights


def node_count(phase: Array) -> Array:
    """Return how many Gauss-Legendre nodes settle integrands whose phase runs over `phase` rad.

    Convergence is geometric once there are more than phase/2 nodes; 26 more reach 1e-13. Rounded
    up to eights, so that few node tables are ever made.
    """
    return np.asarray(8.0 * np.ceil((0.55 * phase + 26.0) / 8.0))


def quick_node_count(phase: Array) -> Array:
    """Return how many nodes reach 1e-6: half as many more than phase/2 as for 1e-13."""
    return np.asarray(8.0 * np.ceil((0.55 * phase + 13.0) / 8.0))


def overlap_otf(shift_mm: ArrayLike, phase_frequency: ArrayLike, *, diameter_mm: float) -> Array:
    """Return the overlap integral of a round opening with itself, in waves along the shift.

    shift_mm : any shape, how far the two copies of the opening stand apart.
    phase_frequency : same shape, cycles/mm in the hole, parallel to the shift.
    Returns float64 of that shape: 1 without shift, 0 when the copies no longer meet.

        (4 / pi a^2) int_0^{a - s/2} sqrt(a^2 - (x + s/2)^2) cos(2 pi q x) dx

    with x + s/2 = a sin t, which takes the square root's edge away.
    Source: Hopkins 1955, in the form that the design of this project derives and checks.
    """
    shift, phase = np.broadcast_arrays(
        np.abs(np.asarray(shift_mm, np.float64)),
        np.abs(np.asarray(phase_frequency, np.float64)),
    )
    radius = 0.5 * diameter_mm
    flat_shift = shift.ravel()
    flat_phase = phase.ravel()
    result = np.zeros(flat_shift.shape)
    meets = np.flatnonzero(flat_shift < diameter_mm)
    if meets.size == 0:
        return result.reshape(shift.shape)
    reach = 2.0 * math.pi * flat_phase[meets] * (radius - 0.5 * flat_shift[meets])
    # Requests of like phase share a node table: a long list costs what its slow part costs.
    order = meets[np.argsort(reach)]
    reach.sort()
    start = 0
    while start < order.size:
        stop = min(order.size, start + 4096)
        count = int(node_count(reach[stop - 1]))
        stop = min(stop, start + max(1, _BLOCK // count))
        result[order[start:stop]] = _overlap_block(
            flat_shift[order[start:stop]], flat_phase[order[start:stop]], radius, count
        )
        start = stop
    return result.reshape(shift.shape)


def _overlap_block(shift: Array, phase: Array, radius: float, count: int) -> Array:
    nodes, weights = gauss_legendre(count)
    half = shift / (2.0 * radius)
    start = np.arcsin(np.minimum(half, 1.0))
    span = 0.5 * math.pi - start
    angle = start[:, None] + span[:, None] * nodes
    wave = np.cos((2.0 * math.pi * radius) * phase[:, None] * (np.sin(angle) - half[:, None]))
    cosine = np.cos(angle)
    wave *= cosine
    wave *= cosine
    return np.asarray((4.0 / math.pi) * span * (wave @ weights))


def round_otf(
    frequency: ArrayLike,
    *,
    diameter_mm: float,
    focal_length_mm: float,
    distance_mm: float = math.inf,
    wavelength_nm: float,
) -> Array:
    """Return the optical transfer function of a round hole on the axis.

    frequency : any shape, cycles/mm on the film.
    focal_length_mm : hole to film; distance_mm : hole to object, along the axis.
    Returns float64 of the same shape, 1 at zero frequency; negative where contrast is reversed.
    Exact within scalar paraxial diffraction. Source: Hopkins, Proc. R. Soc. A 231 (1955) 91.
    """
    nu = np.abs(np.asarray(frequency, np.float64))
    # Written as 1 + z/zo so that an object at infinity gives 1, not nan.
    shadow_scale = 1.0 + focal_length_mm / distance_mm
    shift = (wavelength_nm * 1e-6 * focal_length_mm) * nu
    return overlap_otf(shift, shadow_scale * nu, diameter_mm=diameter_mm)


def round_psf(
    radius_mm: ArrayLike,
    *,
    diameter_mm: float,
    focal_length_mm: float,
    distance_mm: float = math.inf,
    wavelength_nm: float,
) -> Array:
    """Return the point image of a round hole on the axis, of unit energy over the film plane.

    radius_mm : any shape, distance on the film from the point image's middle.
    Returns float64 of the same shape, 1/mm^2.

        |2 pi N int_0^1 exp(i pi N p^2) J0(v p) p dp|^2 / (pi (a m)^2)

    with N = a^2/lambda (1/z + 1/zo), v = 2 pi a r/(lambda z), m = 1 + z/zo. The energy through the
    hole is that of its geometric shadow, radius a m: Fresnel diffraction conserves it.
    Source: Lommel 1885, as in Born and Wolf, Principles of Optics, 8.8.1 (from memory).
    """
    from scipy.special import j0

    radius = np.abs(np.asarray(radius_mm, np.float64))
    hole = 0.5 * diameter_mm
    wavelength_mm = wavelength_nm * 1e-6
    fresnel_number = hole * hole / wavelength_mm * (1.0 / focal_length_mm + 1.0 / distance_mm)
    shadow = hole * (1.0 + focal_length_mm / distance_mm)
    v = (2.0 * math.pi * hole / (wavelength_mm * focal_length_mm)) * radius.ravel()
    amplitude_square = np.empty(v.shape)
    order = np.argsort(v)
    start = 0
    while start < order.size:
        stop = min(order.size, start + 1024)
        count = int(node_count(math.pi * fresnel_number + v[order[stop - 1]]))
        stop = min(stop, start + max(1, _BLOCK // count))
        nodes, weights = gauss_legendre(count)
        lens = np.exp(1j * math.pi * fresnel_number * nodes * nodes) * nodes * weights
        block = order[start:stop]
        field = j0(v[block, None] * nodes) @ lens
        amplitude_square[block] = np.abs(2.0 * math.pi * fresnel_number * field) ** 2
        start = stop
    return np.asarray(amplitude_square / (math.pi * shadow * shadow)).reshape(radius.shape)
