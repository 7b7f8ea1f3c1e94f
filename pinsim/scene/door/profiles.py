"""Colour profiles (ICC.1) to light: by tables and a matrix where that says it all, else by pixel.

The profile is never parsed here: lcms is asked what it makes of ramps of codes. If red, green and
blue add up, as they do for every camera's and phone's profile, three tables and a matrix say all of
it, the codes stay as they are, and colours outside sRGB survive as negative channels.
"""

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from pinsim.colour import srgb_table

Float = NDArray[np.float32]

_SPACES = {"L": "gray", "LA": "gray", "RGB": "rgb", "RGBA": "rgb", "CMYK": "cmyk"}
_SRGB = (0.64, 0.33, 0.30, 0.60, 0.15, 0.06)
_D65 = (0.3127, 0.3290)
# Wide enough for every colour that a surface or a print has: ROMM RGB, ISO 22028-2.
_WIDE = (0.7347, 0.2653, 0.1596, 0.8404, 0.0366, 0.0001)
_D50 = (0.3457, 0.3585)
# Steps of red, green and blue whose mixtures tell whether a profile adds them up.
_TRIAL_STEPS = (0.0, 0.25, 0.5, 0.75, 1.0)
_ADDS_UP = 2e-3
# Published sRGB profiles differ in the rounding of their primaries and in their darkest codes.
_LIKE_SRGB = 4e-3
_BAND_ROWS = 256


class Decoding(NamedTuple):
    """codes, how they become light, and the matrix that brings it to linear sRGB, if any."""

    codes: NDArray[Any]
    decode: Float
    to_srgb: Float | None


def through_profile(codes: NDArray[Any], profile: bytes, mode: str) -> Decoding | None:
    """Return what a profile makes of codes (rows, columns, channels), uint8 or uint16.

    None when the profile does not fit the picture. Grey stays one channel where it can.
    """
    space = _SPACES[mode]
    try:
        if space == "gray":
            return _grey(codes, profile)
        simple = _tables_and_matrix(profile, codes.dtype) if space == "rgb" else None
        return _each_pixel(codes, profile, space) if simple is None else Decoding(codes, *simple)
    except Exception:  # a profile for another colour model, or a broken one
        return None


def _linear_profile(primaries: tuple[float, ...], white: tuple[float, float]) -> bytes:
    import imagecodecs

    told = [value for i in (0, 2, 4) for value in (*primaries[i : i + 2], 1.0)]
    profile = imagecodecs.cms_profile("rgb", whitepoint=[*white, 1.0], primaries=told, gamma=1.0)
    return bytes(profile)


def _transformed(values: NDArray[Any], profile: bytes, space: str, to: bytes, kind: str) -> Any:
    import imagecodecs

    return imagecodecs.cms_transform(
        np.ascontiguousarray(values),
        profile,
        to,
        colorspace=space,
        outcolorspace="rgb",
        outdtype=kind,
        intent=imagecodecs.CMS.INTENT.RELATIVE_COLORIMETRIC,
    )


def _light(values: NDArray[Any], profile: bytes, space: str) -> NDArray[np.float64]:
    """Return linear sRGB of values 0..1, (n, channels), not limited to what sRGB can show."""
    srgb = _linear_profile(_SRGB, _D65)
    told = values.astype(np.float32)[None]
    light = _transformed(told[..., 0] if space == "gray" else told, profile, space, srgb, "float32")
    return np.asarray(light[0], np.float64)


def _ramp(dtype: np.dtype[Any]) -> NDArray[np.float64]:
    top = np.iinfo(dtype).max
    return np.arange(top + 1) / top


def _grey(codes: NDArray[Any], profile: bytes) -> Decoding:
    table = _light(_ramp(codes.dtype)[:, None], profile, "gray").mean(axis=1)
    return Decoding(codes, np.maximum(table, 0.0).astype(np.float32), None)


def _tables_and_matrix(profile: bytes, dtype: np.dtype[Any]) -> tuple[Float, Float | None] | None:
    """Return decoding tables and a matrix, or None for a profile that does not simply add up."""
    mixed = np.stack(np.meshgrid(*[np.array(_TRIAL_STEPS)] * 3), axis=-1).reshape(-1, 3)
    full = _light(np.eye(3), profile, "rgb")  # row: what each channel gives at its highest code
    strength = (full * full).sum(axis=1)
    if not (strength > 1e-6).all():
        return None
    ramp = _ramp(dtype)
    tables = np.empty((3, ramp.size))
    trial = np.zeros_like(mixed)
    for channel in range(3):
        alone = np.zeros((ramp.size, 3))
        alone[:, channel] = ramp
        tables[channel] = _light(alone, profile, "rgb") @ full[channel] / strength[channel]
        trial += np.interp(mixed[:, channel], ramp, tables[channel])[:, None] * full[channel]
    if np.abs(trial - _light(mixed, profile, "rgb")).max() > _ADDS_UP:
        return None
    tables = np.maximum(tables, 0.0)
    matrix = full.T
    srgb = srgb_table(8 if ramp.size == 256 else 16)
    if max(np.abs(tables - srgb).max(), np.abs(matrix - np.eye(3)).max()) < _LIKE_SRGB:
        return srgb, None
    one = np.abs(tables - tables[0]).max() < 1e-5
    decode = (tables.mean(axis=0) if one else tables).astype(np.float32)
    return decode, matrix.astype(np.float32)


def _each_pixel(codes: NDArray[Any], profile: bytes, space: str) -> Decoding:
    """Take every pixel through the profile, to 16-bit linear codes of a wide colour space."""
    wide = _linear_profile(_WIDE, _D50)
    light = np.empty((*codes.shape[:2], 3), np.uint16)
    for first in range(0, codes.shape[0], _BAND_ROWS):
        rows = slice(first, first + _BAND_ROWS)
        light[rows] = _transformed(codes[rows], profile, space, wide, "uint16")
    matrix = _light(np.eye(3), wide, "rgb").T.astype(np.float32)
    return Decoding(light, np.linspace(0.0, 1.0, 65536, dtype=np.float32), matrix)
