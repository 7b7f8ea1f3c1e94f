"""Designs side by side: the same part of the scene, the details that decide, figures and a verdict.

common_part.py  the part of the scene that all films hold, and where a place lies on each of them
details.py      which places are looked at closely: middle, edge, corner, nearest thing, or those told
figures.py      each design's time, detail and darkening, at those very places
verdict.py      the figures in one sentence
curves.py       contrast against detail, of all designs in the same measure
leaf.py         a page in millimetres, which becomes a picture or a PDF with real letters
layout.py       the page that is printed
page.py         the page for a browser: a divider across two pictures, a loupe (page.css, page.js)
comparison.py   all of it in one call
"""

from pinsim.sheets.side_by_side.comparison import (
    PAGE_SUFFIXES,
    Comparison,
    check_compare,
    compare,
)

__all__ = ["PAGE_SUFFIXES", "Comparison", "check_compare", "compare"]
