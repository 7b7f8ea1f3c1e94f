"""Large photos: panoramas open, JPEG needs one array, and can be read at part of its size.

JPEG: ITU-T T.81. Memory is counted as the process's own peak, in a fresh process.
"""

import io
import subprocess
import sys

import numpy as np
import pytest
from PIL import Image

from pinsim import SceneError
from pinsim.scene.door import MAX_PIXELS, read_photo

ORIENTATION = 0x0112
EXIF_DIRECTORY = 0x8769
FOCAL_LENGTH_35MM = 0xA405


def smooth(rows=240, columns=360):
    """Return sRGB codes of a photo without fine detail."""
    y, x = np.mgrid[:rows, :columns]
    return np.stack(
        [40 + 180 * x / columns, 60 + 150 * y / rows, 100 + 50 * np.sin(x / 40)], axis=2
    ).astype(np.uint8)


def test_the_limit_lets_panoramas_of_200_megapixels_in():
    assert MAX_PIXELS >= 200_000_000


def test_pillows_own_limit_is_left_as_it_was(tmp_path):
    before = Image.MAX_IMAGE_PIXELS
    Image.fromarray(smooth()).save(tmp_path / "photo.jpg")
    read_photo(tmp_path / "photo.jpg")
    assert before == Image.MAX_IMAGE_PIXELS


def test_a_jpeg_of_200_megapixels_needs_little_more_than_its_codes(tmp_path):
    """20000 x 10000: 600 MB of codes. A tenth more is allowed, beside what the packages need."""
    if sys.platform != "linux":
        pytest.skip("the peak of a process is read from Linux's own counters")
    path = tmp_path / "panorama.jpg"
    rows = np.full((10_000, 20_000), 90, np.uint8)
    rows[:, ::1000] = 200
    Image.fromarray(rows).convert("RGB").save(path, quality=60)
    del rows
    code = (
        "from pathlib import Path\n"
        "from pinsim.scene.door import read_photo\n"
        "def peak():\n"
        "    text = Path('/proc/self/status').read_text()\n"
        "    return int(text.split('VmHWM:')[1].split()[0]) / 1000\n"
        "import imagecodecs, numpy, PIL.Image\n"
        f"read_photo(Path({str(path.parent / 'small.jpg')!r}))\n"
        "before = peak()\n"
        f"photo = read_photo(Path({str(path)!r}))\n"
        "print(photo.shape, photo.codes.dtype, peak() - before)\n"
    )
    Image.fromarray(smooth()).save(tmp_path / "small.jpg")
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=300
    )
    assert done.stdout.startswith("(10000, 20000) uint8 ")
    assert 500 < float(done.stdout.split()[-1]) < 660


@pytest.mark.parametrize("progressive", [False, True])
@pytest.mark.parametrize("subsampling", [0, 1, 2])
@pytest.mark.parametrize("mode", ["RGB", "L"])
def test_a_jpeg_is_decoded_as_pillow_does(tmp_path, progressive, subsampling, mode):
    path = tmp_path / "photo.jpg"
    image = Image.fromarray(smooth()).convert(mode)
    options = {} if mode == "L" else {"subsampling": subsampling}
    image.save(path, quality=80, progressive=progressive, **options)
    with Image.open(path) as again:
        codes = np.asarray(again)
    expected = codes if mode == "RGB" else codes[..., None].repeat(3, 2)
    np.testing.assert_array_equal(read_photo(path).codes, expected)


@pytest.mark.parametrize("progressive", [False, True])
def test_a_jpeg_cut_short_anywhere_is_refused(tmp_path, progressive):
    """Its decoder would fill what is missing with grey and say nothing."""
    exif = Image.Exif()
    exif[ORIENTATION] = 1
    buffer = io.BytesIO()
    noise = np.random.default_rng(1).integers(0, 256, (64, 96, 3), np.uint8)
    Image.fromarray(noise).save(buffer, "JPEG", quality=90, exif=exif, progressive=progressive)
    whole = buffer.getvalue()
    path = tmp_path / "photo.jpg"
    path.write_bytes(whole + b"what phones append")
    assert read_photo(path).shape == (64, 96)
    for size in range(len(whole) // 4, len(whole) - 1, 97):
        path.write_bytes(whole[:size])
        with pytest.raises(SceneError, match=r"damaged or cut short"):
            read_photo(path)
    path.write_bytes(whole[:-2])
    with pytest.raises(SceneError, match=r"the picture's end is missing"):
        read_photo(path)
