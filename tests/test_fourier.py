"""Whole pictures' transforms against numpy's own (an independent build), by either door of scipy."""

import subprocess
import sys

import numpy as np
import pytest

from pinsim.render import fourier


@pytest.fixture(params=["compiled part", "scipy.fft"])
def door(request, monkeypatch):
    if request.param == "scipy.fft":
        monkeypatch.setattr(fourier, "_compiled", None)
    elif fourier._compiled is None:
        pytest.skip("this scipy keeps its compiled transform elsewhere")


def _planes(shape, seed=3):
    return np.random.default_rng(seed).standard_normal(shape).astype(np.float32)


@pytest.mark.parametrize("shape", [(6, 8), (15, 9), (1, 4), (64, 81)])
def test_it_is_numpys_transform_in_single_precision(door, shape):
    plane = _planes(shape)
    spectrum = fourier.rfft2(plane)
    assert spectrum.dtype == np.complex64
    np.testing.assert_allclose(spectrum, np.fft.rfft2(plane.astype(np.float64)), atol=2e-4)


@pytest.mark.parametrize("threads", [1, 2])
def test_there_and_back_is_the_same(door, threads):
    planes = _planes((3, 30, 45))
    spectra = np.stack([fourier.rfft2(plane) for plane in planes])
    again = fourier.irfft2(spectra, (30, 45), threads=threads)
    assert again.dtype == np.float32
    np.testing.assert_allclose(again, planes, atol=1e-5)


def test_a_strided_plane_is_read_as_it_lies(door):
    light = _planes((12, 10, 3))
    plane = np.moveaxis(light, -1, 0)[1]
    np.testing.assert_array_equal(fourier.rfft2(plane), fourier.rfft2(plane.copy()))


def test_both_doors_give_the_same_bits():
    if fourier._compiled is None:
        pytest.skip("this scipy keeps its compiled transform elsewhere")
    from scipy import fft

    plane = _planes((48, 50))
    spectrum = fourier.rfft2(plane)
    np.testing.assert_array_equal(spectrum, fft.rfft2(plane))
    np.testing.assert_array_equal(
        fourier.irfft2(spectrum.copy(), (48, 50), threads=2),
        fft.irfft(fft.ifft(spectrum, axis=0), n=50),
    )


class _Other:
    """A compiled part that another version of scipy might have: same names, other sense."""

    def r2c(self, plane, axes, forward, inorm, out, nthreads):
        return np.fft.rfft2(plane).astype(np.complex64)

    def c2c(self, spectra, axes, forward, inorm, out, nthreads):
        out[:] = np.fft.ifft(spectra, axis=-2)

    def c2r(self, spectra, axes, lastsize, forward, inorm, out, nthreads):
        return np.fft.irfft(spectra).astype(np.float32) * spectra.size


class _Older:
    def r2c(self, plane):
        return plane


@pytest.mark.parametrize("other", [_Other(), _Older(), object()])
def test_a_part_that_does_otherwise_is_not_used(monkeypatch, other):
    monkeypatch.setitem(sys.modules, "scipy.fft._pocketfft.pypocketfft", other)
    assert fourier.compiled_transform() is None


def _told_by(code):
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    return done.stdout.split()


def test_the_renderer_loads_without_scipys_public_door():
    if fourier._compiled is None:
        pytest.skip("this scipy keeps its compiled transform elsewhere")
    code = "import sys, pinsim.render.preview; print('scipy' in sys.modules)"
    assert _told_by(code) == ["False"]


@pytest.mark.parametrize(
    "doors", ["pinsim.render.fourier, scipy.fft", "scipy.fft, pinsim.render.fourier"]
)
def test_both_doors_open_in_one_process_in_either_order(doors):
    """They share one compiled module: loaded twice, some versions of it end in a crash."""
    code = f"""import numpy, {doors}
from pinsim.render import fourier
from scipy.fft._pocketfft import pypocketfft
plane = numpy.ones((4, 6), numpy.float32)
print(numpy.allclose(fourier.rfft2(plane), scipy.fft.rfft2(plane)))
print(fourier._compiled in (None, pypocketfft))"""
    assert _told_by(code) == ["True", "True"]


def test_one_picture_is_drawn_the_same_by_either_door(monkeypatch):
    from pinsim.camera import Camera, Film, Hole
    from pinsim.render.kept import forget
    from pinsim.render.preview import preview
    from pinsim.scene import Scene

    scene = Scene.load("sample:courtyard", distance_mm=3000.0)
    film = Film(width_mm=36.0, height_mm=24.0)
    camera = Camera(focal_length_mm=46.0, hole=Hole(diameter_mm=0.25), film=film)
    one = preview(scene, camera, width_px=90, averaged=True).exposure
    forget()
    monkeypatch.setattr(fourier, "_compiled", None)
    other = preview(scene, camera, width_px=90, averaged=True).exposure
    np.testing.assert_array_equal(one, other)
