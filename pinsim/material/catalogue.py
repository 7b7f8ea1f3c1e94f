"""The materials by name: those that come with pinsim, and a builder's own from a TOML file.

A file holds one table for each material, named as the material is. `like = "panchromatic-100"` takes
everything from another one, and what is written changes it; a table named as a known material
changes that one. What is wrong is refused when the file is read, in one line.
"""

import itertools
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path
from typing import Any, cast

import numpy as np

from pinsim.errors import DesignError, unknown_name
from pinsim.material.model import PROCESSES, SUPPORTS, Grain, Material, Process, Sensor, Support
from pinsim.material.reciprocity import Reciprocity
from pinsim.material.spectrum import Channel, band_channel, photo_channels, table_channel
from pinsim.material.tone_curve import ToneCurve
from pinsim.tables import Table, read_toml

_BUILT_IN = Path(__file__).with_name("materials.toml")
_KIND = "file of materials"
# Of these tables a change of one key leaves the others as they were; a spectrum or a law of
# reciprocity is one thing and is replaced whole.
_MERGED = ("curve", "grain", "sensor")
# What a missing key might be, for error texts.
_EXAMPLES = {
    "base_fog": "0.25",
    "d_max": "2.5",
    "from_nm": "405",
    "gamma": "0.72",
    "shoulder": "0.4",
    "speed": "100",
    "to_nm": "655",
    "toe": "0.5",
}


@lru_cache(maxsize=1)
def _built_in() -> dict[str, Any]:
    return read_toml(_BUILT_IN, DesignError, _KIND)


class _Frozen(dict[str, Any]):
    """The tables of a file, equal and hashed by what they say, so that designs can be cached."""

    __slots__ = ()

    def __hash__(self) -> int:  # type: ignore[override]
        return hash(repr(self))


@dataclass(frozen=True, slots=True)
class Catalogue:
    """Materials by name. file : whose own tables come before the built-in ones; "" for none."""

    file: str = ""
    _own: _Frozen = field(default_factory=_Frozen)

    @classmethod
    def load(cls, path: str | Path) -> "Catalogue":
        """Read a builder's own materials; DesignError, in one line, for whatever is wrong."""
        catalogue = cls(str(path), _Frozen(read_toml(Path(path), DesignError, _KIND)))
        for name in catalogue._own:
            catalogue.material(name)
        return catalogue

    @property
    def names(self) -> tuple[str, ...]:
        """All names, sorted."""
        return tuple(sorted({*_built_in(), *self._own}))

    @property
    def own_names(self) -> tuple[str, ...]:
        """The names that the file adds or changes, sorted."""
        return tuple(sorted(self._own))

    def material(self, name: str) -> Material:
        """Return a material by name; DesignError names the nearest for a misspelt one."""
        if name not in self._own and name not in _built_in():
            where = f"; {self.file} adds {', '.join(self.own_names)}" if self.file else ""
            raise DesignError(unknown_name("material", name, self.names).rstrip(".") + where + ".")
        return _made(self, name)

    def _values(self, name: str, asked_by: tuple[str, ...] = ()) -> dict[str, Any]:
        """Return a material's keys with all it takes from others."""
        if name not in self._own or name in asked_by[:-1]:
            return dict(_built_in()[name])
        own = self._own[name]
        where = f"{self.file} [{name}]"
        if not isinstance(own, dict):
            raise DesignError(
                f"{where} is {own!r}; a material is a table: its name in brackets on a line of "
                "its own, its keys below."
            )
        like = own.get("like", name if name in _built_in() else None)
        if like is None:
            return dict(own)
        if not isinstance(like, str) or like not in self.names:
            known = unknown_name("material", str(like), self.names)
            raise DesignError(f"{where}: like: {known}")
        if like == name:
            base = _built_in().get(name)
            if base is None:
                raise DesignError(f"{where}: like is its own name; name another material.")
        elif like in asked_by:
            raise DesignError(
                f"{where}: like = {like!r} leads back to itself: "
                f"{' -> '.join((*asked_by, name, like))}; name a material that stands by itself."
            )
        else:
            base = self._values(like, (*asked_by, name))
        return _merged(base, own)


def _merged(base: Mapping[str, Any], own: Mapping[str, Any]) -> dict[str, Any]:
    values = {**base, **own}
    for key in _MERGED:
        if isinstance(base.get(key), dict) and isinstance(own.get(key), dict):
            values[key] = {**base[key], **own[key]}
    values.pop("like", None)
    # What only the other kind has is not taken over: a sensor has no curve.
    for key in ("curve", "grain") if values.get("process") == "sensor" else ("sensor",):
        if key not in own:
            values.pop(key, None)
    return values


@lru_cache(maxsize=64)
def _made(catalogue: Catalogue, name: str) -> Material:
    where = f"{catalogue.file or 'built-in materials'} [{name}]"
    return _material(name, Table(catalogue._values(name), where, DesignError))


def material(name: str) -> Material:
    """Return a built-in material by name; DesignError names the nearest for a misspelt one."""
    return BUILT_IN.material(name)


def _number(
    table: Table,
    key: str,
    low: float,
    high: float,
    default: float | None = None,
    *,
    unit: str = "",
) -> float:
    value = (
        table.need(key, _EXAMPLES.get(key, f"{high:g}"))
        if default is None
        else table.take(key, default)
    )
    return _checked(value, table.place(key), low, high, unit)


def _checked(value: Any, place: str, low: float, high: float, unit: str = "") -> float:
    wanted = f"{low:g} to {high:g}{unit}"
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise DesignError(f"{place} is {value!r}; it must be a plain number, {wanted}.")
    if not low <= value <= high:
        raise DesignError(f"{place} is {value:g}; it must be {wanted}.")
    return float(value)


def _numbers(table: Table, key: str, low: float, high: float, example: str) -> list[float]:
    values = table.need(key, example)
    place = table.place(key)
    if not isinstance(values, list) or not values:
        raise DesignError(
            f"{place} is {values!r}; it must be a list of numbers, such as {example}."
        )
    return [_checked(value, place, low, high) for value in values]


def _material(name: str, top: Table) -> Material:
    description = top.text("description", "")
    process = cast(Process, _word(top, "process", PROCESSES))
    support = cast(Support, top.text("support", "film", SUPPORTS))
    speed = _number(top, "speed", 0.01, 100_000.0)
    unsure = _number(top, "speed_unsure_stops", 0.0, 10.0, 0.5)
    sources = [top.text("source", "")]
    channels = _channels(top)
    sensor = grain = curve = None
    speed_lxs = 0.0
    reciprocity = Reciprocity.from_table(top.table("reciprocity"))
    if process == "sensor":
        sensor = _sensor(top.table("sensor"))
    else:
        table = top.table("curve")
        speed_lxs = _number(table, "speed_lxs", 0.01, 1000.0, 0.8)
        curve = _curve(table, rising=process == "negative")
        sources.append(_finish(table))
        grain = _grain(top.table("grain"))
    mask = top.take("mask_density", [0.0, 0.0, 0.0])
    if not isinstance(mask, list) or len(mask) != 3:
        raise DesignError(
            f"{top.place('mask_density')} is {mask!r}; it must be three densities, of red, green "
            "and blue light, such as [0.2, 0.6, 0.9]."
        )
    red, green, blue = (_checked(one, top.place("mask_density"), 0.0, 4.0) for one in mask)
    top.refuse_leftovers()
    return Material(
        name=name,
        description=description,
        speed_iso=speed,
        speed_unsure_stops=unsure,
        process=process,
        support=support,
        channels=channels,
        reciprocity=reciprocity,
        curve=curve,
        speed_lxs=speed_lxs,
        mask_density=(red, green, blue),
        grain=grain,
        sensor=sensor,
        sources=tuple(one for one in sources if one),
    )


def _word(table: Table, key: str, allowed: tuple[str, ...]) -> str:
    if not table.has(key):
        table.need(key, f'"{allowed[0]}"')
    return table.text(key, "", allowed)


def _finish(table: Table) -> str:
    source = table.text("source", "")
    table.refuse_leftovers()
    return source


def _channels(top: Table) -> tuple[Channel, ...]:
    """Return the layers: spectrum = "photo" is the photo's own colours, a table a silver one."""
    if not top.has("spectrum"):
        top.need("spectrum", "{ from_nm = 405, to_nm = 655 }")
    spectrum = top.take("spectrum")
    if spectrum == "photo":
        return photo_channels()
    if not isinstance(spectrum, dict):
        raise DesignError(
            f"{top.where} [spectrum] is {spectrum!r}; it must be a table such as "
            '{ from_nm = 405, to_nm = 655 }, or "photo" for the photo\'s own colours.'
        )
    table = Table(spectrum, f"{top.where} [spectrum]", DesignError)
    if table.has("wavelength_nm"):
        nm = _numbers(table, "wavelength_nm", 200.0, 2000.0, "[400, 450, 500]")
        sensitivity = _numbers(table, "sensitivity", 0.0, 1e6, "[0.8, 1.0, 0.1]")
        _refuse_uneven(table, "wavelength_nm", nm, "sensitivity", sensitivity)
        if not max(sensitivity) > 0.0:
            raise DesignError(f"{table.place('sensitivity')} is all zero; it must see some light.")
        channel = table_channel("silver", np.array(nm), np.array(sensitivity))
    else:
        first = _number(table, "from_nm", 250.0, 1500.0, unit=" in nm")
        last = _number(table, "to_nm", 250.0, 1500.0, unit=" in nm")
        soft = _number(table, "soft_nm", 1.0, 50.0, 8.0, unit=" in nm")
        if last - first < soft:
            raise DesignError(
                f"{table.place('to_nm')} is {last:g}; it must lie above from_nm, {first:g}, by more "
                f"than soft_nm, {soft:g}."
            )
        channel = band_channel("silver", first, last, soft)
    _finish(table)
    return (channel,)


def _refuse_uneven(table: Table, first: str, xs: list[float], second: str, ys: list[float]) -> None:
    if len(xs) != len(ys) or len(xs) < 2:
        raise DesignError(
            f"{table.place(second)} has {len(ys)} numbers and {first} {len(xs)}; they must be "
            "equally many, two or more."
        )
    if any(a >= b for a, b in itertools.pairwise(xs)):
        raise DesignError(f"{table.place(first)} must rise from each number to the next.")


def _curve(table: Table, *, rising: bool) -> ToneCurve:
    base = _number(table, "base_fog", 0.0, 2.0)
    greatest = _number(table, "d_max", 0.2, 6.0)
    gamma = _number(table, "gamma", 0.1, 10.0)
    toe = _number(table, "toe", 0.02, 3.0)
    shoulder = _number(table, "shoulder", 0.02, 3.0)
    speed_density = _number(table, "speed_density", 0.01, 3.0, 0.10)
    if greatest <= base + speed_density:
        raise DesignError(
            f"{table.place('d_max')} is {greatest:g}; it must be more than base_fog and speed_density "
            f"together, {base + speed_density:g}."
        )
    return ToneCurve(
        base_fog=base,
        d_max=greatest,
        gamma=gamma,
        toe=toe,
        shoulder=shoulder,
        speed_density=speed_density,
        rising=rising,
    )


def _grain(table: Table) -> Grain:
    grain = Grain(
        sigma_density=_number(table, "sigma_density", 0.0, 1.0, 0.0),
        correlation_um=_number(table, "correlation_um", 0.0, 1000.0, 0.0),
    )
    _finish(table)
    return grain


def _sensor(table: Table) -> Sensor:
    def optional(key: str, low: float, high: float) -> float | None:
        return _number(table, key, low, high) if table.has(key) else None

    sensor = Sensor(
        saturation_lxs=_number(table, "saturation_lxs", 1.0, 10_000.0, 78.0),
        pixel_pitch_um=optional("pixel_pitch_um", 0.5, 1000.0),
        full_well_electrons=optional("full_well_electrons", 10.0, 1e8),
        read_noise_electrons=_number(table, "read_noise_electrons", 0.0, 1e5, 0.0),
    )
    _finish(table)
    return sensor


BUILT_IN = Catalogue()
MATERIAL_NAMES = BUILT_IN.names
