"""Colour spaces known by the chromaticities of their primaries and white, and by code points.

Code points are those of ITU-T H.273, which HEIF calls nclx. All matrices lead to linear sRGB.
"""

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.colour import srgb_to_linear

Float = NDArray[np.float32]
Array = NDArray[np.float64]

D65 = (0.3127, 0.3290)
SRGB = ((0.64, 0.33), (0.30, 0.60), (0.15, 0.06))
REC2020 = ((0.708, 0.292), (0.170, 0.797), (0.131, 0.046))  # ITU-R BT.2020
# Linear Bradford cone responses, the usual adaptation between whites (ICC.1, annex E).
_BRADFORD = np.array(
    [[0.8951, 0.2664, -0.1614], [-0.7502, 1.7135, 0.0367], [0.0389, -0.0685, 1.0296]]
)
# H.273, table 2: colour primaries that photos and video carry.
_PRIMARIES: dict[int, tuple[Sequence[Sequence[float]], Sequence[float]]] = {
    1: (SRGB, D65),
    2: (SRGB, D65),  # unspecified
    5: (((0.64, 0.33), (0.29, 0.60), (0.15, 0.06)), D65),
    6: (((0.630, 0.340), (0.310, 0.595), (0.155, 0.070)), D65),
    7: (((0.630, 0.340), (0.310, 0.595), (0.155, 0.070)), D65),
    9: (REC2020, D65),
    11: (((0.680, 0.320), (0.265, 0.690), (0.150, 0.060)), (0.314, 0.351)),
    12: (((0.680, 0.320), (0.265, 0.690), (0.150, 0.060)), D65),  # Display P3
}
_PQ, _HLG = 16, 18
# What diffuse white is coded as: 203 cd/m2, and 75 % of HLG's signal (ITU-R BT.2408).
PQ_WHITE_CD_M2 = 203.0
HLG_WHITE_SIGNAL = 0.75


def _white_xyz(white: Sequence[float]) -> Array:
    x, y = white
    return np.array([x / y, 1.0, (1.0 - x - y) / y])


def _to_xyz(primaries: Sequence[Sequence[float]], white: Sequence[float]) -> Array:
    columns = np.array([_white_xyz(one) for one in primaries]).T
    return np.asarray(columns * np.linalg.solve(columns, _white_xyz(white)))


def to_srgb_matrix(primaries: Sequence[Sequence[float]], white: Sequence[float]) -> Float:
    """Return the matrix (3, 3) from linear RGB of these primaries to linear sRGB; white stays white.

    primaries : (x, y) of red, green, blue. white : (x, y). Raises LinAlgError when they lie on a line.
    """
    cones = (_BRADFORD @ _white_xyz(D65)) / (_BRADFORD @ _white_xyz(white))
    adapt = np.linalg.inv(_BRADFORD) @ np.diag(cones) @ _BRADFORD
    matrix = np.linalg.inv(_to_xyz(SRGB, D65)) @ adapt @ _to_xyz(primaries, white)
    return np.asarray(matrix, np.float32)


def _pq(signal: Array) -> Array:
    """Return light of SMPTE ST 2084 codes, 1.0 = diffuse white."""
    m1, m2 = 2610.0 / 16384.0, 2523.0 / 4096.0 * 128.0
    c1, c2, c3 = 3424.0 / 4096.0, 2413.0 / 4096.0 * 32.0, 2392.0 / 4096.0 * 32.0
    root = signal ** (1.0 / m2)
    light = (np.maximum(root - c1, 0.0) / (c2 - c3 * root)) ** (1.0 / m1)
    return np.asarray(light * (10_000.0 / PQ_WHITE_CD_M2))


def _hlg(signal: Array) -> Array:
    """Return scene light of hybrid log-gamma codes (ITU-R BT.2100), 1.0 = diffuse white."""
    a, b = 0.17883277, 0.28466892
    c = 0.5 - a * math.log(4.0 * a)

    def scene(v: Array) -> Array:
        return np.where(v <= 0.5, v * v / 3.0, (np.exp((v - c) / a) + b) / 12.0)

    return np.asarray(scene(signal) / scene(np.array(HLG_WHITE_SIGNAL)))


_CURVES = {
    4: lambda v: v**2.2,
    5: lambda v: v**2.8,
    8: lambda v: v,
    _PQ: _pq,
    _HLG: _hlg,
}


def by_code_points(told: Mapping[str, Any], bits: int) -> tuple[Float, Float | None, str, bool]:
    """Return what HEIF's code points mean: decoding table, matrix or None, a note or "", and clipping.

    told : color_primaries and transfer_characteristics as numbers of H.273. bits : of a code. The last
    says whether the highest code is white, so that what is brighter was clipped.
    """
    primaries = int(told.get("color_primaries", 2))
    transfer = int(told.get("transfer_characteristics", 2))
    # What is no other curve is shown as sRGB: viewers do so with stills marked as video's curve.
    curve = _CURVES.get(transfer, srgb_to_linear)
    signal = np.arange(1 << bits) / ((1 << bits) - 1)
    known = _PRIMARIES.get(primaries)
    note = "" if known else f"its colour primaries ({primaries}) are not known; read as sRGB's"
    matrix = None
    if known is not None and known != (SRGB, D65):
        matrix = to_srgb_matrix(*known)
    return np.asarray(curve(signal), np.float32), matrix, note, transfer not in {_PQ, _HLG}
