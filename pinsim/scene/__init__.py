"""What stands before the camera.

scene.py      the Scene: a photo, the angle it was seen under, how far things are; read from TOML
photo.py      a photo as linear light, rows at a time
door.py       photo files to Photos: orientation, profile, bit depth and gamma end here
exif_view.py  the angle of view, from what the camera wrote into the file
distance.py   distance maps
"""

from pinsim.scene.distance import DistanceMap
from pinsim.scene.photo import Photo
from pinsim.scene.scene import Boundary, Projection, Scene

__all__ = ["Boundary", "DistanceMap", "Photo", "Projection", "Scene"]
