"""Makes `components.json` and `parallel.json`: principal components and parallel analyses computed
by other programs, on open data that ship with them and on data of known ill condition.

    python -m venv venv && venv/bin/pip install numpy scipy scikit-learn mpmath
    venv/bin/python components.py

It takes a few minutes and is never run by the tests; they read the files it wrote. `usarrests.R`
makes `usarrests.json` in the same form with another program.
"""

import json
import pathlib
import platform

import mpmath
import numpy
import sklearn
from sklearn import datasets
from sklearn.decomposition import PCA

HERE = pathlib.Path(__file__).parent
VERSIONS = {
    "python": platform.python_version(),
    "numpy": numpy.__version__,
    "scikit-learn": sklearn.__version__,
    "mpmath": mpmath.__version__,
}


def by_sklearn(x, names, correlation):
    """Full singular value decomposition (LAPACK gesdd) of centred data, scaled beforehand."""
    z = x - x.mean(axis=0)
    if correlation:
        z = z / x.std(axis=0, ddof=1)
    pca = PCA(svd_solver="full").fit(z)
    return {
        "scaling": "correlation" if correlation else "covariance",
        "variances": pca.explained_variance_.tolist(),
        "proportions": pca.explained_variance_ratio_.tolist(),
        "loadings": pca.components_.T.tolist(),
        "scores": pca.transform(z)[:5].tolist(),
    }


def by_mpmath(x, correlation, digits):
    """Eigenvalues and vectors of the exact covariance or correlation of the doubles given."""
    mpmath.mp.dps = digits
    n, p = x.shape
    m = mpmath.matrix(x.tolist())
    for j in range(p):
        mean = mpmath.fsum(m[i, j] for i in range(n)) / n
        for i in range(n):
            m[i, j] -= mean
        if correlation:
            scale = mpmath.sqrt(mpmath.fsum(m[i, j] ** 2 for i in range(n)) / (n - 1))
            for i in range(n):
                m[i, j] /= scale
    roots, vectors = mpmath.eigsy(m.T * m / (n - 1))
    order = sorted(range(p), key=lambda k: -roots[k])
    return {
        "scaling": "correlation" if correlation else "covariance",
        "digits": digits,
        "variances": [float(roots[k]) for k in order],
        "loadings": [[float(vectors[j, k]) for k in order] for j in range(p)],
    }


def components():
    cases = []
    for load in (datasets.load_iris, datasets.load_wine, datasets.load_breast_cancer):
        bunch = load()
        x, names = bunch.data, list(bunch.feature_names)
        for correlation in (True, False):
            cases.append({
                "name": load.__name__.removeprefix("load_"),
                "by": "scikit-learn PCA(svd_solver='full')",
                "variables": names,
                "data": x.tolist(),
                **by_sklearn(x, names, correlation),
            })

    # More variables than rows: the transposed first rows of the wine data.
    wide = datasets.load_wine().data[:40].T.copy()
    for correlation in (True, False):
        case = by_sklearn(wide, None, correlation)
        rank = wide.shape[0] - 1
        case["variances"] = case["variances"][:rank]
        case["proportions"] = case["proportions"][:rank]
        case["loadings"] = [row[:rank] for row in case["loadings"]]
        case["scores"] = [row[:rank] for row in case["scores"]]
        cases.append({
            "name": "wine, transposed",
            "by": "scikit-learn PCA(svd_solver='full')",
            "variables": [f"unit {i}" for i in range(wide.shape[1])],
            "data": wide.tolist(),
            **case,
        })

    # Ill-conditioned: monomials on equidistant points, whose covariance has roots over some
    # fourteen orders of magnitude, and the same far from the origin.
    t = numpy.arange(1, 25) / 24.0
    powers = numpy.stack([t**k for k in range(1, 9)], axis=1)
    for name, x in (("powers", powers), ("powers + 1000", powers + 1000.0)):
        for correlation in (True, False):
            cases.append({
                "name": name,
                "by": "mpmath.eigsy on the exact cross-product",
                "variables": [f"t^{k}" for k in range(1, 9)],
                "data": x.tolist(),
                **by_mpmath(x, correlation, 60),
            })
    return cases


def thresholds(n, p, replicates, seed):
    """Roots of correlation matrices of normal tables, each table drawn in full."""
    rng = numpy.random.default_rng(seed)
    roots = numpy.empty((replicates, p))
    for k in range(replicates):
        roots[k] = numpy.linalg.eigvalsh(numpy.corrcoef(rng.standard_normal((n, p)).T))[::-1]
    rank = min(n - 1, p)
    return {
        "n_rows": n,
        "n_variables": p,
        "replicates": replicates,
        "seed": seed,
        "mean": roots.mean(axis=0)[:rank].tolist(),
        "deviation": roots.std(axis=0, ddof=1)[:rank].tolist(),
        "percentile_95": numpy.percentile(roots, 95, axis=0)[:rank].tolist(),
    }


def main():
    write = lambda name, value: (HERE / name).write_text(json.dumps(value) + "\n")
    write("components.json", {"versions": VERSIONS, "cases": components()})
    shapes = [(500, 20), (50, 10), (12, 8), (8, 12)]
    cases = [thresholds(n, p, 20_000, 1000 + k) for k, (n, p) in enumerate(shapes)]
    write("parallel.json", {"versions": VERSIONS, "cases": cases})


if __name__ == "__main__":
    main()
