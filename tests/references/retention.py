"""Makes `retention.json`: rules for the number of components computed without the library.

    python -m venv venv && venv/bin/pip install numpy scipy scikit-learn mpmath
    Rscript retention.R && venv/bin/python retention.py

Cross-validation decomposes every table from which a row, a column or a cell was left out, one by one,
by numpy's singular values; nothing is updated or derived. The Tracy-Widom law comes from the
Hastings-McLeod solution of the second Painleve equation, integrated by Taylor series in 40 digits.
It takes a minute or two and is never run by the tests.
"""

import json
import pathlib
import platform

import mpmath
import numpy as np
import scipy
import scipy.stats
import sklearn
from scipy.integrate import quad
from scipy.optimize import brentq
from sklearn.decomposition import PCA
from sklearn.decomposition._pca import _assess_dimension

HERE = pathlib.Path(__file__).parent


def svd(x):
    return np.linalg.svd(x, full_matrices=False)


def eastment_krzanowski(z, most):
    """PRESS(0..most) and W(1..most) from the definition: one prediction for each cell."""
    n, p = z.shape
    u, d, vt = svd(z)
    press = np.zeros(most + 1)
    for i in range(n):
        _, d_row, vt_row = svd(np.delete(z, i, axis=0))
        for j in range(p):
            u_col, d_col, _ = svd(np.delete(z, j, axis=1))
            prediction = 0.0
            press[0] += z[i, j] ** 2
            for t in range(most):
                su = np.sign(u_col[:, t] @ u[:, t])
                sv = np.sign(vt_row[t] @ vt[t])
                prediction += su * u_col[i, t] * np.sqrt(d_col[t]) * np.sqrt(d_row[t]) * sv * vt_row[t, j]
                press[t + 1] += (prediction - z[i, j]) ** 2
    press /= n * p
    w, left = [], p * (n - 1)
    for m in range(1, most + 1):
        taken = n + p - 2 * m
        left -= taken
        w.append((press[m - 1] - press[m]) / taken / (press[m] / left))
    return press.tolist(), w


def by_cell(z, groups):
    """Mean squared error by leaving out rows and then one cell, with an explicit least-squares fit."""
    n, p = z.shape
    most = min(n - -(-n // groups) - 1, p) - 1
    sums = np.zeros(most + 1)
    for g in range(groups):
        out = np.arange(g, n, groups)
        stay = np.delete(z, out, axis=0)
        mean = stay.mean(axis=0)
        _, _, vt = svd(stay - mean)
        for i in out:
            x = z[i] - mean
            sums[0] += np.sum(x**2)
            for k in range(1, most + 1):
                loadings = vt[:k].T
                for j in range(p):
                    others = np.delete(loadings, j, axis=0)
                    t = np.linalg.lstsq(others, np.delete(x, j), rcond=1e-10)[0]
                    sums[k] += (x[j] - loadings[j] @ t) ** 2
    return (sums / (n * p)).tolist()


def gavish_donoho(beta):
    low, high = (1 - np.sqrt(beta)) ** 2, (1 + np.sqrt(beta)) ** 2
    density = lambda t: np.sqrt(max((high - t) * (t - low), 0)) / (2 * np.pi * beta * t)
    above = lambda t: quad(density, t, high, epsabs=1e-13, epsrel=1e-13, limit=500)[0] - 0.5
    median = brentq(above, low + 1e-9, high - 1e-9, xtol=1e-14)
    star = np.sqrt(2 * (beta + 1) + 8 * beta / (beta + 1 + np.sqrt(beta**2 + 14 * beta + 1)))
    return star / np.sqrt(median)


def tracy_widom(places):
    mpmath.mp.dps = 40
    start = mpmath.mpf(20)
    tail = mpmath.quad(mpmath.airyai, [start, 30, 60])
    square = mpmath.quad(lambda t: mpmath.airyai(t) ** 2, [start, 30, 60])
    moment = mpmath.quad(lambda t: (t - start) * mpmath.airyai(t) ** 2, [start, 30, 60])
    # x = start - t; y = (q, q', int q, int (x - s) q^2, int q^2).
    def slopes(t, y):
        x = start - t
        return [-y[1], -(x * y[0] + 2 * y[0] ** 3), y[0], y[4], y[0] ** 2]
    first = [mpmath.airyai(start), mpmath.airyai(start, derivative=1), tail, moment, square]
    solution = mpmath.odefun(slopes, 0, first)
    result = []
    for s in places:
        y = solution(start - mpmath.mpf(str(s)))
        exponent = -(y[2] + y[3]) / 2
        result.append({"s": float(s), "upper_tail": float(-mpmath.expm1(exponent))})
    return result


def analyses(name, x, correlation, slow):
    n, p = x.shape
    z = x - x.mean(axis=0)
    if correlation:
        z = z / z.std(axis=0, ddof=1)
    roots = svd(z)[1] ** 2 / (n - 1)
    case = {"name": name, "scaling": "correlation" if correlation else "covariance", "data": x.tolist()}
    rank = min(n - 1, p)
    if slow:
        case["press"], case["w"] = eastment_krzanowski(z, rank - 1)
        case["cells"] = by_cell(z, n)
    if n > p:
        pca = PCA(n_components="mle", svd_solver="full").fit(z)
        case["mle"] = int(pca.n_components_)
        case["log_evidence"] = [float(_assess_dimension(roots, k, n)) for k in range(1, p)]
        likelihood = []
        for k in range(p - 1):
            q = p - k
            left = roots[k:]
            statistic = (n - (2 * p + 11) / 6) * q * np.log(left.mean() / np.exp(np.log(left).mean()))
            likelihood.append(float(scipy.stats.chi2.sf(statistic, (q - 1) * (q + 2) / 2)))
        case["likelihood_ratio_p"] = likelihood
        lawley = []
        for k in range(p - 1):
            q, a = p - k, roots[k:].mean()
            factor = n - 1 - k - (2 * q**2 + q + 2) / (6 * q) + np.sum(a**2 / (roots[:k] - a) ** 2)
            statistic = factor * (q * np.log(a) - np.log(np.prod(roots[k:])))
            freedom = q * (q - 1) / 2 if k == 0 and correlation else (q - 1) * (q + 2) / 2
            lawley.append(float(scipy.stats.chi2.sf(statistic, freedom)))
        case["lawley_p"] = lawley
        mahalanobis = np.einsum("ij,jk,ik->i", z, np.linalg.inv(z.T @ z / n), z)
        case["kurtosis"] = float((mahalanobis**2).mean())
    if n > p and correlation:
        def partials(m):
            _, vectors = np.linalg.eigh(np.corrcoef(x.T))
            regress = z @ vectors[:, ::-1][:, :m]
            rest = z - regress @ np.linalg.lstsq(regress, z, rcond=None)[0] if m else z
            c = np.corrcoef(rest.T)
            return c[~np.eye(p, dtype=bool)]
        for power in (2, 4):
            case[f"partial_{power}"] = [float(np.mean(partials(m) ** power)) for m in range(p - 1)]
    statistics = []
    for k in range(3):
        freedom, q = n - 1 - k, p - k
        mean = roots[k:rank].sum() / q
        root = np.sqrt(freedom - 1) + np.sqrt(q)
        scale = root * (1 / np.sqrt(freedom - 1) + 1 / np.sqrt(q)) ** (1 / 3)
        statistics.append(float((freedom * roots[k] / mean - root**2) / scale))
    case["tracy_widom_statistics"] = statistics
    beta = min(n - 1, p) / max(n - 1, p)
    singular = np.sqrt(roots[:rank] * (n - 1))
    case["singular_threshold"] = float(gavish_donoho(beta) * np.median(singular))
    return case


def main():
    packages = json.loads((HERE / "retention_packages.json").read_text())
    data = {case["name"]: np.array(case["data"], float) for case in packages["cases"] if "data" in case}
    cases = []
    for name in ("attitude", "swiss"):
        for correlation in (True, False):
            cases.append(analyses(name, data[name], correlation, True))
    cases.append(analyses("attitude, transposed", data["attitude"].T, False, True))
    mpmath.mp.dps = 30
    airy = [{"x": x, "ai": float(mpmath.airyai(mpmath.mpf(str(x))))}
            for x in (-9, -6.5, -3, -1, 0, 0.5, 1, 1.01, 2, 5, 9, 16, 30, 100)]
    places = [-8, -6, -4, -3, -2, -1.2065, -1, 0, 0.9793, 2.0234, 4, 8, 14]
    result = {
        "versions": {
            "python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__,
            "scikit-learn": sklearn.__version__, "mpmath": mpmath.__version__,
        },
        "airy": airy,
        "tracy_widom": tracy_widom(places),
        "gavish_donoho": [{"beta": b, "omega": float(gavish_donoho(b))}
                          for b in (0.01, 0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 1.0)],
        "cases": cases,
    }
    (HERE / "retention.json").write_text(json.dumps(result, separators=(",", ":")) + "\n")


main()
