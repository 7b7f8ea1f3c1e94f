"""What the tests of the photo door share: light by published constants, and files made by hand.

Light is computed from the constants of IEC 61966-2-1 and from primaries and white points; nothing here
comes from pinsim.
"""

import struct
import zlib

import numpy as np
import tifffile

ORIENTATION = 0x0112
D65 = (0.3127, 0.3290)
SRGB_PRIMARIES = ((0.64, 0.33), (0.30, 0.60), (0.15, 0.06))
# Linear Bradford cone responses, as ICC.1 (annex on chromatic adaptation) prints them; from memory.
BRADFORD = np.array(
    [[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]]
)


def light_of(codes, top=255):
    """Return linear light of sRGB codes."""
    v = np.asarray(codes, np.float64) / top
    return np.where(v <= 0.04045, v / 12.92, ((v + 0.055) / 1.055) ** 2.4)


def picture(rows=6, columns=8, channels=3, top=255, dtype=np.uint8):
    """Return codes that differ everywhere, so that no turn or swap goes unseen."""
    n = rows * columns * channels
    spread = (np.arange(n) * 37 % n) / (n - 1)
    return np.round(spread * top).astype(dtype).reshape(rows, columns, channels)


# Orientation n: how an upright picture must be stored so that viewers turn it back (Exif 2.32,
# CIPA DC-008, from memory: 1 normal, 2 mirrored, 3 half turn, 4 upside down, 5 transposed,
# 6 to be turned clockwise, 7 transverse, 8 to be turned anticlockwise). 0 and 9 mean nothing.
STORED = {
    0: lambda a: a,
    1: lambda a: a,
    2: np.fliplr,
    3: lambda a: np.rot90(a, 2),
    4: np.flipud,
    5: lambda a: np.swapaxes(a, 0, 1),
    6: lambda a: np.rot90(a, 1),
    7: lambda a: np.swapaxes(np.rot90(a, 2), 0, 1),
    8: lambda a: np.rot90(a, -1),
    9: lambda a: a,
}


def with_exif(png, exif):
    """Return a PNG's bytes with an eXIf chunk before its pixels (PNG 3rd edition)."""
    body = b"eXIf" + exif.tobytes().removeprefix(b"Exif\0\0")
    chunk = struct.pack(">I", len(body) - 4) + body + struct.pack(">I", zlib.crc32(body))
    at = png.index(b"IDAT") - 4
    return png[:at] + chunk + png[at:]


def to_xyz(primaries, white):
    """Return the matrix from linear RGB to XYZ of three primaries and a white, all as (x, y)."""
    columns = np.array([(x / y, 1.0, (1 - x - y) / y) for x, y in primaries]).T
    x, y = white
    return columns * np.linalg.solve(columns, np.array([x / y, 1.0, (1 - x - y) / y]))


def between(primaries, white):
    """Return the matrix from a space's linear RGB to linear sRGB, white adapted by Bradford."""
    white_from, white_to = (np.array([x / y, 1.0, (1 - x - y) / y]) for x, y in (white, D65))
    cones = np.diag((BRADFORD @ white_to) / (BRADFORD @ white_from))
    adapt = np.linalg.inv(BRADFORD) @ cones @ BRADFORD
    return np.linalg.inv(to_xyz(SRGB_PRIMARIES, D65)) @ adapt @ to_xyz(primaries, white)


# XYZ (D65) to linear sRGB as IEC 61966-2-1 prints it: what a camera with sRGB's own filters does.
XYZ_TO_SRGB = ((3.2406, -1.5372, -0.4986), (-0.9689, 1.8758, 0.0415), (0.0557, -0.2040, 1.0570))


def mosaic(light):
    """Return what a sensor behind red, green, green, blue filters records of (rows, columns, 3)."""
    seen = np.empty(light.shape[:2])
    for row, column, channel in ((0, 0, 0), (0, 1, 1), (1, 0, 1), (1, 1, 2)):
        seen[row::2, column::2] = light[row::2, column::2, channel]
    return seen


def write_dng(
    path,
    codes,
    *,
    black=0,
    white=65535,
    neutral=(1.0, 1.0, 1.0),
    matrix=XYZ_TO_SRGB,
    orientation=1,
    exif=(),
):
    """Write an uncompressed raw file (DNG 1.4), codes (rows, columns) uint16 of a Bayer sensor.

    neutral : what the camera records of white. matrix : XYZ to camera. exif : more tags as tifffile
    takes them.
    """

    def rationals(values, scale=10_000):
        return [part for value in np.ravel(values) for part in (round(float(value) * scale), scale)]

    tags = [
        (274, "H", 1, orientation, True),
        (271, "s", 0, "Homemade", True),
        (272, "s", 0, "Test sensor", True),
        (33421, "H", 2, (2, 2), True),  # CFARepeatPatternDim
        (33422, "B", 4, bytes((0, 1, 1, 2)), True),  # CFAPattern
        (50706, "B", 4, bytes((1, 4, 0, 0)), True),  # DNGVersion
        (50708, "s", 0, "Homemade test sensor", True),  # UniqueCameraModel
        (50714, "I", 1, black, True),  # BlackLevel
        (50717, "I", 1, white, True),  # WhiteLevel
        (50721, "2i", 9, rationals(matrix), True),  # ColorMatrix1
        (50728, "2I", 3, rationals(neutral), True),  # AsShotNeutral
        (50778, "H", 1, 21, True),  # CalibrationIlluminant1: D65
        *exif,
    ]
    tifffile.imwrite(path, codes, photometric=32803, extratags=tags, metadata=None, software=None)
    return path
