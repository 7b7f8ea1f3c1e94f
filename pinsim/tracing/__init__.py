"""Traced holes: from a scan or macro photo of a drilled hole to the opening that optics takes.

measure.py  the HoleScan: outline, diameters, roughness, circularity, clear grid
find.py     which part of the scan is the hole, and whether it is bright or dark
edge.py     its edge to a small part of a pixel
outline.py  geometry of closed outlines: area, calipers, best ellipse, exact cells
scale.py    how large a pixel is: pixel size, dots per inch, or a length in the picture
"""

from typing import TYPE_CHECKING, Any

from pinsim.tracing.scale import Reference, Scale, read_reference

if TYPE_CHECKING:
    from pinsim.tracing.measure import HoleScan, measure_hole, trace_hole

__all__ = ["HoleScan", "Reference", "Scale", "measure_hole", "read_reference", "trace_hole"]


def __getattr__(name: str) -> Any:
    # Lazy: a design with a round hole needs no picture reader.
    if name not in ("HoleScan", "measure_hole", "trace_hole"):
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    from pinsim.tracing import measure

    return getattr(measure, name)
