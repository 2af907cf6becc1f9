"""Case files: whatever is written into them, they are read or refused in plain words."""

from __future__ import annotations

import tempfile
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from ruleout.case import read_case
from ruleout.errors import InputError
from ruleout.files import Section

FILES = {
    "mechanism.toml": """\
title = "Frost response relay"
time_unit = "min"
[node.cold]
kind = "input"
[node.sensor]
kind = "switched"
start = "rest"
[node.store]
kind = "pool"
start = 1.0
[edge.cold_on_sensor]
from = "cold"
to = "sensor"
effect = "stimulates"
law = ["saturating", "hill"]
contested = true
[edge.drain]
from = { store = 2 }
effect = "converts"
rate = { one = "k * store", two = "k * store ** 2" }
[rule.both]
together = ["cold_on_sensor", "drain=two"]
[claim.cold]
text = "Cold acts"
any_of = ["cold_on_sensor=hill"]
[prior]
"sensor.loss_rate" = { median = 0.2, fold = 10 }
"y.offset" = { mean = 0, sd = 1 }
""",
    "experiments.toml": """\
[readout.y]
of = "sensor + 2 * store"
scale = "free"
offset = "free"
relative_to = { condition = "step", time = 0 }
[condition.step]
input.cold = [[0, 1.0], [15, 0.0]]
change = { "sensor.loss_rate" = 0.1 }
free = ["sensor.loss_rate"]
add.store = [[0, 1.5]]
""",
    "data.csv": "condition,time,readout,value,sd\nstep,0,y,0.1,0.1\nstep,10,y,0.5,\n",
}
SNIPPETS = st.sampled_from(
    ["", "0", "-1", "inf", "nan", "1e400", "true", '""', "[]", "{}", '"hill"', '"x"', "[[0, 1]]",
     '{ a = 1 }', '["a", "a"]', "1979-05-27", '"\\u0000"', '"' + "(" * 99 + '"', "9" * 5000,
     "step", ";", '"']
)  # fmt: skip


def _outcome(files: dict[str, bytes]) -> str:
    """Return the refusal, or an empty string; anything else that is raised fails the test."""
    with tempfile.TemporaryDirectory() as folder:
        for name, content in files.items():
            (Path(folder) / name).write_bytes(content)
        try:
            read_case(folder)
        except InputError as refused:
            return str(refused)
    return ""


def _raw() -> dict[str, bytes]:
    return {name: text.encode() for name, text in FILES.items()}


def test_the_files_mutated_below_are_a_valid_case() -> None:
    assert _outcome(_raw()) == ""


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(sorted(FILES)), st.data())
def test_a_replaced_value_is_read_or_refused_in_one_line(name: str, data: st.DataObject) -> None:
    lines = FILES[name].splitlines()
    i = data.draw(st.integers(0, len(lines) - 1))
    mark = "," if name == "data.csv" else "="
    head, sign, _ = lines[i].rpartition(mark)
    lines[i] = f"{head}{sign} {data.draw(SNIPPETS)}"
    assert "\n" not in _outcome(_raw() | {name: "\n".join(lines).encode()})


@settings(max_examples=200, deadline=None)
@given(st.sampled_from(sorted(FILES)), st.data())
def test_a_line_lost_doubled_or_moved_is_read_or_refused(name: str, data: st.DataObject) -> None:
    lines = FILES[name].splitlines()
    i, j = (data.draw(st.integers(0, len(lines) - 1)) for _ in range(2))
    match data.draw(st.sampled_from(["lost", "doubled", "moved"])):
        case "lost":
            del lines[i]
        case "doubled":
            lines.insert(j, lines[i])
        case _:
            lines.insert(j, lines.pop(i))
    assert "\n" not in _outcome(_raw() | {name: "\n".join(lines).encode()})


@settings(max_examples=200, deadline=None)
@given(st.sampled_from(sorted(FILES)), st.data())
def test_damaged_bytes_are_read_or_refused(name: str, data: st.DataObject) -> None:
    raw = bytearray(_raw()[name])
    for _ in range(data.draw(st.integers(1, 4))):
        raw[data.draw(st.integers(0, len(raw) - 1))] = data.draw(st.integers(0, 255))
    assert "\n" not in _outcome(_raw() | {name: bytes(raw)})


@settings(max_examples=100, deadline=None)
@given(st.sampled_from(sorted(FILES)), st.binary(max_size=300))
def test_any_bytes_are_read_or_refused(name: str, raw: bytes) -> None:
    assert "\n" not in _outcome(_raw() | {name: raw})


KEY = st.from_regex(r"[a-z_]{1,8}", fullmatch=True)
QUOTED = st.text(
    st.characters(codec="ascii", exclude_characters='"\\', min_codepoint=32, max_codepoint=126),
    max_size=8,
)
VALUE = st.sampled_from(
    ["1", "'''a\n[b]\n# c'''", '"""x = "1"\n"""', "[1, # one\n 2]", '"a # b"', "{ u = [1, 2] }",
     "'\"'", '"\\""', "[[0, 1],\n\n [2, 3]]"]
)  # fmt: skip


@settings(deadline=None)
@given(st.lists(st.tuples(KEY, QUOTED, VALUE), min_size=1, max_size=8), st.data())
def test_every_field_is_found_on_its_line(
    fields: list[tuple[str, str, str]], data: st.DataObject
) -> None:
    text, expected = "", {}
    for i, (key, quoted, value) in enumerate(fields):
        if data.draw(st.booleans()):
            text += "# a comment = 1\n\n"
        expected[f"t{i}.{key}"] = text.count("\n") + 1
        text += f"[t{i}.{key}]\n"
        expected[f"t{i}.{key}.{quoted}"] = text.count("\n") + 1
        text += f'"{quoted}" = {value}\n'
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "x.toml"
        path.write_text(text, encoding="utf-8")
        lines = Section.open(path).lines
    assert {field: lines[field] for field in expected} == expected
