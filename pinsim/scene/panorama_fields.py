"""What a panorama's XMP packet tells of its place on the sphere.

The names, and what they mean, are those of the published field reference of panoramas in XMP.
"""

import math
from collections.abc import Mapping
from dataclasses import replace
from xml.parsers import expat

from pinsim.scene.panorama import (
    SHAPE_SLIP,
    SHAPE_SLIP_PX,
    PanoramaPlace,
    full_sphere,
    is_full_sphere,
)

NAMESPACE = "http://ns.google.com/photos/1.0/panorama/"
_SEPARATOR = " "  # no XML name holds one
_NUMBERS = (
    "CroppedAreaImageWidthPixels",
    "CroppedAreaImageHeightPixels",
    "FullPanoWidthPixels",
    "FullPanoHeightPixels",
    "CroppedAreaLeftPixels",
    "CroppedAreaTopPixels",
    "PoseHeadingDegrees",
    "PosePitchDegrees",
    "PoseRollDegrees",
)
_KNOWN = frozenset(("ProjectionType", *_NUMBERS))
# A JPEG's packet is below 64 KB; a longer one is not about a panorama.
MAX_PACKET_BYTES = 1_000_000
_MAX_TEXT = 200


class _NotReadError(Exception):
    """The packet is no XML, or holds what none needs; the text says which."""


def _read_fields(packet: bytes) -> Mapping[str, str]:
    """Return the panorama's fields in an XMP packet, as text; empty when there are none.

    Fields may be attributes or elements. A document type is refused unread, as it is what carries
    entities.
    """
    # Of two bytes a letter, whichever comes first, the packet holds all but the last.
    if NAMESPACE.encode() not in packet and NAMESPACE.encode("utf-16-le")[:-1] not in packet:
        return {}
    if len(packet) > MAX_PACKET_BYTES:
        raise _NotReadError(f"they are {len(packet)} bytes long")
    found: dict[str, str] = {}
    open_field: list[str | None] = []

    def field(name: str) -> str | None:
        space, _, local = name.rpartition(_SEPARATOR)
        return local if space == NAMESPACE and local in _KNOWN else None

    def start(name: str, attributes: dict[str, str]) -> None:
        open_field.append(field(name))
        for key, value in attributes.items():
            known = field(key)
            if known:
                found[known] = value.strip()[:_MAX_TEXT]

    def end(_name: str) -> None:
        open_field.pop()

    def text(part: str) -> None:
        if open_field and open_field[-1]:
            found[open_field[-1]] = (found.get(open_field[-1], "") + part)[:_MAX_TEXT]

    def refuse(*_: object) -> None:
        raise _NotReadError("they declare a document type")

    parser = expat.ParserCreate(namespace_separator=_SEPARATOR)
    parser.StartElementHandler = start
    parser.EndElementHandler = end
    parser.CharacterDataHandler = text
    parser.StartDoctypeDeclHandler = refuse
    parser.EntityDeclHandler = refuse
    try:
        # Padding of zeros is no XML; with two bytes a letter a zero belongs to the last letter.
        parser.Parse(packet if b"\0" in packet[:4] else packet.strip(b"\0 \r\n\t"), True)
    except (expat.ExpatError, LookupError, ValueError) as problem:
        raise _NotReadError(f"they are not XML ({ascii(str(problem))[1:-1]})") from None
    return {name: value.strip() for name, value in found.items()}


def panorama_of(
    packet: bytes | str | None, shape: tuple[int, int]
) -> tuple[PanoramaPlace | None, str, tuple[str, ...]]:
    """Return where a picture's XMP packet says it lies on the sphere, and notes for people.

    shape : rows and columns of the picture as it was read. None when the packet does not call it
    equirectangular. What is absurd or contradicts itself is left out with a note; if that leaves an
    equirectangular picture without a place, the text between says why.
    """
    if not packet:
        return None, "", ()
    try:
        fields = _read_fields(packet.encode() if isinstance(packet, str) else bytes(packet))
    except _NotReadError as reason:
        return None, "", (f"its XMP data are not used: {reason}",)
    kind = fields.get("ProjectionType", "").lower()
    if kind != "equirectangular":
        named = f"its XMP data call it a panorama of kind {kind!a}, which is not read"
        return None, "", (named,) if kind else ()
    numbers, notes = _numbers(fields)
    pose = _pose(numbers, notes)
    place, why = _placed(numbers, shape)
    if place is None:
        if not is_full_sphere(shape):
            return None, f"the panorama's place in its XMP data cannot be used: {why}", tuple(notes)
        notes.append(f"taken as a whole sphere: its place in its XMP data cannot be used: {why}")
        place = full_sphere(shape)
    place = replace(
        place,
        pitch_deg=pose["PosePitchDegrees"],
        roll_deg=pose["PoseRollDegrees"],
        heading_deg=numbers.get("PoseHeadingDegrees"),
    )
    return place, "", tuple(notes)


def _numbers(fields: Mapping[str, str]) -> tuple[dict[str, float], list[str]]:
    """Return the fields that are numbers, and a note for those that are not."""
    numbers: dict[str, float] = {}
    notes: list[str] = []
    for name in _NUMBERS:
        if name not in fields:
            continue
        try:
            value = float(fields[name])
        except ValueError:
            value = math.nan
        if math.isfinite(value):
            numbers[name] = value
        else:
            notes.append(f"{name} in its XMP data is {fields[name]!a}, no number; left out")
    return numbers, notes


# Of each angle, the least and the greatest that the field reference allows.
_POSE_DEG = {
    "PoseHeadingDegrees": (0.0, 360.0),
    "PosePitchDegrees": (-90.0, 90.0),
    "PoseRollDegrees": (-180.0, 180.0),
}


def _pose(numbers: dict[str, float], notes: list[str]) -> dict[str, float]:
    """Return pitch and roll; drop angles that cannot be, with a note."""
    for name, (low, high) in _POSE_DEG.items():
        if name in numbers and not low <= numbers[name] <= high:
            notes.append(
                f"{name} in its XMP data is {numbers.pop(name):g}, not {low:g} to {high:g}; left out"
            )
    pose = {name: numbers.get(name, 0.0) for name in ("PosePitchDegrees", "PoseRollDegrees")}
    if any(pose.values()):
        notes.append(
            f"levelled by its XMP data: pitch {pose['PosePitchDegrees']:g} deg, "
            f"roll {pose['PoseRollDegrees']:g} deg"
        )
    return pose


def _placed(
    numbers: Mapping[str, float], shape: tuple[int, int]
) -> tuple[PanoramaPlace | None, str]:
    """Return the place by the crop's numbers, or None and why not."""
    rows, columns = shape
    wide, high = (numbers.get(f"FullPano{side}Pixels") for side in ("Width", "Height"))
    if wide is None and high is None:
        if is_full_sphere(shape):
            return full_sphere(shape), ""
        return None, "it gives no full size, and the picture is not twice as wide as high"
    wide = 2.0 * high if wide is None and high is not None else wide
    high = 0.5 * wide if high is None and wide is not None else high
    assert wide is not None
    assert high is not None
    # The numbers are of the picture as it was stitched; it may have been made smaller since.
    crop_wide = numbers.get("CroppedAreaImageWidthPixels", float(columns))
    crop_high = numbers.get("CroppedAreaImageHeightPixels", float(rows))
    if crop_wide < 1.0 or crop_high < 1.0:
        return None, f"a cropped area of {crop_wide:g} x {crop_high:g} px"
    scale = columns / crop_wide, rows / crop_high
    slip = SHAPE_SLIP + 1.0 / min(rows, columns)
    if abs(scale[0] / scale[1] - 1.0) > slip:
        return None, (
            f"it is of {crop_wide:g} x {crop_high:g} px, the picture is {columns} x {rows}: "
            "it was cropped since"
        )
    left, top = (
        _start(numbers.get(f"CroppedArea{side}Pixels"), part, whole)
        for side, part, whole in (("Left", crop_wide, wide), ("Top", crop_high, high))
    )
    if left is None or top is None:
        return None, "it does not say where in the full panorama its part lies"
    place = PanoramaPlace(
        full_width_px=wide * scale[0],
        full_height_px=high * scale[1],
        left_px=left * scale[0],
        top_px=top * scale[1],
    )
    wrong = place.refuse(shape)
    return (None, wrong) if wrong else (place, "")


def _start(told: float | None, part: float, whole: float) -> float | None:
    """Return where a part starts; one as long as the whole starts at 0 without being told."""
    if told is None and abs(whole - part) <= SHAPE_SLIP_PX:
        return 0.0
    return told
