"""Transforms of whole pictures, in the picture's own precision, by scipy's compiled transform.

`import scipy.fft` also loads numpy's test tools and the special functions: a third of a second, which
is as long as many a picture takes to draw. The compiled part alone loads at once. It is no public
part of scipy: where it is not found, or does not do what is expected of it, scipy.fft itself is used,
with the same result to the last bit.
"""

import importlib.util
import sys
from importlib.machinery import PathFinder
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

Float = NDArray[np.float32]
Spectrum = NDArray[np.complex64]

# Loaded under its own name, so that scipy.fft, if anybody imports it later, finds it loaded: such a
# module cannot be in one process twice.
_PACKAGE, _NAME = "scipy.fft._pocketfft", "pypocketfft"
_BY_ALL = 2  # its mark for a result divided by the number of points, as the inverse is


def compiled_transform() -> Any | None:
    """Return scipy's compiled transform, or None when it is not where it has been so far."""
    name = f"{_PACKAGE}.{_NAME}"
    loaded = sys.modules.get(name)
    if loaded is None:
        try:
            scipy = importlib.util.find_spec("scipy")
            if scipy is None or scipy.origin is None:
                return None
            folder = Path(scipy.origin).parent / "fft" / "_pocketfft"
            found = PathFinder.find_spec(name, [str(folder)])
            if found is None or found.loader is None:
                return None
            loaded = importlib.util.module_from_spec(found)
            found.loader.exec_module(loaded)
            sys.modules[name] = loaded
        except (ImportError, OSError, ValueError):
            return None
    return loaded if _as_expected(loaded) else None


def _as_expected(transform: Any) -> bool:
    """Try it on a small plane, there and back."""
    plane = np.arange(12, dtype=np.float32).reshape(3, 4)
    try:
        spectrum = _forward(transform, plane)
        right = np.allclose(spectrum, np.fft.rfft2(plane), atol=1e-4)
        again = _backward(transform, spectrum, plane.shape, 1)
        return bool(right and spectrum.dtype == np.complex64 and np.allclose(again, plane))
    except (AttributeError, TypeError, ValueError, RuntimeError):
        return False


def _forward(transform: Any, plane: Float) -> Spectrum:
    spectrum: Spectrum = transform.r2c(plane, (-2, -1), True, 0, None, 1)
    return spectrum


def _backward(transform: Any, spectra: Spectrum, shape: tuple[int, int], threads: int) -> Float:
    # One axis after the other, the first in place: no second array of spectra is needed.
    transform.c2c(spectra, (-2,), False, _BY_ALL, spectra, threads)
    planes: Float = transform.c2r(spectra, (-1,), shape[1], False, _BY_ALL, None, threads)
    return planes


_compiled = compiled_transform()


def rfft2(plane: Float) -> Spectrum:
    """Return the transform of a plane, float32 (..., rows, columns), in this thread alone."""
    if _compiled is not None:
        return _forward(_compiled, plane)
    from scipy import fft

    return np.asarray(fft.rfft2(plane))


def irfft2(spectra: Spectrum, shape: tuple[int, int], *, threads: int) -> Float:
    """Return planes of a shape from their transforms, complex64 (..., rows, columns // 2 + 1).

    The transforms are used up: what they hold afterwards is not defined.
    """
    if _compiled is not None:
        return _backward(_compiled, spectra, shape, threads)
    from scipy import fft

    half = fft.ifft(spectra, axis=-2, workers=threads, overwrite_x=True)
    return np.asarray(fft.irfft(half, n=shape[1], axis=-1, workers=threads))
