"""Makes `distributions.csv`: tails and quantiles of distributions in many digits.

    python -m venv venv && venv/bin/pip install mpmath gmpy2 scipy
    venv/bin/python distributions.py

Each tail is the density integrated numerically in 36 digits, each quantile found from it by
Newton's method from scipy's value; nothing is shared with the library's series and continued
fractions in double precision. Arguments are read as the exact value of their doubles. It takes a
few minutes and is never run by the tests; they read the file it wrote.
"""

import pathlib

import mpmath
from mpmath import mp, mpf
from scipy import stats

mp.dps = 36
HERE = pathlib.Path(__file__).parent


def tail_of(ln_density, start, direction):
    """The integral of a log-concave density from `start` in one direction.

    Gauss–Legendre quadrature over panels, out to where the density is e^-110 of its largest.
    """
    top = ln_density(start)
    reach = mpf("1e-3")
    while True:
        here = ln_density(start + direction * reach)
        top = max(top, here)
        if here < top - 110:
            break
        reach *= mpf("1.5")
    points = [start + direction * reach * k / 24 for k in range(25)]
    # Scaled, since the quadrature stops at an absolute error.
    scaled = lambda w: mpmath.exp(ln_density(w) - top)
    return direction * mpmath.quad(scaled, points, method="gauss-legendre") * mpmath.exp(top)


def tails(ln_density, mode, start):
    """Both tails; the one away from the mode is integrated."""
    if start < mode:
        lower = tail_of(ln_density, start, -1)
        return lower, 1 - lower
    upper = tail_of(ln_density, start, 1)
    return 1 - upper, upper


def gamma_law(a):
    """The density of ln X for a gamma variable X, and its mode."""
    a = mpf(a)
    constant = mpmath.loggamma(a)
    return lambda w: a * w - mpmath.exp(w) - constant, mpmath.log(a)


def ratio_law(a, b):
    """The density of ln F for F = (X / a) / (Y / b), X and Y gamma variables, and its mode."""
    a, b = mpf(a), mpf(b)
    constant = mpmath.loggamma(a) + mpmath.loggamma(b) - mpmath.loggamma(a + b)
    constant -= a * mpmath.log(a) + b * mpmath.log(b)
    return lambda w: a * w - (a + b) * mpmath.log(a * mpmath.exp(w) + b) - constant, mpf(0)


def gamma_tails(a, x):
    return tails(*gamma_law(a), mpmath.log(x))


def ratio_tails(a, b, f):
    return tails(*ratio_law(a, b), mpmath.log(f))


def beta_tails(a, b, x):
    return ratio_tails(a, b, x * b / ((1 - x) * a))


def quantile(law, side, target, start):
    """Newton's method on ln of a tail; `start` has some digits already."""
    ln_density, mode = law
    target, w = mpf(target), mpmath.log(mpf(start))
    for _ in range(40):
        tail = tails(ln_density, mode, w)[side]
        slope = mpmath.exp(ln_density(w)) / tail * (1 if side == 0 else -1)
        step = (mpmath.log(target) - mpmath.log(tail)) / slope
        w += step
        if abs(step) < mpf(10) ** -22:
            return mpmath.exp(w)
    raise ArithmeticError((side, target, start))


rows = []


def put(name, first, second, argument, value):
    rows.append(
        f"{name},{float(first)!r},{float(second)!r},{float(argument)!r},{mpmath.nstr(value, 20)}"
    )


for z in [1e-3, 0.3, 1.0, 1.959964, 3.3, 6.0, 8.5, 12.0, 20.0, 30.0, 37.0]:
    put("normal_upper", 0, 0, z, mpmath.erfc(mpf(z) / mpmath.sqrt(2)) / 2)
for tail in [0.49, 0.25, 0.05, 0.025, 0.01, 1e-3, 1e-6, 1e-9, 1e-12, 1e-50, 1e-100, 1e-200, 1e-300]:
    start = mpmath.sqrt(-2 * mpmath.log(mpf(tail)))
    g = lambda z: mpmath.log(mpmath.erfc(z / mpmath.sqrt(2)) / 2) - mpmath.log(mpf(tail))
    put("normal_upper_quantile", 0, 0, tail, mpmath.findroot(g, start))

for freedom in [0.1, 0.5, 1, 2.5, 3, 7, 10.25, 30, 100, 1000, 20000.5, 1e6]:
    a = mpf(freedom) / 2
    deviation = mpmath.sqrt(2 * mpf(freedom))
    places = [0.01 * freedom, 0.5 * freedom, float(freedom), 1.5 * freedom + 1, 3 * freedom + 3]
    places += [float(freedom + k * deviation) for k in (0.5, 2, 5, 12, 25)]
    if freedom <= 100:
        places += [200.0, 800.0, 1300.0]
    for x in places:
        lower, upper = gamma_tails(a, mpf(x) / 2)
        for name, value in (("chi_squared_lower", lower), ("chi_squared_upper", upper)):
            if mpf(10) ** -300 < value < 1 - mpf(10) ** -12:
                put(name, freedom, 0, x, value)

for freedom in [0.5, 1, 2.5, 7, 30, 1000.5, 1e6]:
    a = mpf(freedom) / 2
    for tail in [0.5, 0.05, 0.01, 1e-3, 1e-6, 1e-9, 1e-12]:
        start = stats.chi2.isf(tail, freedom) / 2
        value = 2 * quantile(gamma_law(a), 1, tail, start)
        put("chi_squared_upper_quantile", freedom, 0, tail, value)
        start = stats.chi2.ppf(tail, freedom) / 2
        value = 2 * quantile(gamma_law(a), 0, tail, start)
        put("chi_squared_lower_quantile", freedom, 0, tail, value)

PAIRS = [
    (0.5, 0.5), (1, 1), (1, 3), (1, 30.5), (1, 1e4), (1, 1e6), (2, 2), (3, 1), (4.5, 7.25),
    (10, 100), (30, 30), (100, 10), (500, 1000), (1e4, 3), (1e5, 1e5), (1e6, 1), (1e6, 1e6),
    (5, 1e6), (0.1, 12),
]
for d1, d2 in PAIRS:
    spread = min(2.0, float(mpmath.sqrt(mpf(2) / d1 + mpf(2) / d2)))
    places = {0.01, 0.5, 0.999, 1.0, 1.001, 2.0, 10.0, 100.0}
    places |= {1 + k * spread for k in (0.5, 1, 2, 4, 8, 16, 30)}
    places |= {1 / (1 + k * spread) for k in (1, 4, 16)}
    for f in sorted(places):
        lower, upper = ratio_tails(mpf(d1) / 2, mpf(d2) / 2, mpf(f))
        for name, value in (("f_lower", lower), ("f_upper", upper)):
            if mpf(10) ** -300 < value < 1 - mpf(10) ** -12:
                put(name, d1, d2, f, value)
    for tail in [0.5, 0.05, 0.001, 1e-9]:
        law = ratio_law(mpf(d1) / 2, mpf(d2) / 2)
        value = quantile(law, 1, tail, stats.f.isf(tail, d1, d2))
        put("f_upper_quantile", d1, d2, tail, value)

for freedom in [0.5, 1, 2, 5.5, 30, 1000, 1e6]:
    for t in [0.01, 0.7, 2.0, 5.0, 12.0, 30.0, 1e3]:
        value = ratio_tails(mpf(1) / 2, mpf(freedom) / 2, mpf(t) ** 2)[1]
        if value > mpf(10) ** -300:
            put("t_two", freedom, 0, t, value)

for a, b in [(0.5, 0.5), (1, 1), (1.5, 20), (2.5, 150.25), (7, 3), (0.5, 500), (400, 0.5), (3e4, 2e4)]:
    mean = a / (a + b)
    for x in sorted({1e-6, 0.5 * mean, mean, 1 - 0.5 * (1 - mean), 0.25, 0.999}):
        lower, upper = beta_tails(mpf(a), mpf(b), mpf(x))
        for name, value in (("beta_lower", lower), ("beta_upper", upper)):
            if mpf(10) ** -300 < value < 1 - mpf(10) ** -12:
                put(name, a, b, x, value)

(HERE / "distributions.csv").write_text(
    f"# mpmath {mpmath.__version__}, 36 digits; made by distributions.py\n"
    "function,first,second,argument,value\n" + "\n".join(rows) + "\n"
)
