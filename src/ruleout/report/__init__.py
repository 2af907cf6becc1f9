"""What people look at: the report, the figures for a paper, its table and methods text."""

from ruleout.report.writing import write_report

__all__ = ["write_report"]
