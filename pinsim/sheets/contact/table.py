"""Every frame's figures as a table: CSV for a spreadsheet, JSON for a script."""

import csv
import io
import json
import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, BinaryIO

from pinsim import __version__, files
from pinsim.sheets.contact.captions import Entry

TABLE_SUFFIXES = (".csv", ".json")

_FIGURES = (
    *("film", "material", "tone", "rows", "columns", "covered_share", "f_number"),
    *("horizontal_view_deg", "vertical_view_deg", "diagonal_view_deg", "figures_for_distance_mm"),
    *("detail_cycles_mm", "corner_cycles_mm", "frame_cycles_mm", "corner_falloff_stops"),
    *("ev", "needed_time_s", "time_s"),
)


def rows_of(
    entries: Sequence[Entry], places: Sequence[tuple[int, int, int]], near: Sequence[int]
) -> list[dict[str, Any]]:
    """Return a record for each frame, in the order of the sheet; units are in the names."""
    rows = []
    for number, (entry, place) in enumerate(zip(entries, places, strict=True)):
        frame, about = entry.frame, entry.about or {}
        rows.append(
            {
                "frame": number + 1,
                "page": place[0],
                "row": place[1],
                "column": place[2],
                "name": frame.name,
                "scene": frame.scene_name,
                "camera": frame.camera_name,
                "hole_mm": frame.hole_mm,
                "focal_length_mm": frame.focal_mm,
                "distance_mm": frame.distance_mm,
                "wavelength_nm": frame.wavelength_nm,
                "look": frame.look,
                **{key: about.get(key) for key in _FIGURES},
                "notes": "; ".join(entry.notes) if entry.about is not None else "",
                "nearest_to_need": number in near,
                "problem": entry.reason,
                "checksum_sha256": entry.key,
            }
        )
    return rows


def save_table(
    path: Path,
    rows: Sequence[Mapping[str, Any]],
    *,
    need: str,
    inputs: Mapping[str, str],
    overwrite: bool,
) -> None:
    """Write the records as .csv or .json; inputs : checksums of the files that went in, for JSON."""
    files.check_target(path, overwrite=overwrite, suffixes=TABLE_SUFFIXES)
    if path.suffix.lower() == ".csv":
        text = _csv(rows)
    else:
        told = {
            "pinsim": __version__,
            "need": need,
            "inputs_sha256": dict(inputs),
            "frames": [{key: _plain(value) for key, value in row.items()} for row in rows],
        }
        text = json.dumps(told, indent=1, allow_nan=False) + "\n"

    def write(file: BinaryIO) -> None:
        file.write(text.encode("utf-8"))

    files.write_whole(path, write, overwrite=overwrite)


def _csv(rows: Sequence[Mapping[str, Any]]) -> str:
    made = io.StringIO()
    writer = csv.writer(made, lineterminator="\n")
    writer.writerow(rows[0].keys())
    for row in rows:
        writer.writerow(["" if value is None else _plain(value) for value in row.values()])
    return made.getvalue()


def _plain(value: Any) -> Any:
    """Return a value as both kinds of file can hold it."""
    if isinstance(value, float):
        if math.isinf(value):
            return "infinity"
        return float(f"{value:.6g}")
    return value
