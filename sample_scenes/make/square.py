"""A small paved square seen all round from its middle, as an equirectangular panorama; invented.

Rays are cast at plain shapes with numpy alone: boxes, upright cylinders, cones and a ground, lit by the
sun with hard shadows and by the sky. World axes: x to the right, y away, z up, in metres; the picture's
middle looks along y, a little above a cistern, the sun stands behind on the left.

    python sample_scenes/make/square.py [--rows 1500] [--out FOLDER]

Writes photo.jpg (with the metadata that says it is a panorama), distance.png and scene.toml.
"""

from __future__ import annotations

import argparse
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from PIL import Image

Array = npt.NDArray[Any]
EYE_M = np.array([0.0, 0.0, 1.5])
SUN = np.array([-0.62, -0.38, 0.69]) / np.linalg.norm([-0.62, -0.38, 0.69])
SUNLIGHT = np.array([1.0, 0.93, 0.80])
SKYLIGHT = np.array([0.16, 0.20, 0.27])
SUB = 2  # rays for each pixel, along each side
STEP_M = 0.002  # of the distance map
NAMESPACE = "http://ns.google.com/photos/1.0/panorama/"
SCENE = """\
# A small paved square, seen all round from its middle; invented.
photo = "photo.jpg"              # its own metadata say that it is a whole sphere
look_at = ["20 deg", "4 deg"]    # to the right of the panorama's middle, and up
[distance]
map = "distance.png"             # along each ray, as a panorama has no one axis
step = "2 mm"
holes = "far"                    # 0 is the sky
[light]
ev = 14                          # scene average, ISO 100
"""


def lattice(key: Array) -> Array:
    """Return numbers 0 to 1 that look random, from whole numbers (..., k)."""
    mixed = np.zeros(key.shape[:-1], np.uint64)
    for k in range(key.shape[-1]):
        mixed = (mixed ^ key[..., k].astype(np.int64).astype(np.uint64)) * np.uint64(
            0x9E3779B97F4A7C15
        )
        mixed ^= mixed >> np.uint64(29)
    return (mixed >> np.uint64(40)).astype(np.float64) / 2.0**24


_CELLS = np.random.default_rng(5).random((64, 64, 64)).astype(np.float32).ravel() - 0.5


def noise(place: Array, octaves: int = 4) -> Array:
    """Return smooth value noise about 0, roughly -1 to 1, of places (n, 3)."""
    total = np.zeros(len(place), np.float32)
    for octave in range(octaves):
        scaled = place * 2.0**octave + 17.3 * octave
        cell = np.floor(scaled)
        t = (scaled - cell).astype(np.float32)
        t = t * t * (np.float32(3.0) - np.float32(2.0) * t)
        x, y, z = cell.astype(np.int64).T
        value = np.zeros(len(place), np.float32)
        for i in (0, 1):
            for j in (0, 1):
                side = (t[:, 0] if i else 1 - t[:, 0]) * (t[:, 1] if j else 1 - t[:, 1])
                base = (((x + i) & 63) * 64 + ((y + j) & 63)) * 64
                low, high = _CELLS[base + (z & 63)], _CELLS[base + ((z + 1) & 63)]
                value += side * (low + t[:, 2] * (high - low))
        total += value * np.float32(0.5**octave)
    return total


@dataclass(frozen=True)
class Hit:
    """Where rays meet a shape: distance (n,), inf where they do not, and normals (n, 3)."""

    distance: Array
    normal: Array


@dataclass(frozen=True)
class Box:
    """A box from a low to a high corner, with a colour and a finish."""

    low: tuple[float, float, float]
    high: tuple[float, float, float]
    colour: tuple[float, float, float]
    finish: str = "plain"

    def meet(self, start: Array, ray: Array) -> Hit:
        """Return the first meeting in front of the starts."""
        with np.errstate(divide="ignore", invalid="ignore"):
            one = (np.array(self.low) - start) / ray
            two = (np.array(self.high) - start) / ray
        near, far = np.fmin(one, two), np.fmax(one, two)
        axis = np.argmax(near, axis=1)
        enter, leave = near.max(axis=1), far.min(axis=1)
        distance = np.where((enter < leave) & (enter > 1e-4), enter, np.inf)
        normal = np.zeros_like(ray)
        rows = np.arange(len(ray))
        normal[rows, axis] = -np.sign(ray[rows, axis])
        return Hit(distance, normal)


@dataclass(frozen=True)
class Round:
    """An upright cylinder or cone: its foot, height, and radius below and above."""

    foot: tuple[float, float, float]
    height: float
    below: float
    above: float
    colour: tuple[float, float, float]
    finish: str = "plain"

    def meet(self, start: Array, ray: Array) -> Hit:
        """Return the first meeting with the side or the flat top."""
        slope = (self.above - self.below) / self.height
        o = start - np.array(self.foot)
        radius = self.below + slope * o[:, 2]
        a = ray[:, 0] ** 2 + ray[:, 1] ** 2 - (slope * ray[:, 2]) ** 2
        b = o[:, 0] * ray[:, 0] + o[:, 1] * ray[:, 1] - slope * radius * ray[:, 2]
        c = o[:, 0] ** 2 + o[:, 1] ** 2 - radius**2
        with np.errstate(divide="ignore", invalid="ignore"):
            root = np.sqrt(b * b - a * c)
            best = np.full(len(ray), np.inf)
            for t in ((-b - root) / a, (-b + root) / a):
                z = o[:, 2] + t * ray[:, 2]
                good = (t > 1e-4) & (z >= 0.0) & (z <= self.height) & (t < best)
                good &= self.below + slope * z >= 0.0
                best = np.where(good, t, best)
            lid = (self.height - o[:, 2]) / ray[:, 2]
        at = o + np.where(np.isfinite(best), best, 0.0)[:, None] * ray
        normal = np.stack([at[:, 0], at[:, 1], -slope * np.hypot(at[:, 0], at[:, 1])], axis=1)
        on_lid = np.hypot(*(o[:, :2] + lid[:, None] * ray[:, :2]).T) <= self.above
        top = (lid > 1e-4) & (lid < best) & on_lid
        normal = np.where(top[:, None], [0.0, 0.0, 1.0], normal)
        normal /= np.maximum(np.linalg.norm(normal, axis=1), 1e-9)[:, None]
        return Hit(np.where(top, lid, best), normal)


@dataclass(frozen=True)
class Ground:
    """The level ground."""

    colour: tuple[float, float, float] = (0.45, 0.42, 0.37)
    finish: str = "paving"

    def meet(self, start: Array, ray: Array) -> Hit:
        """Return where rays that point down meet it."""
        with np.errstate(divide="ignore"):
            distance = -start[:, 2] / ray[:, 2]
        distance = np.where((distance > 1e-4) & (distance < 400.0), distance, np.inf)
        return Hit(distance, np.broadcast_to([0.0, 0.0, 1.0], ray.shape))


Shape = Box | Round | Ground


def shapes() -> list[Shape]:
    """Return everything that stands on the square."""
    made: list[Shape] = [Ground()]
    ochre, rose, cream, grey = (
        (0.62, 0.45, 0.22),
        (0.60, 0.34, 0.26),
        (0.66, 0.60, 0.48),
        (0.44, 0.45, 0.46),
    )
    houses = [  # ahead, to the right, behind, to the left
        ((-11.0, 11.0), (-4.5, 17.0), 7.4, cream),
        ((-4.5, 11.6), (1.5, 17.0), 5.8, rose),
        ((4.2, 11.0), (11.0, 17.0), 8.6, ochre),
        ((10.5, 3.0), (16.0, 10.0), 6.4, grey),
        ((10.9, -6.0), (16.0, 3.0), 7.9, cream),
        ((10.2, -13.0), (16.0, -6.6), 5.5, ochre),
        ((-3.0, -17.0), (8.0, -11.0), 6.8, rose),
        ((-10.0, -17.0), (-3.0, -11.4), 9.2, grey),
        ((-16.0, -9.0), (-10.6, -1.5), 6.1, ochre),
        ((-16.0, 2.0), (-10.2, 9.5), 7.2, rose),
    ]
    for (x0, y0), (x1, y1), tall, colour in houses:
        made.append(Box((x0, y0, 0.0), (x1, y1, tall), colour, "house"))
        made.append(
            Box(
                (x0 - 0.35, y0 - 0.35, tall),
                (x1 + 0.35, y1 + 0.35, tall + 0.22),
                (0.42, 0.2, 0.13),
                "tiles",
            )
        )
    for k in range(6):  # a colonnade on the right, its beam on top
        made.append(Round((8.2, -4.6 + 1.7 * k, 0.0), 2.9, 0.2, 0.17, (0.64, 0.60, 0.53)))
        made.append(
            Box((7.93, -4.87 + 1.7 * k, 0.0), (8.47, -4.33 + 1.7 * k, 0.16), (0.6, 0.57, 0.5))
        )
    made.append(Box((7.95, -5.1, 2.9), (8.45, 4.4, 3.25), (0.60, 0.55, 0.46), "tiles"))
    # A cistern with a rim, ahead, a little to the right; a bench; pots; poplars in the gaps.
    made.append(Round((1.6, 4.6, 0.0), 0.72, 0.92, 0.90, (0.56, 0.53, 0.48), "rough"))
    made.append(Round((1.6, 4.6, 0.72), 0.09, 1.02, 1.02, (0.60, 0.57, 0.51)))
    made.append(Round((1.6, 4.6, 0.81), 0.005, 0.78, 0.78, (0.03, 0.06, 0.07), "water"))
    for x in (0.55, 2.65):
        made.append(Box((x - 0.06, 4.54, 0.75), (x + 0.06, 4.66, 2.3), (0.22, 0.14, 0.08)))
    made.append(Box((0.4, 4.5, 2.3), (2.8, 4.7, 2.45), (0.24, 0.15, 0.09)))
    made.append(Box((-4.2, 3.4, 0.38), (-2.2, 3.9, 0.46), (0.30, 0.19, 0.11)))
    for x in (-4.0, -2.5):
        made.append(Box((x, 3.45, 0.0), (x + 0.1, 3.85, 0.38), (0.12, 0.12, 0.13)))
    for x, y, size in ((-5.0, 4.6, 0.5), (5.3, 6.9, 0.42), (-2.6, -3.4, 0.55), (6.4, -5.6, 0.5)):
        made.append(Round((x, y, 0.0), size, 0.62 * size, 0.85 * size, (0.47, 0.20, 0.11)))
        made.append(Round((x, y, size), 2.2 * size, 0.9 * size, 0.0, (0.10, 0.19, 0.05), "leaves"))
    for x, y, tall in ((2.8, 13.6, 9.5), (12.4, 11.8, 11.0), (-13.0, 0.2, 10.0), (9.2, -14.5, 8.5)):
        made.append(Round((x, y, 0.0), tall, 0.95, 0.05, (0.06, 0.12, 0.04), "leaves"))
    return made


def painted(shape: Shape, place: Array, normal: Array) -> Array:
    """Return the colour of places on a shape, (n, 3)."""
    colour = np.broadcast_to(np.array(shape.colour), place.shape).copy()
    grain = noise(place * 3.0)
    if shape.finish == "paving":
        size = np.where(np.hypot(place[:, 0] - 1.6, place[:, 1] - 4.6) < 2.6, 0.35, 0.8)[:, None]
        cell = np.floor((place[:, :2] + 0.3) / size)
        inside = (place[:, :2] + 0.3) / size - cell
        tone = 0.72 + 0.5 * lattice(cell)
        joint = np.minimum(inside, 1.0 - inside).min(axis=1) * size[:, 0] < 0.012
        colour *= np.where(joint, 0.45, tone)[:, None]
        colour *= (1.0 + 0.35 * noise(place * 1.3))[:, None]
    elif shape.finish == "house":
        colour *= _house(shape, place, normal)
    elif shape.finish == "tiles":
        along = place[:, 0] + place[:, 1]
        colour *= (0.7 + 0.4 * (np.mod(along / 0.22, 1.0) > 0.18))[:, None]
    elif shape.finish == "leaves":
        colour *= (0.75 + 1.6 * np.maximum(noise(place * 7.0), -0.35))[:, None]
    elif shape.finish == "rough":
        layer = np.floor(place[:, 2] / 0.24)
        angle = np.arctan2(place[:, 1] - 4.6, place[:, 0] - 1.6) * 2.2 + 0.5 * layer
        joint = (np.mod(place[:, 2] / 0.24, 1.0) < 0.06) | (np.mod(angle, 1.0) < 0.03)
        colour *= np.where(joint, 0.5, 0.8 + 0.4 * lattice(np.stack([layer, np.floor(angle)], 1)))[
            :, None
        ]
    return colour * (1.0 + 0.22 * grain)[:, None]


def _house(shape: Shape, place: Array, normal: Array) -> Array:
    """Return what windows, doors and weather make of a house's plaster, (n, 3)."""
    assert isinstance(shape, Box)
    sideways = np.abs(normal[:, 0]) > 0.5
    along = np.where(sideways, place[:, 1] - shape.low[1], place[:, 0] - shape.low[0])
    width = np.where(sideways, shape.high[1] - shape.low[1], shape.high[0] - shape.low[0])
    count = np.maximum(np.floor(width / 1.9), 1.0)
    bay = width / count
    across = np.abs(np.mod(along, bay) - 0.5 * bay)
    number = np.floor(along / bay)
    floor = np.floor((place[:, 2] - 0.25) / 2.6)
    rise = np.mod(place[:, 2] - 0.25, 2.6)
    upright = np.abs(normal[:, 2]) < 0.5
    roof = shape.high[2] - place[:, 2] < 0.7
    door = (floor < 1.0) & (np.mod(number, 3.0) == 1.0) & (rise < 2.05) & (across < 0.5)
    window = (rise > 0.95) & (rise < 2.25) & (across < 0.38) & ~roof & ~door
    frame = (rise > 0.85) & (rise < 2.35) & (across < 0.48) & ~roof & ~window & ~door
    shut = lattice(np.stack([number, floor, np.full(len(along), shape.high[2] * 10.0)], 1)) < 0.45
    bars = (across < 0.025) | (np.abs(rise - 1.7) < 0.02)
    slats = 0.6 + 0.5 * (np.mod(rise / 0.06, 1.0) > 0.3)
    share = np.ones((len(along), 3))
    share *= (1.0 + 0.25 * noise(place * 0.7) - 0.25 * np.exp(-place[:, 2] / 0.5))[:, None]
    share[frame & upright] = (1.15, 1.25, 1.6)
    glass = window & upright & ~shut
    share[glass] = np.where(bars[glass, None], [0.9, 1.0, 1.3], [0.10, 0.14, 0.22])
    closed = window & upright & shut
    share[closed] = slats[closed, None] * np.array([0.32, 0.62, 0.85])
    wood = door & upright
    share[wood] = (0.5 + 0.3 * (np.mod(across[wood] / 0.12, 1.0) > 0.1))[:, None] * np.array(
        [0.5, 0.45, 0.5]
    )
    return share


def sky(ray: Array) -> Array:
    """Return the sky's light, hills at its foot and the sun, (n, 3)."""
    height = np.maximum(ray[:, 2], 0.0)
    light = np.array([0.62, 0.70, 0.80]) * (1.0 - height[:, None]) ** 3 + np.array(
        [0.16, 0.30, 0.58]
    )
    flat = ray[:, :2] / np.maximum(ray[:, 2:], 0.06)
    drift = noise(np.concatenate([flat * 1.4, np.full((len(ray), 1), 3.7)], axis=1), 5)
    cloud = np.clip((drift - 0.06) * 4.0, 0.0, 1.0) * np.clip(height * 6.0, 0.0, 1.0)
    light = light * (1.0 - cloud[:, None]) + cloud[:, None] * np.array([0.95, 0.95, 0.96])
    around = np.arctan2(ray[:, 0], ray[:, 1])
    ring = np.stack([np.cos(around) * 3.0, np.sin(around) * 3.0, np.zeros(len(ray))], axis=1)
    hill = 0.045 + 0.07 * noise(ring)
    light[ray[:, 2] < hill] = (0.20, 0.27, 0.30)
    light[ray @ SUN > np.cos(np.radians(0.7))] = (6.0, 5.6, 4.8)
    return light


def within(shape: Shape, ray: Array) -> Array:
    """Return which rays from the eye may meet a shape at all, by direction alone."""
    if isinstance(shape, Ground):
        return np.flatnonzero(ray[:, 2] < 0.0)
    if isinstance(shape, Box):
        (x0, y0, _), (x1, y1, top) = shape.low, shape.high
    else:
        wide = max(shape.below, shape.above)
        x0, x1 = shape.foot[0] - wide, shape.foot[0] + wide
        y0, y1 = shape.foot[1] - wide, shape.foot[1] + wide
        top = shape.foot[2] + shape.height
    corners = np.arctan2([x0, x0, x1, x1], [y0, y1, y0, y1])
    middle = np.arctan2(0.5 * (x0 + x1), 0.5 * (y0 + y1))
    half = np.abs(np.angle(np.exp(1j * (corners - middle)))).max() + 1e-3
    nearest = max(min(np.hypot(*(0.5 * np.array([x0 + x1, y0 + y1]))) - 0.1, 1e9), 0.1)
    nearest = max(nearest - 0.5 * np.hypot(x1 - x0, y1 - y0), 0.1)
    steepest = max(top - EYE_M[2], 0.0) / nearest
    off = np.angle(np.exp(1j * (np.arctan2(ray[:, 0], ray[:, 1]) - middle)))
    level = np.hypot(ray[:, 0], ray[:, 1])
    return np.flatnonzero((np.abs(off) <= half) & (ray[:, 2] <= steepest * level + 1e-6))


def met(ray: Array, made: list[Shape]) -> tuple[Array, Array, Array]:
    """Return distance (n,), which shape (n,) and its normal (n, 3) that rays from the eye meet."""
    distance = np.full(len(ray), np.inf)
    which = np.full(len(ray), -1)
    normal = np.zeros_like(ray)
    for k, shape in enumerate(made):
        those = within(shape, ray)
        if not those.size:
            continue
        hit = shape.meet(np.broadcast_to(EYE_M, (those.size, 3)), ray[those])
        closer = hit.distance < distance[those]
        chosen = those[closer]
        distance[chosen], which[chosen], normal[chosen] = (
            hit.distance[closer],
            k,
            hit.normal[closer],
        )
    return distance, which, normal


def traced(ray: Array, made: list[Shape]) -> Array:
    """Return the light (n, 3) that rays from the eye meet."""
    distance, which, normal = met(ray, made)
    seen = which >= 0
    light = np.empty_like(ray)
    light[~seen] = sky(ray[~seen])
    place = EYE_M + distance[seen, None] * ray[seen]
    facing = normal[seen]
    sun = np.maximum(facing @ SUN, 0.0)
    for shape in made[1:]:
        todo = np.flatnonzero(sun > 0.0)
        towards = np.broadcast_to(SUN, (todo.size, 3))
        hit = shape.meet(place[todo] + 1e-3 * facing[todo], towards)
        sun[todo[np.isfinite(hit.distance)]] = 0.0
    # The sky lights what faces up most; low parts are closed in by what stands around.
    open_sky = (0.5 + 0.5 * facing[:, 2]) * (0.55 + 0.45 * np.clip(place[:, 2] / 6.0, 0.0, 1.0))
    bounce = 0.10 * np.clip(1.0 - facing[:, 2], 0.0, 1.0)
    lit = sun[:, None] * SUNLIGHT + 1.6 * open_sky[:, None] * SKYLIGHT
    lit = lit + bounce[:, None] * np.array([0.9, 0.81, 0.68])
    colours = np.zeros_like(place)
    for k, shape in enumerate(made):
        those = which[seen] == k
        if those.any():
            colours[those] = painted(shape, place[those], facing[those])
    light[seen] = colours * lit
    return light


def encoded(light: Array) -> Array:
    """Return 8-bit sRGB codes (IEC 61966-2-1) of light, its brightest parts eased into white."""
    eased = np.where(light < 0.7, light, 0.7 + 0.3 * np.tanh((light - 0.7) / 0.6))
    curve = np.where(
        eased <= 0.0031308, 12.92 * eased, 1.055 * np.maximum(eased, 1e-9) ** (1 / 2.4) - 0.055
    )
    return np.asarray(np.rint(255.0 * np.clip(curve, 0.0, 1.0)), np.uint8)


def directions(row: Array, column: Array, rows: int) -> Array:
    """Return unit rays of places in the picture, in pixels from its upper left edge."""
    height = 0.5 * np.pi - row / rows * np.pi
    azimuth = column / rows * np.pi - np.pi
    level = np.cos(height)
    return np.stack(
        np.broadcast_arrays(level * np.sin(azimuth), level * np.cos(azimuth), np.sin(height)),
        axis=-1,
    )


def main() -> None:
    """Make the three files."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--rows", type=int, default=1500)
    options.add_argument("--out", type=Path, default=Path(__file__).parent.parent / "square")
    given = options.parse_args()
    rows: int = given.rows
    made = shapes()
    picture = np.empty((rows, 2 * rows, 3), np.uint8)
    far = np.empty((rows, 2 * rows), np.uint16)
    for row in range(rows):
        down = row + (np.arange(SUB) + 0.5) / SUB
        across = (np.arange(2 * rows * SUB) + 0.5) / SUB
        light = traced(directions(down[:, None], across, rows).reshape(-1, 3), made)
        picture[row] = encoded(light.reshape(SUB, 2 * rows, SUB, 3).mean(axis=(0, 2)))
        metres = met(directions(np.array([row + 0.5]), np.arange(2 * rows) + 0.5, rows), made)[0]
        far[row] = np.where(np.isfinite(metres), np.rint(metres / STEP_M), 0)
    given.out.mkdir(parents=True, exist_ok=True)
    fields = "".join(
        f' p:{name}="{value}"'
        for name, value in (
            ("ProjectionType", "equirectangular"),
            ("FullPanoWidthPixels", 2 * rows),
            ("FullPanoHeightPixels", rows),
            ("CroppedAreaImageWidthPixels", 2 * rows),
            ("CroppedAreaImageHeightPixels", rows),
            ("CroppedAreaLeftPixels", 0),
            ("CroppedAreaTopPixels", 0),
        )
    )
    packet = (
        '<x:xmpmeta xmlns:x="adobe:ns:meta/">'
        '<rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#">'
        f'<rdf:Description rdf:about="" xmlns:p="{NAMESPACE}"{fields}/></rdf:RDF></x:xmpmeta>'
    )
    Image.fromarray(picture).save(
        given.out / "photo.jpg", quality=90, optimize=True, xmp=packet.encode()
    )
    Image.fromarray(far).save(given.out / "distance.png", optimize=True)
    (given.out / "scene.toml").write_text(SCENE, encoding="utf-8")


if __name__ == "__main__":
    main()
