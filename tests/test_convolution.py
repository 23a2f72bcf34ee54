"""The exact law of a sum: against rational arithmetic, 40-digit quadrature, scipy's laws and published intervals."""

from __future__ import annotations

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from stagesum_server.engine import laws
from stagesum_server.engine.characteristic import Term, Transform
from stagesum_server.engine.convolution import NoExactLawError, sum_law
from stagesum_server.engine.sum_law import SeriesLaw

UNIFORM = laws.Uniform(0.0, 1.0)
LAWS = {
    "uniform": (laws.Uniform(-1.0, 2.0), stats.uniform(-1, 3)),
    "triangular": (laws.Triangular(-1.0, 2.0, 1.4), stats.triang(0.8, -1, 3)),
    "trapezoidal": (laws.Trapezoidal(-1.0, 2.0, 0.4), stats.trapezoid(0.3, 0.7, -1, 3)),
    "arcsine": (laws.Arcsine(-1.0, 2.0), stats.arcsine(-1, 3)),
    "cut normal": (laws.TruncatedNormal(0.2, 0.5, -1.0, 2.0), stats.truncnorm(-2.4, 3.6, 0.2, 0.5)),
    "normal cut far out": (laws.TruncatedNormal(0.0, 0.1, -1.0, 2.0), stats.truncnorm(-10, 20, 0, 0.1)),
    "normal cut on one side": (laws.TruncatedNormal(-3.0, 1.0, -1.0, 2.0), stats.truncnorm(2, 5, -3, 1)),
    "nearly flat normal": (laws.TruncatedNormal(0.0, 300.0, -1.0, 2.0), stats.truncnorm(-1 / 300, 2 / 300, 0, 300)),
    "normal": (laws.Normal(0.2, 0.5, -1.0, 2.0), stats.norm(0.2, 0.5)),
    "student t": (laws.StudentT(0.2, 0.5, 5.0, -1.0, 2.0), stats.t(5, 0.2, 0.5)),
}


def irwin_hall(n: int, x: Fraction) -> Fraction:
    """P(sum of n uniform values on [0, 1] > x), exactly (Johnson, Kotz, Balakrishnan 2, 26.9)."""
    y = n - x
    return sum(
        (Fraction((-1) ** k * math.comb(n, k)) * (y - k) ** n for k in range(math.floor(y) + 1)), Fraction(0)
    ) / math.factorial(n)


@pytest.mark.parametrize("n", [1, 2, 3, 4, 12, 30])
def test_sums_of_uniform_laws_are_exact(n):
    """Absolute 1e-13 over the range against rational arithmetic."""
    law = sum_law([Term(1.0, UNIFORM)] * n)
    places = [Fraction(n) * Fraction(k, 16) for k in range(1, 16)]
    found = law.sf(np.array([float(x) for x in places]))
    assert found == pytest.approx([float(irwin_hall(n, x)) for x in places], abs=1e-13)


@pytest.mark.parametrize(("n", "x"), [(12, "9.5"), (12, "10.9"), (30, "21"), (30, "23.5"), (30, "25.25"), (4, "3.95")])
def test_tails_of_sums_of_uniform_laws_keep_their_relative_accuracy(n, x):
    """From 1e-4 down to 4e-15: relative 1e-10, both tails."""
    exact = float(irwin_hall(n, Fraction(x)))
    law = sum_law([Term(1.0, UNIFORM)] * n)
    assert law.sf(np.array([float(Fraction(x))]))[0] == pytest.approx(exact, rel=1e-10)
    assert law.cdf(np.array([float(n - Fraction(x))]))[0] == pytest.approx(exact, rel=1e-10)


MIXED = (
    [Term(0.3 + 0.05 * i, laws.TruncatedNormal(0.0, 1.0, -3.0, 3.0)) for i in range(6)]
    + [Term(0.5 + 0.1 * i, laws.Uniform(-1.0, 1.0)) for i in range(4)]
    + [Term(0.4, laws.Triangular(-1.0, 1.0, 0.0)), Term(-0.6, laws.Triangular(-1.0, 1.0, 0.5))]
    + [
        Term(0.7, laws.Arcsine(-1.0, 1.0)),
        Term(0.25, laws.TwoPoint(-1.0, 1.0, 0.3)),
        Term(0.3, laws.Trapezoidal(-1.0, 1.0, 0.5)),
    ]
)


def mixed_transform(z):
    """Moment generating function of MIXED at 40 digits, each law from its textbook formula."""
    m = mpmath.mpf
    product = m(1)
    for term in MIXED:
        y, law = z * m(term.coefficient), term.law
        match law:
            case laws.TruncatedNormal():
                root = mpmath.sqrt(2)
                spread = mpmath.erf((3 - y) / root) + mpmath.erf((3 + y) / root)
                product *= mpmath.exp(y * y / 2) * spread / (2 * mpmath.erf(3 / root))
            case laws.Uniform():
                product *= mpmath.sinh(y) / y
            case laws.Triangular():
                c = m(law.mode)
                ends = (1 - c) * mpmath.exp(-y) - 2 * mpmath.exp(c * y) + (1 + c) * mpmath.exp(y)
                product *= ends / ((1 - c * c) * y * y)
            case laws.Arcsine():
                product *= mpmath.besseli(0, y)
            case laws.TwoPoint():
                product *= m("0.7") * mpmath.exp(-y) + m("0.3") * mpmath.exp(y)
            case laws.Trapezoidal():
                product *= mpmath.sinh(y * m("0.75")) / (y * m("0.75")) * mpmath.sinh(y * m("0.25")) / (y * m("0.25"))
    return product


def mixed_tail(x: float) -> float:
    """P(MIXED > x) at 40 digits: inverse Laplace integral along a vertical line, by the trapezoidal rule."""
    with mpmath.workdps(40):
        theta, step = mpmath.mpf(x) / 3, mpmath.mpf(1) / 10
        total = mixed_transform(theta) * mpmath.exp(-theta * x) / theta / 2
        for k in range(1, 900):
            z = mpmath.mpc(theta, k * step)
            term = mpmath.re(mixed_transform(z) * mpmath.exp(-z * x) / z)
            total += term
            if abs(term) < mpmath.mpf(10) ** -36 and k > 60:
                break
        return float(total * step / mpmath.pi)


@pytest.mark.parametrize("x", [3.0, 6.0, 8.5])
def test_a_mixed_sum_agrees_with_forty_digits(x):
    """Every family at once; relative 1e-10 from 1e-1 to far tails."""
    exact = mixed_tail(x)
    assert sum_law(MIXED).sf(np.array([x]))[0] == pytest.approx(exact, rel=1e-10, abs=1e-300)


@pytest.mark.parametrize("name", LAWS)
def test_one_source_is_its_own_law(name):
    """scipy.stats, 1e-12 relative in both tails."""
    ours, theirs = LAWS[name]
    law = sum_law([Term(2.0, ours)], 1.0)
    p = np.array([1e-9, 1e-3, 0.2, 0.5, 0.9, 0.999])
    x = theirs.ppf(p)
    assert law.cdf(1.0 + 2.0 * x) == pytest.approx(theirs.cdf(x), rel=1e-9 if "flat" in name else 1e-11)
    assert law.sf(1.0 + 2.0 * x) == pytest.approx(theirs.sf(x), rel=1e-9 if "flat" in name else 1e-11)
    turned = sum_law([Term(-2.0, ours)], 1.0)
    assert turned.sf(1.0 - 2.0 * x) == pytest.approx(theirs.cdf(x), rel=1e-9 if "flat" in name else 1e-11)


@pytest.mark.parametrize("name", [name for name in LAWS if name not in ("normal", "student t")])
def test_the_series_agrees_with_quadrature_for_every_shape(name):
    """One source of the shape plus a normal one: the plain convolution integral (the quadrature's own error: 1e-7)."""
    ours, theirs = LAWS[name]
    law = sum_law([Term(1.0, ours), Term(0.3, laws.Normal(0.0, 1.0, 0.0, 0.0))])
    assert isinstance(law, SeriesLaw)
    u, w = np.polynomial.legendre.leggauss(600)
    values = theirs.ppf(0.5 * (1 + u))
    for x in (-0.5, 0.7, 2.1):
        exact = float(np.sum(0.5 * w * stats.norm.cdf((x - values) / 0.3)))
        assert law.cdf(np.array([x]))[0] == pytest.approx(exact, abs=1e-6)


def test_student_t_beside_others_agrees_with_quadrature():
    law = sum_law([Term(1.0, laws.StudentT(0.0, 0.5, 4.0, -1, 1)), Term(1.0, laws.Uniform(-1.0, 1.0))])
    u, w = np.polynomial.legendre.leggauss(200)
    for x in (0.5, 3.0, 30.0):
        exact = float(np.sum(0.5 * w * stats.t(4, scale=0.5).sf(x - u)))
        assert law.sf(np.array([x]))[0] == pytest.approx(exact, rel=1e-9)


def test_a_sum_of_two_points_is_the_binomial_law():
    """Eight equal atoms against scipy's binomial law."""
    law = sum_law([Term(1.0, laws.TwoPoint(0.0, 1.0, 0.3))] * 8)
    k = np.arange(9)
    assert law.cdf(k.astype(float)) == pytest.approx(stats.binom(8, 0.3).cdf(k), rel=1e-12)
    assert law.outside(2.0, 5.0) == pytest.approx(stats.binom(8, 0.3).cdf(1) + stats.binom(8, 0.3).sf(5), rel=1e-12)
    assert law.quantile(0.5) == stats.binom(8, 0.3).ppf(0.5)


@pytest.mark.parametrize("ratio", [1e-2, 1e-4, 1e-6, 1e-8])
def test_one_dominant_uniform_source_with_tiny_others(ratio):
    """At the end of the wide law: P = E max(0, R) / 2 with R normal of sigma r, which is r phi(0) / 2."""
    tiny = [Term(ratio, laws.TruncatedNormal(0.0, 1.0, -9.0, 9.0)) for _ in range(4)]
    law = sum_law([Term(1.0, laws.Uniform(-1.0, 1.0)), *tiny])
    expected = 2.0 * ratio / math.sqrt(2.0 * math.pi) / 2.0
    assert law.sf(np.array([1.0]))[0] == pytest.approx(expected, rel=1e-7)
    assert law.cdf(np.array([0.25]))[0] == pytest.approx(0.625, abs=1e-9)


def test_two_equal_uniform_laws_are_triangular():
    """95 % point 2a (1 - sqrt 0.05) = 1.552786 a (Irwin-Hall; recomputed)."""
    law = sum_law([Term(1.0, laws.Uniform(-1.0, 1.0))] * 2)
    assert law.interval(0.95)[1] == pytest.approx(2 * (1 - math.sqrt(0.05)), rel=1e-12)


def test_too_many_student_t_sources_are_told():
    with pytest.raises(NoExactLawError, match="Monte Carlo is the method"):
        sum_law([Term(1.0, LAWS["student t"][0])] * 2 + [Term(1.0, UNIFORM)])


BOUNDED = [ours for name, (ours, _) in LAWS.items() if name not in ("normal", "student t", "nearly flat normal")]


@st.composite
def sums(draw):
    chosen = draw(st.lists(st.sampled_from(range(len(BOUNDED))), min_size=5, max_size=12))
    return [Term(draw(st.floats(0.2, 2.0)) * draw(st.sampled_from([-1, 1])), BOUNDED[i]) for i in chosen]


@settings(max_examples=25, deadline=None)
@given(terms=sums())
def test_a_law_behaves_like_one(terms):
    """Monotone, tails add up, moments are those of the terms, quantiles invert, nothing outside the support."""
    try:
        law = sum_law(terms)
    except NoExactLawError:
        return
    x = np.linspace(law.lower, law.upper, 101)
    F, S = law.cdf(x), law.sf(x)
    assert np.all(np.diff(F) >= -1e-13)
    assert pytest.approx(np.ones(101), abs=1e-12) == F + S
    assert law.sf(np.array([law.upper]))[0] < 1e-20
    for p in (1e-6, 0.01, 0.5, 0.99):
        assert law.cdf(np.array([law.quantile(p)]))[0] == pytest.approx(p, rel=1e-9)
    assert law.mean == pytest.approx(sum(t.coefficient * t.law.mean for t in terms), abs=1e-12)
    if isinstance(law, SeriesLaw):
        places, _, f = law.grid(8192)
        step = places[1] - places[0]
        assert np.sum(f) * step == pytest.approx(1, rel=1e-9)
        mean = np.sum(places * f) * step
        assert mean == pytest.approx(law.mean, abs=1e-8 * (law.upper - law.lower))
        variance = np.sum((places - mean) ** 2 * f) * step
        assert math.sqrt(variance) == pytest.approx(
            math.sqrt(sum((t.coefficient * t.law.sigma) ** 2 for t in terms)), rel=1e-7
        )


@settings(max_examples=25, deadline=None)
@given(terms=sums(), t=st.floats(0.01, 200.0))
def test_no_transform_leaves_its_envelope(terms, t):
    transform = Transform(terms)
    bound, _ = transform.envelope(t)
    values, _ = transform(0.0, np.array([0.0, t, 1.3 * t, 4.0 * t]))
    assert np.all(np.abs(values[1:]) <= bound * (1 + 1e-9))


def chain(sources: list[dict], **more) -> dict:
    named = [{"name": f"e{i}", "effect": "offset", **source} for i, source in enumerate(sources)]
    return {"input": {"unit": "V", "values": [0]}, "stages": [{"name": "s", "gain": 1, "sources": named}], **more}


ROOT3 = math.sqrt(3)


@pytest.mark.parametrize(
    ("sources", "sigma", "half"),
    [
        # JCGM 101:2008, 9.2.2, 9.2.3, 9.2.4 (from memory; recomputed: 3.91993, 3.87941, 17.01581)
        ([{"typ": 1}] * 4, 2.0, 3.919927969),
        ([{"max": ROOT3}] * 4, 2.0, 3.879406741),
        ([{"max": ROOT3}] * 3 + [{"max": 10 * ROOT3}], 10.14889157, 17.0158141),
        # EA-4/02, supplement, hand-held multimeter (from memory; recomputed: 0.050560)
        ([{"max": 0.05}, {"max": 0.011}, {"typ": 0.001}], 0.02957476402, 0.050560),
    ],
)
def test_published_intervals_through_the_service(post, sources, sigma, half):
    answer = post("/v1/budget", chain(sources, coverage=0.95, methods=["rss", "convolution"]))
    found = answer["points"][0]["convolution"]
    assert found["sigma"] == pytest.approx(sigma, rel=1e-7)
    assert found["upper"] == pytest.approx(half, rel=1e-5)
    assert found["lower"] == pytest.approx(-half, rel=1e-5)
    assert answer["checks"]["rss_against"] == "convolution"


def test_partly_correlated_normal_sources_are_exact_and_others_are_told(post, client):
    body = chain([{"typ": 1}, {"typ": 1}], limit={"max": 3})
    body["correlations"] = [{"between": ["s/e0", "s/e1"], "coefficient": 0.5}]
    found = post("/v1/budget", body)["points"][0]
    assert found["convolution"]["outside_ppm"] == pytest.approx(2e6 * stats.norm.sf(math.sqrt(3)), rel=1e-9)
    body["stages"][0]["sources"][0] = {"name": "e0", "effect": "offset", "max": 1}
    answer = post("/v1/budget", body)
    assert "convolution" not in answer["points"][0]
    assert any("Monte Carlo is the method" in note for note in answer["assumptions"])
    refused = client.post("/v1/budget", json=body | {"methods": ["rss", "convolution"]})
    assert refused.status_code == 422
    assert refused.get_json()["errors"][0]["pointer"] == "#/methods/1"


def test_convolution_and_simulation_agree(post, example):
    """Interval ends within the noise of 500,000 trials (five standard errors of a quantile, normal density)."""
    for point in post("/v1/budget", example)["points"]:
        noise = 5 * point["rss"]["sigma"] * math.sqrt(0.00135 / 500_000) / 0.00443
        assert point["monte_carlo"]["upper"] == pytest.approx(point["convolution"]["upper"], abs=noise)
