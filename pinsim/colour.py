"""sRGB to linear light and back; nothing else in pinsim knows of gamma.

IEC 61966-2-1: V = 12.92 L up to L = 0.0031308, else 1.055 L^(1/2.4) - 0.055. White is 1.0.
"""

from concurrent.futures import ThreadPoolExecutor
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from pinsim.threads import THREADS

Float = NDArray[np.float32]


def srgb_to_linear(encoded: ArrayLike) -> NDArray[np.float64]:
    """Decode sRGB values 0..1, any shape, to linear light."""
    v = np.asarray(encoded, np.float64)
    return np.where(v <= 0.04045, v / 12.92, ((np.maximum(v, 0.0) + 0.055) / 1.055) ** 2.4)


def linear_to_srgb(linear: ArrayLike) -> NDArray[np.float64]:
    """Encode linear light, any shape, to sRGB 0..1; below 0 and above 1 are clipped."""
    light = np.clip(np.asarray(linear, np.float64), 0.0, 1.0)
    return np.where(light <= 0.0031308, 12.92 * light, 1.055 * light ** (1.0 / 2.4) - 0.055)


@lru_cache(maxsize=2)
def srgb_table(bits: int) -> Float:
    """Return linear light for every sRGB code of 8 or 16 bits: float32, (2**bits,), read-only."""
    top = (1 << bits) - 1
    table = srgb_to_linear(np.arange(top + 1) / top).astype(np.float32)
    table.flags.writeable = False
    return table


# Encoding a whole picture by the power function costs more than rendering it. The table is even in
# the square root of light: there it is fine where sRGB is steep, so one half code is never missed.
_STEPS = 1 << 14
_CHUNK = 1 << 18  # values encoded at once, small enough to stay in the processor's cache


@lru_cache(maxsize=2)
def _encode_table(top: int) -> NDArray[np.uint16]:
    root = np.arange(_STEPS + 1) / _STEPS
    return np.round(linear_to_srgb(root * root) * top).astype(np.uint16)


def encode_8bit(linear: Float) -> NDArray[np.uint8]:
    """Encode linear light, any shape, to sRGB codes 0..255, at most one code from exact rounding.

    NaN is black.
    """
    table = _encode_table(255).astype(np.uint8)
    flat = np.ascontiguousarray(linear).reshape(-1)
    codes = np.empty(flat.shape, np.uint8)

    def encode(start: int) -> None:
        part = slice(start, start + _CHUNK)
        root = np.fmax(flat[part], np.float32(0.0))
        np.minimum(root, np.float32(1.0), out=root)
        np.sqrt(root, out=root)
        root *= np.float32(_STEPS)
        root += np.float32(0.5)
        index = root.astype(np.uint16)
        np.take(table, index, out=codes[part], mode="clip")

    with ThreadPoolExecutor(THREADS) as pool:
        list(pool.map(encode, range(0, flat.size, _CHUNK)))
    return codes.reshape(linear.shape)


def encode_16bit(linear: Float) -> NDArray[np.uint16]:
    """Encode linear light, any shape, to sRGB codes 0..65535."""
    return np.round(linear_to_srgb(linear) * 65535.0).astype(np.uint16)
