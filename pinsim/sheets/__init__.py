"""Pictures on a sheet, with captions that can be read without the manual.

side_by_side/    designs compared: the same part of the scene, the details that decide, a verdict
contact/         any number of frames on pages, with the nearest to a need marked
hole_overlay.py  a traced hole drawn over its scan
numbers_plot.py  contrast against detail, and point images across the frame
exposure_card.py exposure times to pin in a box's lid
bracket.py       one picture under exposure times a stop apart
lettering.py     the sheet itself: paper, captions, frames, saving
"""

from pinsim.sheets.contact import contact_sheet
from pinsim.sheets.lettering import Sheet
from pinsim.sheets.side_by_side import Comparison, compare

__all__ = ["Comparison", "Sheet", "compare", "contact_sheet"]
