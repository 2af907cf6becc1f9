"""Published facts about small networks, each with its source."""

from __future__ import annotations

from dataclasses import replace
from typing import ClassVar

import numpy as np
import pytest

from ruleout.expressions import parse
from ruleout.kernel import System, compile_system
from ruleout.mechanism.types import Fixed, LogUniform
from ruleout.survey.behaviours import Subject
from ruleout.survey.behaviours.adaptation import Adaptation
from ruleout.survey.behaviours.hysteresis import Hysteresis
from ruleout.survey.behaviours.multistability import Multistability
from ruleout.survey.behaviours.oscillation import Oscillation
from ruleout.survey.behaviours.pulse import Pulse
from ruleout.survey.behaviours.resemblance import Resemblance
from ruleout.survey.behaviours.switching import Switch
from ruleout.survey.behaviours.timing import Acceleration, Delay, response_times
from ruleout.survey.enumeration import enumerate_family, label
from ruleout.survey.features import circuit_signs
from ruleout.survey.sampling import parameter_sets
from ruleout.survey.systems import Member
from ruleout.survey.types import Family

U = "input_u"


def subject(equations: dict[str, str], output: str, start=None, ceiling=None, **sets) -> Subject:
    """Return a network given by formulas, with one parameter set for each value in ``sets``."""
    states = tuple(equations)
    sets = {name: np.atleast_1d(np.asarray(v, float)) for name, v in sets.items()}
    count = max(map(len, sets.values()))
    names = tuple(sets)
    system = System(states, names, tuple(parse(text) for text in equations.values()))
    p = np.column_stack([np.broadcast_to(v, count) for v in sets.values()])
    return Subject(
        program=compile_system(system),
        p=p,
        start=np.array(start or [0.0] * len(states), float),
        ceiling=np.broadcast_to(np.asarray(ceiling or 1.0, float), (count, len(states))),
        output=states.index(output),
        source=names.index(U) if U in names else None,
        loss=names.index("loss") if "loss" in names else None,
    )


def cascade(h: float, a: list[float]) -> Subject:
    """x' = a / (1 + z^h) - x, y' = x - y, z' = y - z."""
    equations = {"x": "a / (1 + max(z, 1e-12) ** h) - x", "y": "x - y", "z": "y - z"}
    return subject(equations, "x", start=[1.0, 1.0, 1.0], a=a, h=[h] * len(a))


class TestSecantCondition:
    """Three equal steps under end-product inhibition oscillate only if the gain passes
    sec(pi/3)^3 = 8 (Tyson & Othmer 1978; Thron, Bull. Math. Biol. 53 (1991) 383,
    doi:10.1007/BF02460724); thresholds recomputed from h z^h / (1 + z^h) = 8.
    """

    def test_a_gain_of_eight_or_less_never_oscillates(self):
        score = Oscillation().score(cascade(7.9, [1.0, 3.0, 10.0, 100.0]))
        assert not score.shown.any()
        assert score.judged.all()

    @pytest.mark.parametrize(("h", "critical"), [(10, 5.743492), (9, 11.339289), (12, 3.178389)])
    def test_onset_lies_at_the_critical_rate(self, h, critical):
        score = Oscillation(amplitude=0.01).score(cascade(h, [0.95 * critical, 1.05 * critical]))
        assert score.judged.all()
        assert score.shown.tolist() == [False, True]

    def test_a_slow_spiral_is_no_oscillation(self):
        """At a = 5.6 the eigenvalue is -0.0019 + 1.73i: a swing halves in a hundred periods."""
        score = Oscillation(amplitude=0.01).score(cascade(10, [5.6, 5.9]))
        assert score.shown.tolist() == [False, True]
        assert score.measures["period"][1] == pytest.approx(3.630, abs=0.002)


def test_an_oscillator_of_known_period():
    """Brusselator, A = 1, B = 3: period 7.156920, x from 0.370560 to 3.751738."""
    equations = {"x": "1 + x * x * y - 4 * x * k", "y": "3 * x * k - x * x * y"}
    score = Oscillation().score(subject(equations, "x", start=[1.5, 3.0], k=[1.0]))
    assert score.shown.all()
    # Samples are 1/17 of a period apart at least.
    assert score.measures["period"][0] == pytest.approx(7.156920, rel=1e-3)


class TestToggle:
    """u' = a/(1+v^n) - u and v likewise are bistable iff a > n/(n-1) (n-1)^(-1/n)
    (Cherry & Adler, J. Theor. Biol. 203 (2000) 117, doi:10.1006/jtbi.2000.1068).
    """

    EQUATIONS: ClassVar = {
        "u": "a / (1 + max(v, 1e-12) ** n) - u",
        "v": "a / (1 + max(u, 1e-12) ** n) - v",
    }

    @pytest.mark.parametrize("n", [1.5, 2.0, 3.0, 4.0])
    def test_threshold(self, n):
        critical = n / (n - 1) * (n - 1) ** (-1 / n)
        a = critical * np.array([0.99, 1.01])
        made = subject(self.EQUATIONS, "u", ceiling=[1.2 * critical] * 2, a=a, n=[n, n])
        score = Multistability().score(made)
        assert score.measures["states"].tolist() == [1.0, 2.0]
        assert score.shown.tolist() == [False, True]

    def test_without_cooperativity_never(self):
        a = np.geomspace(1e-2, 1e4, 25)
        made = subject(self.EQUATIONS, "u", ceiling=[1e4, 1e4], a=a, n=np.ones(25))
        assert not Multistability().score(made).shown.any()


class TestResponseTimes:
    """Rosenfeld, Elowitz & Alon 2002, doi:10.1016/S0022-2836(02)00994-4."""

    EXPECTED: ClassVar = {
        1.0: 0.653913,
        10.0: 0.388725,
        100.0: 0.269176,
        1e3: 0.227452,
        1e4: 0.213866,
    }

    def test_negative_autoregulation_is_faster(self):
        """x' = b / (1 + x) - x from zero: t_half / ln 2, closed forms recomputed."""
        b = list(self.EXPECTED)
        made = subject(
            {"x": "input_u * b / (1 + x) - loss * x"}, "x", b=b, loss=[1.0] * 5, **{U: [1.0] * 5}
        )
        score = Acceleration(ratio=0.3).score(made)
        expected = np.array(list(self.EXPECTED.values()))
        # Straight interpolation on 2,000 points: 1e-4.
        np.testing.assert_allclose(score.measures["response_ratio"], expected, rtol=2e-4)
        assert score.shown.tolist() == [False, False, True, True, True]

    def test_simple_regulation_takes_ln_2_over_the_loss_rate(self):
        loss = [0.1, 1.0, 7.0]
        made = subject({"x": "input_u - loss * x"}, "x", loss=loss, **{U: [1.0] * 3})
        times, judged = response_times(made, 0.0, 1.0, 0.1)
        assert judged.all()
        np.testing.assert_allclose(times, np.log(2.0) / np.array(loss), rtol=2e-4)

    def test_positive_autoregulation_is_slower(self):
        made = subject(
            {"x": "input_u * (0.1 + 1.8 * x / (1 + x)) - loss * x"},
            "x",
            loss=[1.0],
            **{U: [1.0]},
        )
        ratio = Acceleration().score(made).measures["response_ratio"]
        assert ratio[0] == pytest.approx(3.933, abs=2e-3)


@pytest.mark.parametrize(("share", "delay"), [(0.2, 0.223144), (0.5, 0.693147), (0.8, 1.609438)])
def test_the_coherent_feed_forward_loop_delays_only_the_rise(share, delay):
    """-ln(1 - K/Y) on the way up, none on the way down (Mangan & Alon 2003,
    doi:10.1073/pnas.2133841100); the AND gate is a Hill law of exponent 200 here.
    """
    gate = f"(max(y, 1e-9) / {share}) ** 200"
    equations = {
        "y": "input_u - y",
        "z": f"input_u * {gate} / (1 + {gate}) - loss * z",
    }
    score = Delay().score(subject(equations, "z", loss=[1.0], **{U: [1.0]}))
    assert score.measures["delay_on"][0] == pytest.approx(delay, abs=0.02)
    assert score.measures["delay_off"][0] == pytest.approx(0.0, abs=0.02)
    assert score.shown.all()


class TestSniffer:
    """R' = k1 S - k2 X R, X' = k3 S - k4 X rests at R = k1 k4 / (k2 k3) for every S
    (Tyson, Chen & Novak, Curr. Opin. Cell Biol. 15 (2003) 221,
    doi:10.1016/S0955-0674(03)00017-6).
    """

    def sniffer(self) -> Subject:
        equations = {"r": "2 * input_u - 2 * x * r", "x": "input_u - k4 * x"}
        return subject(equations, "r", start=[1.0, 1.0], k4=[1.0], **{U: [1.0]})

    @pytest.mark.parametrize(("after", "peak"), [(2.0, 1.4205), (4.0, 2.0290)])
    def test_it_adapts_perfectly_after_a_peak(self, after, peak):
        score = Adaptation(before=1.0, after=after, sensitivity=0.3).score(self.sniffer())
        assert score.measures["precision"][0] > 1e8
        assert score.shown.all()
        sensitivity = (peak - 1.0) / (after - 1.0)
        # The top is read off a parabola through samples a third apart in time.
        assert score.measures["sensitivity"][0] == pytest.approx(sensitivity, rel=0.01)

    def test_it_pulses(self):
        score = Pulse(height=0.4, before=1.0, after=4.0).score(self.sniffer())
        assert score.shown.all()
        assert score.measures["height"][0] == pytest.approx(1.0290, rel=0.01)
        assert score.measures["back"][0] == pytest.approx(1.0, abs=1e-6)


@pytest.mark.parametrize("h", [1.0, 2.0, 4.0, 8.0])
def test_the_effective_hill_coefficient_of_a_hill_law_is_its_exponent(h):
    """ln 81 / ln(EC90/EC10), Goldbeter & Koshland 1981, doi:10.1073/pnas.78.11.6840."""
    made = subject({"x": "1 / (1 + (1 / max(input_u, 1e-9)) ** h) - x"}, "x", h=[h], **{U: [1.0]})
    score = Switch(hill=1.5, low=1e-5, high=1e5, points=61).score(made)
    assert score.measures["hill_coefficient"][0] == pytest.approx(h, rel=2e-3)
    assert score.measures["ec50"][0] == pytest.approx(1.0, rel=2e-3)
    assert score.shown.tolist() == [h > 1.5]


def test_hysteresis_needs_the_fold():
    """x' = s + x^4/(1 + x^4) - l x has one state for every s at l = 1.1, two at l = 0.9 / 0.7.

    With f(x) = l x - x^4/(1 + x^4), two folds exist iff the largest slope of the Hill term
    (5^(5/4) 3^(3/4) / 16 = 1.0654) exceeds l.
    """
    equations = {"x": "0.01 * input_u + max(x, 1e-12) ** 4 / (1 + max(x, 1e-12) ** 4) - l * x"}
    made = subject(equations, "x", l=[1.1, 0.9], **{U: [1.0, 1.0]})
    score = Hysteresis(low=0.1, high=100.0, points=61).score(made)
    assert score.judged.all()
    assert score.shown.tolist() == [False, True]


def gene_family(n: int) -> Family:
    return Family(
        title="",
        style="gene",
        nodes=tuple("xyz"[:n]),
        output=0,
        source="",
        drives=(),
        allowed=(((-1, 0, 1),) * n,) * n,
        must_reach=False,
        starts=(0.1,) * n,
    )


def counts(of: Family, signs: np.ndarray, sets: int) -> tuple[np.ndarray, np.ndarray]:
    """Return how many sets of each network are multistable, and how many oscillate."""
    stable, swinging = np.zeros(len(signs), dtype=int), np.zeros(len(signs), dtype=int)
    for k, s in enumerate(signs):
        member = Member(of, s)
        made = member.subject(parameter_sets(of, member.parameters, sets, "sobol", 1, label(s)))
        stable[k] = Multistability(starts=8).score(made).shown.sum()
        swinging[k] = Oscillation().score(made).shown.sum()
    return stable, swinging


class TestThomasRules:
    """Several stable states need a positive circuit, oscillation needs a negative one
    (Thomas 1981; proofs Snoussi 1998, Gouze 1998, Soule 2003, doi:10.1159/000076100).
    """

    def test_all_two_node_networks(self):
        of = gene_family(2)
        signs = enumerate_family(of)
        plus, minus = circuit_signs(signs)
        stable, swinging = counts(of, signs, 32)
        assert not stable[~plus].any()
        assert not swinging[~minus].any()
        # With this many sets most of the 53 networks with a positive circuit are multistable.
        assert np.count_nonzero(stable[plus]) > 25

    @pytest.mark.parametrize(
        ("networks", "sets"), [(24, 16), pytest.param(400, 128, marks=pytest.mark.slow)]
    )
    def test_a_sample_of_three_node_networks(self, networks, sets):
        of = gene_family(3)
        signs = enumerate_family(of)
        plus, minus = circuit_signs(signs)
        rng = np.random.default_rng(1)
        for without, which in ((~plus, 0), (~minus, 1)):
            some = signs[rng.choice(np.flatnonzero(without), networks, replace=False)]
            assert not counts(of, some, sets)[which].any()

    def test_the_repressilator_oscillates_and_its_positive_twin_does_not(self):
        """Three repressors in a ring (Elowitz & Leibler 2000, doi:10.1038/35002125)."""
        of = replace(gene_family(3), ranges={"hill": LogUniform(3.0, 4.0), "basal": Fixed(30.0)})
        ring = np.array([[0, -1, 0], [0, 0, -1], [-1, 0, 0]], dtype=np.int8)
        twin = np.array([[0, -1, 0], [0, 0, -1], [1, 0, 0]], dtype=np.int8)
        stable, swinging = counts(of, np.array([ring, twin]), 64)
        assert swinging[0] > 0
        assert swinging[1] == 0
        assert stable[0] == 0


def test_data_are_recognised_up_to_a_scale():
    """x' = u - k x from rest at 0, u = 1 until 2, then 0: closed form, times an arbitrary 7."""
    times = np.array([0.5, 1.0, 2.0, 3.0, 5.0])
    rise, fall = 1.0 - np.exp(-times), (1.0 - np.exp(-2.0)) * np.exp(2.0 - times)
    data = 7.0 * np.where(times <= 2.0, rise, fall)
    of = Resemblance(tuple(times), tuple(data), 0.0, ((0.0, 1.0), (2.0, 0.0)), closeness=0.01)
    made = subject({"x": "input_u - k * x"}, "x", k=[1.0, 1.5], **{U: [1.0, 1.0]})
    score = of.score(made)
    assert score.shown.tolist() == [True, False]
    assert score.measures["scale"][0] == pytest.approx(7.0, rel=1e-4)
    assert score.measures["distance"][0] < 1e-4


def test_amounts_below_zero_are_not_judged():
    """x' = u - 2 - x rests at -1, which is no amount: no evidence either way."""
    made = subject({"x": "input_u - 2 - k * x"}, "x", start=[0.1], k=[1.0], **{U: [1.0]})
    for behaviour in (Adaptation(), Pulse(), Switch(), Hysteresis(), Multistability(level=1.0)):
        assert not behaviour.score(made).judged.any()
