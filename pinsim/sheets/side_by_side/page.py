"""The comparison as one document for a browser: a divider across two pictures, and a loupe.

It loads nothing and sends nothing: pictures are data inside it, style and script stand in it and are
named by their digests in its Content-Security-Policy, so that nothing else can run.
"""

import base64
import hashlib
import io
from html import escape
from importlib.resources import files as package_files

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from pinsim.render.develop import LOOK_TEXT
from pinsim.sheets.side_by_side.layout import Material, cropped_words, detail_title
from pinsim.sheets.side_by_side.table import legend, table, time_notes

PICTURE_PX = (1600, 1200, 900)  # the longer side; less when so many pictures grow too large
MOST_BYTES = 5_600_000
_DETAIL_PX = 420
_QUALITY = 95
_PLOT = (480.0, 330.0)
_PLOT_EDGES = (52.0, 12.0, 14.0, 56.0)  # left, top, right, bottom


def page(material: Material) -> str:
    """Return the document."""
    for longest in PICTURE_PX:
        made = _page(material, longest)
        if len(made.encode("utf-8")) <= MOST_BYTES:
            break
    return made


def _page(material: Material, longest_px: int) -> str:
    style, script = _asset("page.css"), _asset("page.js")
    policy = (
        f"default-src 'none'; img-src data:; style-src '{_digest(style)}'; "
        f"script-src '{_digest(script)}'; base-uri 'none'; form-action 'none'"
    )
    return "\n".join(
        [
            "<!doctype html>",
            '<html lang="en">',
            "<head>",
            '<meta charset="utf-8">',
            f'<meta http-equiv="Content-Security-Policy" content="{policy}">',
            '<meta name="viewport" content="width=device-width, initial-scale=1">',
            '<meta name="color-scheme" content="light dark">',
            '<meta name="referrer" content="no-referrer">',
            '<link rel="icon" href="data:,">',
            f"<title>{escape(material.title)}</title>",
            f"<style>{style}</style>",
            "</head>",
            "<body>",
            "<main>",
            _header(material),
            _viewer(material, longest_px),
            _details(material),
            '<div class="figures">',
            _figures(material),
            _contrast(material),
            "</div>",
            _footer(material),
            "</main>",
            f"<script>{script}</script>",
            "</body>",
            "</html>",
            "",
        ]
    )


def _asset(name: str) -> str:
    return package_files("pinsim.sheets.side_by_side").joinpath(name).read_text("utf-8")


def _digest(text: str) -> str:
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode("utf-8")).digest()).decode()


def _data_url(codes: NDArray[np.uint8]) -> str:
    """Return a picture as a JPEG inside a URL; grey stays one channel."""
    grey = codes.shape[2] == 1
    file = io.BytesIO()
    Image.fromarray(codes[..., 0] if grey else codes).save(
        file, "JPEG", quality=_QUALITY, subsampling=0, optimize=True
    )
    return "data:image/jpeg;base64," + base64.b64encode(file.getvalue()).decode()


def _header(material: Material) -> str:
    items = [
        f'<li><span class="letter">{one.letter}</span><b>{escape(one.name)}</b>'
        f"{escape(one.summary)}<br>"
        f'<span class="faint">{escape(one.material)}; {escape(cropped_words(one))}</span></li>'
        for one in material.figures
    ]
    look = LOOK_TEXT[material.pictures[0].look]
    return "\n".join(
        [
            "<header>",
            f"<h1>{escape(material.title)}</h1>",
            f'<p class="verdict">{escape(material.verdict)}</p>',
            f'<p class="faint">{escape(_sentence(look))} {escape(_sentence(material.light_words))}</p>',
            '<ul class="designs">',
            *items,
            "</ul>",
            "</header>",
        ]
    )


def _sentence(words: str) -> str:
    return f"{words[:1].upper()}{words[1:]}."


def _viewer(material: Material, longest_px: int) -> str:
    rows, columns = shape = material.shape(longest_px, longest_px)
    side = material.mark(material.details[0]).width
    images = [
        f'<img data-letter="{one.letter}" width="{columns}" height="{rows}" '
        f'alt="{one.letter}: {escape(material.pictures[i].scene_name)} through {escape(one.name)}, '
        f'{escape(one.summary)}" src="{_data_url(material.picture(i, shape))}">'
        for i, one in enumerate(material.figures)
    ]
    first, second = material.figures[:2]
    keys = (
        "Drag the divider, or with it in focus use <kbd>&larr;</kbd> <kbd>&rarr;</kbd> (with "
        "<kbd>Shift</kbd> ten times as far) <kbd>Home</kbd> <kbd>End</kbd>. Point at the picture to "
        "see both under the loupe. <kbd>N</kbd> and <kbd>P</kbd> or a number step through the details, "
        "<kbd>+</kbd> <kbd>-</kbd> change the loupe, <kbd>Esc</kbd> goes back to the start."
    )
    start = "Point at the picture, or choose a detail."
    buttons = [_detail_button(material, i) for i in range(len(material.details))]
    return "\n".join(
        [
            '<section id="viewer" aria-labelledby="viewer-head">',
            '<h2 id="viewer-head">Both pictures, one over the other</h2>',
            _choosers(material),
            '<div class="look">',
            f'<div class="stage" id="stage" data-side="{side:.6f}" data-aspect="{columns / rows:.6f}">',
            *images,
            '<div class="ring" id="ring" hidden></div>',
            f'<span class="tag left letter" id="tag-left" aria-hidden="true">{first.letter}</span>',
            f'<span class="tag right letter" id="tag-right" aria-hidden="true">{second.letter}</span>',
            '<div class="divider" id="divider" role="slider" tabindex="0" '
            'aria-label="Divider: how much of the left picture is seen" aria-orientation="horizontal" '
            'aria-valuemin="0" aria-valuemax="100" aria-valuenow="50" '
            f'aria-valuetext="50 percent {first.letter}, 50 percent {second.letter}" '
            'aria-describedby="keys"></div>',
            "</div>",
            '<div class="loupe" id="loupe" role="group" aria-label="Loupe">',
            '<div class="pair">',
            _canvas("left", first.letter),
            _canvas("right", second.letter),
            "</div>",
            f'<p class="status faint" id="status" role="status" data-start="{start}"></p>',
            '<div class="buttons" role="group" aria-label="Details">',
            *buttons,
            "</div>",
            '<div class="buttons">',
            '<button type="button" id="larger">Enlarge more</button>',
            '<button type="button" id="smaller">Enlarge less</button>',
            '<button type="button" id="reset">Back to the start</button>',
            "</div>",
            "</div>",
            f'<p class="keys faint" id="keys">{keys}</p>',
            "</div>",
            "</section>",
        ]
    )


def _canvas(side: str, letter: str) -> str:
    return (
        f'<figure><canvas id="loupe-{side}" role="img" aria-label="{letter}, enlarged"></canvas>'
        f'<span class="letter" id="loupe-letter-{side}" aria-hidden="true">{letter}</span></figure>'
    )


def _choosers(material: Material) -> str:
    """Return what chooses two of more designs."""
    if len(material.figures) == 2:
        return ""
    selects = []
    for side, chosen in (("left", 0), ("right", 1)):
        options = "".join(
            f'<option value="{i}"{" selected" if i == chosen else ""}>'
            f"{one.letter} - {escape(one.name)}, {escape(one.summary)}</option>"
            for i, one in enumerate(material.figures)
        )
        selects.append(
            f'<label>{side.capitalize()}: <select id="choose-{side}">{options}</select></label>'
        )
    return f"<fieldset><legend>Which two</legend>{''.join(selects)}</fieldset>"


def _cycles(value: float) -> str:
    return f"{value:#.3g}".rstrip(".") if value > 0.0 else "none"


def _told(material: Material, number: int) -> str:
    each = ", ".join(
        f"{one.letter} {_cycles(one.places[number].plain_cycles_deg)}" for one in material.figures
    )
    return (
        f"{detail_title(number, material.details[number])}: finest detail {each} cycles per degree"
    )


def _detail_button(material: Material, number: int) -> str:
    detail = material.details[number]
    mark = material.mark(detail)
    centre = f"{mark.left + 0.5 * mark.width:.5f},{mark.top + 0.5 * mark.height:.5f}"
    return (
        f'<button type="button" aria-pressed="false" data-place="{centre}" '
        f'data-words="{escape(detail.name)}" data-told="{escape(_told(material, number))}">'
        f"{number + 1}&ensp;{escape(detail.name)}</button>"
    )


def _details(material: Material) -> str:
    figures = []
    many = " many" if len(material.figures) > 2 else ""
    for i, detail in enumerate(material.details):
        images = [
            f'<figure><img width="{_DETAIL_PX}" height="{_DETAIL_PX}" '
            f'alt="{one.letter}, {escape(detail.name)}, enlarged" '
            f'src="{_data_url(material.detail(n, detail, _DETAIL_PX))}">'
            f'<span class="letter" aria-hidden="true">{one.letter}</span>'
            f"<p>{_cycles(one.places[i].plain_cycles_deg)} cycles/deg</p></figure>"
            for n, one in enumerate(material.figures)
        ]
        figures.append(
            f"<figure><figcaption>{escape(detail_title(i, detail))}</figcaption>"
            f'<div class="pair{many}">{"".join(images)}</div></figure>'
        )
    return "\n".join(
        [
            '<section aria-labelledby="details-head">',
            '<h2 id="details-head">The details that decide</h2>',
            f'<p class="faint">All at one scale, each {material.detail_deg(material.details[0]):.1f} '
            "degrees of the scene wide.</p>",
            '<div class="details">',
            *figures,
            "</div>",
            "</section>",
        ]
    )


def _figures(material: Material) -> str:
    designs = material.figures
    heads = "".join(
        f'<th scope="col"><span class="letter">{one.letter}</span> {escape(one.hole)}</th>'
        for one in designs
    )
    bodies = []
    for group in table(designs):
        lines = [
            f'<tr><th scope="rowgroup" colspan="{len(designs) + 1}">{escape(group.title)}</th></tr>'
        ]
        for row in group.rows:
            cells = "".join(
                f"<td><strong>{escape(cell.text)}</strong> "
                f'<span class="mark">{escape(cell.mark)}</span></td>'
                if cell.mark
                else f"<td>{escape(cell.text)}</td>"
                for cell in row.cells
            )
            lines.append(f'<tr><th scope="row">{escape(row.label)}</th>{cells}</tr>')
        bodies.append(f"<tbody>{''.join(lines)}</tbody>")
    return "\n".join(
        [
            '<section aria-labelledby="figures-head">',
            '<h2 id="figures-head">Figures</h2>',
            '<div class="scroll" role="region" aria-label="Table of figures" tabindex="0">',
            "<table>",
            "<caption>The better one of each row is named beside its figure.</caption>",
            f"<thead><tr><td></td>{heads}</tr></thead>",
            *bodies,
            "</table>",
            "</div>",
            "</section>",
        ]
    )


def _contrast(material: Material) -> str:
    places = list(dict.fromkeys(line.place for line in material.curves.lines))
    words = (
        f"Full lines: {places[0]}; broken lines: {places[1]}."
        if len(places) == 2
        else f"Lines: {', '.join(places) or 'none, no light comes there'}."
    )
    return "\n".join(
        [
            '<section aria-labelledby="contrast-head">',
            '<h2 id="contrast-head">Contrast that is left, against detail</h2>',
            f'<figure class="plot">{_plot(material)}</figure>',
            f'<p class="faint">{escape(words)} What lies above the line at 20 % is plain to see. '
            "Where these lines cross it stands in the table of figures.</p>",
            "</section>",
        ]
    )


def _plot(material: Material) -> str:
    """Return the curves as SVG."""
    curves = material.curves
    wide, high = _PLOT
    left, top, right, bottom = _PLOT_EDGES
    end = float(curves.cycles_deg[-1])

    def x(value: float) -> float:
        return left + (wide - left - right) * value / end

    def y(value: float) -> float:
        return high - bottom - (high - top - bottom) * value

    parts = []
    for level, kind in ((0.0, "axis"), (0.2, "level"), (0.5, "grid"), (1.0, "grid")):
        parts.append(
            f'<line class="{kind}" x1="{left}" x2="{wide - right}" y1="{y(level):.1f}" '
            f'y2="{y(level):.1f}"/>'
            f'<text x="{left - 6}" y="{y(level) + 5:.1f}" text-anchor="end">{100 * level:.0f} %</text>'
        )
    for i in range(round(end / curves.step) + 1):
        value = i * curves.step
        parts.append(
            f'<text x="{x(value):.1f}" y="{high - bottom + 20}" text-anchor="middle">{value:g}</text>'
        )
    parts.append(
        f'<text x="{0.5 * (left + wide - right):.0f}" y="{high - 10}" text-anchor="middle">'
        "cycles per degree of the scene</text>"
    )
    heights = np.linspace(0.78, 0.34, max(len(curves.lines), 2))
    names = []
    for number, line in enumerate(curves.lines):
        points = [
            (x(float(nu)), y(max(float(one), 0.0)))
            for nu, one in zip(curves.cycles_deg, line.contrast, strict=True)
        ]
        outer = " outer" if line.place != curves.lines[0].place else ""
        path = "M" + "L".join(f"{a:.1f} {b:.1f}" for a, b in points)
        parts.append(f'<path class="d{line.design}{outer}" d="{path}"/>')
        a, b = points[int((line.contrast <= heights[number]).argmax())]
        names.append(
            f'<rect class="at d{line.design}" x="{a - 9:.1f}" y="{b - 9:.1f}" width="18" height="18"/>'
            f'<text class="name d{line.design}" x="{a:.1f}" y="{b + 5:.1f}">{line.letter}</text>'
        )
    label = "Curves of contrast against detail; the table of figures tells where they fall to 20 %"
    return (
        f'<svg viewBox="0 0 {wide:g} {high:g}" role="img" aria-label="{label}">'
        f"{''.join(parts)}{''.join(names)}</svg>"
    )


def _footer(material: Material) -> str:
    words = [legend(material.figures, material.view_words), time_notes(material.figures)]
    return "\n".join(
        [
            '<footer class="faint">',
            "<h2>How to read this</h2>",
            *(f"<p>{escape(one)}</p>" for one in words if one),
            "<p>Made by pinsim. This page loads nothing and sends nothing.</p>",
            "</footer>",
        ]
    )
