"""TOML with line numbers: tomllib reads the values, a light scan finds where they stand."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from ruleout.errors import InputError
from ruleout.files.text import read_text

LARGEST = 2_000_000
DEEPEST = 8
"""Levels of tables that get lines; a case needs five."""
_STRING = re.compile(
    r'"""(?:\\.|[^\\])*?"{3,5}|\'\'\'.*?\'{3,5}|"(?:\\.|[^"\\\n])*"|\'[^\'\n]*\'', re.DOTALL
)
_KEY = re.compile(r"[ \t]*(?:\"((?:\\.|[^\"\\\n])*)\"|'([^'\n]*)'|([A-Za-z0-9_-]+))[ \t]*")
_BLANK = re.compile(r"(?:[ \t\n]|#[^\n]*)+")
_PLAIN = re.compile(r"[^\"'\[\]{}#\n]+")
_ERROR_PLACE = re.compile(r"\s*\(at (?:line (\d+), column \d+|end of document)\)")


def read_toml(path: Path) -> tuple[dict[str, Any], dict[str, int]]:
    """Return the content of a TOML file and the line of each of its dotted fields.

    Raises
    ------
    InputError
        Where the file cannot be read or breaks the rules of TOML.
    """
    text = read_text(path, limit=LARGEST)
    try:
        return tomllib.loads(text), _lines(text)
    except tomllib.TOMLDecodeError as error:
        found = _ERROR_PLACE.search(str(error))
        line = found[1] if found and found[1] else text.count("\n") + 1
        message = _ERROR_PLACE.sub("", str(error))
        raise InputError(
            f"this is not valid TOML: {message[:1].lower()}{message[1:]}", where=f"{path}:{line}"
        ) from error
    except (RecursionError, ValueError) as error:
        raise InputError(
            "this TOML is nested too deeply or holds a number too long to read", where=str(path)
        ) from error


def nearest_line(lines: Mapping[str, int], field: str) -> int | None:
    """Return the line of ``field`` or of the nearest table around it."""
    while field not in lines and "." in field:
        field = field.rpartition(".")[0]
    return lines.get(field)


def place(path: Path | str, lines: Mapping[str, int], field: str) -> str:
    """Return ``path:line: field``, as messages begin."""
    line = nearest_line(lines, field)
    return f"{path}:{line}: {field}" if line else f"{path}: {field}"


def _lines(text: str) -> dict[str, int]:
    """Return the line of every dotted field; a table never opened has that of its first field."""
    lines: dict[str, int] = {}
    for parts, line in _fields(text):
        for depth in range(1, min(len(parts), DEEPEST)):
            lines.setdefault(".".join(parts[:depth]), line)
        lines[".".join(parts)] = line
    return lines


def _fields(text: str) -> Iterator[tuple[tuple[str, ...], int]]:
    """Yield the keys of every field of a valid TOML text with its line, tables included."""
    table: tuple[str, ...] = ()
    at, counted, line = 0, 0, 1
    while at < len(text):
        if blank := _BLANK.match(text, at):
            at = blank.end()
            continue
        line += text.count("\n", counted, at)
        counted = at
        if text[at] == "[":
            at += 2 if text.startswith("[[", at) else 1
            table, at = _dotted(text, at)
            yield table, line
            at = _line_end(text, at)
        else:
            key, at = _dotted(text, at)
            yield table + key, line
            at = _value_end(text, at)


def _dotted(text: str, at: int) -> tuple[tuple[str, ...], int]:
    parts: list[str] = []
    while found := _KEY.match(text, at):
        parts.append(next(group for group in found.groups() if group is not None))
        at = found.end()
        if not text.startswith(".", at):
            break
        at += 1
    return tuple(parts), max(at, 1)


def _line_end(text: str, at: int) -> int:
    end = text.find("\n", at)
    return len(text) if end < 0 else end + 1


def _value_end(text: str, at: int) -> int:
    """Return where the value that follows ends: the first line end outside brackets."""
    depth = 0
    while at < len(text):
        if string := _STRING.match(text, at):
            at = string.end()
            continue
        if plain := _PLAIN.match(text, at):
            at = plain.end()
            continue
        character = text[at]
        if character == "#":
            at = max(_line_end(text, at) - 1, at + 1)
        elif character == "\n" and depth == 0:
            return at + 1
        else:
            depth += (character in "[{") - (character in "]}")
            at += 1
    return at
