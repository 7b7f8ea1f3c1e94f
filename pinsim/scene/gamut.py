"""Colours that sRGB's primaries cannot make, brought in without turning their hue.

A wide-gamut photo or a raw file holds colours that are negative in one channel of linear sRGB. Such a
colour is moved straight towards the grey of its own luminance until its lowest channel is 0: the
luminance stays exactly, and so does the dominant wavelength, as white, the new colour and the old one
lie on one line of the chromaticity diagram (CIE 15). What is above 1 stays above 1.
"""

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float32]

# Luminance of linear sRGB (IEC 61966-2-1).
LUMINANCE = np.array([0.2126, 0.7152, 0.0722], np.float32)
# Farther outside than this, in parts of white, a colour counts as outside; less is rounding.
OUTSIDE = 2e-3


def lowest(light: Float) -> Float:
    """Return the lowest channel of light (..., 3)."""
    # Three slices: numpy's min along an axis of three is many times slower.
    return np.minimum(np.minimum(light[..., 0], light[..., 1]), light[..., 2])


def bring_in(light: Float) -> Float:
    """Return linear sRGB (..., 3) without negative channels; the array given may be changed.

    A colour whose luminance itself is not above 0 is no light, and becomes black.
    """
    low = lowest(light)
    outside = low < 0.0
    if not outside.any():
        return light
    colour, low = light[outside], low[outside]
    grey = np.maximum(colour @ LUMINANCE, 0.0)
    kept = grey / np.maximum(grey - low, np.finfo(np.float32).tiny)
    moved = grey[:, None] + (colour - grey[:, None]) * kept[:, None]
    light[outside] = np.maximum(moved, 0.0)
    return light
