"""Distance maps in files: which numbers stand in them, and what those mean."""

import math
import zipfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import IO, Any, Literal

import numpy as np
from numpy.typing import NDArray

from pinsim.errors import SceneError, out_of_range
from pinsim.scene.distance import ALONGS, NEAREST_MM, Along, DistanceMap, inverse_of
from pinsim.scene.door import MAX_PIXELS, read_plain
from pinsim.scene.fit import at_size, check_aspect, filled, fitted
from pinsim.scene.panorama import PanoramaPlace
from pinsim.scene.photo import Photo
from pinsim.units import MM_PER, format_length

Kind = Literal["distance", "inverse", "disparity"]
KINDS = ("distance", "inverse", "disparity")
Holes = Literal["far", "fill"]
HOLES = ("far", "fill")
MAP_UNITS = ("mm", "cm", "m", "in", "ft")

STEP_RANGE_MM = (1e-4, 1e4)
STEP_RANGE_PX = (1e-6, 100.0)
BASELINE_RANGE_MM = (0.1, 1e6)
FOCAL_RANGE_PX = (1.0, 1e7)
# A scene mostly nearer than a thumb's width, or wholly beyond the horizon, is a wrong unit.
LEAST_MEDIAN_MM = 30.0
MOST_MM = 1e8
_SAMPLES = 300  # rows and columns looked at for the median

_NPY, _ZIP = b"\x93NUMPY", b"PK\x03\x04"
_NAMES = ("distance", "depth")


@dataclass(frozen=True, slots=True, kw_only=True)
class MapFile:
    """A distance map in a file, and what its numbers mean.

    kind "distance": a number times step_mm, 0 infinitely far. "inverse": linear in 1/distance from
    far_mm, at code 0, to near_mm, at the highest code of the file (floats: 0 to 1). "disparity":
    a number times step_px is how far a thing moves between two pictures taken baseline_mm apart.
    focal_length_px : of the disparity's own pixels; else from the photo's angle of view.
    along : "axis" or "ray"; None is the axis, of a panorama the ray.
    holes : what 0 and NaN are: "far", infinitely far, or "fill", like what is around them; None
    takes 0 as infinitely far and refuses NaN.
    """

    path: Path
    kind: Kind = "distance"
    step_mm: float | None = None
    step_px: float | None = None
    near_mm: float | None = None
    far_mm: float | None = None
    baseline_mm: float | None = None
    focal_length_px: float | None = None
    along: Along | None = None
    holes: Holes | None = None

    def __post_init__(self) -> None:
        for name, value, allowed in (
            ("kind", self.kind, KINDS),
            ("along", self.along or "axis", ALONGS),
            ("holes", self.holes or "far", HOLES),
        ):
            if value not in allowed:
                raise self._error(
                    f": {name} is {value!r}; it must be one of: {', '.join(allowed)}."
                )
        self._refuse_foreign()
        for name, number, unit, (low, high) in (
            ("the map's step", self.step_mm, "mm", STEP_RANGE_MM),
            ("the map's step", self.step_px, "px", STEP_RANGE_PX),
            ("near", self.near_mm, "mm", (NEAREST_MM, MOST_MM)),
            ("far", self.far_mm, "mm", (NEAREST_MM, math.inf)),
            ("baseline", self.baseline_mm, "mm", BASELINE_RANGE_MM),
            ("the map's focal length", self.focal_length_px, "px", FOCAL_RANGE_PX),
        ):
            if number is not None and not low <= number <= high:
                raise self._error(": " + out_of_range(name, number, unit, low, high))
        if self.kind == "inverse":
            if self.near_mm is None or self.far_mm is None:
                raise self._error(
                    ": a map of inverse distances needs the distances of its highest value and of "
                    'its 0: near = "0.5 m", far = "infinity" in a scene file, '
                    "--near 0.5m --far infinity on the line."
                )
            if self.near_mm >= self.far_mm:
                raise self._error(
                    f": near, {format_length(self.near_mm)}, is not nearer than far, "
                    f"{format_length(self.far_mm)}; near belongs to the map's highest value."
                )
        if self.kind == "disparity" and self.baseline_mm is None:
            raise self._error(
                ": a map of disparities needs how far apart its two pictures were taken: "
                'baseline = "65 mm" in a scene file, --baseline 65mm on the line.'
            )

    @property
    def files(self) -> tuple[Path, ...]:
        """The map."""
        return (self.path,)

    def lay(
        self, photo: Photo, *, focal_length_px: float, panorama: PanoramaPlace | None = None
    ) -> tuple[DistanceMap, tuple[str, ...]]:
        """Read the map and return the distances of the photo's pixels, and what was done to it.

        focal_length_px : the photo's. panorama : where it lies on the sphere, if it is one.
        Raises SceneError, in one line, for a file that cannot be read, another shape than the
        photo's, and numbers that cannot be what they are said to be.
        """
        if panorama is not None and self.kind == "disparity":
            raise self._error(": disparities belong to a flat photo, not to a panorama.")
        numbers = read_numbers(self.path)
        check_aspect(self.path, numbers.shape, photo.shape, "map")
        own = numbers.shape
        notes = []
        focal_px = self.focal_length_px or focal_length_px * own[1] / photo.shape[1]
        if numbers.size > photo.shape[0] * photo.shape[1]:
            numbers = at_size(numbers, photo.shape)
        self._refuse_wrong(numbers)
        codes, table, holes = self._meant(numbers, focal_px)
        del numbers
        if holes.any():
            codes, note = self._without_holes(codes, holes, photo)
            notes += note
        del holes
        if codes.shape != photo.shape:
            codes, table = fitted(codes if table is None else table[codes], photo), None
        if own != photo.shape:
            notes.append(
                f"the distance map of {own[1]} x {own[0]} px was brought to the photo's "
                f"{photo.shape[1]} x {photo.shape[0]} px"
            )
        along: Along = self.along or ("axis" if panorama is None else "ray")
        if panorama is not None and along == "axis":
            codes, table = _along_rays(self.path, codes, table, panorama), None
        codes.flags.writeable = False
        made = DistanceMap(
            codes=codes,
            inverse_of_code=table,
            ray_focal_px=focal_length_px if along == "ray" and panorama is None else None,
            along="axis" if panorama is None else "ray",
        )
        self._check_distances(made)
        return made, tuple(notes)

    def _error(self, text: str) -> SceneError:
        return SceneError(f"{self.path}{text}")

    def _refuse_foreign(self) -> None:
        """Raise for what says something about a kind of map that this is not."""
        said = {
            "distance": {"a step": self.step_mm},
            "inverse": {"near": self.near_mm, "far": self.far_mm},
            "disparity": {
                "a step in pixels": self.step_px,
                "a baseline": self.baseline_mm,
                "a focal length of the map": self.focal_length_px,
            },
        }
        for kind, values in said.items():
            for name, value in values.items():
                if kind != self.kind and value is not None:
                    raise self._error(
                        f": {name} belongs to a map of kind {kind!r}, and this is one of kind "
                        f"{self.kind!r}; leave it out, or state the kind (--map-kind, "
                        "kind in a scene file)."
                    )
        if self.kind == "disparity" and self.along == "ray":
            raise self._error(
                ": a disparity always gives the distance along the axis; leave along out."
            )

    def _refuse_wrong(self, numbers: NDArray[Any]) -> None:
        """Raise for numbers that are nothing of the kind."""
        floats = np.issubdtype(numbers.dtype, np.floating)
        if self.kind == "distance" and self.step_mm is None:
            raise self._error(
                " holds numbers without a unit: metres or millimetres? State it: "
                'unit = "m" in a scene file, --map-unit m on the line.'
                if floats
                else ": what does one code value of the map mean? Give the step, for example 1 mm "
                '(--map-step 1mm on the line, step = "1 mm" in a scene file).'
            )
        if self.kind == "disparity" and self.step_px is None and not floats:
            raise self._error(
                ": how many pixels of disparity is one code value of the map? Give the step, for "
                'example 1/256 px (--map-step 1/256px on the line, step = "1/256 px" in a scene file).'
            )
        if not floats:
            return
        wrong = int(np.count_nonzero(np.isnan(numbers)))
        if wrong and self.holes is None:
            what = {"distance": "distances", "inverse": "values", "disparity": "disparities"}
            raise self._error(
                f": {wrong} {what[self.kind]} are NaN; say what they are: infinitely far "
                '(holes = "far", --holes far) or like what is around them (holes = "fill", '
                "--holes fill)."
            )
        if wrong == numbers.size:
            raise self._error(" holds nothing but NaN; export it again.")
        low, high = float(np.nanmin(numbers)), float(np.nanmax(numbers))
        if self.kind == "inverse" and not (low >= 0.0 and high <= 1.0):
            raise self._error(
                f": inverse distances as decimal numbers go from 0 (far) to 1 (near), and these from "
                f"{low:g} to {high:g}; scale them."
            )
        if low < 0.0:
            if self.kind == "disparity":
                raise self._error(
                    f": disparities go down to {low:g} px; they start at 0, which is infinitely far. "
                    "Take the left picture's map, or change the sign."
                )
            raise self._error(
                f": distances go down to {low * (self.step_mm or 1.0):g} mm; "
                "they start at 0, which means infinitely far."
            )

    def _meant(
        self, numbers: NDArray[Any], focal_px: float
    ) -> tuple[NDArray[Any], NDArray[np.float32] | None, NDArray[np.bool_]]:
        """Return codes, 1/distance of each code (None: floats are it themselves), and the holes.

        Disparity: Z = f B / d for two parallel cameras B apart (Hartley and Zisserman, Multiple View
        Geometry, 2nd ed., stereo with parallel axes, from memory), so 1/Z is linear in it.
        """
        whole = np.issubdtype(numbers.dtype, np.integer)
        values = np.arange(np.iinfo(numbers.dtype).max + 1) if whole else numbers
        if self.kind == "distance":
            assert self.step_mm is not None
            inverse = inverse_of(values, self.step_mm)
        elif self.kind == "disparity":
            assert self.baseline_mm is not None
            scale = (self.step_px or 1.0) / (focal_px * self.baseline_mm)
            inverse = (values * scale).astype(np.float32)
        else:
            assert self.near_mm is not None
            assert self.far_mm is not None
            nearest, farthest = 1.0 / self.near_mm, 1.0 / self.far_mm
            top = float(values[-1]) if whole else 1.0
            inverse = (farthest + values * ((nearest - farthest) / top)).astype(np.float32)
        if whole:
            holes = numbers == 0 if self.kind != "inverse" else np.zeros(numbers.shape, np.bool_)
            return numbers, inverse, holes
        holes = np.isnan(numbers)
        if self.kind != "inverse":
            holes |= numbers == 0
        if self.kind == "disparity":
            holes |= np.isinf(numbers)  # how some write that nothing was found
        inverse[holes] = 0.0
        return inverse, None, holes

    def _without_holes(
        self, codes: NDArray[Any], holes: NDArray[np.bool_], photo: Photo
    ) -> tuple[NDArray[Any], list[str]]:
        share = float(holes.mean())
        part = f"{100.0 * share:.1f} %" if share >= 5e-4 else f"{np.count_nonzero(holes)} pixels"
        if self.holes == "fill":
            if holes.all():
                raise self._error(" has holes only: not one distance is in it; export it again.")
            return filled(codes, holes, photo), [
                f"{part} of the distance map were holes, filled from what is around them"
            ]
        if self.holes == "far":
            return codes, []  # as told; a sky needs no word
        return codes, [
            f"{part} of the distance map are 0, taken as infinitely far "
            "(--holes far or --holes fill to settle it)"
        ]

    def _check_distances(self, made: DistanceMap) -> None:
        """Raise for distances that are possible but mean a wrong unit."""
        right = {
            "distance": f"is the step or unit, {format_length(self.step_mm or 1.0)}, right?",
            "inverse": "are near and far right?",
            "disparity": "are step, baseline and focal length right?",
        }[self.kind]
        if made.nearest_mm < NEAREST_MM:
            raise self._error(
                f": the nearest distance is {made.nearest_mm:g} mm, too near to draw; {right}"
            )
        if MOST_MM < made.nearest_mm < math.inf:
            raise self._error(
                f": everything is farther than {MOST_MM / 1e6:g} km, the nearest "
                f"{made.nearest_mm / 1e6:.3g} km; {right}"
            )
        rows, columns = (
            np.linspace(0, size - 1, min(size, _SAMPLES)).astype(np.intp) for size in made.shape
        )
        inverse = made.inverse_mm(rows[:, None], columns[None, :])
        seen = inverse[inverse > 0.0]
        if seen.size and 1.0 / float(np.median(seen)) < LEAST_MEDIAN_MM:
            raise self._error(
                f": half of it is nearer than {1.0 / float(np.median(seen)):.3g} mm, which is within "
                f"or just before the box; {right}"
            )


def unit_mm(unit: str) -> float:
    """Return the millimetres of one of MAP_UNITS."""
    return MM_PER[unit]


def _along_rays(
    path: Path,
    codes: NDArray[Any],
    table: NDArray[np.float32] | None,
    place: PanoramaPlace,
) -> NDArray[np.float32]:
    """Return 1/distance along the rays of a panorama from distances along its way straight ahead."""
    up = (np.arange(codes.shape[0]) - place.horizon_row) / place.row_per_rad
    right = (np.arange(codes.shape[1]) - place.ahead_column) / place.column_per_rad
    if np.abs(right).max() >= 0.5 * math.pi:
        raise SceneError(
            f"{path}: a panorama that reaches sideways and back has no one axis; give distances "
            'along the ray (along = "ray", --map-along ray).'
        )
    inverse = np.array(codes, np.float32) if table is None else table[codes]
    inverse *= np.cos(up)[:, None].astype(np.float32)
    inverse *= np.cos(right)[None, :].astype(np.float32)
    return np.asarray(inverse, np.float32)


# Numbers ----------------------------------------------------------------------------------------


def read_numbers(path: Path) -> NDArray[Any]:
    """Read a map's bare numbers from a picture, .npy or .npz: uint8, uint16 or float (rows, columns).

    Of an .npz the only array, or the one named "distance" or "depth". The first row is the photo's
    upper edge. Raises SceneError in one line.
    """
    try:
        with path.open("rb") as file:
            head = file.read(8)
    except OSError:
        head = b""  # read_plain says what is wrong
    if head.startswith(_NPY):
        with _numpy_file(path), path.open("rb") as file:
            return _plain_numbers(_read_array(file, path), path)
    if head.startswith(_ZIP) and path.suffix.lower() != ".tif":
        with _numpy_file(path), zipfile.ZipFile(path) as archive:
            return _plain_numbers(_read_member(archive, path), path)
    if head and path.suffix.lower() in {".npy", ".npz"}:
        raise SceneError(f"{path} is no numpy file, whatever its ending; save the map again.")
    return _plain_numbers(read_plain(path, "distance map"), path)


@contextmanager
def _numpy_file(path: Path) -> Iterator[None]:
    try:
        yield
    except SceneError:
        raise
    except MemoryError:
        raise SceneError(f"{path} needs more memory than there is; shrink the map first.") from None
    except Exception as problem:  # numpy and zlib raise ValueError, EOFError, BadZipFile, error ...
        reason = " ".join(str(problem).split()) or type(problem).__name__
        raise SceneError(
            f"{path} is damaged or cut short ({ascii(reason)[1:-1]}); save the map again."
        ) from None


def _read_member(archive: zipfile.ZipFile, path: Path) -> NDArray[Any]:
    names = [name for name in archive.namelist() if name.endswith(".npy")]
    arrays = {name.removesuffix(".npy"): name for name in names}
    wanted = [name for name in _NAMES if name in arrays]
    chosen = wanted[0] if wanted else next(iter(arrays)) if len(arrays) == 1 else None
    if chosen is None:
        found = ", ".join(ascii(name) for name in sorted(arrays)) or "none"
        raise SceneError(
            f"{path} holds these arrays: {found}; the map must be the only one, or be named "
            "'distance' or 'depth'."
        )
    with archive.open(arrays[chosen]) as file:
        return _read_array(file, path)


def _read_array(file: IO[bytes], path: Path) -> NDArray[Any]:
    """Read one array; its size is looked at before memory is taken, and objects are never built."""
    version = np.lib.format.read_magic(file)
    readers = {
        (1, 0): np.lib.format.read_array_header_1_0,
        (2, 0): np.lib.format.read_array_header_2_0,
    }
    if version not in readers:
        raise SceneError(f"{path} holds no plain numbers; save the map as one array of floats.")
    shape, by_columns, dtype = readers[version](file)
    if dtype.kind not in "uif":
        raise SceneError(
            f"{path} holds values of type {dtype}; a map is numbers, whole or decimal, one a pixel."
        )
    shape = tuple(size for size in shape if size != 1) if len(shape) > 2 else shape
    if len(shape) != 2 or 0 in shape:
        raise SceneError(f"{path} holds an array of shape {shape}; a map is (rows, columns).")
    count = shape[0] * shape[1]
    if count > MAX_PIXELS:
        raise SceneError(
            f"{path}: {count / 1e6:.0f} megapixels is more than the {MAX_PIXELS / 1e6:.0f} that "
            "pinsim opens; shrink the map first."
        )
    data = file.read(count * dtype.itemsize)
    if len(data) < count * dtype.itemsize:
        raise SceneError(f"{path} is damaged or cut short; save the map again.")
    array = np.frombuffer(data, dtype)
    return array.reshape(shape[::-1]).T if by_columns else array.reshape(shape)


def _plain_numbers(array: NDArray[Any], path: Path) -> NDArray[Any]:
    """Return uint8 and uint16 as they are, other whole numbers as uint16 if they fit, else floats."""
    if array.dtype == np.bool_:
        raise SceneError(f"{path} is only black and white; a map has a number for each pixel.")
    if array.dtype in (np.uint8, np.uint16):
        return np.ascontiguousarray(array.astype(array.dtype.newbyteorder("="), copy=False))
    if np.issubdtype(array.dtype, np.integer):
        low, high = int(array.min()), int(array.max())
        if low < 0:
            raise SceneError(
                f"{path}: the numbers go down to {low}; they start at 0, which is infinitely far. "
                "Make what has no distance 0."
            )
        if high > np.iinfo(np.uint16).max:
            raise SceneError(
                f"{path}: whole numbers up to {high} do not fit 16 bits; save the map as float."
            )
        return array.astype(np.uint16)
    if not np.issubdtype(array.dtype, np.floating):
        raise SceneError(f"{path} holds values of type {array.dtype}; save the map as float.")
    return np.ascontiguousarray(array, np.float64 if array.dtype.itemsize > 4 else np.float32)
