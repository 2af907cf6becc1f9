"""Every slip in a mechanism.toml is refused in one plain line with its place and a remedy."""

from __future__ import annotations

from pathlib import Path

import pytest

from ruleout.errors import InputError
from ruleout.mechanism import read_mechanism

HEAD = """\
[node.cold]
kind = "input"
[node.sensor]
kind = "switched"
[node.maker]
kind = "expressed"
[node.store]
kind = "pool"
[edge.a]
from = "cold"
to = "sensor"
effect = "stimulates"
contested = true
"""
FIRST = HEAD.count("\n") + 1
COLD = '[edge.e]\nfrom = "cold"\nto = "sensor"\n'

SLIPS = {
    "misspelt top key": ("[nodes.x]\n", 0, "nodes", "did you mean 'node'"),
    "unknown kind": ('[node.x]\nkind = "swiched"', 1, "node.x.kind", "did you mean 'switched'"),
    "no kind": ("[node.x]", 0, "node.x.kind", "'kind' is missing"),
    "misspelt node key": (
        '[node.x]\nkind = "pool"\nstrat = 1', 2, "node.x.strat", "did you mean 'start'",
    ),
    "parameter as node key": (
        '[node.x]\nkind = "expressed"\nloss_rate = 1', 2, "node.x.loss_rate", "[prior]",
    ),
    "start of an input": ('[node.x]\nkind = "input"\nstart = 1', 2, "node.x.start", "resting"),
    "rest of a pool": ('[node.x]\nkind = "pool"\nstart = "rest"', 2, "node.x.start", "pool"),
    "negative start": ('[node.x]\nkind = "pool"\nstart = -1', 2, "node.x.start", "at least 0"),
    "fraction above one": ('[node.x]\nkind = "switched"\nstart = 2', 2, "node.x.start", "0 to 1"),
    "start of nothing known": (
        '[node.x]\nkind = "pool"\nstart = "fre"', 2, "node.x.start", "did you mean 'free'",
    ),
    "resting of a pool": ('[node.x]\nkind = "pool"\nresting = 1', 2, "node.x.resting", "input"),
    "acts_on of a pool": (
        '[node.x]\nkind = "pool"\nacts_on = "linear"', 2, "node.x.acts_on", "switched",
    ),
    "negative basal": ('[node.x]\nkind = "expressed"\nbasal = -1', 2, "node.x.basal", "at least 0"),
    "basal of a pool": ('[node.x]\nkind = "pool"\nbasal = 1', 2, "node.x.basal", "basal gain"),
    "sign of a node": ('[node.x]\nkind = "pool"\ncontested = ["a"]', 2, "node.x.contested", "true"),
    "basal twice": (
        '[node.x]\nkind = "expressed"\nbasal = 1\n[prior]\n"x.basal" = 2',
        4, "prior.x.basal", "keep one",
    ),
    "node called time": ('[node.time]\nkind = "pool"', 0, "node.time", "meaning of its own"),
    "node with a dash": ('[node.a-b]\nkind = "pool"', 0, "node.a-b", "letters"),
    "node starting with a digit": ('[node.1x]\nkind = "pool"', 0, "node.1x", "letters"),
    "node is no table": ("[node]\nx = 3", 1, "node.x", "a table is expected"),
    "edge named as a node": (
        '[edge.store]\nfrom = "store"\neffect = "converts"', 0, "edge.store", "different names",
    ),
    "no effect": (COLD, 0, "edge.e.effect", "'effect' is missing"),
    "unknown effect": (f'{COLD}effect = "activates"', 3, "edge.e.effect", "stimulates, inhibits"),
    "misspelt effect": (f'{COLD}effect = "inhibit"', 3, "edge.e.effect", "did you mean 'inhibits'"),
    "effects as a list": (f'{COLD}effect = ["inhibits"]', 3, "edge.e.effect", "contested = ["),
    "dispute with one option": (f'{COLD}contested = ["inhibits"]', 3, "edge.e.contested", "two"),
    "law in contested": (f'{COLD}contested = ["hill", "linear"]', 3, "edge.e.contested", "law = ["),
    "mixed effects": (
        f'{COLD}contested = ["inhibits", "converts"]', 3, "edge.e.contested", "two edges",
    ),
    "effect beside other options": (
        f'{COLD}effect = "converts"\ncontested = ["inhibits", "absent"]', 3, "edge.e.effect",
        "none of the contested",
    ),
    "contested is text": (f'{COLD}effect = "inhibits"\ncontested = "yes"', 4, "edge.e.contested",
                          "true or false"),
    "unknown law": (
        f'{COLD}effect = "inhibits"\nlaw = "hil"', 4, "edge.e.law", "did you mean 'hill'",
    ),
    "law of another language": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nlaw = "mass_action"', 3, "edge.e.law",
        'law = "linear"',
    ),
    "Michaelis-Menten by name": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nlaw = "michaelis_menten"', 3, "edge.e.law",
        'law = "saturating"',
    ),
    "law twice": (f'{COLD}effect = "inhibits"\nlaw = ["hill", "hill"]', 4, "edge.e.law", "twice"),
    "parameter as edge key": (f'{COLD}effect = "inhibits"\nhalf = 2', 4, "edge.e.half", "[prior]"),
    "misspelt edge key": (
        f'{COLD}effect = "inhibits"\nnecesary = true', 4, "edge.e.necesary",
        "did you mean 'necessary'",
    ),
    "unknown source": (
        '[edge.e]\nfrom = "cld"\nto = "sensor"\neffect = "inhibits"', 1, "edge.e.from",
        "did you mean 'cold'",
    ),
    "unknown target": (
        '[edge.e]\nfrom = "cold"\nto = "sensr"\neffect = "inhibits"', 2, "edge.e.to",
        "did you mean 'sensor'",
    ),
    "edge as a target": (
        '[edge.e]\nfrom = "cold"\nto = "a"\neffect = "inhibits"', 2, "edge.e.to", "onto",
    ),
    "input as a target": (
        '[edge.e]\nfrom = "sensor"\nto = "cold"\neffect = "inhibits"', 2, "edge.e.to", "input",
    ),
    "pool as a target": (
        '[edge.e]\nfrom = "sensor"\nto = "store"\neffect = "inhibits"', 2, "edge.e.to", "onto",
    ),
    "two regulators": (
        '[edge.e]\nfrom = ["cold", "maker"]\nto = "sensor"\neffect = "inhibits"', 1, "edge.e.from",
        "one node",
    ),
    "no regulator": ('[edge.e]\nto = "sensor"\neffect = "inhibits"', 0, "edge.e.from", "one node"),
    "stoichiometry of regulation": (
        '[edge.e]\nfrom = { cold = 2 }\nto = "sensor"\neffect = "inhibits"', 1, "edge.e.from",
        "stoichiometry",
    ),
    "regulator that rests below zero": (
        '[node.x]\nkind = "input"\nresting = -1\n[edge.e]\nfrom = "x"\nto = "sensor"\n'
        'effect = "inhibits"', 4, "edge.e.from", "0 or more",
    ),
    "two of one kind": (
        '[edge.e]\nfrom = ["store", "store"]\neffect = "converts"', 1, "edge.e.from",
        "{ store = 2 }",
    ),
    "a number too long to show": (
        f'[node.x]\nkind = "pool"\nstart = 0x{"f" * 5000}', 2, "node.x.start", "too long",
    ),
    "negative stoichiometry": (
        '[edge.e]\nfrom = { store = -2 }\neffect = "converts"', 1, "edge.e.from.store", "above 0",
    ),
    "necessary and linear": (
        f'{COLD}effect = "stimulates"\nnecessary = true', 4, "edge.e.necessary", "saturating",
    ),
    "necessary inhibition": (
        f'{COLD}effect = "inhibits"\nlaw = "hill"\nnecessary = true', 5, "edge.e.necessary",
        "divides",
    ),
    "rate of regulation": (f'{COLD}effect = "inhibits"\nrate = "k"', 4, "edge.e.rate", "leave"),
    "unknown side": (f'{COLD}effect = "inhibits"\non = "los"', 4, "edge.e.on", "'loss'"),
    "negative delay": (f'{COLD}effect = "inhibits"\ndelay = -1', 4, "edge.e.delay", "above 0"),
    "stages without delay": (f'{COLD}effect = "inhibits"\nstages = 2', 4, "edge.e.stages", "delay"),
    "half a stage": (
        f'{COLD}effect = "inhibits"\ndelay = 1\nstages = 2.5', 5, "edge.e.stages", "whole number",
    ),
    "own acts_on at an expressed node": (
        '[edge.e]\nfrom = "cold"\nto = "maker"\neffect = "stimulates"\nacts_on = "saturating"', 4,
        "edge.e.acts_on", "switched",
    ),
    "material without ends": ('[edge.e]\neffect = "converts"', 1, "edge.e.effect", "'from'"),
    "material in a switched node": (
        '[edge.e]\nfrom = "sensor"\neffect = "converts"', 1, "edge.e.from", "switched",
    ),
    "material into an input": (
        '[edge.e]\nfrom = "store"\nto = "cold"\neffect = "converts"', 2, "edge.e.to", "input",
    ),
    "nothing moves": (
        '[edge.e]\nfrom = "store"\nto = "store"\neffect = "converts"', 2, "edge.e.to", "same",
    ),
    "one-sided reversible": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nreversible = true', 3, "edge.e.reversible",
        "both",
    ),
    "binding one": (
        '[edge.e]\nfrom = "store"\nto = "maker"\neffect = "binds"', 3, "edge.e.effect", "two",
    ),
    "saturating inflow": (
        '[edge.e]\nto = "store"\neffect = "converts"\nlaw = "saturating"', 3, "edge.e.law",
        "inflow",
    ),
    "unknown onto": (
        '[edge.e]\nfrom = "cold"\nonto = "b"\neffect = "inhibits"', 2, "edge.e.onto", "no edge",
    ),
    "onto another parameter": (
        '[edge.e]\nfrom = "cold"\nonto = "a.rate"\neffect = "inhibits"', 2, "edge.e.onto", "half",
    ),
    "onto a missing half": (
        '[edge.e]\nfrom = "cold"\nonto = "a.half"\neffect = "inhibits"', 2, "edge.e.onto",
        "no half",
    ),
    "onto itself": (
        '[edge.e]\nfrom = "cold"\nonto = "e"\neffect = "inhibits"', 2, "edge.e.onto", "e -> e",
    ),
    "onto and to": (
        f'{COLD}onto = "a"\neffect = "inhibits"', 2, "edge.e.to", "leave 'to' out",
    ),
    "rate that is a number": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nrate = 0.1', 3, "edge.e.rate", "[prior]",
    ),
    "rate that divides by zero": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nrate = "k / 0"', 3, "edge.e.rate",
        "division by zero",
    ),
    "rate with a foreign function": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nrate = "abs(k)"', 3, "edge.e.rate",
        "allowed are exp, log",
    ),
    "rate with code": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nrate = "__import__(\'os\').getcwd()"', 3,
        "edge.e.rate", "not allowed",
    ),
    "labelled rate with a slip": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\n[edge.e.rate]\nx = "k"\ny = "k ^ 2"', 5,
        "edge.e.rate.y", "**",
    ),
    "dotted name in a rate": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nrate = "a.k"', 3, "edge.e.rate", "dot",
    ),
    "rate and law": (
        '[edge.e]\nfrom = "store"\neffect = "converts"\nlaw = "hill"\nrate = "k"', 3,
        "edge.e.law", "expression",
    ),
    "contains without order": (
        f'{COLD}effect = "inhibits"\nlaw = ["linear", "hill"]\ncontains = "hill"', 5,
        "edge.e.contains", "larger > smaller",
    ),
    "contains what is no option": (
        f'{COLD}effect = "inhibits"\nlaw = ["linear", "hill"]\ncontains = "hill > saturating"', 5,
        "edge.e.contains", "'saturating' is not one of",
    ),
    "rule with a semicolon": ('[rule."a;b"]\ntogether = ["a", "a=absent"]', 0, "rule.a;b", "';'"),
    "rule without a kind": ("[rule.r]", 0, "rule.r", "exactly one"),
    "rule with two kinds": (
        '[rule.r]\ntogether = ["a", "e"]\nimplies = ["a", "e"]', 0, "rule.r", "exactly one",
    ),
    "rule of one": ('[rule.r]\ntogether = ["a"]', 1, "rule.r.together", "two members"),
    "rule over what is settled": (
        f'{COLD}effect = "inhibits"\n[rule.r]\ntogether = ["a", "e"]', 5, "rule.r.together",
        "not in dispute",
    ),
    "rule with an unknown edge": (
        '[rule.r]\ntogether = ["a", "aa"]', 1, "rule.r.together", "no edge or node",
    ),
    "rule with an unknown option": (
        '[rule.r]\ntogether = ["a=hill", "a"]', 1, "rule.r.together", "no option of 'a'",
    ),
    "claim named as an edge": ('[claim.a]\nany_of = ["a"]', 0, "claim.a", "rename"),
    "claim of nothing": ("[claim.c]\nany_of = []", 1, "claim.c.any_of", "name one"),
    "claim of a loop": ('[claim.c]\nloop = "up"', 1, "claim.c.loop", "negative, positive"),
    "claim without a kind": ('[claim.c]\ntext = "x"', 0, "claim.c", "any_of"),
    "prior low above high": (
        '[prior]\n"sensor.basal" = { low = 2, high = 1 }', 1, "prior.sensor.basal.high", "exclude",
    ),
    "prior from zero in the logarithm": (
        '[prior]\n"sensor.basal" = { low = 0, high = 1 }', 1, "prior.sensor.basal.low", "linear",
    ),
    "prior fold of one": (
        '[prior]\n"sensor.basal" = { median = 1, fold = 1 }', 1, "prior.sensor.basal.fold",
        "above 1",
    ),
    "negative median": (
        '[prior]\n"sensor.basal" = { median = -1, fold = 2 }', 1, "prior.sensor.basal.median",
        "above 0",
    ),
    "prior sd of zero": (
        '[prior]\n"sensor.basal" = { mean = 1, sd = 0 }', 1, "prior.sensor.basal.sd", "above 0",
    ),
    "prior with half a form": (
        '[prior]\n"sensor.basal" = { median = 1 }', 1, "prior.sensor.basal", "a prior is",
    ),
    "prior with a misspelt word": (
        '[prior]\n"sensor.basal" = { meadian = 1, fold = 2 }', 1, "prior.sensor.basal.meadian",
        "did you mean 'median'",
    ),
    "prior that is not finite": (
        '[prior]\n"sensor.basal" = { low = 1, high = inf }', 1, "prior.sensor.basal.high", "finite",
    ),
    "prior that is no number": (
        '[prior]\n"sensor.basal" = { median = nan, fold = 2 }', 1, "prior.sensor.basal.median",
        "finite",
    ),
    "prior that is a list": ('[prior]\n"sensor.basal" = [1, 2]', 1, "prior.sensor.basal", "median"),
    "tie to itself": ('[prior]\n"a.strength" = "a.strength"', 1, "prior.a.strength", "itself"),
    "ties in a circle": (
        '[prior]\n"a.strength" = "sensor.basal"\n"sensor.basal" = "a.strength"', 1,
        "prior.a.strength", "circle",
    ),
    "text that is a number": (
        '[claim.c]\nloop = "positive"\ntext = 3', 2, "claim.c.text", "quotes",
    ),
}  # fmt: skip


def refusal(path: Path) -> str:
    with pytest.raises(InputError) as refused:
        read_mechanism(path)
    message = str(refused.value)
    assert "\n" not in message
    assert len(message.removeprefix(str(path))) < 330
    assert refused.value.exit_status == 2
    return message


@pytest.mark.parametrize("slip", SLIPS)
def test_slip_is_named_with_its_place_and_a_remedy(tmp_path: Path, slip: str) -> None:
    text, line, field, said = SLIPS[slip]
    path = tmp_path / "mechanism.toml"
    path.write_text(HEAD + text, encoding="utf-8")
    message = refusal(path)
    assert message.startswith(f"{path}:{FIRST + line}: {field}: ")
    assert said in message


@pytest.mark.parametrize(
    ("raw", "said"),
    [
        (b"", "the file is empty"),
        (b"  \n\n", "the file is empty"),
        (b"\x89PNG\r\n\0\0", "binary"),
        ("[node.x]\nkind = 'pool'".encode("utf-16"), "UTF-16"),
        (b'title = "\xe4\xf6"\n', ":1: this line is not in UTF-8"),
        (b"\n[node.x\n", ":2: this is not valid TOML"),
        (b"[node.x]\nkind = \n", ":2: this is not valid TOML"),
        (b'[node.x]\nkind = "pool"\nkind = "pool"\n', "this is not valid TOML"),
        (b"a = " + b"[" * 5000 + b"]" * 5000, "nested too deeply"),
        (b"title = 'x'\n", "there is no node"),
        (b"title = '" + b"x" * 3_000_000 + b"'", "at most 2 MB"),
        (b"title = " + b"9" * 5000, "number too long"),
    ],
)
def test_files_that_cannot_be_read(tmp_path: Path, raw: bytes, said: str) -> None:
    path = tmp_path / "mechanism.toml"
    path.write_bytes(raw)
    assert said in refusal(path)


def test_missing_file_and_folder(tmp_path: Path) -> None:
    assert "there is no such file" in refusal(tmp_path / "mechanism.toml")
    assert "this is a folder" in refusal(tmp_path)


def test_too_many_nodes_and_edges(tmp_path: Path) -> None:
    path = tmp_path / "mechanism.toml"
    path.write_text("\n".join(f'[node.n{i}]\nkind = "pool"' for i in range(201)), encoding="utf-8")
    assert "201 nodes; at most 200" in refusal(path)
    edges = "\n".join(f'[edge.e{i}]\nto = "n"\neffect = "converts"' for i in range(1001))
    path.write_text(f'[node.n]\nkind = "pool"\n{edges}', encoding="utf-8")
    assert "1001 edges; at most 1000" in refusal(path)


def test_byte_order_mark_and_windows_line_ends_are_read(tmp_path: Path) -> None:
    path = tmp_path / "mechanism.toml"
    path.write_bytes(b"\xef\xbb\xbf" + HEAD.replace("\n", "\r\n").encode())
    mechanism = read_mechanism(path)
    assert list(mechanism.nodes) == ["cold", "sensor", "maker", "store"]
    assert mechanism.lines["edge.a.effect"] == 12
