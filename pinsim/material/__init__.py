"""What lies in the film plane: a film, a paper or a sensor.

materials.toml   the materials that come with pinsim, each figure with its source
catalogue.py     materials by name, and a builder's own from a file
model.py         what is known of one: Material
spectrum.py      which light each of its layers records
tone_curve.py    density against exposure
reciprocity.py   how much longer than metered a long exposure must be
"""

from pinsim.material.catalogue import BUILT_IN, MATERIAL_NAMES, Catalogue, material
from pinsim.material.model import Grain, Material, Sensor
from pinsim.material.spectrum import (
    LONGEST_NM,
    SHORTEST_NM,
    WAVELENGTHS_PER_BAND,
    Channel,
    basis_spectra,
)
from pinsim.material.tone_curve import ToneCurve

DEFAULT_MATERIAL = "colour"

__all__ = [
    "BUILT_IN",
    "DEFAULT_MATERIAL",
    "LONGEST_NM",
    "MATERIAL_NAMES",
    "SHORTEST_NM",
    "WAVELENGTHS_PER_BAND",
    "Catalogue",
    "Channel",
    "Grain",
    "Material",
    "Sensor",
    "ToneCurve",
    "basis_spectra",
    "material",
]
