"""The range strip: a range drawn inside its measuring head, and pressure drawn against the body rating.

Lists draw fifty of them a page, so a strip is one f-string over fixed geometry; colours, widths of line and
themes are left to the stylesheet by class names.
"""

from __future__ import annotations

from html import escape

from django.utils.safestring import SafeString

WIDTH = 132
HEIGHT = 30
#: Where the lower and upper end of both lines stand, in px; equal in every row so that a column reads as one scale.
LOW_END = 18.0
HIGH_END = 114.0
#: How far outside a value is still drawn where it lies, as a fraction of the line; beyond it stands at the edge
#: with a second chevron.
OVERHANG = 0.15

_LENGTH = HIGH_END - LOW_END
_OPEN = f'<svg class="m strip" role="img" viewBox="0 0 {WIDTH} {HEIGHT}" width="{WIDTH}" height="{HEIGHT}">'
_HEAD = '<path class="hair" d="M18 5v8M114 5v8M18 9H114"/>'
_NO_HEAD = '<path class="gone" d="M18 9H114"/>'
_RATING = '<path class="hair" d="M18 20v6M114 20v6M18 23H114"/>'
_NO_RATING = '<path class="gone" d="M18 23H114"/>'
#: Slack of a comparison with an end of the line: arithmetic noise is not a finding.
_SLACK = 1e-9


def fraction(value: float | None, low: float | None, high: float | None) -> float | None:
    """Place of a value between two ends, 0 at `low` and 1 at `high`; None where it cannot be said.

    Parameters: value, low, high in one unit. Returns: a fraction, outside 0…1 where the value lies outside.
    """
    if value is None or low is None or high is None or low == high:
        return None
    return (value - low) / (high - low)


def _place(share: float) -> float:
    return LOW_END + _LENGTH * min(max(share, -OVERHANG), 1 + OVERHANG)


def _hatch(start: float, end: float, top: float, height: float) -> str:
    """Slanted strokes between two x positions [px], drawn as plain segments so that print and export keep them."""
    low, high = (start, end) if start <= end else (end, start)
    more = f"m1 {height:g}l2-{height:g}" * (round((high - low) / 3) - 1)
    return f'<path class="hatch" d="M{low + 0.5:.1f} {top + height:g}l2-{height:g}{more}"/>'


def _bar(lrv: float, urv: float) -> str:
    """The range as a bar with its arrow head at URV; only what lies inside the head is drawn solid."""
    low, high = (lrv, urv) if lrv <= urv else (urv, lrv)
    if low >= -_SLACK and high <= 1 + _SLACK:
        return _solid(LOW_END + _LENGTH * lrv, LOW_END + _LENGTH * urv)
    a, b = _place(lrv), _place(urv)
    inner_a, inner_b = min(max(a, LOW_END), HIGH_END), min(max(b, LOW_END), HIGH_END)
    way = 1 if urv >= lrv else -1
    parts = []
    if -_SLACK <= urv <= 1 + _SLACK:
        parts.append(_solid(inner_a, inner_b))
    else:
        if inner_a != inner_b:
            parts.append(f'<path class="bar" d="M{inner_a:.1f} 6.5H{inner_b:.1f}V11.5H{inner_a:.1f}z"/>')
        parts.append(f'<path class="bad" d="M{b - way * 4:.1f} 4.5l{way * 4} 4.5l{-way * 4} 4.5"/>')
    for start, end in ((low, min(high, 0.0)), (max(low, 1.0), high)):
        if end - start > _SLACK:
            parts.append(_hatch(_place(start), _place(end), 5.5, 7))
    for share in (lrv, urv):
        if not -OVERHANG <= share <= 1 + OVERHANG:
            out = 1 if share > 1 else -1
            parts.append(f'<path class="bad" d="M{_place(share):.1f} 6l{out * 3} 3l{-out * 3} 3"/>')
    return "".join(parts)


def _solid(start: float, tip: float) -> str:
    neck = max(tip - 5, start) if tip >= start else min(tip + 5, start)
    return f'<path class="bar" d="M{start:.1f} 6.5H{neck:.1f}V4.5L{tip:.1f} 9L{neck:.1f} 13.5V11.5H{start:.1f}z"/>'


def _pressures(operating: float | None, design: float | None) -> str:
    """Operating pressure as a dot, design pressure as a tick, beyond the rating hatched."""
    drawn = ""
    worst = max(operating or 0.0, design or 0.0)
    if worst > 1 + _SLACK:
        drawn = _hatch(HIGH_END, _place(worst), 20, 6)
        if worst > 1 + OVERHANG:
            drawn += f'<path class="bad" d="M{_place(worst):.1f} 20l3 3l-3 3"/>'
    if design is not None:
        kind = "tick bad" if design > 1 + _SLACK else "tick"
        drawn += f'<path class="{kind}" d="M{_place(design):.1f} 18.5v9"/>'
    if operating is not None:
        kind = "dot bad" if operating > 1 + _SLACK else "dot"
        drawn += f'<circle class="{kind}" cx="{_place(operating):.1f}" cy="23" r="2.5"/>'
    return drawn


def range_strip(
    lrv: float | None,
    urv: float | None,
    least_span: float | None,
    operating: float | None,
    design: float | None,
    words: str,
    *,
    head: bool = True,
    rated: bool = True,
) -> SafeString:
    """Draw a range inside its measuring head and the pressures against the body rating.

    Parameters
    ----------
    lrv, urv : range-values as fractions of the head, 0 at LRL and 1 at URL; None where no range is set.
    least_span : least span as a fraction of URL − LRL; None where unknown.
    operating, design : pressures as fractions of the body rating at the process temperature; None where unknown.
    words : the same said in words; the title of the picture.
    head, rated : False draws that line broken, because its limits are not known.

    Returns
    -------
    One inline SVG, ready for a template.

    Notes
    -----
    Where the head is unknown there is nothing to draw the range against, so the bar is left out.
    """
    body = _HEAD if head else _NO_HEAD
    if lrv is not None and urv is not None and head:
        body += _bar(lrv, urv)
        if least_span is not None:
            end = _place(lrv + least_span if urv >= lrv else lrv - least_span)
            if abs(urv - lrv) < least_span - _SLACK:
                body += f'<path class="tick bad" d="M{_place(urv):.1f} 14.5H{end:.1f}M{end:.1f} 12v4"/>'
            else:
                body += f'<path class="tick" d="M{end:.1f} 12.5v3.5"/>'
    body += _RATING + _pressures(operating, design) if rated else _NO_RATING
    return SafeString(f"{_OPEN}<title>{escape(words)}</title>{body}</svg>")
