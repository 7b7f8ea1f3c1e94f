"""Grain: density that flickers from place to place, as much as the film's true size makes it.

What a spot averages over many grains varies less the larger it is: sigma times the root of the spot's
area stays the same (Selwyn, Photogr. J. 75 (1935) 571, from memory). Spots smaller than the grains'
own reach see one grain together, so there the flicker is smoothed over that reach. It grows about as
the root of density (Siedentopf's theory of random dots, from memory).
"""

import math

import numpy as np
from numpy.typing import NDArray

from pinsim.material import Grain, Sensor
from pinsim.threads import THREADS

Float = NDArray[np.float32]

_SPOT_UM = 24.0  # radius of the hole that granularity is told for
_FLAT = 0.05  # pixels of smoothing that change nothing


def noise_field(
    shape: tuple[int, int], *, pitch_um: float, grain: Grain, rng: np.random.Generator
) -> Float:
    """Return the flicker of density 1 above fog on pixels of a pitch: float32, mean 0.

    Its spread is that of means over pixels, so larger pixels flicker less.
    """
    from scipy import fft

    field = rng.standard_normal(shape, dtype=np.float32)
    reach_px = grain.correlation_um / pitch_um
    if reach_px > _FLAT:
        # A Gaussian keeps the spectrum's low end, so spots larger than it flicker as without it.
        rows, columns = (fft.fftfreq(shape[0]), fft.rfftfreq(shape[1]))
        square = rows[:, None] ** 2 + columns[None, :] ** 2
        keep = np.exp(-2.0 * (math.pi * reach_px) ** 2 * square).astype(np.float32)
        field = fft.irfft2(fft.rfft2(field, workers=THREADS) * keep, s=shape, workers=THREADS)
    field -= field.mean()
    fine = grain.sigma_density / math.sqrt(_seen_through_spot(grain.correlation_um))
    field *= np.float32(fine * math.sqrt(math.pi) * _SPOT_UM / pitch_um)
    return np.asarray(field, np.float32)


def _seen_through_spot(reach_um: float) -> float:
    """Return the share of white noise's power that a spot still sees when grains hang together.

    Integral of J1(u)^2 exp(-p^2 u^2) / u, in closed form (Watson, Bessel Functions,
    13.31, from memory).
    """
    if reach_um == 0.0:
        return 1.0
    z = 0.5 * (_SPOT_UM / reach_um) ** 2
    from scipy import special

    return float(1.0 - special.ive(0, z) - special.ive(1, z))


def add_grain(
    above_fog: Float, *, pitch_mm: float, grain: Grain, rng: np.random.Generator
) -> Float:
    """Return densities above base and fog with grain, (rows, columns, layers); a new array.

    Each layer has its own grain; a picture of one layer stays grey.
    """
    noisy = np.empty_like(above_fog)
    for layer in range(above_fog.shape[2]):
        field = noise_field(above_fog.shape[:2], pitch_um=1000.0 * pitch_mm, grain=grain, rng=rng)
        density = above_fog[..., layer]
        noisy[..., layer] = density + field * np.sqrt(np.maximum(density, 0.0))
    return noisy


def add_sensor_noise(
    filled: Float, *, pitch_mm: float, sensor: Sensor, rng: np.random.Generator
) -> Float:
    """Return a sensor's record with the noise of its light and of its reading; a new array.

    filled : (rows, columns, layers), 1.0 = full. A picture's pixel averages as many of the sensor's as
    it covers. Light is counted, so n electrons flicker by their root (Poisson).
    """
    if sensor.full_well_electrons is None or sensor.pixel_pitch_um is None:
        return filled.copy()
    averaged = max((1000.0 * pitch_mm / sensor.pixel_pitch_um) ** 2, 1.0)
    well = np.float32(sensor.full_well_electrons)
    square = (filled * well + np.float32(sensor.read_noise_electrons**2)) / np.float32(averaged)
    flicker = rng.standard_normal(filled.shape, dtype=np.float32)
    return np.asarray(np.clip(filled + flicker * np.sqrt(square) / well, 0.0, 1.0), np.float32)
