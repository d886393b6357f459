"""Makes `adequacy.json`: adequacy and normality by Python packages, and sampling errors of variances
and loadings by the delta method, on open data that ship with scikit-learn.

The delta method here differentiates the whole way from a covariance matrix to its components
numerically and takes the covariances of covariances of normal rows, so that it shares no formula
with the library.

    python -m venv venv && venv/bin/pip install factor_analyzer pingouin scikit-learn scipy
    venv/bin/python adequacy.py

It is never run by the tests; they read the file it wrote. The data are in `components.json`.
"""

import json
import pathlib
from importlib.metadata import version

import numpy
import pandas
import pingouin
from factor_analyzer.factor_analyzer import calculate_bartlett_sphericity, calculate_kmo
from sklearn import datasets

HERE = pathlib.Path(__file__).parent


def components(covariance, correlation):
    """Variances, then loadings by columns with the largest of each column positive."""
    if correlation:
        scale = numpy.sqrt(numpy.diag(covariance))
        covariance = covariance / numpy.outer(scale, scale)
    roots, vectors = numpy.linalg.eigh(covariance)
    roots, vectors = roots[::-1], vectors[:, ::-1]
    signs = numpy.sign(vectors[numpy.abs(vectors).argmax(axis=0), range(len(roots))])
    return numpy.concatenate([roots, (vectors * signs).T.ravel()])


def sampling_errors(x, correlation):
    """Standard errors of variances (p) and of loadings (p × p by columns)."""
    n, p = x.shape
    s = numpy.cov(x.T)
    pairs = [(i, j) for i in range(p) for j in range(i + 1)]
    columns = []
    for i, j in pairs:
        step = 1e-5 * numpy.sqrt(s[i, i] * s[j, j])
        change = numpy.zeros((p, p))
        change[i, j] = change[j, i] = step
        difference = components(s + change, correlation) - components(s - change, correlation)
        columns.append(difference / (2 * step))
    jacobian = numpy.array(columns).T
    spread = numpy.array([
        [(s[i, k] * s[j, l] + s[i, l] * s[j, k]) / (n - 1) for k, l in pairs] for i, j in pairs
    ])
    variances = numpy.einsum("ab,bc,ac->a", jacobian, spread, jacobian)
    errors = numpy.sqrt(numpy.maximum(variances, 0))
    return {
        "correlation" if correlation else "covariance": {
            "variance_errors": errors[:p].tolist(),
            "loading_errors": errors[p:].reshape(p, p).T.tolist(),
        }
    }


cases = []
for load in (datasets.load_iris, datasets.load_wine):
    bunch = load()
    data = pandas.DataFrame(bunch.data)
    by_variable, overall = calculate_kmo(data)
    _, p_value = calculate_bartlett_sphericity(data)
    normal = pingouin.multivariate_normality(data)
    setosa = pingouin.multivariate_normality(data[bunch.target == 0])
    cases.append({
        "name": load.__name__.removeprefix("load_"),
        "overall": float(overall),
        "by_variable": numpy.asarray(by_variable).tolist(),
        "p_value": float(p_value),
        "henze_zirkler": float(normal.hz),
        "henze_zirkler_p": float(normal.pval),
        "first_group_rows": int((bunch.target == 0).sum()),
        "first_group": float(setosa.hz),
        "first_group_p": float(setosa.pval),
        **sampling_errors(bunch.data, True),
        **sampling_errors(bunch.data, False),
    })
packages = ("factor_analyzer", "pingouin", "scikit-learn", "numpy", "scipy")
(HERE / "adequacy.json").write_text(
    json.dumps({"versions": {name: version(name) for name in packages}, "cases": cases}) + "\n"
)
