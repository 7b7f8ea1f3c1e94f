"""The Picture: what a camera would record of a scene, with its scale, and how it is saved."""

import json
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from pinsim import files
from pinsim.camera import Camera
from pinsim.render.develop import LOOK_TEXT, Look, develop, develop_material, turn
from pinsim.render.expose import Exposed
from pinsim.units import format_time

Float = NDArray[np.float32]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Picture:
    """An exposed film.

    exposure : float32 (rows, columns, channels), linear, upright as the scene; 1.0 = an evenly lit
    white scene at the film's axis; NaN where the photo does not cover the frame.
    pitch_mm : film mm per pixel; the array's middle is the middle of the film frame.
    gain : time given over the time needed. exposed : how the material was exposed, if a time was given;
    without it tones are the photo's. grain_seed : draws the material's grain, the same each time.
    notes : what a builder should know of it.
    """

    exposure: Float
    pitch_mm: float
    camera: Camera
    scene_name: str
    look: Look = "upright"
    gain: float = 1.0
    exposed: Exposed | None = None
    grain_seed: int | None = None
    covered_share: float = 1.0
    notes: tuple[str, ...] = ()

    @property
    def description(self) -> str:
        """One line that says what the picture is and from where it is looked at."""
        return (
            f"pinsim: {self.scene_name} through {self.camera.name} ({self.camera.summary}); "
            f"{self.camera.tone}, {LOOK_TEXT[self.look]}{self._given}"
        )

    @property
    def _given(self) -> str:
        if self.exposed is None:
            return ""
        return f"; {format_time(self.exposed.time_s)} at EV {self.exposed.ev:g}"

    def codes(self, bits: int = 8) -> NDArray[Any]:
        """Return sRGB codes, uint8 or uint16 (rows, columns, channels), turned as `look` says."""
        return np.ascontiguousarray(turn(self.develop(self.exposure, bits=bits), self.look))

    def develop(self, exposure: Float, *, bits: int = 8) -> NDArray[Any]:
        """Return upright sRGB codes of another exposure of this very film, such as a part of it."""
        if self.exposed is None:
            return develop(exposure, gain=self.gain, tone=self.camera.tone, bits=bits)
        return develop_material(
            exposure,
            exposed=self.exposed,
            tone=self.camera.tone,
            bits=bits,
            pitch_mm=self.pitch_mm,
            rng=None if self.grain_seed is None else np.random.default_rng(self.grain_seed),
        )

    def looked_at(self, look: Look) -> "Picture":
        """Return the same film looked at from elsewhere."""
        return replace(self, look=look)

    def save(self, path: str | Path, *, bits: str | None = None, overwrite: bool = False) -> None:
        """Write the picture; the ending decides the kind.

        .png, .jpg: 8 bits. .tif: bits "8", "16" (unless told) or "float". .npz and float .tif hold the
        exposure itself, linear and upright. Raises OutputError, and then nothing is written.
        """
        target = Path(path)
        files.check_target(target, overwrite=overwrite, suffixes=files.EXPOSURE_SUFFIXES)
        files.write_whole(target, self._writer(target.suffix.lower(), bits), overwrite=overwrite)

    def _writer(self, suffix: str, bits: str | None) -> Any:
        files.check_bits(suffix, bits)
        tiff = suffix in {".tif", ".tiff"}
        if suffix == ".npz":
            return self._write_npz
        if bits == "float":
            return self._write_float_tiff
        depth = int(bits or (16 if tiff else 8))
        return files.encode_picture(
            self.codes(depth),
            suffix,
            dpi=files.dpi_for(self.pitch_mm),
            description=self.description,
        )

    def _exposure_text(self) -> str:
        upright = self.looked_at("upright").description
        return (
            f"{upright}; linear exposure, 1.0 = white on the axis, NaN = not covered by the photo"
        )

    def _write_float_tiff(self, file: BinaryIO) -> None:
        data = self.exposure[..., 0] if self.exposure.shape[2] == 1 else self.exposure
        files.write_tiff(
            file, data, dpi=files.dpi_for(self.pitch_mm), description=self._exposure_text()
        )

    def _write_npz(self, file: BinaryIO) -> None:
        about = {
            "description": self._exposure_text(),
            "pitch_mm": self.pitch_mm,
            "hole_mm": self.camera.hole.diameter_mm,
            "focal_length_mm": self.camera.focal_length_mm,
            "gain": self.gain,
        }
        np.savez_compressed(
            file,
            exposure=self.exposure,
            pitch_mm=np.float64(self.pitch_mm),
            about=np.array(json.dumps(about)),
        )
