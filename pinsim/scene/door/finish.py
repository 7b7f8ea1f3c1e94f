"""What a decoder read, to a Photo: upright, three channels, its colour and transparency settled."""

from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pinsim.colour import srgb_table
from pinsim.scene.door.profiles import through_profile
from pinsim.scene.door.upright import orientation_note, upright
from pinsim.scene.exif_view import FocalLength, horizontal_view_deg
from pinsim.scene.gamut import LUMINANCE, OUTSIDE, bring_in, lowest
from pinsim.scene.highlights import LIFT_HINT, clipped_share, sampled
from pinsim.scene.panorama_fields import panorama_of
from pinsim.scene.photo import Photo, sound_light

Float = NDArray[np.float32]

# Shares of a photo below which nobody needs a word.
_FEW_OUTSIDE = 1e-3
_FEW_CLIPPED = 2e-3
# Negative luminance no deeper than this is a renderer's rounding, and black.
_BLACK = -1e-3


@dataclass(frozen=True, kw_only=True, eq=False)
class Decoded:
    """A picture as a decoder gives it.

    codes : (rows, columns[, channels]) as stored. mode : L, LA, RGB, RGBA (not premultiplied) or CMYK.
    orientation : what is left to turn. profile : ICC. decode, to_srgb : as in Photo, where the kind of
    file settles it; floats are linear light. focal : the focal length in stored pixels. clips : whether
    the highest code is white and more was lost. xmp : the packet of its metadata.
    """

    codes: NDArray[Any]
    mode: str
    orientation: object = 1
    profile: bytes | None = None
    decode: Float | None = None
    to_srgb: Float | None = None
    focal: FocalLength = field(default_factory=FocalLength)
    clips: bool = True
    xmp: bytes | str | None = None
    notes: tuple[str, ...] = ()


def finished(read: Decoded, path: Path) -> Photo:
    """Return the Photo of what was read."""
    notes = [*read.notes, orientation_note(read.orientation), read.focal.note]
    codes = upright(read.codes, read.orientation)
    mode, alpha = read.mode, None
    if mode in {"LA", "RGBA"}:
        alpha, codes, mode = codes[..., -1], codes[..., :-1], mode[:-1]
    elif codes.ndim == 2:
        codes = codes[..., None]
    floating = np.issubdtype(codes.dtype, np.floating)
    clipped = ""
    if read.clips and not floating and mode != "CMYK":  # no ink is paper, not light
        clipped = _clipped_note(clipped_share(codes, _top(read, codes)))
    decode, to_srgb = read.decode, read.to_srgb
    if decode is None and not floating:
        codes, decode, to_srgb, note = _by_profile(codes, read.profile, mode)
        notes.append(note)
    if codes.shape[2] == 1:
        codes = np.repeat(codes, 3, axis=2)
    if floating:
        codes, note = _sound(codes, to_srgb, path)
        notes.append(note)
        to_srgb = None
    focal_px = read.focal.px
    panorama, why, panorama_notes = panorama_of(read.xmp, (codes.shape[0], codes.shape[1]))
    notes += panorama_notes
    photo = Photo(
        codes=codes,
        decode=decode,
        to_srgb=to_srgb,
        view_deg=horizontal_view_deg(focal_px, codes.shape[1]) if focal_px else None,
        view_note=read.focal.note,
        clips=read.clips and not floating,
        panorama=panorama,
        panorama_note=why,
    )
    if not floating:
        notes.append(_outside_note(photo))
    if alpha is not None and not opaque(alpha):
        photo = replace(photo, codes=_on_paper(photo, alpha), decode=None, to_srgb=None)
        notes.append("transparent parts are taken as white paper")
    else:
        notes.append(clipped)
    photo.codes.flags.writeable = False
    return replace(photo, notes=tuple(note for note in notes if note))


def opaque(alpha: NDArray[Any]) -> bool:
    """Tell whether an alpha channel hides nothing."""
    top = 1.0 if np.issubdtype(alpha.dtype, np.floating) else np.iinfo(alpha.dtype).max
    return bool((alpha >= top).all())


def _top(read: Decoded, codes: NDArray[Any]) -> int:
    if read.decode is not None:
        # The first code that is white; a raw file's codes go on above it.
        return int(np.searchsorted(read.decode, np.float32(1.0 - 1e-6)))
    return int(np.iinfo(codes.dtype).max)


def _by_profile(
    codes: NDArray[Any], profile: bytes | None, mode: str
) -> tuple[NDArray[Any], Float, Float | None, str]:
    """Return codes, table, matrix and a note, by the profile or else as sRGB."""
    note = ""
    if profile:
        if profile[16:20] == b"RGB " and mode == "L":
            codes, mode = np.repeat(codes, 3, axis=2), "RGB"
        seen = through_profile(codes, profile, mode)
        if seen is not None:
            return *seen, ""
        note = "its colour profile cannot be used; read as sRGB"
    if mode == "CMYK":  # the plain rule: paper white times what each ink leaves
        top = np.float32(np.iinfo(codes.dtype).max)
        ink = codes.astype(np.float32) / top
        paper = (1.0 - ink[..., :3]) * (1.0 - ink[..., 3:])
        codes = np.round(top * paper).astype(codes.dtype)
    return codes, srgb_table(8 if codes.dtype == np.uint8 else 16), None, note


def _clipped_note(share: float) -> str:
    if share <= _FEW_CLIPPED:
        return ""
    return (
        f"{100 * share:.1f} % of the photo is clipped white: lamps and sky there are drawn no brighter "
        f"than white {LIFT_HINT}"
    )


def _outside_note(photo: Photo) -> str:
    if photo.to_srgb is None:
        return ""
    some = replace(photo, codes=sampled(photo.codes))
    light = some.decoded() @ photo.to_srgb.T
    return _share_outside(float((lowest(light) < -OUTSIDE).mean()))


def _share_outside(share: float) -> str:
    if share <= _FEW_OUTSIDE:
        return ""
    return (
        f"{100 * share:.1f} % of the photo has colours outside sRGB; they are drawn in their own hue, "
        "a little greyer"
    )


def _sound(codes: NDArray[Any], to_srgb: Float | None, path: Path) -> tuple[NDArray[Any], str]:
    """Return float light in sRGB without what cannot be light, and a note.

    A single negative channel is a colour outside sRGB and is brought in; negative luminance is none.
    """
    if to_srgb is not None and np.isfinite(codes).all():
        codes = codes.astype(np.float32) @ to_srgb.T
    if not np.isfinite(codes).all() or not (lowest(codes) < 0.0).any():
        return sound_light(codes, str(path)), ""
    light = codes.astype(np.float32)
    if float((light @ LUMINANCE).min()) < _BLACK:
        return sound_light(light, str(path)), ""
    share = float((lowest(light) < -OUTSIDE).mean())
    return bring_in(light), _share_outside(share)


def _on_paper(photo: Photo, alpha: NDArray[Any]) -> Float:
    full = 1.0 if np.issubdtype(alpha.dtype, np.floating) else float(np.iinfo(alpha.dtype).max)
    clear = (alpha.astype(np.float32) / np.float32(full))[..., None]
    light: Float = photo.linear() * clear + (1.0 - clear)
    return light
