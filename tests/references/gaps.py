"""Makes `gaps.json`: components of tables with holes, computed by other ways than the library's.

Maximum likelihood is found by a quasi-Newton search on the observed-data likelihood, which is
written with one multivariate normal density for each row; missing cells and their standard
deviations come from the conditional normal distribution in its textbook form. Least squares on the
observed cells is found by the Levenberg-Marquardt and trust-region methods of scipy, the shrunken
fixed point by Powell's hybrid root finder on the missing cells. Likelihoods of complete tables come from
scikit-learn.

Data: wine and iris as they ship with scikit-learn, every third row and all rows, holes by a seed.
"""

import json
import platform
from pathlib import Path

import numpy
import scipy
import sklearn
from scipy import optimize
from sklearn.datasets import load_iris, load_wine
from sklearn.decomposition import PCA

HERE = Path(__file__).parent
VERSIONS = {
    "python": platform.python_version(),
    "numpy": numpy.__version__,
    "scipy": scipy.__version__,
    "scikit-learn": sklearn.__version__,
}


def holes(x, share, seed):
    """Cells at random, at most p - 5 (or p - 2 in narrow tables) of a row."""
    rng = numpy.random.default_rng(seed)
    n, p = x.shape
    mask = rng.random((n, p)) < share
    keep = 5 if p > 6 else 2
    for i in range(n):
        while (~mask[i]).sum() < keep:
            mask[i, rng.integers(p)] = False
    return numpy.where(mask, numpy.nan, x)


def negative_log_likelihood(theta, x, k):
    """Of the observed cells, and its gradient, by each row's own covariance matrix."""
    n, p = x.shape
    w = theta[: p * k].reshape(p, k)
    mean = theta[p * k : p * k + p]
    noise = numpy.exp(theta[-1])
    covariance = w @ w.T + noise * numpy.eye(p)
    value = 0.0
    slope_c = numpy.zeros((p, p))
    slope_m = numpy.zeros(p)
    for row in x:
        o = numpy.flatnonzero(~numpy.isnan(row))
        c = covariance[numpy.ix_(o, o)]
        inverse = numpy.linalg.inv(c)
        r = row[o] - mean[o]
        u = inverse @ r
        value += 0.5 * (len(o) * numpy.log(2 * numpy.pi) + numpy.linalg.slogdet(c)[1] + r @ u)
        slope_c[numpy.ix_(o, o)] += 0.5 * (inverse - numpy.outer(u, u))
        slope_m[o] -= u
    slope_w = 2.0 * slope_c @ w
    slope_s = numpy.trace(slope_c) * noise
    return value, numpy.concatenate([slope_w.ravel(), slope_m, [slope_s]])


def most_likely(x, k, n_starts):
    rng = numpy.random.default_rng(100 + k)
    n, p = x.shape
    sd = numpy.nanstd(x, axis=0)
    best = None
    for _ in range(n_starts):
        start = numpy.concatenate([
            (0.7 * rng.standard_normal((p, k)) * sd[:, None]).ravel(),
            numpy.nanmean(x, axis=0),
            [numpy.log(0.5 * (sd**2).mean())],
        ])
        found = start
        for _ in range(4):
            found = optimize.minimize(
                negative_log_likelihood, found, args=(x, k), jac=True, method="BFGS",
                options={"gtol": 1e-10, "maxiter": 5000},
            ).x
        value, slope = negative_log_likelihood(found, x, k)
        if best is None or value < best[0]:
            best = (value, found, numpy.abs(slope).max())
    return best


def conditional(x, covariance, mean):
    """Mean and standard deviation of each missing cell given the others of its row."""
    cells = []
    for i, row in enumerate(x):
        m = numpy.flatnonzero(numpy.isnan(row))
        o = numpy.flatnonzero(~numpy.isnan(row))
        if len(m) == 0:
            continue
        by = covariance[numpy.ix_(m, o)] @ numpy.linalg.inv(covariance[numpy.ix_(o, o)])
        values = mean[m] + by @ (row[o] - mean[o])
        left = covariance[numpy.ix_(m, m)] - by @ covariance[numpy.ix_(o, m)]
        cells += [[int(i), int(j), float(v), float(s)]
                  for j, v, s in zip(m, values, numpy.sqrt(numpy.diag(left)))]
    return cells


def likelihood_case(name, x, k, scaling, n_starts):
    centre = numpy.nanmean(x, axis=0)
    scale = numpy.nanstd(x, axis=0, ddof=1) if scaling == "correlation" else numpy.ones(x.shape[1])
    z = (x - centre) / scale
    value, theta, slope = most_likely(z, k, n_starts)
    p = x.shape[1]
    w = theta[: p * k].reshape(p, k)
    mean = theta[p * k : p * k + p]
    noise = numpy.exp(theta[-1])
    cells = conditional(z, w @ w.T + noise * numpy.eye(p), mean)
    for cell in cells:
        j = cell[1]
        cell[2] = cell[2] * scale[j] + centre[j]
        cell[3] = cell[3] * scale[j]
    return {
        "table": name, "kind": "likelihood", "scaling": scaling, "n_components": k,
        "by": "scipy BFGS on the observed-data likelihood, conditional normal distribution",
        "largest_slope": float(slope), "log_likelihood": -float(value), "noise": float(noise),
        "squared_lengths": numpy.linalg.svd(w, compute_uv=False).__pow__(2).tolist(),
        "mean": (mean * scale + centre).tolist(), "cells": cells,
    }


def least_squares_case(name, x, k):
    """Means, scores and axes that fit the observed cells best, without scaling."""
    n, p = x.shape
    seen = ~numpy.isnan(x)
    rows, cols = numpy.nonzero(seen)
    rng = numpy.random.default_rng(7 + k)
    centre = numpy.nanmean(x, axis=0)
    unit = numpy.nanstd(x)

    def parts(theta):
        t = theta[: n * k].reshape(n, k)
        v = theta[n * k : n * k + p * k].reshape(p, k)
        return t, v, theta[n * k + p * k :]

    def residuals(theta):
        t, v, m = parts(theta)
        return ((t @ v.T + m)[seen] - ((x - centre) / unit)[seen])

    def jacobian(theta):
        t, v, _ = parts(theta)
        out = numpy.zeros((len(rows), len(theta)))
        at = numpy.arange(len(rows))
        for s in range(k):
            out[at, rows * k + s] = v[cols, s]
            out[at, n * k + cols * k + s] = t[rows, s]
        out[at, n * k + p * k + cols] = 1.0
        return out

    best = None
    for _ in range(3):
        start = 0.3 * rng.standard_normal(n * k + p * k + p)
        found = optimize.least_squares(
            residuals, start, jacobian, method="trf", x_scale="jac",
            xtol=1e-15, ftol=1e-15, gtol=1e-13, max_nfev=3000)
        if best is None or found.cost < best.cost:
            best = found
    t, v, m = parts(best.x)
    fitted = (t @ v.T + m) * unit + centre
    cells = [[int(i), int(j), float(fitted[i, j])] for i, j in zip(*numpy.nonzero(~seen))]
    return {
        "table": name, "kind": "least squares", "scaling": "covariance", "n_components": k,
        "by": "scipy least_squares, trust region, 3 starts",
        "sum_of_squares": float(2 * best.cost * unit**2), "cells": cells,
    }


def shrunken_case(name, x, k, scaling):
    """The table that the shrunken reconstruction leaves as it is; by singular values, and by
    a root finder."""
    n, p = x.shape
    gone = numpy.isnan(x)
    sd = numpy.broadcast_to(numpy.nanstd(x, axis=0), x.shape)[gone]
    means = numpy.broadcast_to(numpy.nanmean(x, axis=0), x.shape)[gone]

    def rebuilt(z):
        filled = x.copy()
        filled[gone] = means + z * sd
        m = filled.mean(axis=0)
        d = filled.std(axis=0) if scaling == "correlation" else numpy.ones(p)
        u, s, vt = numpy.linalg.svd((filled - m) / d, full_matrices=False)
        roots = s**2 / n
        noise = n * p / min(p, n - 1) * roots[k:].sum() / ((n - 1 - k) * (p - k))
        factors = numpy.maximum(roots[:k] - noise, 0) / roots[:k]
        return m + d * ((u[:, :k] * s[:k] * factors) @ vt[:k]), noise

    def change(z):
        return (rebuilt(z)[0][gone] - means) / sd - z

    z = numpy.zeros(gone.sum())
    for _ in range(100):
        z = z + change(z)
    z = optimize.root(change, z, method="hybr", options={"xtol": 1e-14}).x
    _, noise = rebuilt(z)
    values = means + z * sd
    cells = [[int(i), int(j), float(v)] for (i, j), v in zip(numpy.argwhere(gone), values)]
    return {
        "table": name, "kind": "shrunken", "scaling": scaling, "n_components": k,
        "by": "numpy SVD, scipy root (Powell's hybrid method)",
        "largest_change": float(numpy.abs(change(z)).max()), "noise": float(noise), "cells": cells,
    }


def complete_case(name, x, k, scaling):
    """scikit-learn's noise and likelihood have the divisor n - 1 in the covariance; data shrunk by
    sqrt((n - 1)/n) bring it to n, as maximum likelihood has it."""
    n, p = x.shape
    z = x - x.mean(axis=0)
    if scaling == "correlation":
        z = z / x.std(axis=0, ddof=1)
    model = PCA(n_components=k, svd_solver="full").fit(z * numpy.sqrt((n - 1) / n))
    model.mean_ = numpy.zeros(p)
    return {
        "table": name, "kind": "complete", "scaling": scaling, "n_components": k,
        "by": "scikit-learn PCA.score_samples, noise_variance_, explained_variance_",
        "log_likelihood": float(model.score_samples(z).sum()),
        "noise": float(model.noise_variance_),
        "variances": model.explained_variance_.tolist(),
        "axes": model.components_.T.tolist(),
    }


def main():
    wine = load_wine().data[::3]
    iris = load_iris().data
    tables = {
        "wine": holes(wine, 0.1, 1),
        "wine, a third missing": holes(wine, 0.33, 2),
        "iris": holes(iris, 0.08, 3),
    }
    tables["wine, scaled"] = numpy.round(tables["wine"] / numpy.nanstd(tables["wine"], axis=0), 3)
    cases = []
    for name, ks, starts in [("wine", [1, 3], 3), ("wine, a third missing", [2], 4),
                             ("iris", [2], 2)]:
        for k in ks:
            cases.append(likelihood_case(name, tables[name], k, "correlation", starts))
    cases.append(likelihood_case("iris", tables["iris"], 1, "covariance", 2))
    for name, k in [("iris", 1), ("wine, scaled", 2)]:
        cases.append(least_squares_case(name, tables[name], k))
    for name, k, scaling in [("wine", 2, "correlation"), ("wine, a third missing", 1, "correlation"),
                             ("iris", 1, "correlation"), ("iris", 2, "covariance")]:
        cases.append(shrunken_case(name, tables[name], k, scaling))
    complete = {"wine, complete": wine, "iris, complete": iris}
    for name, k, scaling in [("wine, complete", 3, "correlation"), ("iris, complete", 2, "covariance")]:
        cases.append(complete_case(name, complete[name], k, scaling))
    listed = {name: [[None if numpy.isnan(v) else v for v in row] for row in x.tolist()]
              for name, x in {**tables, **complete}.items()}
    document = {"versions": VERSIONS, "tables": listed, "cases": cases}
    (HERE / "gaps.json").write_text(json.dumps(document) + "\n")


if __name__ == "__main__":
    main()
