"""The three files of a case, read and held against each other."""

from ruleout.case.read import Case, read_case

__all__ = ["Case", "read_case"]
