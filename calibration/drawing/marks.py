"""The marks of a test: error between its limits, a due date on a line of time, drift inside the tolerance.

Plain f-strings over fixed geometry; what a mark looks like is left to the stylesheet by class names.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from datetime import date
from html import escape

from django.utils.safestring import SafeString

#: Errors beyond this many limits stand at the edge, with an arrow for a dot.
CLIP = 1.5
#: The verdict allows |e| ≤ limit + 1e-9 % of span, a share of 1e-7 of a limit of 0.01 %: the mark must not
#: contradict it.
SLACK = 1e-7


def _wrap(kind: str, width: int, height: int, words: str, body: str) -> SafeString:
    return SafeString(
        f'<svg class="m {kind}" role="img" viewBox="0 0 {width} {height}" width="{width}" height="{height}">'
        f"<title>{escape(words)}</title>{body}</svg>"
    )


def _hatch(start: float, end: float, foot: float, height: float) -> str:
    """Slanted strokes between two x positions [px], drawn as plain segments so that print and export keep them."""
    low, high = (start, end) if start <= end else (end, start)
    more = f"m0 {height:g}l3-{height:g}" * (round((high - low) / 3) - 1)
    return f'<path class="hatch" d="M{low:.1f} {foot:g}l3-{height:g}{more}"/>'


def _is_outside(error: float) -> bool:
    return abs(error) > 1 + SLACK


# --- error ------------------------------------------------------------------------------------------------

_MIDDLE = 60.0
_PER_LIMIT = 38.0


def _error_place(error: float) -> float:
    return _MIDDLE + _PER_LIMIT * min(max(error, -CLIP), CLIP)


def _error_dot(error: float, kind: str, radius: float) -> str:
    x = _error_place(error)
    bad = " bad" if _is_outside(error) else ""
    if abs(error) > CLIP:
        way = 1 if error > 0 else -1
        long = way * radius * 1.6
        return f'<path class="dot {kind}{bad}" d="M{x - long:.1f} {12 - radius:g}v{2 * radius:g}L{x:.1f} 12z"/>'
    return f'<circle class="dot {kind}{bad}" cx="{x:.1f}" cy="12" r="{radius:g}"/>'


def error_mark(found: float | None, left: float | None, words: str, *, guard: float | None = None) -> SafeString:
    """Draw the worst errors of a test between its limits: as-found hollow, as-left filled.

    Parameters
    ----------
    found, left : worst signed error of the run divided by the MPE (1 is at the limit); None where there is none.
    words : the same said in words; the title of the picture.
    guard : acceptance limit divided by the MPE, where a guard band applies.
    """
    body = '<path class="hair" d="M3 12H117M60 9.5v5"/><path class="limit" d="M22 3v18M98 3v18"/>'
    if guard is not None:
        inner = _PER_LIMIT * guard
        body += f'<path class="inner" d="M{_MIDDLE - inner:.1f} 5v14M{_MIDDLE + inner:.1f} 5v14"/>'
    shown = [error for error in (found, left) if error is not None and _is_outside(error)]
    body += "".join(_hatch(_error_place(error / abs(error)), _error_place(error), 15, 6) for error in shown)
    if found is not None:
        body += _error_dot(found, "hollow", 4.5)
    if left is not None:
        body += _error_dot(left, "full", 2.8)
    return _wrap("error", 120, 24, words, body)


def error_bar(error: float | None, words: str, *, guard: float | None = None, up: bool | None = None) -> SafeString:
    """Draw one reading's error as a bar grown from the middle of its limits, in the width that the page gives it.

    Parameters
    ----------
    error : signed error divided by the limit that applies to the run; None draws the empty scale.
    words : the same said in words; the title of the picture.
    guard : acceptance limit divided by that limit, where a guard band applies.
    up : True ends the bar in ▲, False in ▼ (direction of the input), None in a dot.

    Notes
    -----
    Places are given in percent, so the lines keep their thickness at any width.
    """
    scale = 100 / (2 * CLIP)

    def place(share: float) -> str:
        return f"{50 + scale * min(max(share, -CLIP), CLIP):.2f}%"

    body = '<line class="hair" x1="0" x2="100%" y1="14" y2="14"/>'
    body += '<line class="hair" x1="50%" x2="50%" y1="9" y2="19"/>'
    for limit in (-1.0, 1.0):
        body += f'<line class="limit" x1="{place(limit)}" x2="{place(limit)}" y1="2" y2="26"/>'
    if guard is not None:
        for limit in (-guard, guard):
            body += f'<line class="inner" x1="{place(limit)}" x2="{place(limit)}" y1="5" y2="23"/>'
    if error is not None:
        bad = " bad" if _is_outside(error) else ""
        within = min(max(error, -1.0), 1.0)
        start = place(min(within, 0.0))
        body += f'<rect class="grow{bad}" x="{start}" y="10.5" width="{scale * abs(within):.2f}%" height="7"/>'
        if bad:
            body += _fluid_hatch(error, scale)
        body += _bar_end(error, place(error), bad, up)
    return SafeString(
        f'<svg class="m live" role="img" width="100%" height="28"><title>{escape(words)}</title>{body}</svg>'
    )


def _fluid_hatch(error: float, scale: float) -> str:
    way = 1 if error > 0 else -1
    reach = scale * (min(abs(error), CLIP) - 1)
    count = max(1, round(reach / 1.4))
    strokes = (50 + way * (scale + reach * (i + 0.5) / count) for i in range(count))
    return "".join(f'<line class="hatch" x1="{x - 0.4:.2f}%" x2="{x + 0.4:.2f}%" y1="18.5" y2="9.5"/>' for x in strokes)


def _bar_end(error: float, place: str, bad: str, up: bool | None) -> str:
    if abs(error) > CLIP:
        shape = "M-11 7v14L0 14z" if error > 0 else "M11 7v14L0 14z"
    elif up is None:
        return f'<circle class="sign{bad}" cx="{place}" cy="14" r="5"/>'
    else:
        shape = "M0 6L6.5 20H-6.5z" if up else "M0 22L6.5 8H-6.5z"
    return f'<svg x="{place}" overflow="visible"><path class="sign{bad}" d="{shape}"/></svg>'


# --- due --------------------------------------------------------------------------------------------------

DUE_WIDTH = 150
#: Days drawn before and after today: the scale is the same in every row, so today makes one upright line down a column.
DAYS_BACK = 400
DAYS_AHEAD = 230
TODAY_PLACE = DUE_WIDTH * DAYS_BACK / (DAYS_BACK + DAYS_AHEAD)


def _due_place(day: date, today: date) -> float:
    days = min(max((day - today).days, -DAYS_BACK), DAYS_AHEAD)
    return (days + DAYS_BACK) * DUE_WIDTH / (DAYS_BACK + DAYS_AHEAD)


def _is_drawn(day: date, today: date) -> bool:
    return -DAYS_BACK <= (day - today).days <= DAYS_AHEAD


def _edge(day: date, today: date, kind: str) -> str:
    """A chevron at the edge: it lies further off than the scale shows."""
    if day < today:
        return f'<path class="{kind}" d="M4.5 12L1 16L4.5 20"/>'
    return f'<path class="{kind}" d="M{DUE_WIDTH - 4.5} 12L{DUE_WIDTH - 1} 16L{DUE_WIDTH - 4.5} 20"/>'


def due_mark(
    today: date,
    *,
    last: date | None,
    due: date | None,
    limit: date | None,
    words: str,
    deferred: date | None = None,
) -> SafeString:
    """Draw the last test, the due date, the end of grace and today on a short line of time.

    Parameters
    ----------
    today : the plant's local day.
    last : day of the last accepted test. due : due date. limit : end of grace, not before due.
    words : the same said in words; the title of the picture.
    deferred : day until which the test is deferred.

    Notes
    -----
    Lateness is a length: due to today in grace, end of grace to today (hatched) when overdue. The scale is fixed
    about today; what lies beyond it is a chevron at the edge.
    """
    parts = []
    if due is None:
        parts.append(f'<path class="gone" d="M0 16H{DUE_WIDTH}"/>')
    else:
        d = _due_place(due, today)
        line = "gone" if last is None else "hair"
        parts.append(f'<path class="{line}" d="M{0 if last is None else _due_place(last, today):.1f} 16H{d:.1f}"/>')
        parts.append(_lateness(today, due, limit or due, deferred))
        if limit is not None and limit > due:
            end = _due_place(limit, today)
            parts.append(f'<path class="hair" d="M{d:.1f} 14.5H{end:.1f}M{d:.1f} 17.5H{end:.1f}"/>')
            if _is_drawn(limit, today):
                parts.append(f'<path class="tick" d="M{end:.1f} 12v8"/>')
        kind = "bad" if (limit or due) < today else ""
        parts.append(f'<path class="limit" d="M{d:.1f} 9v14"/>' if _is_drawn(due, today) else _edge(due, today, kind))
        if deferred is not None:
            parts.append(f'<path class="tick" d="M{d:.1f} 7.5V4.5H{_due_place(deferred, today):.1f}V7.5"/>')
    if last is not None:
        if _is_drawn(last, today):
            parts.append(f'<circle class="dot" cx="{_due_place(last, today):.1f}" cy="16" r="3"/>')
        else:
            parts.append(_edge(last, today, ""))
    parts.append(f'<path class="today" d="M{TODAY_PLACE:.1f} 1v26"/>')
    return _wrap("due", DUE_WIDTH, 28, words, "".join(parts))


def _lateness(today: date, due: date, limit: date, deferred: date | None) -> str:
    if today <= due or (deferred is not None and today <= deferred):
        return ""
    d, end, now = _due_place(due, today), _due_place(limit, today), _due_place(today, today)
    drawn = f'<path class="late" d="M{d:.1f} 16H{min(end, now):.1f}"/>' if end > d else ""
    if today > limit:
        drawn += f'{_hatch(end, now, 19.5, 7)}<path class="overdue" d="M{end:.1f} 16H{now:.1f}"/>'
    return drawn


# --- drift ------------------------------------------------------------------------------------------------

_DRIFT_CLIP = 1.35


def _drift_x(time: float) -> float:
    return 4 + 124 * time


def _drift_y(share: float) -> float:
    return 14 - 9 * min(max(share, -_DRIFT_CLIP), _DRIFT_CLIP)


def drift_mark(
    stretches: Iterable[Sequence[tuple[float, float]]],
    words: str,
    *,
    band: Sequence[tuple[float, float, float]] = (),
) -> SafeString:
    """Draw cumulative drift inside the tolerance, with the prediction to the next due date in a lighter tone.

    Parameters
    ----------
    stretches : unbroken stretches of (time, drift): time 0…1 over the width, drift divided by the MPE.
    words : the same said in words; the title of the picture.
    band : the prediction as (time, low, high), drift divided by the MPE.

    Notes
    -----
    The curve restarts at each stretch, because a broken pair says nothing about the step between two tests.
    """
    parts = [
        f'<path class="inner" d="M4 14H128"/><path class="limit" d="M4 {_drift_y(1):g}H128M4 {_drift_y(-1):g}H128"/>'
    ]
    if band:
        upper = "L".join(f"{_drift_x(time):.1f} {_drift_y(high):.1f}" for time, _, high in band)
        lower = "L".join(f"{_drift_x(time):.1f} {_drift_y(low):.1f}" for time, low, _ in reversed(band))
        parts.append(f'<path class="band" d="M{upper}L{lower}z"/>')
    last = None
    for stretch in stretches:
        if len(stretch) > 1:
            points = "L".join(f"{_drift_x(time):.1f} {_drift_y(share):.1f}" for time, share in stretch)
            parts.append(f'<path class="thread" d="M{points}"/>')
        for time, share in stretch:
            if _is_outside(share):
                x, y = _drift_x(time), _drift_y(share)
                parts.append(f'<path class="bad thread" d="M{x - 2.5:.1f} {y - 2.5:.1f}l5 5m0-5l-5 5"/>')
            last = (time, share)
    if last is not None and not _is_outside(last[1]):
        parts.append(f'<circle class="dot" cx="{_drift_x(last[0]):.1f}" cy="{_drift_y(last[1]):.1f}" r="2.4"/>')
    return _wrap("drift", 132, 28, words, "".join(parts))
