from ruleout.equations import build, describe
from ruleout.expressions import parse
from ruleout.variants import expand

RELAY = """
[node.u]
kind = "input"
[node.x]
kind = "switched"
[node.z]
kind = "expressed"
[edge.ux]
from = "u"
to = "x"
effect = "stimulates"
[edge.xz]
from = "x"
to = "z"
effect = "stimulates"
law = "hill"
[edge.uz]
from = "u"
to = "z"
effect = "stimulates"
law = "saturating"
[edge.zx]
from = "z"
to = "x"
effect = "inhibits"
law = "hill"
"""


def described(case):
    (variant,) = expand(case.mechanism, case.experiments).variants.values()
    return describe(build(variant, case.mechanism, case.experiments))


def test_equations_read_as_in_a_textbook(case_of):
    found = described(case_of(RELAY))
    assert found["text"] == [
        "d[x]/dt = (x.basal + ux.strength * u) * (1 - x) / (1 + (z / zx.half) ** zx.hill)"
        " - x.loss_rate * x",
        "d[z]/dt = z.basal + xz.strength * (x ** xz.hill / (xz.half ** xz.hill + x ** xz.hill))"
        " + uz.strength * (u / (uz.half + u)) - z.loss_rate * z",
    ]
    for line in found["text"]:
        parse(line.partition(" = ")[2])


def test_latex_lines_are_balanced_and_name_the_derivative(case_of):
    for line in described(case_of(RELAY))["latex"]:
        assert line.startswith(r"\frac{\mathrm{d}[\mathrm{")
        assert line.count("{") == line.count("}")
        assert "max" not in line


def test_loops_are_sentences(case_of):
    loops = described(case_of(RELAY))["loops"]
    assert loops[0] == "Negative feedback: x -> z -| x (by xz, zx)."
    assert "Incoherent feed-forward from u to x (by ux, uz, zx)." in loops
    assert "Coherent feed-forward from u to z (by uz, ux, xz)." in loops


def test_a_basal_rate_fixed_at_zero_is_not_printed(case_of):
    found = described(case_of(RELAY + '[prior]\n"z.basal" = 0\n'))
    assert not any("z.basal" in line for line in found["text"])


def test_delay_stages_have_lines_of_their_own(case_of):
    text = RELAY.replace('law = "saturating"', 'law = "saturating"\ndelay = true\nstages = 2')
    found = described(case_of(text))
    assert "d[uz:2]/dt = 2 / uz.delay * (uz:1 - uz:2)" in found["text"]
    assert any("linear chain trick" in sentence for sentence in found["assumptions"])
