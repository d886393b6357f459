"""Makes `transform_python.json`: exponents of Box and Cox.

    python transform.py

Needs numpy, scipy, scikit-learn and mpmath. It is never run by the tests; they read the file it
wrote. For each column of open data: the exponent and its 95 % interval by scipy.stats.boxcox (a
bounded search for the maximum), the log-likelihood by scipy.stats.boxcox_llf, the values by
sklearn.preprocessing.PowerTransformer without standardising, and the exponent in 40 digits as the
zero of the derivative of the likelihood, formed by mpmath's numerical differentiation.
"""

import json
import platform

import mpmath
import numpy
import scipy
import sklearn
from scipy import stats
from sklearn import datasets, preprocessing

mpmath.mp.dps = 40


def likelihood(column, exponent):
    values = [mpmath.mpf(float(value)) for value in column]
    n = len(values)
    logs = [mpmath.log(value) for value in values]
    if exponent == 0:
        powers = logs
    else:
        powers = [(value**exponent - 1) / exponent for value in values]
    mean = sum(powers) / n
    variance = sum((power - mean) ** 2 for power in powers) / n
    return -mpmath.mpf(n) / 2 * mpmath.log(variance) + (exponent - 1) * sum(logs)


def in_forty_digits(column, near):
    slope = lambda exponent: mpmath.diff(lambda e: likelihood(column, e), exponent)
    return mpmath.findroot(slope, (near - 0.01, near + 0.01), tol=1e-20)


def case(name, column):
    _, exponent, interval = stats.boxcox(column, alpha=0.05)
    exact = in_forty_digits(column, exponent)
    power = preprocessing.PowerTransformer(method="box-cox", standardize=False)
    return {
        "name": name,
        "values": column.tolist(),
        "exponent": float(exact),
        "exponent_by_search": exponent,
        "interval": list(interval),
        "log_likelihood": float(likelihood(column, exact)),
        "log_likelihood_untransformed": stats.boxcox_llf(1.0, column),
        "exponent_by_other_search": float(power.fit(column[:, None]).lambdas_[0]),
        "transformed_by_half": stats.boxcox(column[:5], lmbda=0.5).tolist(),
        "transformed_by_minus_one": stats.boxcox(column[:5], lmbda=-1.0).tolist(),
    }


iris = datasets.load_iris()
wine = datasets.load_wine()
columns = [
    ("iris, petal length", iris.data[:, 2]),
    ("iris, sepal width", iris.data[:, 1]),
    ("wine, malic acid", wine.data[:, 1]),
    ("wine, colour intensity", wine.data[:, 9]),
    ("wine, proline", wine.data[:, 12]),
]
file = {
    "versions": {
        "python": platform.python_version(),
        "numpy": numpy.__version__,
        "scipy": scipy.__version__,
        "scikit-learn": sklearn.__version__,
        "mpmath": mpmath.__version__,
    },
    "cases": [case(name, column) for name, column in columns],
}
with open("transform_python.json", "w") as out:
    json.dump(file, out)
    out.write("\n")
