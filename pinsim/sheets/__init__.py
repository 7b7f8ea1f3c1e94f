"""Pictures on a sheet, with captions that can be read without the manual.

side_by_side.py  two designs, the same part of the scene, with details enlarged
contact.py       scenes down, designs across
hole_overlay.py  a traced hole drawn over its scan
numbers_plot.py  contrast against detail, and point images across the frame
lettering.py     the sheet itself: paper, captions, frames, saving
"""

from pinsim.sheets.contact import contact_sheet
from pinsim.sheets.lettering import Sheet
from pinsim.sheets.side_by_side import compare

__all__ = ["Sheet", "compare", "contact_sheet"]
