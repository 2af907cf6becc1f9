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

from ruleout.errors import InputError

COLUMN: Final = 89.0
"""Width of a figure in one column of a journal, in millimetres."""
PAGE: Final = 183.0
MM: Final = 1 / 25.4

COLOURS: Final = (
    "#1956aa",
    "#d1622b",
    "#2f9987",
    "#451a51",
    "#edaf2c",
    "#65648f",
    "#9c1f45",
    "#7fbbe8",
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


def _read_style(path: Path) -> dict[str, Any]:
    """Read a style file strictly: matplotlib itself only warns of what it cannot use."""
    import matplotlib as mpl

    try:
        lines = path.read_text(encoding="utf-8").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise InputError(f"this style file cannot be read: {error}", where=str(path)) from error
    given: dict[str, Any] = {}
    for number, line in enumerate(lines, 1):
        key, _, value = line.partition(":")
        if not key.strip() or key.lstrip().startswith("#"):
            continue
        try:
            given.update(mpl.RcParams({key.strip(): value.split(" #")[0].strip()}))
        except (KeyError, ValueError) as error:
            reason = str(error).strip("'\"").splitlines()[0]
            raise InputError(
                f"not a line of a matplotlib style file: {reason}", where=f"{path}:{number}"
            ) from error
    return given


@contextmanager
def figure_style(extra: Path | None = None) -> Iterator[None]:
    """Draw with these settings, and with those of the style file ``extra`` over them."""
    import matplotlib as mpl

    with mpl.rc_context(settings()):
        if extra is not None:
            mpl.rcParams.update(_read_style(extra))
        yield
