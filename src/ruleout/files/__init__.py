"""User files: read as text, located line by line, taken apart field by field."""

from ruleout.files.names import check_label, check_name
from ruleout.files.section import Section, describe
from ruleout.files.text import read_text
from ruleout.files.toml import nearest_line, place, read_toml

__all__ = [
    "Section",
    "check_label",
    "check_name",
    "describe",
    "nearest_line",
    "place",
    "read_text",
    "read_toml",
]
