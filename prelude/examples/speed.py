"""The peer of `speed.rs`: prints the smallest and the median time in milliseconds of the fastest
exact way that numpy and scikit-learn have, and the name of that way.

    python speed.py components|random|noise N P
"""

import sys
import time

import numpy
from sklearn.decomposition import PCA


def timed(run, least):
    times = []
    while len(times) < 3 or (sum(times) < least and len(times) < 200):
        start = time.perf_counter()
        run()
        times.append((time.perf_counter() - start) * 1e3)
    times.sort()
    return times[0], times[len(times) // 2]


def ways(x):
    n, p = x.shape

    def by_centred_product():
        z = x - x.mean(axis=0)
        if p < n:
            return numpy.linalg.eigh(z.T @ z / (n - 1))
        roots, vectors = numpy.linalg.eigh(z @ z.T / (n - 1))
        return roots, z.T @ vectors[:, 1:] / numpy.sqrt(roots[1:] * (n - 1))

    def by_plain_product():
        mean = x.mean(axis=0)
        return numpy.linalg.eigh((x.T @ x - n * numpy.outer(mean, mean)) / (n - 1))

    yield "numpy, centred product", by_centred_product
    if p < n:
        yield "numpy, product less the means", by_plain_product
        yield "scikit-learn, covariance_eigh", lambda: PCA(svd_solver="covariance_eigh").fit(x)
    if n * p * min(n, p) < 1e8:
        yield "scikit-learn, full", lambda: PCA(svd_solver="full").fit(x)


def main():
    kind, n, p = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    rng = numpy.random.default_rng(1)
    if kind == "noise":
        def draw():
            for _ in range(1000):
                numpy.linalg.eigvalsh(numpy.corrcoef(rng.standard_normal((n, p)).T))
        print(*timed(draw, 2000), "numpy, whole tables")
        return
    x = 5 + rng.standard_normal((n, p)) * (1 + numpy.arange(p) / p)
    if kind == "random":
        # As many directions and power iterations as ours.
        pca = PCA(10, svd_solver="randomized", n_oversamples=10, iterated_power=4, random_state=1)
        print(*timed(lambda: pca.fit(x), 500), "scikit-learn, randomized")
        return
    # Both memory orders are tried: the peer may have the one that suits it.
    results = []
    for order in "CF":
        for name, run in ways(numpy.asarray(x, order=order)):
            results.append((*timed(run, 500), f"{name}, {order} order"))
    print(*min(results))


main()
