"""Guaranteed ranges of laws with their denominators cleared, against brute force over their errors."""

import numpy as np
import pytest
import sympy

from discrim.ratelaw.cleared import cleared

K, KA, KB, A, B, C = sympy.symbols("k K_A K_B a b c", positive=True)


@pytest.mark.parametrize(
    ("law", "power", "terms"),
    [
        (K * A / (1 + KA * A), 1, (1, 1)),
        (K * KA * KB * A * B / (1 + KA * A + KB * B) ** 2, 2, (1, 2)),
        (K * sympy.sqrt(KA * A) * B / (1 + sympy.sqrt(KA * A)) ** 2, 2, (1, 1)),
        (K * A * (B - C / 2) / (1 + KA * A), 1, (1, 1)),
        ((A - B / 2) / (KA * A + KB * B), 1, (0, 2)),
        (K * A / (KA + A), 1, (1, 1)),
        (K * A / (1 + KA * A) / (1 + KB * B), None, None),  # two sums cannot both be cleared
        (K * A**KA, None, None),
        ((K + KA) * A / (1 + KB * B), None, None),  # only the sum k + K_A is linear
    ],
)
def test_form(law, power, terms):
    form = cleared(law, [K, KA, KB], [A, B, C])
    if power is None:
        assert form is None
        return
    assert form is not None
    assert (form.power, (len(form.numerator), len(form.denominator))) == (power, terms)
    # put together again at random values the law comes back
    rng = np.random.default_rng(1)
    values = {
        s: float(v) for s, v in zip((K, KA, KB, A, B, C), rng.uniform(0.5, 2, 6), strict=True)
    }
    logs = np.log([values[K], values[KA], values[KB]])
    coefficients = form.factor * np.exp(form.exponents @ logs)
    top = sum(
        c * float(m.subs(values))
        for c, m in zip(coefficients[: terms[0]], form.numerator, strict=True)
    )
    bottom = sum(
        c * float(w.subs(values))
        for c, w in zip(coefficients[terms[0] :], form.denominator, strict=True)
    )
    if form.known is None:
        bottom += 1
    else:
        top = float(form.known.subs(values))
    assert top / bottom**power == pytest.approx(float(law.subs(values)), rel=1e-12)


def test_range_holds_every_table_within_its_bounds():
    """Saturation law on four runs with hard bounds: constants of tables drawn inside the bounds and
    fitted exactly through two of the runs never lie outside the range (an outer bound)."""
    from discrim.evidence.guaranteed import guaranteed
    from discrim.evidence.guaranteed_cleared import Cleared
    from discrim.fit.measurements import OBSERVATION, Measurements, Scale, source
    from discrim.ratelaw.compile import CompiledLaw
    from discrim.reactor.rates import RatePredictor

    a = np.array([0.5, 1.0, 2.0, 4.0])
    y = 3.0 * a / (1 + 0.8 * a)
    half_y, half_a = 0.01, 0.005
    n = len(a)
    predictor = RatePredictor(
        [CompiledLaw(K * A / (1 + KA * A), [K, KA], [A])],
        np.zeros(n, int),
        names=("k", "K_A"),
        lower=np.zeros(2),
        upper=np.full(2, np.inf),
        linear=np.array([True, False]),
        scale=np.ones(2),
        starts=np.zeros((0, 2)),
    )
    data = Measurements(
        y,
        a[:, None],
        (
            source(OBSERVATION, n, absolute=half_y / 3**0.5, bound=np.full(n, half_y)),
            source(0, n, absolute=half_a / 3**0.5, bound=np.full(n, half_a)),
        ),
        Scale.STATED,
        ("a",),
    )
    form = cleared(K * A / (1 + KA * A), [K, KA], [A])
    assert form is not None

    def shapes(c):
        return c[..., :1], c[..., :1], np.zeros((*c.shape[:2], 0))

    found = guaranteed(
        predictor, data, 0.05, 1.0, Cleared(shapes, form.power, form.exponents, form.factor)
    )
    assert all(i.note == "outer bound, by clearing the denominator" for i in found)
    assert found[0].low.value < 3.0 < found[0].high.value
    assert found[1].low.value < 0.8 < found[1].high.value
    rng = np.random.default_rng(2)
    inside = 0
    for k, k_a in zip(rng.uniform(2.9, 3.1, 20_000), rng.uniform(0.75, 0.85, 20_000), strict=True):
        # consistent when for each run some a within its bound gives a rate within its bound
        f_low = k * (a - half_a) / (1 + k_a * (a - half_a))
        f_high = k * (a + half_a) / (1 + k_a * (a + half_a))
        if ((f_low <= y + half_y) & (f_high >= y - half_y)).all():
            inside += 1
            assert found[0].low.value <= k <= found[0].high.value
            assert found[1].low.value <= k_a <= found[1].high.value
    assert inside > 50
