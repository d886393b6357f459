"""Makes `outliers.json`: distances, T squared, Q, their limits and contributions for open data
that ship with scikit-learn, and minimum covariance determinants of scikit-learn.

    python outliers.py

Rows are split by a singular value decomposition and by dense projectors; limits come from roots
of mpmath's incomplete gamma and beta functions in 30 digits; contributions from the square root of
a dense matrix. It is never run by the tests; they read the file it wrote.
"""

import json

import mpmath
import numpy
import scipy
import scipy.linalg
import sklearn
from sklearn.covariance import MinCovDet
from sklearn.datasets import load_iris, load_wine

mpmath.mp.dps = 30


def root(function, low, high):
    low, high = mpmath.mpf(low), mpmath.mpf(high)
    for _ in range(160):
        middle = (low + high) / 2
        low, high = (middle, high) if function(middle) < 0 else (low, middle)
    return (low + high) / 2


def chi_squared(share, freedom):
    half = mpmath.mpf(freedom) / 2
    law = lambda x: mpmath.gammainc(half, 0, x / 2, regularized=True) - share
    return root(law, 0, 1000 + 20 * freedom)


def beta(share, a, b):
    return root(lambda x: mpmath.betainc(a, b, 0, x, regularized=True) - share, 0, 1)


def f(share, numerator, denominator):
    a, b = mpmath.mpf(numerator) / 2, mpmath.mpf(denominator) / 2
    x = beta(share, a, b)
    return x / (1 - x) * b / a


def normal(share):
    return mpmath.sqrt(2) * mpmath.erfinv(2 * share - 1)


def limits(roots, n, k, share, residuals):
    share = mpmath.mpf(share)
    left = [mpmath.mpf(value) for value in roots[k:]]
    one, two, three = (mpmath.fsum(value**power for value in left) for power in (1, 2, 3))
    h0 = 1 - 2 * one * three / (3 * two**2)
    z = normal(share)
    bracket = z * mpmath.sqrt(2 * two * h0**2) * mpmath.sign(h0) / one + 1
    bracket += two * h0 * (h0 - 1) / one**2
    q = len(left)
    matched = residuals.var(ddof=1) / (2 * residuals.mean())
    return {
        "share": float(share),
        "t_squared_fitted": float(
            mpmath.mpf(n - 1) ** 2 / n * beta(share, mpmath.mpf(k) / 2, mpmath.mpf(n - k - 1) / 2)
        ),
        "t_squared_new": float(
            mpmath.mpf(k * (n + 1) * (n - 1)) / (n * (n - k)) * f(share, k, n - k)
        ),
        "jackson_mudholkar": float(one * bracket ** (1 / h0)),
        "box": float(two / one * chi_squared(share, one**2 / two)),
        "moments": float(matched * chi_squared(share, residuals.mean() / matched)),
        "f": float(one * (n - 1) / (n - k - 1) * f(share, q, q * (n - k - 1))),
        "f_applies": bool(one**2 / two >= mpmath.mpf("0.8") * q),
        "score_distance": float(mpmath.sqrt(chi_squared(share, k))),
    }


def case(name, x, k, scaled, held_back):
    fitted, new = x[:-held_back], x[-held_back:]
    n = len(fitted)
    mean = fitted.mean(axis=0)
    scale = fitted.std(axis=0, ddof=1) if scaled else numpy.ones(x.shape[1])
    take = lambda rows: (rows - mean) / scale
    _, singular, vectors = numpy.linalg.svd(take(fitted), full_matrices=False)
    roots = singular**2 / (n - 1)
    kept = vectors[:k].T
    inverse = kept @ numpy.diag(1 / roots[:k]) @ kept.T
    beyond = numpy.eye(x.shape[1]) - kept @ kept.T
    half = scipy.linalg.sqrtm(inverse + 0j).real
    t_squared = lambda rows: numpy.einsum("ij,jk,ik->i", take(rows), inverse, take(rows))
    q = lambda rows: ((take(rows) @ beyond) ** 2).sum(axis=1)
    row = int(numpy.argmax(q(fitted)))
    return {
        "name": name,
        "scaling": "correlation" if scaled else "covariance",
        "k": k,
        "data": fitted.tolist(),
        "new_rows": new.tolist(),
        "t_squared": t_squared(fitted).tolist(),
        "q": q(fitted).tolist(),
        "new_t_squared": t_squared(new).tolist(),
        "new_q": q(new).tolist(),
        "limits": [
            limits(roots, n, k, share, q(fitted)) for share in ("0.95", "0.975", "0.99")
        ],
        "row": row,
        "to_t_squared": ((half @ take(fitted)[row]) ** 2).tolist(),
        "to_q": ((beyond @ take(fitted)[row]) ** 2).tolist(),
    }


def scatter(name, x, share):
    found = MinCovDet(support_fraction=share, random_state=3).fit(x)
    n, p = x.shape
    return {
        "name": name,
        "h": int(found.raw_support_.sum()),
        "share": share,
        "data": x.tolist(),
        "raw_centre": found.raw_location_.tolist(),
        "log_determinant": float(numpy.linalg.slogdet(numpy.cov(x[found.raw_support_].T))[1]),
    }


iris, wine = load_iris().data, load_wine().data
wild = wine[:90, [0, 3, 6, 9]].copy()
wild[:12] += numpy.array([8.0, 30.0, -9.0, 25.0])
answer = {
    "versions": {
        "numpy": numpy.__version__,
        "scipy": scipy.__version__,
        "scikit-learn": sklearn.__version__,
        "mpmath": mpmath.__version__,
    },
    "cases": [
        case("iris", iris, 2, False, 10),
        case("iris", iris, 1, True, 10),
        case("wine", wine, 5, True, 20),
        case("wine, first variety", wine[:59], 9, True, 9),
    ],
    "scatter": [scatter("wine with 12 rows moved", wild, 0.75)],
}
with open("outliers.json", "w") as file:
    json.dump(answer, file)
    file.write("\n")
