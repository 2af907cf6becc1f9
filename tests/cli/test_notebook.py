"""How a judgement shows itself in a notebook."""

from __future__ import annotations

from collections.abc import Callable
from types import SimpleNamespace

from ruleout.report.notebook import MOST_ROWS, judgement_html, show_in_notebooks
from ruleout.verdicts.types import Judgement


class Formatter:
    """Keeps what it is told, as a notebook's formatter does."""

    def __init__(self) -> None:
        self.known: dict[tuple[str, str], Callable[[object], str]] = {}

    def for_type_by_name(self, module: str, name: str, show: Callable[[object], str]) -> None:
        self.known[module, name] = show


def test_a_notebook_is_told_how_to_show_a_judgement(frost_judgement: Judgement) -> None:
    formatter = Formatter()
    shell = SimpleNamespace(display_formatter=SimpleNamespace(formatters={"text/html": formatter}))
    assert show_in_notebooks(shell)
    kind = type(frost_judgement)
    shown = formatter.known[kind.__module__, kind.__name__](frost_judgement)
    assert "Of 8 variants, 4 are ruled out and 4 are kept." in shown
    assert shown.count("<tr>") == 9


def test_outside_a_notebook_nothing_happens() -> None:
    assert not show_in_notebooks()


def test_what_comes_from_files_is_escaped_and_hundreds_are_counted(
    judgement_with: Callable[..., Judgement], frost_judgement: Judgement
) -> None:
    table = frost_judgement.variants
    many = table.loc[table.index.repeat(20)].assign(reason="<b>bold</b>")
    shown = judgement_html(judgement_with(variants=many))
    assert "<b>bold</b>" not in shown
    assert f"and {len(many) - MOST_ROWS} more" in shown
