"""What stands before the camera.

scene.py      the Scene: a photo, the angle it was seen under, how far things are; read from TOML
photo.py      a photo as linear light, rows at a time
door/         photo files to Photos: orientation, colour, bit depth and gamma end there
gamut.py      colours outside sRGB, brought in without turning their hue
highlights.py clipped highlights: how many, and a lift that brightens them
exif_view.py  the angle of view, from what the camera wrote into the file
distance.py   the distance of every pixel, in one form whatever it was made from

What a distance can be made from:

distance_table.py  the [distance] table of a scene file, and the options of the line that stand for it
distance_file.py   maps in files: distances, inverse distances, disparities
fit.py             maps of another size, and maps with holes, brought to the photo by its own edges
ground.py          level ground up to a horizon
planes.py          a few planes, each with a mask
"""

from pinsim.scene.distance import DistanceMap
from pinsim.scene.distance_file import MapFile
from pinsim.scene.ground import Ground
from pinsim.scene.photo import Photo
from pinsim.scene.planes import Plane, Planes
from pinsim.scene.scene import Boundary, Projection, Scene

__all__ = [
    "Boundary",
    "DistanceMap",
    "Ground",
    "MapFile",
    "Photo",
    "Plane",
    "Planes",
    "Projection",
    "Scene",
]
