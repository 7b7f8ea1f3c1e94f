"""pinsim materials: what can be exposed, and what is known of each."""

import json
from typing import TYPE_CHECKING, Any

import click

from pinsim.cli import options

if TYPE_CHECKING:
    from pinsim.material import Material

_SHOWN_TIMES_S = (1.0, 10.0, 100.0)


@click.command("materials")
@click.argument("name", required=False)
@options.own_materials
@click.option("--json", "as_json", is_flag=True, help="Print JSON: nm, s, lx s, um, densities.")
def command(name: str | None, materials_file: str | None, as_json: bool) -> None:
    """List films, papers and sensors, or tell all of one.

    NAME is a material's name, as for --material.
    """
    from pinsim.cli.show import tell
    from pinsim.material import BUILT_IN, Catalogue

    catalogue = Catalogue.load(materials_file) if materials_file else BUILT_IN
    if name is not None:
        material = catalogue.material(name)
        if as_json:
            click.echo(json.dumps(_plain(material), indent=2))
        else:
            tell(_told(material))
        return
    everything = [catalogue.material(one) for one in catalogue.names]
    if as_json:
        click.echo(json.dumps([_plain(material) for material in everything], indent=2))
        return
    lines = [f"{'name':<24}{'index':<16}{'sees':<20}long exposures"]
    for material in everything:
        own = f" ({catalogue.file})" if material.name in catalogue.own_names else ""
        lines += [
            f"{material.name:<24}{_index(material):<16}{_sees(material):<20}"
            f"{material.reciprocity.label}",
            f"    {material.description}{own}",
        ]
    tell([*lines, "pinsim materials NAME tells all of one, with sources."])


def _index(material: "Material") -> str:
    unsure = material.speed_unsure_stops
    return f"{material.speed_iso:g}" + (f" +-{unsure:g} stops" if unsure else "")


def _sees(material: "Material") -> str:
    return ", ".join(material.colours_seen)


def _told(material: "Material") -> list[str]:
    from pinsim.exposure import time_text

    law = material.reciprocity
    shares = ", ".join(f"{one} {100 * part:.0f} %" for one, part in material.colours_seen.items())
    times = ", ".join(
        f"{seconds:g} s -> {time_text(law.corrected_s(seconds))}" for seconds in _SHOWN_TIMES_S
    )
    correction = f"{law.label}: {times}" if law.needed else "none"
    if law.outside_data(_SHOWN_TIMES_S[-1]):
        correction += f" (nothing is known beyond {law.data_to_s:g} s metered)"
    lines = [
        f"{material.name}: {material.description}",
        f"exposure index  {_index(material)}",
        f"kind            {material.process} on {material.support}"
        if material.curve
        else "kind            sensor",
        f"sees            {shares} of a white scene's light; "
        f"{material.light.mean_nm:.0f} nm on average",
        f"long exposures  {correction}",
        *_curve_lines(material),
        *_sensor_lines(material),
    ]
    sources = dict.fromkeys((*material.sources, *([law.source] if law.source else [])))
    return [
        *lines,
        *(f"source: {source}" for source in sources),
        "READ: read in that work; MEM: from memory of it.",
    ]


def _curve_lines(material: "Material") -> list[str]:
    import math

    from pinsim.render.expose import METERED_LXS
    from pinsim.render.printing import print_of

    curve = material.curve
    if curve is None:
        return []
    middle = float(curve.density(math.log10(METERED_LXS / material.speed_lxs)))
    lines = [
        f"density         {curve.base_fog:g} to {curve.d_max:g}, {curve.gamma:g} for each tenfold "
        f"exposure; a metered mid-tone gets {middle:.2f}"
    ]
    if material.process == "negative":
        paper = print_of(material).paper
        lines.append(f"print           on paper of ISO range {paper.iso_range:.0f}")
    if material.grain is not None and material.grain.sigma_density > 0.0:
        lines.append(
            f"grain           +-{material.grain.sigma_density:g} of density 1 in a hole of 48 um, "
            f"hanging together over {material.grain.correlation_um:g} um"
        )
    return lines


def _sensor_lines(material: "Material") -> list[str]:
    sensor = material.sensor
    if sensor is None:
        return []
    lines = [f"full            at {sensor.saturation_lxs / material.speed_iso:.3g} lx s"]
    if sensor.pixel_pitch_um is not None:
        lines.append(f"pixels          {sensor.pixel_pitch_um:g} um")
    if sensor.full_well_electrons is not None:
        lines.append(
            f"noise           {sensor.full_well_electrons:g} electrons when full, "
            f"{sensor.read_noise_electrons:g} from reading"
        )
    return lines


def _plain(material: "Material") -> dict[str, Any]:
    from dataclasses import asdict

    law = material.reciprocity
    curve = material.curve
    return {
        "name": material.name,
        "description": material.description,
        "exposure_index": material.speed_iso,
        "unsure_stops": material.speed_unsure_stops,
        "process": material.process,
        "support": material.support,
        "colours_seen": material.colours_seen,
        "mean_wavelength_nm": material.light.mean_nm,
        "reciprocity": {
            "label": law.label,
            "data_to_s": law.data_to_s if law.data_to_s < float("inf") else None,
            "times": [
                {"metered_s": one, "corrected_s": law.corrected_s(one)} for one in _SHOWN_TIMES_S
            ],
            "source": law.source,
        },
        "curve": None
        if curve is None
        else {
            "base_fog": curve.base_fog,
            "d_max": curve.d_max,
            "gamma": curve.gamma,
            "toe": curve.toe,
            "shoulder": curve.shoulder,
            "speed_density": curve.speed_density,
            "speed_lxs": material.speed_lxs,
        },
        "grain": None if material.grain is None else asdict(material.grain),
        "sensor": None if material.sensor is None else asdict(material.sensor),
        "sources": list(material.sources),
    }
