"""The tuning surface as small multiples: for each statistic the score against weight, window or reference.

The line is the best truncation at each value, the ground reaches from there to the worst one, the dashed line is the controls alone.
Written as it is: nine panels take matplotlib a second to lay out.
"""

from collections.abc import Sequence

from markupsafe import Markup, escape

from pbm.io.report import words
from pbm.records.tuning import Search, Surface

_ACROSS, _WIDTH, _HEIGHT = 3, 196, 162
_LEFT, _RIGHT, _TOP, _BOTTOM = 34, 10, 36, 34
_NAME = 16  # where a panel's name begins
_LETTER = 6  # width of a digit, with room to spare
_TICKS = (1, 2, 2.5, 5, 10)


def surface_plot(search: Search) -> Markup | None:
    """All statistics of a search on one scale of scores; none where nothing was compared."""
    panels = [one for one in search.surfaces if _columns(one)]
    if not panels:
        return None
    top = 1.12 * max(search.schedule_alone, *(column[0] for one in panels for column in _columns(one).values()))
    across = min(_ACROSS, len(panels))
    box = f"0 0 {across * _WIDTH} {-(-len(panels) // _ACROSS) * _HEIGHT}"
    drawn = [_panel(search, one, top or 1.0, place) for place, one in enumerate(panels)]
    return Markup('<svg class="plot panels p{}" viewBox="{}" role="img" aria-label="{}">{}</svg>').format(
        across, box, escape(seen_surface(search)), Markup("").join(drawn)
    )


def _columns(surface: Surface) -> dict[float, tuple[float, float]]:
    """Least and greatest score over the truncations, by parameter; a parameter that could never be limited is left out."""
    found: dict[float, tuple[float, float]] = {}
    for place, parameter in enumerate(surface.columns):
        scores = [row[place] for row in surface.scores]
        given = [one for one in scores if one is not None]
        if given:
            found[parameter] = min(given), max(given)
    return found


def _panel(search: Search, surface: Surface, top: float, place: int) -> Markup:
    columns = _columns(surface)
    left, under = place % _ACROSS * _WIDTH, place // _ACROSS * _HEIGHT
    width = _WIDTH - _LEFT - _RIGHT
    xs = [_LEFT + width * (i + 0.5) / len(columns) for i in range(len(columns))]
    best, worst = ([_height(one[i], top) for one in columns.values()] for i in (0, 1))
    alone = _height(search.schedule_alone, top)
    parts = [
        _text(_NAME, 14, surface.statistic, "start", "name"),
        _text(_NAME, 26, surface.more, "start"),
        *_scale(top),
        Markup('<path class="range" d="M{}L{}Z"/>').format(_points(xs, best), _points(xs[::-1], worst[::-1])),
        Markup('<path class="alone" d="M{:g} {:g}H{:g}"/>').format(_LEFT, alone, _LEFT + width),
        Markup('<path class="best" d="M{}"/>').format(_points(xs, best)),
        Markup('<path class="dots" d="{}"/>').format(
            "".join(f"M{x:.1f} {y:.1f}h0" for x, y in zip(xs, best, strict=True))
        ),
        *_parameters(xs, list(columns), surface.parameter),
    ]
    return Markup('<g transform="translate({} {})">{}</g>').format(left, under, Markup("").join(parts))


def _title(surface: Surface) -> str:
    return f"{surface.statistic}, {surface.more}" if surface.more else surface.statistic


def _scale(top: float) -> list[Markup]:
    """Lines and names of round scores."""
    step = next(one * 10.0**power for power in range(-9, 12) for one in _TICKS[:-1] if top / (one * 10.0**power) <= 5)
    heights = [(count * step, _height(count * step, top)) for count in range(int(top / step) + 1)]
    rules = "".join(f"M{_LEFT} {y:.1f}H{_WIDTH - _RIGHT}" for _, y in heights)
    return [
        Markup('<path class="rule" d="{}"/>').format(rules),
        *(_text(_LEFT - 4, y + 3, f"{score:g}", "end") for score, y in heights),
    ]


def _parameters(xs: Sequence[float], values: Sequence[float], name: str) -> list[Markup]:
    """The values tried, every second one where there is no room, and what they are."""
    letters = sum(len(f"{value:g}") + 1 for value in values)
    every = -(-letters * _LETTER // (_WIDTH - _LEFT - _RIGHT))
    shown = [(x, value) for place, (x, value) in enumerate(zip(xs, values, strict=True)) if place % every == 0]
    under = _HEIGHT - _BOTTOM
    return [
        *(_text(x, under + 12, f"{value:g}", "middle") for x, value in shown),
        _text((_WIDTH + _LEFT - _RIGHT) / 2, under + 25, name, "middle"),
    ]


def _height(score: float, top: float) -> float:
    return _HEIGHT - _BOTTOM - (_HEIGHT - _TOP - _BOTTOM) * min(score / top, 1.0)


def _points(xs: Sequence[float], ys: Sequence[float]) -> str:
    return "L".join(f"{x:.1f} {y:.1f}" for x, y in zip(xs, ys, strict=True))


def _text(x: float, y: float, text: str, anchor: str, name: str = "") -> Markup:
    kind = Markup(' class="{}"').format(name) if name else ""
    return Markup('<text x="{:g}" y="{:g}" text-anchor="{}"{}>{}</text>').format(
        round(x, 1), round(y, 1), anchor, kind, text
    )


def seen_surface(search: Search) -> str:
    """The panels in words."""
    told = []
    for surface in search.surfaces:
        columns = _columns(surface)
        if columns:
            at = min(columns, key=lambda one: columns[one][0])
            told.append(f"{_title(surface)}: {words.number(columns[at][0])} at {surface.parameter} {at:g}")
    return (
        f"Score against the memory of each statistic, best truncation at each value; lower is better, the controls alone stand at "
        f"{words.number(search.schedule_alone)}. Least {'; '.join(told)}."
    )
