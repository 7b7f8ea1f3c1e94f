"""From a Scene and a Camera to a Picture. Data moves one way, in this order:

plan.py        everything decided before any pixel is touched: grid, margin, transfer functions
project.py     Scene -> FilmView: light, distance and coverage on the film's own grid
illuminate.py  FilmView -> FilmView: falloff and plate shade
spread.py      FilmView -> exposure: every point of light spread by the hole's transfer function
hiding.py      exposure -> exposure: near things hide far ones, at their edges
expose.py      exposure -> lux seconds that count: brightness, f-number, time, reciprocity
grain.py       flicker of density, as much as the film's true size makes it
printing.py    the print of a negative on the paper that fits
develop.py     exposure -> tones, positive or negative, upright or as seen on the film
picture.py     the Picture: what came out, with its scale, and how it is saved
preview.py     the whole road, in one call

kernels.py     how the hole draws all over the film: a mean and some modes (for plan)
frequencies.py kernels at every frequency of the grid (for spread)
fourier.py     transforms of whole pictures (for spread)
kept.py        what a second look at the same scene need not make again
panorama.py, sphere_grid.py  what project does for panoramas
resample.py    band-limited resampling along one axis, as block-banded matrices (for project)
"""
