"""A camera design: what is built, valid from birth.

hole.py         the opening in the plate: round, oval, slit or traced
film.py         the film: its frame, where it lies, how it is bent
frames.py       film frames by name
camera.py       the Camera: hole, distance to the film, film, material
design_file.py  TOML to Camera
design_text.py  Camera to TOML
"""

from pinsim.camera.camera import TONES, Camera, Tone
from pinsim.camera.film import Film, named_film
from pinsim.camera.frames import FRAMES_MM
from pinsim.camera.hole import Hole

__all__ = ["FRAMES_MM", "TONES", "Camera", "Film", "Hole", "Tone", "named_film"]
