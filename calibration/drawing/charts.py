"""The large plots of a test and of a tag: the marks grown up, drawn by matplotlib for a page.

Calls cost some 50 ms: one page, one or two charts; lists use `calibration.drawing.marks`. Nothing is judged here: what
is outside is said by who asks for the picture, from the comparison that made the verdict.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import date
from typing import TYPE_CHECKING, Any

from django.utils.safestring import SafeString

from calibration.drawing.inline_svg import COLOURS, SETTINGS, inline

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure
    from matplotlib.lines import Line2D

INK, FAINT, HAIR, RULE = COLOURS["ink"], COLOURS["faint"], COLOURS["hair"], COLOURS["rule"]
PAPER, OUTSIDE, NEAR, ACTION = COLOURS["paper"], COLOURS["outside"], COLOURS["near"], COLOURS["action"]
BAND = COLOURS["band"]


@dataclass(frozen=True)
class ErrorPoint:
    """One reading: applied input, its error, direction of the input, expanded uncertainty of the error.

    `outside` is what the judgement of the reading says. `clipped` says that the error is a lower bound, because the
    output stood at its saturation.
    """

    input: float
    error: float
    up: bool
    uncertainty: float | None = None
    clipped: bool = False
    outside: bool = False


@dataclass(frozen=True)
class LimitPoint:
    """The limits of the error at one input; not finite where there is none on that side."""

    input: float
    lower: float
    upper: float


@dataclass(frozen=True)
class DriftPoint:
    """What has added up on one day, and whether that exceeds the limits."""

    on: date
    value: float
    outside: bool = False


@dataclass(frozen=True)
class DriftEvent:
    """What breaks or restarts the curve: kind "swap", "adjustment", "re-range" or "other", with a short label."""

    on: date
    kind: str
    label: str


@dataclass(frozen=True)
class BandPoint:
    """The prediction on one day: its centre and the ends of the band."""

    on: date
    centre: float
    low: float
    high: float


def _figure(height: float) -> tuple[Figure, Axes]:
    from matplotlib.figure import Figure

    figure = Figure(figsize=(9.0, height), dpi=72)
    figure.patch.set_alpha(0)
    figure.subplots_adjust(left=0.075, right=0.985, top=0.91, bottom=0.15)
    axes = figure.add_subplot()
    axes.patch.set_alpha(0)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(RULE)
        axes.spines[side].set_linewidth(0.8)
    axes.tick_params(colors=FAINT, width=0.8, length=3, labelsize=9)
    for spine_label in (axes.xaxis.label, axes.yaxis.label):
        spine_label.set_color(INK)
    axes.axhline(0, color=RULE, linewidth=0.8, zorder=1)
    return figure, axes


def _legend(axes: Axes, handles: Sequence[Line2D], height: float) -> None:
    """What the shapes mean, in one line over the plot; height in fractions of the axes."""
    axes.legend(
        handles=list(handles),
        loc="lower left",
        bbox_to_anchor=(-0.012, height),
        ncols=len(handles),
        frameon=False,
        fontsize=8.5,
        labelcolor=INK,
        handlelength=1.5,
        handletextpad=0.4,
        columnspacing=0.9,
        borderaxespad=0,
    )


def _key(label: str, **look: Any) -> Line2D:
    from matplotlib.lines import Line2D

    return Line2D([], [], label=label, **{"color": INK, "linestyle": "none", **look})


# --- errors of a test ---------------------------------------------------------------------------------------


def error_plot(
    *,
    title: str,
    description: str,
    found: Sequence[ErrorPoint],
    left: Sequence[ErrorPoint] = (),
    limits: Sequence[LimitPoint] = (),
    left_limits: Sequence[LimitPoint] = (),
    acceptance: Sequence[LimitPoint] = (),
    input_unit: str,
    error_unit: str = "% of span",
) -> SafeString:
    """Errors against input between their limits: up ▲, down ▼, as-found hollow, as-left filled.

    Parameters
    ----------
    title, description : name of the picture and what it shows, in words.
    found, left : readings in the order taken; input in `input_unit`, error and uncertainty in `error_unit`.
    limits : the MPE in `error_unit` at inputs close enough that straight lines between them look like the curve.
    left_limits, acceptance : likewise the as-left tolerance and the acceptance limit inside a guard band.

    Returns
    -------
    Inline SVG; points that are outside are vermilion and crossed.
    """
    from matplotlib import rc_context

    with rc_context(SETTINGS):
        figure, axes = _figure(3.6)
        _scale_errors(axes, [*found, *left], [*limits, *left_limits])
        keys = [
            *_draw_run(axes, found, "as-found", PAPER),
            *_draw_run(axes, left, "as-left", INK),
            *_draw_limits(axes, limits, "MPE", linewidth=1.8, color=INK),
            *_draw_limits(axes, acceptance, "acceptance limit", linewidth=1.1, color=FAINT, linestyle=(0, (3, 2))),
            *_draw_limits(axes, left_limits, "as-left tolerance", linewidth=1.1, color=FAINT, linestyle=(0, (1, 1.5))),
        ]
        if any(point.outside for point in (*found, *left)):
            keys.append(_key("outside", marker="x", markersize=8, color=OUTSIDE))
        axes.set_xlabel(f"Applied input, {input_unit}")
        axes.set_ylabel(f"Error, {error_unit}")
        _sign_ticks(axes)
        _legend(axes, keys, 1.02)
        return inline(figure, title=title, description=description)


def _draw_run(axes: Axes, run: Sequence[ErrorPoint], name: str, fill: str) -> list[Line2D]:
    if not run:
        return []
    style = "-" if fill == INK else (0, (4, 2))
    axes.plot([p.input for p in run], [p.error for p in run], color=FAINT, linewidth=0.9, linestyle=style, zorder=3)
    spread = [point for point in run if point.uncertainty is not None]
    if spread:
        axes.errorbar(
            [point.input for point in spread],
            [point.error for point in spread],
            [point.uncertainty or 0.0 for point in spread],
            linestyle="none",
            color=RULE,
            elinewidth=1,
            capsize=2.5,
            capthick=1,
            zorder=2,
        )
    keys = []
    for up, shape in ((True, "^"), (False, "v")):
        look: dict[str, Any] = {"marker": shape, "linestyle": "none", "markeredgewidth": 1.4}
        for bad in (False, True):
            shown = [point for point in run if point.up is up and point.outside is bad]
            colour = OUTSIDE if bad else INK
            face = fill if fill == PAPER else colour
            places = ([point.input for point in shown], [point.error for point in shown])
            if shown:
                axes.plot(*places, markersize=7.5, markerfacecolor=face, markeredgecolor=colour, zorder=5, **look)
            if shown and bad:
                axes.plot(*places, marker="x", linestyle="none", markersize=13, color=OUTSIDE, zorder=4)
        if any(point.up is up for point in run):
            way = "up" if up else "down"
            keys.append(_key(f"{name}, {way}", markersize=7, markerfacecolor=fill, markeredgecolor=INK, **look))
    for point in run:
        if point.clipped:
            _arrow_onward(axes, point, OUTSIDE if point.outside else INK)
    return keys


def _arrow_onward(axes: Axes, point: ErrorPoint, colour: str) -> None:
    """An arrow away from zero: the true error is at least this large."""
    way = 1 if point.error >= 0 else -1
    axes.annotate(
        "",
        xy=(point.input, point.error + way * 0.2 * axes.get_ylim()[1]),
        xytext=(point.input, point.error),
        arrowprops={"arrowstyle": "->", "color": colour},
    )


def _draw_limits(axes: Axes, limits: Sequence[LimitPoint], label: str, **look: Any) -> list[Line2D]:
    if not limits:
        return []
    inputs = [point.input for point in limits]
    for side in ([point.lower for point in limits], [point.upper for point in limits]):
        axes.plot(inputs, [value if math.isfinite(value) else math.nan for value in side], zorder=2, **look)
    return [_key(label, **{"linestyle": "-", **look})]


def _scale_errors(axes: Axes, points: Sequence[ErrorPoint], limits: Sequence[LimitPoint]) -> None:
    sizes = [abs(point.error) + (point.uncertainty or 0) for point in points]
    sizes += [abs(side) for point in limits for side in (point.lower, point.upper) if math.isfinite(side)]
    reach = (max(sizes, default=1.0) or 1.0) * 1.22
    axes.set_ylim(-reach, reach)
    inputs = [point.input for point in points] + [limit.input for limit in limits]
    if inputs:
        low, high = min(inputs), max(inputs)
        margin = (high - low or 1.0) * 0.035
        axes.set_xlim(low - margin, high + margin)


def _sign_ticks(axes: Axes) -> None:
    """Errors always carry their sign, on the scale as well."""
    from matplotlib.ticker import FuncFormatter, ScalarFormatter

    plain = axes.yaxis.get_major_formatter()

    def words(value: float, place: int | None) -> str:
        if isinstance(plain, ScalarFormatter):
            plain.set_locs(list(axes.get_yticks()))
        text = plain(value, place)
        return f"+{text}" if value > 0 else text

    axes.yaxis.set_major_formatter(FuncFormatter(words))


# --- drift of a tag -----------------------------------------------------------------------------------------

_EVENT_SHAPES = {
    "swap": ("x", "swapped"),
    "adjustment": ("D", "adjusted"),
    "re-range": ("s", "re-ranged"),
    "other": ("|", "other"),
}


def drift_plot(
    *,
    title: str,
    description: str,
    stretches: Sequence[Sequence[DriftPoint]],
    limits: tuple[float, float] | None = None,
    events: Sequence[DriftEvent] = (),
    band: Sequence[BandPoint] = (),
    due: date | None = None,
    meets: date | None = None,
    unit: str = "% of span",
) -> SafeString:
    """Cumulative drift against time between its limits, with the prediction band and what broke the curve.

    Parameters
    ----------
    title, description : name of the picture and what it shows, in words.
    stretches : unbroken stretches of cumulative drift in `unit`; the curve restarts at each.
    limits : the MPE in `unit`, lower and upper; not finite where there is none on that side, None for no MPE at all.
    events : swaps, adjustments, re-ranges and other interventions, drawn above the curve by shape.
    band : the prediction, in the order of days. due : next due date. meets : day on which the band meets the MPE.

    Notes
    -----
    The curve is joined, never fitted: a straight line through a cumulative sum claims far too much.
    """
    from matplotlib import rc_context

    with rc_context(SETTINGS):
        figure, axes = _figure(3.8)
        figure.subplots_adjust(top=0.86, bottom=0.09)
        sides = [side for side in limits or () if math.isfinite(side)]
        for side in sides:
            axes.axhline(side, color=INK, linewidth=1.8, zorder=2)
        keys = [_key("MPE", linestyle="-", linewidth=1.8)] if sides else []
        keys += _draw_stretches(axes, stretches)
        keys += _draw_band(axes, band)
        _scale_drift(axes, stretches, sides, band, [event.on for event in events], due, meets)
        outer, inner = _heights_for_words(axes, sides, band)
        _draw_day(axes, due, "due", ACTION, outer)
        _draw_day(axes, meets, "band meets MPE", OUTSIDE, inner)
        keys += _draw_events(axes, events)
        axes.set_ylabel(f"Cumulative drift, {unit}")
        _sign_ticks(axes)
        _date_ticks(axes)
        _legend(axes, keys, 1.09)
        return inline(figure, title=title, description=description)


def _days(values: Sequence[date]) -> list[float]:
    from matplotlib.dates import date2num

    return [float(date2num(value)) for value in values]  # type: ignore[no-untyped-call]


def _draw_stretches(axes: Axes, stretches: Sequence[Sequence[DriftPoint]]) -> list[Line2D]:
    drawn = False
    for stretch in stretches:
        if not stretch:
            continue
        drawn = True
        days, drift = _days([point.on for point in stretch]), [point.value for point in stretch]
        axes.plot(days, drift, color=INK, linewidth=1.3, marker="o", markersize=5, zorder=4)
        for day, point in zip(days, stretch, strict=True):
            if point.outside:
                axes.plot(day, point.value, marker="x", markersize=12, markeredgewidth=1.2, color=OUTSIDE, zorder=5)
    return [_key("cumulative drift", linestyle="-", marker="o", markersize=5, linewidth=1.3)] if drawn else []


def _draw_band(axes: Axes, band: Sequence[BandPoint]) -> list[Line2D]:
    if not band:
        return []
    days = _days([point.on for point in band])
    low, high = [point.low for point in band], [point.high for point in band]
    axes.fill_between(days, low, high, color=BAND, linewidth=0, zorder=1)
    for edge in (low, high):
        axes.plot(days, edge, color=RULE, linewidth=0.8, zorder=2)
    axes.plot(days, [point.centre for point in band], color=FAINT, linewidth=1.1, linestyle=(0, (4, 2)), zorder=3)
    return [_key("prediction, 95 %", marker="s", markersize=9, markerfacecolor=BAND, markeredgecolor=RULE)]


def _scale_drift(
    axes: Axes,
    stretches: Sequence[Sequence[DriftPoint]],
    sides: Sequence[float],
    band: Sequence[BandPoint],
    event_days: Sequence[date],
    due: date | None,
    meets: date | None,
) -> None:
    values = [abs(point.value) for stretch in stretches for point in stretch]
    values += [abs(side) for side in sides]
    # A wide band must not press the curve flat: it may run out of the picture.
    most = 2 * max([abs(side) for side in sides] or values, default=0.0) or math.inf
    values += [min(max(abs(point.low), abs(point.high)), most) for point in band]
    reach = max(values, default=0.0) * 1.2 or 1.0
    axes.set_ylim(-reach, reach)
    days = [point.on for stretch in stretches for point in stretch] + [point.on for point in band] + list(event_days)
    days += [day for day in (due, meets) if day is not None]
    if days:
        first, last = _days([min(days), max(days)])
        margin = max((last - first) * 0.03, 20)
        axes.set_xlim(first - margin, last + margin)


def _heights_for_words(axes: Axes, sides: Sequence[float], band: Sequence[BandPoint]) -> tuple[float, float]:
    """Two lines of words on the side that the prediction leaves free, inside the limit or, where it is near, beyond."""
    way = 1.0 if band and band[-1].centre < 0 else -1.0
    reach = axes.get_ylim()[1]
    limit = next((abs(side) for side in sides if side * way > 0.0), 0.0)
    outer, inner = (0.8 * limit, 0.5 * limit) if limit > 0.55 * reach else (0.92 * reach, 0.76 * reach)
    return way * outer, way * inner


def _draw_day(axes: Axes, day: date | None, word: str, colour: str, height: float) -> None:
    """An upright line with its word and date; the words stand at a height in the unit of the drift."""
    if day is None:
        return
    (place,) = _days([day])
    axes.axvline(place, color=colour, linewidth=1.3, zorder=3)
    low, high = axes.get_xlim()
    # Words turn inwards where the line stands near the edge.
    side = "right" if place > low + 0.75 * (high - low) else "left"
    axes.annotate(
        f"{word} {day:%Y-%m-%d}",
        xy=(place, height),
        xytext=(-4 if side == "right" else 4, 0),
        textcoords="offset points",
        ha=side,
        va="center",
        color=colour,
        fontsize=9,
        bbox={"facecolor": PAPER, "edgecolor": "none", "pad": 1.5},
        zorder=6,
    )


def _draw_events(axes: Axes, events: Sequence[DriftEvent]) -> list[Line2D]:
    keys: dict[str, Line2D] = {}
    across = axes.get_xaxis_transform()
    for event in sorted(events, key=lambda item: item.on):
        kind = event.kind if event.kind in _EVENT_SHAPES else "other"
        shape, word = _EVENT_SHAPES[kind]
        (place,) = _days([event.on])
        look: dict[str, Any] = {"marker": shape, "markersize": 6, "linestyle": "none", "markeredgewidth": 1.3}
        look["markerfacecolor"] = INK if kind == "adjustment" else PAPER
        axes.plot(place, 1.05, transform=across, clip_on=False, color=INK, markeredgecolor=INK, zorder=6, **look)
        if kind in {"swap", "re-range"}:
            axes.axvline(place, ymax=1.0, color=RULE, linewidth=0.9, linestyle=(0, (2, 2)), zorder=1)
        keys.setdefault(kind, _key(word, markeredgecolor=INK, **look))
    return list(keys.values())


def _date_ticks(axes: Axes) -> None:
    from matplotlib.dates import AutoDateLocator, ConciseDateFormatter, num2date

    low, high = (num2date(value) for value in axes.get_xlim())  # type: ignore[no-untyped-call]
    locator = AutoDateLocator(minticks=4, maxticks=11)  # type: ignore[no-untyped-call]
    axes.xaxis.set_major_locator(locator)
    if high.year - low.year < 3:
        formats = ["%Y", "%Y-%m", "%m-%d", "%H:%M", "%H:%M", "%H:%M"]
        axes.xaxis.set_major_formatter(ConciseDateFormatter(locator, formats=formats))  # type: ignore[no-untyped-call]
    axes.xaxis_date()
