"""An opening of any outline, known by how clear each cell of a grid is."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from pinsim.optics.opening import sunflower

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]

# Cells to each turn of the overlap's phase at its steepest: enough for a cubic to follow.
_CELLS_PER_TURN = 4.0
_MOST_CELLS = 2048
_REMEMBERED_BYTES = 64 << 20


@dataclass(frozen=True, slots=True, eq=False)
class _Table:
    """Cubic spline coefficients of a complex table, real and imaginary part, and its step.

    blunt : what is missing to 1 at the table's middle.
    """

    real: Array
    imaginary: Array
    step: float
    blunt: float

    def read(self, right: Array, up: Array) -> Complex:
        """Return the table at places counted from its middle; 0 beyond it."""
        from scipy import ndimage

        middle = np.array(self.real.shape) // 2
        place = [middle[0] - up / self.step, middle[1] + right / self.step]
        parts = [
            ndimage.map_coordinates(part, place, order=3, mode="constant", prefilter=False)
            for part in (self.real, self.imaginary)
        ]
        return np.asarray(parts[0] + 1j * parts[1])


def _spline(table: Complex, step: float, blunt: float = 0.0) -> _Table:
    from scipy import ndimage

    return _Table(
        ndimage.spline_filter(table.real, order=3),
        ndimage.spline_filter(table.imag, order=3),
        step,
        blunt,
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Traced:
    """An opening of any outline; see pinsim.optics.opening for what its members promise.

    clear : (n, n) float 0..1, row 0 up, as seen from behind; the cell's share that is open, so that
    outlines are finer than cells. cell_mm : a cell's side. The middle of the grid is the chief ray's.

    The overlap is an autocorrelation of A exp(i pi x^T C x), made by one transform for all shifts.
    With cells of 1/256 of the hole the error is below 1e-3 of 1 for any hole and wavelength; up to
    twice the best hole below 2e-4 (measured against the quadrature and closed forms in the tests).
    """

    clear: Array
    cell_mm: float
    _memory: dict[tuple[str, tuple[float, ...]], _Table] = field(default_factory=dict, repr=False)

    @property
    def width_mm(self) -> float:
        """The diagonal of the box around what is open."""
        return self.cell_mm * math.hypot(*self._box())

    def _box(self) -> tuple[int, int]:
        """Return how many columns and rows the opening spans."""
        rows = np.flatnonzero(self.clear.max(axis=1) > 0)
        columns = np.flatnonzero(self.clear.max(axis=0) > 0)
        return int(columns[-1] - columns[0]) + 1, int(rows[-1] - rows[0]) + 1

    @property
    def mirrored(self) -> bool:
        """Nothing is known of a traced outline."""
        return False

    @property
    def area_mm2(self) -> float:
        """The open area."""
        return float(self.clear.sum()) * self.cell_mm**2

    def eyes_mm(self, count: int) -> Array:
        """Return about `count` points (n, 2), right and up: those of a denser disc that are open."""
        half = 0.5 * len(self.clear) * self.cell_mm
        # The grid's square within a circle, and only the open part of it.
        share = float(self.clear.mean()) * 2.0 / math.pi
        points = sunflower(math.ceil(count / max(share, 1e-6))) * (half * math.sqrt(2.0))
        points = points[(np.abs(points) < half).all(axis=1)]
        column = ((points[:, 0] + half) / self.cell_mm).astype(np.intp)
        row = ((half - points[:, 1]) / self.cell_mm).astype(np.intp)
        return np.asarray(points[self.clear[row, column] >= 0.5])

    def coarser(self, cells: int) -> "Traced":
        """Return the opening on a grid of at least `cells` across it, at most twice as many.

        Each cell is the mean of those it joins, so the area stays; the middle stays to a cell's half.
        """
        join = max(self._box()) // cells
        if join < 2:
            return self
        # An even count of joined cells keeps the grid's middle where it was.
        side = self.clear.shape[0]
        size = join * (2 * math.ceil(side / (2 * join)))
        if (size - side) % 2:
            size += 2 * join if (size + 2 * join - side) % 2 == 0 else 0
        before = (size - side) // 2
        padded = np.zeros((size, size))
        padded[before : before + side, before : before + side] = self.clear
        count = size // join
        means = padded.reshape(count, join, count, join).mean(axis=(1, 3))
        return Traced(clear=means, cell_mm=self.cell_mm * join)

    def clear_share(self, plate_shift_mm: Array) -> Array:
        """Return the overlap of the outline with itself for each shift."""
        apart = np.asarray(plate_shift_mm, np.float64)
        flat = self.otf(apart.reshape(-1, 2), np.zeros((2, 2)), np.zeros(2)).real
        # Below this it is the spline that rings, not light.
        flat = np.where(flat < 1e-5, 0.0, np.minimum(flat, 1.0))
        return np.asarray(flat.reshape(apart.shape[:-1]))

    def otf(
        self, shift_mm: Array, curvature: Array, plate_shift_mm: Array, *, quick: bool = False
    ) -> Complex:
        """Read the autocorrelation at the shifts wanted, or transform the mere shadow.

        The autocorrelation turns steepest * width times per mm of shift, so that is how fine its grid
        must be for a cubic to follow. Where that takes too many cells, the shift is far below a cell
        and the overlap is the opening itself: its own Fourier transform, at C s.
        """
        shift = np.asarray(shift_mm, np.float64)
        focus = np.asarray(0.5 * (curvature + np.asarray(curvature).T), np.float64)
        plate = (float(plate_shift_mm[0]), float(plate_shift_mm[1]))
        if not self._meets_itself(plate):
            return np.zeros(len(shift), np.complex128)
        clear = self._through(plate)
        if not (clear > 1e-9).any():
            return np.zeros(len(shift), np.complex128)
        steepest = float(np.abs(np.linalg.eigvalsh(focus)).max())
        zoom = max(1, math.ceil(self.cell_mm * _CELLS_PER_TURN * steepest * self.width_mm))
        if clear.shape[0] * zoom > _MOST_CELLS:
            wave = shift @ focus.T
            half_turns = math.pi * np.einsum("ij,ij->i", wave, shift)
            return np.asarray(self._shadow(clear, plate, wave) * np.cos(half_turns))
        table = self._overlap(clear, plate, focus, zoom)
        # Cells open in part round the peak off: by 1 - sum c^2 / sum c, over two cells.
        near = np.minimum(np.hypot(shift[:, 0], shift[:, 1]) / (2.0 * self.cell_mm), 1.0)
        return table.read(shift[:, 0], shift[:, 1]) + table.blunt * (1.0 - near) ** 2

    def _meets_itself(self, plate: tuple[float, float]) -> bool:
        columns, rows = self._box()
        return abs(plate[0]) < columns * self.cell_mm and abs(plate[1]) < rows * self.cell_mm

    def _through(self, plate: tuple[float, float]) -> Array:
        """Return what a thick plate leaves of the opening: two of it, the plate's shift apart."""
        from scipy import ndimage

        if not any(plate):
            return self.clear
        # Each opening of the bore moves half the way. Rows run down, so up is minus.
        half = np.array([-0.5 * plate[1], 0.5 * plate[0]]) / self.cell_mm
        first, second = (ndimage.shift(self.clear, way, order=1) for way in (half, -half))
        return np.asarray(first * second)

    def _shadow(self, clear: Array, plate: tuple[float, float], wave: Array) -> Complex:
        """Return the opening's transform with exp(+2 pi i q x), q = wave (n, 2), cycles/mm."""
        from scipy import fft

        n = clear.shape[0]
        key = ("shadow", plate)
        if key not in self._memory:
            size = fft.next_fast_len(8 * n)
            padded = np.zeros((size, size))
            first = size // 2 - n // 2
            padded[first : first + n, first : first + n] = clear
            spectrum = fft.fftshift(fft.fft2(fft.ifftshift(padded), workers=2)) / clear.sum()
            self._remember(key, _spline(spectrum, 1.0 / (size * self.cell_mm)))
        # numpy transforms with exp(-2 pi i q x), so +q is read at -q.
        values = self._memory[key].read(-wave[:, 0], -wave[:, 1])
        # The middle of an even grid lies half a cell before the transform's.
        half = 0.5 * self.cell_mm * (1 - n % 2)
        return np.asarray(values * np.exp(2j * math.pi * half * (wave[:, 0] - wave[:, 1])))

    def _overlap(
        self, clear: Array, plate: tuple[float, float], curvature: Array, zoom: int
    ) -> _Table:
        """Return the autocorrelation on a grid, zero shift in its middle."""
        from scipy import fft

        key = ("overlap", (*(round(float(c), 9) for c in curvature.ravel()), *plate))
        if key in self._memory:
            return self._memory[key]
        cell = self.cell_mm / zoom
        if zoom > 1:
            clear = np.repeat(np.repeat(clear, zoom, axis=0), zoom, axis=1)
        n = clear.shape[0]
        place = np.asarray((np.arange(n) - 0.5 * (n - 1)) * cell, np.float64)
        x, y = place[None, :], -place[:, None]
        turns = curvature[0, 0] * x * x + curvature[1, 1] * y * y
        phase = turns + (curvature[0, 1] + curvature[1, 0]) * x * y
        wave = clear * np.exp(1j * math.pi * phase)
        size = fft.next_fast_len(2 * n)
        power = np.abs(fft.fft2(wave, (size, size), workers=2)) ** 2
        overlap = np.asarray(fft.fftshift(fft.ifft2(power, workers=2)) / clear.sum())
        blunt = 1.0 - float(overlap[size // 2, size // 2].real)
        return self._remember(key, _spline(overlap, cell, blunt))

    def _remember(self, key: tuple[str, tuple[float, ...]], table: _Table) -> _Table:
        """Keep a table, and let the oldest go when all take too much room."""
        self._memory[key] = table
        while len(self._memory) > 1 and (
            sum(2 * kept.real.nbytes for kept in list(self._memory.values())) > _REMEMBERED_BYTES
        ):
            self._memory.pop(next(iter(self._memory)), None)
        return table
