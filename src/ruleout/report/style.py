"""Colours, sizes and marks, the same in every figure.

The palette is our own: eight colours of distinct lightness that stay apart under the common kinds
of colour blindness, tested so in the tests. Nothing is told by colour alone: conditions also have
their own marker, verdicts their own sign.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any, Final

COLUMN: Final = 89.0
"""Width of a figure in one column of a journal, in millimetres."""
PAGE: Final = 183.0
MM: Final = 1 / 25.4

COLOURS: Final = (
    "#1f5fa8",
    "#d1622b",
    "#3a9d8f",
    "#7b4b94",
    "#c79a1e",
    "#6d7680",
    "#b23a5e",
    "#57a0d6",
)
MARKERS: Final = ("o", "s", "^", "D", "v", "P", "X", "*")
VERDICT_COLOURS: Final[Mapping[str, str]] = {
    "kept": "#1f5fa8",
    "ruled_out": "#a8331f",
    "not_judged": "#6d7680",
}
VERDICT_SIGNS: Final[Mapping[str, str]] = {"kept": "●", "ruled_out": "✕", "not_judged": "?"}
INK: Final = "#22272e"
FAINT: Final = "#b4bac1"
CONTESTED: Final = "#b5460f"
NODE_FILL: Final = "#eef1f5"

_FONTS: Final = ("Arial", "Helvetica", "Liberation Sans", "DejaVu Sans")


def condition_styles(conditions: Iterable[str]) -> dict[str, tuple[str, str]]:
    """Return colour and marker of each condition, by its place in the file."""
    n, m = len(COLOURS), len(MARKERS)
    return {c: (COLOURS[i % n], MARKERS[(i + i // n) % m]) for i, c in enumerate(conditions)}


def settings() -> dict[str, Any]:
    """Return the matplotlib settings of all figures."""
    from matplotlib import font_manager

    installed = set(font_manager.get_font_names())
    return {
        "font.family": [f for f in _FONTS if f in installed],
        "font.size": 7.0,
        "axes.labelsize": 7.0,
        "axes.titlesize": 7.0,
        "xtick.labelsize": 6.0,
        "ytick.labelsize": 6.0,
        "legend.fontsize": 6.0,
        "axes.linewidth": 0.6,
        "xtick.major.width": 0.6,
        "ytick.major.width": 0.6,
        "xtick.major.size": 2.5,
        "ytick.major.size": 2.5,
        "axes.spines.top": False,
        "axes.spines.right": False,
        "axes.edgecolor": INK,
        "text.color": INK,
        "axes.labelcolor": INK,
        "xtick.color": INK,
        "ytick.color": INK,
        "lines.linewidth": 1.0,
        "legend.frameon": False,
        "svg.fonttype": "none",
        "svg.hashsalt": "ruleout",
        "pdf.fonttype": 42,
        "savefig.dpi": 300,
        "figure.dpi": 100,
        "mathtext.default": "regular",
    }


@contextmanager
def figure_style(extra: Path | None = None) -> Iterator[None]:
    """Draw with these settings, and with those of the style file ``extra`` over them."""
    import matplotlib as mpl

    from ruleout.errors import InputError

    with mpl.rc_context(settings()):
        if extra is not None:
            try:
                mpl.rcParams.update(mpl.rc_params_from_file(extra, use_default_template=False))
            except (OSError, KeyError, ValueError) as error:
                raise InputError(
                    f"not a matplotlib style file: {error}", where=str(extra)
                ) from error
        yield
