"""The figures in one sentence: which design draws finer, where, and what it costs in light.

Nothing here adds up a score. Detail is what is plain to see, 20 % contrast, in cycles per degree of
the scene; light is the time a meter asks for, so material and f-number count, reciprocity does not.
"""

import math
from collections.abc import Sequence

from pinsim.sheets.side_by_side.figures import DesignFigures, PlaceFigures

# Below these nobody sees a difference: 3 % in fineness, a tenth of a stop (common practice, no source).
ALIKE_DETAIL = 0.03
ALIKE_STOPS = 0.1
_DARKER_STOPS = 0.3
_WIDER = 0.05


def verdict(designs: Sequence[DesignFigures]) -> str:
    """Return the sentence that says what the figures of two or more designs mean."""
    return _of_two(*designs) if len(designs) == 2 else _of_many(designs)


def ratio(value: float, other: float) -> float:
    """Return value over other; 1 when both are nothing, infinity when only the other is."""
    if other > 0.0:
        return value / other
    return math.inf if value > 0.0 else 1.0


def alike(one: float, tolerance: float = ALIKE_DETAIL) -> bool:
    """Tell whether a ratio is as good as 1."""
    return 1.0 / (1.0 + tolerance) < one < 1.0 + tolerance


def light_stops(design: DesignFigures, other: DesignFigures) -> float:
    """Return how much more light a design needs than another, stops of metered time."""
    return math.log2(design.time.metered_s / other.time.metered_s)


def middle_of(design: DesignFigures) -> PlaceFigures:
    """Return the place that stands for the middle: the centre, or the first that was pointed at."""
    return design.at("centre") or design.places[0]


def _of_two(first: DesignFigures, second: DesignFigures) -> str:
    compared = _compared_names(first)
    ratios = [
        ratio(second.places[i].plain_cycles_deg, first.places[i].plain_cycles_deg)
        for i, _ in compared
    ]
    told = [one for one in ratios if not alike(one)]
    needs_more = light_stops(second, first)
    same_light = abs(needs_more) < ALIKE_STOPS
    extras = _extras(first, second)
    if not told and same_light:
        most = max(max(one, 1.0 / one) for one in ratios) - 1.0
        where = " and ".join(words for _, words in compared)
        within = f"within {max(1, math.ceil(100.0 * most))} % {where}"
        names, times = f"{first.letter} and {second.letter}", _times(first, second)
        if extras:
            alike_words = f"{names} draw alike ({within}) and need the same light ({times})"
            return _closed(alike_words, extras)
        return (
            f"{names} hardly differ: their finest detail is {within}, and both need the same light "
            f"({times}); choose what is easier to make."
        )
    if not told:
        fast, slow = (first, second) if needs_more > 0.0 else (second, first)
        where = " and ".join(words for _, words in compared)
        alike_words = (
            f"{fast.letter} and {slow.letter} draw equally fine {where}, and {fast.letter} needs "
            f"{abs(needs_more):.1f} {_unit(needs_more)} less light ({_times(fast, slow)})"
        )
        return _closed(alike_words, extras)
    better, worse = (second, first) if told[0] > 1.0 else (first, second)
    if better is first:
        ratios = [ratio(1.0, one) if one > 0.0 else math.inf for one in ratios]
        needs_more = -needs_more
    parts = _detail_parts([words for _, words in compared], ratios)
    light = (
        f"needs the same light ({_times(better, worse)})"
        if same_light
        else f"needs {abs(needs_more):.1f} {_unit(needs_more)} "
        f"{'more' if needs_more > 0.0 else 'less'} light ({_times(better, worse)})"
    )
    joined = f"{', '.join(parts)}, and {light}" if len(parts) > 1 else f"{parts[0]} and {light}"
    return _closed(f"{better.letter} draws {joined}", extras)


def _compared_names(design: DesignFigures) -> list[tuple[int, str]]:
    """Return the places the sentence speaks of, with the words for them."""
    words = {"centre": "in the middle", "corner": "in the corners"}
    named = [(i, words[one.name]) for i, one in enumerate(design.places) if one.name in words]
    if named:
        return named
    return [(i, f"at {one.name}") for i, one in enumerate(design.places)][:3]


def _detail_parts(words: Sequence[str], ratios: Sequence[float]) -> list[str]:
    """Return "18 % finer in the middle", "9 % coarser in the corners", of the better design."""
    parts, before = [], ""
    for where, one in zip(words, ratios, strict=True):
        told = fineness(one)
        # "18 % finer in the middle, 12 % in the corners": the word once is enough.
        kind = told.rsplit(" ", 1)[-1]
        parts.append(f"{told.rsplit(' ', 1)[0] if kind == before else told} {where}")
        before = kind if kind in {"finer", "coarser"} else ""
    return parts


def fineness(one: float) -> str:
    """Return a ratio of finest detail in words: "18 % finer", "9 % coarser", "2.3 times as fine"."""
    if alike(one):
        return "as fine"
    if one == math.inf:
        return "something where the other draws nothing"
    if one == 0.0:
        return "nothing"
    if one >= 2.0:
        return f"{one:.1f} times as fine"
    if one <= 0.5:
        return f"{1.0 / one:.1f} times as coarse"
    return f"{100.0 * abs(one - 1.0):.0f} % {'finer' if one > 1.0 else 'coarser'}"


def _times(first: DesignFigures, second: DesignFigures) -> str:
    if first.time.text == second.time.text:
        return f"{first.time.text} at EV {first.ev:g}"
    return f"{first.time.text} against {second.time.text} at EV {first.ev:g}"


def _unit(stops: float) -> str:
    return "stop" if abs(stops) < 1.05 else "stops"


def _closed(sentence: str, extras: Sequence[str]) -> str:
    return "; ".join([sentence, *extras]) + "."


def _extras(first: DesignFigures, second: DesignFigures) -> list[str]:
    """Return what else decides: another order at another contrast, darker corners, another view."""
    found = [_other_order(first, second), _darker(first, second), _wider(first, second)]
    return [one for one in found if one]


def _other_order(first: DesignFigures, second: DesignFigures) -> str:
    """Say when another contrast would turn the order in the middle round."""
    one, other = middle_of(first).cycles_deg, middle_of(second).cycles_deg
    plain = ratio(middle_of(second).plain_cycles_deg, middle_of(first).plain_cycles_deg)
    for k, words in ((2, "what is just seen (10 % contrast)"), (0, "clear contrast (50 %)")):
        here = ratio(other[k], one[k])
        if alike(plain) or alike(here) or (here > 1.0) == (plain > 1.0):
            continue
        better = second if here > 1.0 else first
        return f"in {words} {better.letter} reaches {fineness(max(here, ratio(1.0, here)))} detail"
    return ""


def _darker(first: DesignFigures, second: DesignFigures) -> str:
    one, other = first.at("corner"), second.at("corner")
    if one is None or other is None:
        return ""
    if math.isinf(one.falloff_stops) or math.isinf(other.falloff_stops):
        unlit = [
            d.letter
            for d, place in ((first, one), (second, other))
            if math.isinf(place.falloff_stops)
        ]
        return f"no light reaches the corners of {' and '.join(unlit)}"
    stops = other.falloff_stops - one.falloff_stops
    if abs(stops) < _DARKER_STOPS:
        return ""
    darker = second if stops > 0.0 else first
    return f"the corners of {darker.letter} are {abs(stops):.1f} {_unit(stops)} darker"


def _wider(first: DesignFigures, second: DesignFigures) -> str:
    across = ratio(second.horizontal_view_deg, first.horizontal_view_deg)
    high = ratio(second.vertical_view_deg, first.vertical_view_deg)
    if alike(across * high, _WIDER):
        return ""
    wide, narrow = (second, first) if across * high > 1.0 else (first, second)
    return (
        f"{wide.letter} sees more than is shown here, {_view(wide)} against {_view(narrow)} deg"
        if wide.hidden_share > narrow.hidden_share
        else f"{wide.letter} sees wider, {_view(wide)} against {_view(narrow)} deg"
    )


def _view(design: DesignFigures) -> str:
    return f"{design.horizontal_view_deg:.0f} x {design.vertical_view_deg:.0f}"


def _of_many(designs: Sequence[DesignFigures]) -> str:
    """Say which of several designs leads where, and by how much."""
    parts: list[str] = []
    leads: dict[str, list[str]] = {}
    for i, where in _compared_names(designs[0]):
        ranked = sorted(designs, key=lambda one: -one.places[i].plain_cycles_deg)
        finest = ranked[0].places[i].plain_cycles_deg
        lead = [one for one in ranked if alike(ratio(finest, one.places[i].plain_cycles_deg))]
        if len(lead) == len(designs):
            parts.append(f"all draw alike {where}")
            continue
        after = ranked[len(lead)]
        gain = fineness(ratio(finest, after.places[i].plain_cycles_deg))
        than = (
            f"{gain} than {after.letter}" if gain.endswith("finer") else f"{gain} as {after.letter}"
        )
        who = f"{_listed(lead)} {'draws' if len(lead) == 1 else 'draw'} finest"
        leads.setdefault(who, []).append(f"{where} ({than})")
    parts = [f"{who} {' and '.join(places)}" for who, places in leads.items()] + parts
    by_light = sorted(designs, key=lambda one: one.time.metered_s)
    quick = [one for one in by_light if light_stops(one, by_light[0]) < ALIKE_STOPS]
    spread = light_stops(by_light[-1], by_light[0])
    if len(quick) == len(designs):
        parts.append(f"all need the same light ({by_light[0].time.text} at EV {by_light[0].ev:g})")
    else:
        verb = "needs" if len(quick) == 1 else "need"
        parts.append(
            f"{_listed(quick)} {verb} least light ({by_light[0].time.text} at EV "
            f"{by_light[0].ev:g}), {by_light[-1].letter} most ({spread:.1f} {_unit(spread)} more)"
        )
    return f"Of these, {', '.join(parts[:-1])}, and {parts[-1]}."


def _listed(designs: Sequence[DesignFigures]) -> str:
    letters = sorted(one.letter for one in designs)
    return letters[0] if len(letters) == 1 else f"{', '.join(letters[:-1])} and {letters[-1]}"
