"""Makes `rotation_python.json`: promax and varimax with Kaiser normalisation by factor_analyzer, exact
p-values of the Procrustes permutation test by going through all 720 permutations of six rows, angles
between subspaces by scipy and, for a small one, by mpmath, and scipy's orthogonal Procrustes.

    python rotation.py

Reads the matrices of `rotation.json`. Needs numpy, scipy, mpmath, factor_analyzer. It is never run by
the tests; they read the file it wrote.
"""

import itertools
import json
from importlib.metadata import version

import mpmath
import numpy as np
from factor_analyzer.rotator import Rotator
from scipy.linalg import orthogonal_procrustes, subspace_angles

matrices = json.load(open("rotation.json"))["matrices"]
cases = []
for name, values in matrices.items():
    a = np.array(values)
    for method, power in [("varimax", 4), ("promax", 4), ("promax", 3)]:
        rotator = Rotator(method=method, normalize=True, power=power, max_iter=20000, tol=1e-15)
        loadings = rotator.fit_transform(a)
        phi = np.eye(a.shape[1]) if method == "varimax" else rotator.phi_
        cases.append({"name": name, "by": f"factor_analyzer {method}", "rotation": method,
                      "kaiser": True, "gamma": 0.0, "power": power,
                      "loadings": loadings.tolist(), "phi": np.array(phi).tolist()})


def overlap(x, y):
    return np.linalg.svd(y.T @ x, compute_uv=False).sum()


# Six units seen twice, somewhat alike.
x = np.array([[0, 3], [1, 1], [4, 0], [2, 5], [5, 2], [6, 6]], float)
y = np.array([[1, 4], [3, 1], [2, 0], [0, 5], [6, 1], [4, 3]], float)
xc, yc = x - x.mean(0), y - y.mean(0)
seen = overlap(xc, yc)
every = [overlap(xc, yc[list(order)]) for order in itertools.permutations(range(6))]
exact = {"x": x.tolist(), "y": y.tolist(),
         "correlation": seen / np.linalg.norm(xc) / np.linalg.norm(yc),
         "p_value": sum(value >= seen * (1 - 1e-10) for value in every) / len(every)}

angles = []
for n, k, l in [(6, 2, 2), (7, 3, 2), (9, 2, 4)]:
    a = np.fromfunction(lambda i, j: np.sin(1.3 * i * (j + 1) + 0.2 * n), (n, k))
    b = np.fromfunction(lambda i, j: np.cos(0.7 * i * (j + 2) + 0.1 * n), (n, l))
    angles.append({"a": a.tolist(), "b": b.tolist(),
                   "radians": sorted(subspace_angles(a, b).tolist())})

# A plane and the same plane tilted by a small amount: 40 digits, from the singular values of the
# part of one basis outside the other.
mpmath.mp.dps = 40
a = [[1, 0], [0, 1], [1, 1], [2, -1]]
b = [[1, 0], [2.0 ** -30, 1], [1, 1 + 2.0 ** -28], [2, -1]]


def orthonormal(rows):
    q, _ = mpmath.qr(mpmath.matrix(rows), mode="skinny")
    return q


p, q = orthonormal(a), orthonormal(b)
outside = q - p * (p.T * q)
sines = mpmath.svd_r(outside, compute_uv=False)
angles.append({"a": a, "b": b, "radians": sorted(float(mpmath.asin(s)) for s in sines)})

first = np.array(matrices["Harman74.cor, 4 components"])[:, :3]
second = np.fromfunction(lambda i, j: np.sin(1.1 * i + 2.3 * j) + 0.2 * j, first.shape)
turn, scale = orthogonal_procrustes(second, first)

json.dump({"versions": {name: version(name) for name in
                        ["numpy", "scipy", "mpmath", "factor_analyzer"]},
           "cases": cases, "exact_test": exact, "angles": angles,
           "procrustes": {"first": first.tolist(), "second": second.tolist(),
                          "rotation": turn.tolist(), "overlap": float(scale)}},
          open("rotation_python.json", "w"))
