"""Exposure to tones for the eye: brightness, positive or negative, turned as it is looked at.

Without a time a picture is a perfect print: the tones of the photo (`develop`). With one it is what the
material's curve makes of it (`develop_material`). As no place of a film knows of another, each layer is
one function of exposure, read from a table: that costs no more than encoding does.
"""

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.camera import Tone
from pinsim.colour import encode_8bit, encode_16bit, linear_to_srgb
from pinsim.render.expose import METERED_LXS, MID_TONE, Exposed
from pinsim.render.grain import add_grain, add_sensor_noise
from pinsim.render.printing import print_of
from pinsim.threads import THREADS

Array = NDArray[np.float64]
Codes = NDArray[np.unsignedinteger[Any]]
Float = NDArray[np.float32]

Look = Literal["upright", "screen", "emulsion"]
LOOKS = ("upright", "screen", "emulsion")
LOOK_TEXT = {
    "upright": "upright, as the scene",
    "screen": "seen from behind the film like a focusing screen: turned by 180 degrees",
    "emulsion": "the exposed face of the film: upside down, not reversed sideways",
}

# Hatching for what the photo does not cover: two mid greys that no toned picture shows in stripes.
_HATCH_LIGHT = (168, 112)
_HATCH_PERIOD = 96  # stripes along the longer side, whatever the picture's size

# A negative lies on a light table that shows its clear edge just below white.
_BASE_SHOWN = 0.9
# Tables are even in the root of exposure: fine in the shadows, where tones are steep.
_STEPS = 1 << 16
_ROOTS = np.arange(_STEPS) / (_STEPS - 1)
_CHUNK = 1 << 18  # values at once, small enough to stay in the processor's cache
_UNSEEN = 0.2 / 255.0  # of an encoded tone


def turn(picture: NDArray[np.generic], look: Look) -> NDArray[np.generic]:
    """Return an upright (rows, columns, ...) array as `look` sees it; a view, not a copy."""
    if look == "screen":
        return picture[::-1, ::-1]
    if look == "emulsion":
        return picture[::-1]
    return picture


def develop(
    exposure: Float, *, gain: float = 1.0, tone: Tone = "positive", bits: int = 8
) -> NDArray[np.generic]:
    """Return sRGB codes of an upright exposure; uncovered places are hatched.

    exposure : (rows, columns, channels), 1.0 = white, NaN where not covered. gain : how many times
    the exposure for a white scene was given. tone "negative" is a plain inversion of the tones.
    Returns uint8 or uint16 of the same shape.
    """
    given = exposure if gain == 1.0 else exposure * np.float32(gain)
    codes = encode_8bit(given) if bits == 8 else encode_16bit(np.nan_to_num(given, nan=0.0))
    if tone == "negative":
        codes = np.iinfo(codes.dtype).max - codes
    return _hatched(codes, exposure, bits)


def develop_material(
    exposure: Float,
    *,
    exposed: Exposed,
    tone: Tone = "positive",
    bits: int = 8,
    pitch_mm: float = 1.0,
    rng: np.random.Generator | None = None,
) -> Codes:
    """Return sRGB codes of an upright exposure as its material shows it.

    exposure : (rows, columns, channels), 1.0 = white, NaN where not covered. tone "negative" : the
    negative on a light table, of paper the sheet itself; a reversal material and a sensor make none,
    their tones are inverted. rng : draws the grain of pixels of pitch_mm; without it there is none.
    Returns uint8 or uint16 of the same shape.
    """
    layers = [
        lambda light, layer=layer: seen_light(light, exposed, tone=tone, layer=layer)
        for layer in range(exposure.shape[2])
    ]
    if rng is None:
        codes = _looked_up(exposure, layers, bits)
    else:
        codes = _grainy(exposure, exposed, tone=tone, bits=bits, pitch_mm=pitch_mm, rng=rng)
    if tone == "negative" and exposed.material.process != "negative":
        codes = np.invert(codes)  # of unsigned codes: the greatest less each
    return _hatched(codes, exposure, bits)


def seen_light(relative: Array, exposed: Exposed, *, tone: Tone, layer: int = 0) -> Array:
    """Return the light that a viewer gets from each relative exposure; any shape, white is 1."""
    material = exposed.material
    if material.curve is None:
        full = material.sensor.saturation_lxs if material.sensor else np.inf
        used = exposed.used_lux_seconds(relative) * material.speed_iso
        # White of the photo at the right time is white of the picture, however much more it holds.
        return np.asarray(np.minimum(used, full) * (MID_TONE / METERED_LXS))
    density = material.curve.density(exposed.log_exposure(relative))
    return light_from_density(density, exposed, tone=tone, layer=layer)


def light_from_density(density: Array, exposed: Exposed, *, tone: Tone, layer: int = 0) -> Array:
    """Return the light that a viewer gets from each density of the material; white is 1."""
    material = exposed.material
    if material.curve is None:
        raise ValueError(f"{material.name} has no densities")
    above = density - material.curve.base_fog
    if material.process == "negative" and tone == "positive":
        return print_of(material).light(density)
    if material.process == "negative":
        return np.asarray(_BASE_SHOWN * 10.0 ** -(above + material.mask_density[layer]))
    return np.asarray(10.0**-above)


def _looked_up(exposure: Float, layers: Sequence[Callable[[Array], Array]], bits: int) -> Codes:
    """Return codes of each layer by its function from relative exposure to light."""
    top = _last_change(exposure, layers)
    tables = [_encoded(layer(_ROOTS * _ROOTS * top), bits) for layer in layers]
    return _taken(exposure, tables, _by_root(top))


def _encoded(light: Array, bits: int) -> Codes:
    most = (1 << bits) - 1
    return np.round(linear_to_srgb(light) * most).astype(np.uint8 if bits == 8 else np.uint16)


def _by_root(top: float) -> Callable[[Float], Float]:
    """Return what finds an exposure's place in a table that is even in its root, up to `top`."""
    scale = np.float32((_STEPS - 1) / np.sqrt(top))
    # fmax takes NaN, where nothing is covered, for black.
    return lambda exposure: np.sqrt(np.fmax(exposure, np.float32(0.0))) * scale


def _taken(
    values: Float, tables: Sequence[NDArray[Any]], place_of: Callable[[Float], Float]
) -> NDArray[Any]:
    """Return each layer's entries of its table, at the nearest place of every value."""
    result = np.empty(values.shape, tables[0].dtype)
    strip = max(1, _CHUNK // values[0].size)

    def read(start: int) -> None:
        rows = slice(start, start + strip)
        place = np.clip(place_of(values[rows]), np.float32(0.0), np.float32(_STEPS - 1))
        index = (place + np.float32(0.5)).astype(np.uint16)
        for layer, table in enumerate(tables):
            result[rows, :, layer] = table[index[..., layer]]

    with ThreadPoolExecutor(THREADS) as pool:
        list(pool.map(read, range(0, values.shape[0], strip)))
    return result


def _last_change(exposure: Float, layers: Sequence[Callable[[Array], Array]]) -> float:
    """Return the exposure beyond which no layer's tones change, or the greatest there is."""
    greatest = float(np.max(exposure, where=np.isfinite(exposure), initial=0.0))
    light = np.geomspace(1e-6, max(greatest, 1e-3), 600)
    last = 0
    for layer in layers:
        tones = linear_to_srgb(layer(light))
        moving = np.flatnonzero(np.abs(tones - tones[-1]) > _UNSEEN)
        last = max(last, int(moving[-1]) + 1 if moving.size else 0)
    return float(light[last])


def _grainy(
    exposure: Float,
    exposed: Exposed,
    *,
    tone: Tone,
    bits: int,
    pitch_mm: float,
    rng: np.random.Generator,
) -> Codes:
    material = exposed.material
    if material.curve is None:
        light = seen_light(np.fmax(exposure, 0.0), exposed, tone=tone).astype(np.float32)
        if material.sensor is not None:
            full = np.float32(material.sensor.saturation_lxs * MID_TONE / METERED_LXS)
            light = full * add_sensor_noise(
                light / full, pitch_mm=pitch_mm, sensor=material.sensor, rng=rng
            )
        return encode_8bit(light) if bits == 8 else encode_16bit(light)
    curve = material.curve
    layers = range(exposure.shape[2])
    top = max(float(np.max(exposure, where=np.isfinite(exposure), initial=0.0)), 1e-3)
    above = curve.density(exposed.log_exposure(_ROOTS * _ROOTS * top)) - curve.base_fog
    densities = _taken(exposure, [above.astype(np.float32) for _ in layers], _by_root(top))
    if material.grain is not None:
        densities = add_grain(densities, pitch_mm=pitch_mm, grain=material.grain, rng=rng)
    # Grain reaches beyond what the curve does, on both sides.
    least, most = -1.0, curve.d_max + 2.0
    span = least + (most - least) * _ROOTS + curve.base_fog
    tables = [
        _encoded(light_from_density(span, exposed, tone=tone, layer=layer), bits)
        for layer in layers
    ]
    scale = np.float32((_STEPS - 1) / (most - least))
    return _taken(densities, tables, lambda density: (density - np.float32(least)) * scale)


def _hatched(codes: Codes, exposure: Float, bits: int) -> Codes:
    uncovered = np.isnan(exposure[..., 0])
    if uncovered.any():
        codes[uncovered] = _hatching(uncovered.shape, bits)[uncovered][:, None]
    return codes


def _hatching(shape: tuple[int, int], bits: int) -> NDArray[np.generic]:
    """Return diagonal stripes, (rows, columns)."""
    period = max(4, max(shape) // _HATCH_PERIOD)
    diagonal = np.add.outer(np.arange(shape[0]), np.arange(shape[1])) // (period // 2)
    bright, dark = (np.array(value * (257 if bits == 16 else 1)) for value in _HATCH_LIGHT)
    return np.where(diagonal % 2 == 0, bright, dark).astype(np.uint8 if bits == 8 else np.uint16)
