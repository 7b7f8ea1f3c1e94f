"""The photo door: orientation, colour, bit depth and gamma of files are settled here and nowhere else.

read.py       read_photo and read_plain: which file goes which way
kinds.py      what kind of file it is, told by its first bytes
refuse.py     one line for each file that cannot be read
pictures.py   what Pillow reads, 16-bit PNG, and JPEG without a second copy
tiff.py       16-bit and float TIFF
heif.py       HEIC of phones and 10-bit HEIF of cameras (extra `phone`)
raw.py        camera raw files (extra `raw`)
hdr.py        OpenEXR (extra `hdr`) and Radiance
profiles.py   colour profiles
primaries.py  colour spaces known by their primaries, and by their code points in video and HEIF
upright.py    orientation
finish.py     what was read to a Photo
"""

from pinsim.scene.door.read import read_photo, read_plain
from pinsim.scene.door.refuse import MAX_PIXELS

__all__ = ["MAX_PIXELS", "read_photo", "read_plain"]
