"""Charts of the HTML report, drawn from the tables as inline SVG."""

from __future__ import annotations

from collections.abc import Mapping
from html import escape
from typing import Final

import numpy as np
import pandas as pd
from markupsafe import Markup
from numpy.typing import NDArray

from ruleout.report.panels import STEADY, Panel
from ruleout.report.style import COLOURS
from ruleout.report.svg import MARKER_PATHS, polyline, short, ticks
from ruleout.report.tables import records
from ruleout.report.words import number_text

Array = NDArray[np.float64]

WIDTH: Final = 250.0
HEIGHT: Final = 150.0
LEFT: Final = 38.0
RIGHT: Final = 8.0
TOP: Final = 8.0
BOTTOM: Final = 22.0


class _Scale:
    """A linear map from values to pixels."""

    def __init__(self, low: float, high: float, start: float, stop: float) -> None:
        self.low, self.high = low, high if high > low else low + 1.0
        self._start, self._stop = start, stop

    def __call__(self, value: Array | float) -> Array:
        share = (np.asarray(value, float) - self.low) / (self.high - self.low)
        return self._start + share * (self._stop - self._start)


def fit_chart(
    panel: Panel,
    limits: tuple[float, float],
    styles: Mapping[str, tuple[str, str]],
    most_points: int,
) -> Markup:
    """Return the fitted band (5-95 %) over the data of one panel.

    Parameters
    ----------
    panel : Panel
    limits : (low, high)
        Range of values shown.
    styles : mapping of condition to (colour, marker)
    most_points : int
        Points per curve; finer curves are thinned.
    """
    y = _Scale(*limits, HEIGHT - BOTTOM, TOP)
    if panel.condition == STEADY:
        names = list(dict.fromkeys(panel.points["condition"]))
        x = _Scale(-0.6, len(names) - 0.4, LEFT, WIDTH - RIGHT)
        body = _steady_marks(panel, names, x, y, styles)
        bottom = [(float(i), name) for i, name in enumerate(names)] if len(names) <= 4 else []
    else:
        times = np.concatenate([panel.points["time"], panel.curves["time"]]).astype(float)
        x = _Scale(min(0.0, times.min()), times.max(), LEFT, WIDTH - RIGHT)
        colour, marker = styles[panel.condition]
        drawn = [
            _band(curve.sort_values("time"), x, y, colour, most_points)
            for _, curve in panel.curves.groupby("replicate", sort=False)
        ]
        marks = _points(panel.points["time"].to_numpy(float), panel.points, x, y, colour, marker)
        body = "".join(drawn) + marks
        bottom = [(t, f"{t:g}") for t in ticks(x.low, x.high)]
    title = f"{panel.readout}, {panel.condition or 'steady states'}"
    return Markup(
        f'<svg class="chart" viewBox="0 0 {WIDTH:g} {HEIGHT:g}" role="img" '
        f'aria-label="{escape(title)}: fitted band over the data">'
        f"{_axes(x, y, bottom)}{body}</svg>"
    )


def _axes(x: _Scale, y: _Scale, bottom: list[tuple[float, str]]) -> str:
    low = HEIGHT - BOTTOM
    marks = [f'<path class="axis" d="M{LEFT:g} {TOP:g}V{low:g}H{WIDTH - RIGHT:g}"/>']
    for value in ticks(y.low, y.high):
        at = short(float(y(value)))
        marks.append(f'<path class="tick" d="M{LEFT:g} {at}h-3"/>')
        marks.append(f'<text class="left" x="{LEFT - 5:g}" y="{at}">{value:g}</text>')
    for value, label in bottom:
        at = short(float(x(value)))
        marks.append(f'<path class="tick" d="M{at} {low:g}v3"/>')
        marks.append(f'<text class="bottom" x="{at}" y="{low + 12:g}">{escape(label)}</text>')
    return "".join(marks)


def _css_colour(colour: str) -> str:
    return f"c{COLOURS.index(colour)}"


def _band(curve: pd.DataFrame, x: _Scale, y: _Scale, colour: str, most_points: int) -> str:
    keep = np.unique(np.linspace(0, len(curve) - 1, most_points).round().astype(int))
    curve = curve.iloc[keep[: len(curve)]]
    at = x(curve["time"].to_numpy(float))
    low, high, best = (y(curve[k].to_numpy(float)) for k in ("low", "high", "best"))
    good = np.isfinite(low) & np.isfinite(high) & np.isfinite(best)
    if not good.any():
        return ""
    at, low, high, best = at[good], low[good], high[good], best[good]
    beyond = curve["extrapolated"].to_numpy(bool)[good]
    there = np.column_stack([at, high])
    back = np.column_stack([at, low])[::-1]
    css = _css_colour(colour)
    drawn = f'<path class="band {css}" d="{polyline(np.concatenate([there, back]))}Z"/>'
    inner = np.column_stack([at, best])[~beyond]
    outer = np.column_stack([at, best])[beyond | np.append(beyond[1:], False)]
    if len(inner) > 1:
        drawn += f'<path class="line {css}" d="{polyline(inner)}"/>'
    if beyond.any() and len(outer) > 1:
        drawn += f'<path class="line beyond {css}" d="{polyline(outer)}"/>'
    return drawn


def _points(
    x_values: Array, points: pd.DataFrame, x: _Scale, y: _Scale, colour: str, marker: str
) -> str:
    css = _css_colour(colour)
    marks = []
    for at, row in zip(x_values, records(points), strict=True):
        hollow = " hollow" if row["held_out"] or row["censored"] else ""
        where = f"translate({short(float(x(at)))} {short(float(y(row['value'])))})"
        text = f"time {row['time']:g}: {row['value']:.4g}, fitted {row['fitted']:.4g}"
        marks.append(
            f'<path class="point {css}{hollow}" d="{MARKER_PATHS[marker]}" transform="{where}">'
            f"<title>{text}</title></path>"
        )
    return "".join(marks)


def _steady_marks(
    panel: Panel,
    names: list[str],
    x: _Scale,
    y: _Scale,
    styles: Mapping[str, tuple[str, str]],
) -> str:
    marks = []
    half = float(x(0.35) - x(0.0))
    for i, name in enumerate(names):
        colour, marker = styles[name]
        css, centre = _css_colour(colour), float(x(i))
        for row in records(panel.curves[panel.curves["condition"] == name]):
            low, high, best = (float(y(row[k])) for k in ("low", "high", "best"))
            corners = [
                (centre - half, low),
                (centre + half, low),
                (centre + half, high),
                (centre - half, high),
            ]
            marks.append(f'<path class="band {css}" d="{polyline(corners)}Z"/>')
            line = [(centre - half, best), (centre + half, best)]
            marks.append(f'<path class="line {css}" d="{polyline(line)}"/>')
        points = panel.points[panel.points["condition"] == name]
        marks.append(_points(np.full(len(points), float(i)), points, x, y, colour, marker))
    return "".join(marks)


STRIP_WIDTH: Final = 170.0
STRIP_HEIGHT: Final = 34.0


def check_chart(row: Mapping[str, float], draws: Array, fails: bool) -> Markup:
    """Return a statistic against its replicates: histogram or band, and the observed value."""
    draws = draws[np.isfinite(draws)]
    known = [row[k] for k in ("observed", "band_low", "band_high", "replicated_median")]
    values = np.concatenate([draws, [v for v in known if np.isfinite(v)]])
    if not len(values):
        return Markup("")
    room = 0.04 * float(np.ptp(values)) or 1.0
    x = _Scale(float(values.min()) - room, float(values.max()) + room, 2, STRIP_WIDTH - 2)
    base = STRIP_HEIGHT - 4
    body = f'<path class="axis" d="M2 {base:g}H{STRIP_WIDTH - 2:g}"/>'
    if len(draws):
        counts, edges = np.histogram(draws, bins=min(28, max(8, len(draws) // 8)))
        tops = base - counts / counts.max() * (base - 5)
        outline = [(float(x(edges[0])), base)]
        for count_top, left, right in zip(tops, edges[:-1], edges[1:], strict=True):
            outline += [(float(x(left)), count_top), (float(x(right)), count_top)]
        outline.append((float(x(edges[-1])), base))
        body += f'<path class="replicates" d="{polyline(outline)}Z"/>'
    elif np.isfinite(row["band_low"]) and np.isfinite(row["band_high"]):
        low, high = (short(float(x(row[k]))) for k in ("band_low", "band_high"))
        body += f'<path class="replicates wide" d="M{low} {base - 8:g}H{high}"/>'
    if np.isfinite(row["observed"]):
        at = float(x(row["observed"]))
        css = "observed fails" if fails else "observed"
        body += f'<path class="{css}" d="M{short(at)} {base + 2:g}V5"/>'
        body += f'<path class="{css} tip" d="M{short(at - 3)} 1h6l-3 5z"/>'
    label = (
        f"observed {number_text(row['observed'])}, replicates {number_text(row['band_low'])} to "
        f"{number_text(row['band_high'])}"
    )
    return Markup(
        f'<svg class="strip" viewBox="0 0 {STRIP_WIDTH:g} {STRIP_HEIGHT:g}" role="img" '
        f'aria-label="{label}">{body}</svg>'
    )


def marginal_chart(quantiles: pd.DataFrame, *, logarithmic: bool) -> Markup:
    """Return a parameter's posterior (above) against its prior (below).

    Thin lines reach from the 2.5 % to the 97.5 % quantile, thick ones from 25 % to 75 %; the
    median is a tick.
    """
    if quantiles.empty:
        return Markup("")
    levels = quantiles["level"].to_numpy(float)
    order = np.argsort(levels)
    wanted = (0.025, 0.25, 0.5, 0.75, 0.975)
    lines = {}
    for name in ("posterior", "prior"):
        values = quantiles[name].to_numpy(float)[order]
        values = np.log(np.maximum(values, 1e-300)) if logarithmic else values
        lines[name] = np.interp(wanted, levels[order], values)
    every = np.concatenate(list(lines.values()))
    if not np.isfinite(every).all():
        return Markup("")
    room = 0.03 * float(np.ptp(every)) or 1.0
    x = _Scale(float(every.min()) - room, float(every.max()) + room, 2, STRIP_WIDTH - 2)
    body = ""
    for name, y in (("posterior", 7), ("prior", 19)):
        low, quarter, median, three, high = (short(float(v)) for v in x(lines[name]))
        body += (
            f'<path class="{name} thin" d="M{low} {y}H{high}"/>'
            f'<path class="{name} thick" d="M{quarter} {y}H{three}"/>'
            f'<path class="{name} middle" d="M{median} {y - 5}v10"/>'
        )
    return Markup(
        f'<svg class="strip" viewBox="0 0 {STRIP_WIDTH:g} 26" role="img" '
        f'aria-label="posterior above prior">{body}</svg>'
    )
