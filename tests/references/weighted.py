"""Makes `weighted.json`: covariances of weighted rows, and components of rows that are repeated as
often as their weights say, of the iris data that `components.json` holds.

    python -m venv venv && venv/bin/pip install numpy scikit-learn
    venv/bin/python weighted.py

It is never run by the tests; they read the file it wrote.
"""

import json
import pathlib
import platform

import numpy
import sklearn
from sklearn.decomposition import PCA

HERE = pathlib.Path(__file__).parent


def main():
    cases = json.loads((HERE / "components.json").read_text())["cases"]
    x = numpy.array(next(case for case in cases if case["name"] == "iris")["data"])
    weights = 1 + numpy.arange(len(x)) ** 2 % 5
    repeated = numpy.repeat(x, weights, axis=0)
    by_repetition = []
    for correlation in (True, False):
        z = repeated - repeated.mean(axis=0)
        if correlation:
            z = z / repeated.std(axis=0, ddof=1)
        pca = PCA(svd_solver="full").fit(z)
        by_repetition.append({
            "scaling": "correlation" if correlation else "covariance",
            "variances": pca.explained_variance_.tolist(),
            "proportions": pca.explained_variance_ratio_.tolist(),
            "loadings": pca.components_.T.tolist(),
        })
    value = {
        "versions": {
            "python": platform.python_version(),
            "numpy": numpy.__version__,
            "scikit-learn": sklearn.__version__,
        },
        "weights": weights.tolist(),
        "n_repeated": len(repeated),
        "mean": numpy.average(x, axis=0, weights=weights).tolist(),
        "covariance_aweights": numpy.cov(x.T, aweights=weights).tolist(),
        "covariance_fweights": numpy.cov(x.T, fweights=weights).tolist(),
        "by_repetition": by_repetition,
    }
    (HERE / "weighted.json").write_text(json.dumps(value) + "\n")


if __name__ == "__main__":
    main()
