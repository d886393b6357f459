"""The peer of `speed.rs`: prints the smallest and the median time in milliseconds of the fastest
exact way that numpy and scikit-learn have, and the name of that way.

    python speed.py components|random|noise|bootstrap|scatter|gaps N P
"""

import sys
import time

import numpy
from sklearn.covariance import MinCovDet
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


def gapped(rng, n, p, k):
    """Rows around a plane, and which cells are there: a tenth are not."""
    x = rng.standard_normal((n, k)) @ rng.standard_normal((k, p)) + 0.5 * rng.standard_normal((n, p))
    return x, rng.random((n, p)) > 0.1


def expectation_maximisation(x, there, k):
    """Probabilistic components by plain EM, all rows at once, until the likelihood settles."""
    n, p = x.shape
    shown = numpy.where(there, x, 0.0)
    mean = shown.sum(axis=0) / there.sum(axis=0)
    load = numpy.random.default_rng(2).standard_normal((p, k))
    noise, before = 1.0, -numpy.inf
    for _ in range(2000):
        z = numpy.where(there, x - mean, 0.0)
        inner = numpy.einsum("np,pk,pl->nkl", there, load, load) + noise * numpy.eye(k)
        cov = noise * numpy.linalg.inv(inner)
        scores = numpy.einsum("nkl,nl->nk", cov, z @ load) / noise
        second = cov + numpy.einsum("nk,nl->nkl", scores, scores)
        mean = numpy.where(there, x - scores @ load.T, 0.0).sum(axis=0) / there.sum(axis=0)
        z = numpy.where(there, x - mean, 0.0)
        left = numpy.einsum("np,nkl->pkl", there, second)
        load = numpy.linalg.solve(left, (z.T @ scores)[..., None])[..., 0]
        fitted = scores @ load.T
        spread = numpy.einsum("np,pk,nkl,pl->", there, load, cov, load, optimize=True)
        noise = (((z - fitted) ** 2)[there].sum() + spread) / there.sum()
        if abs(noise - before) < 1e-7 * noise:
            break
        before = noise
    return load, noise


def main():
    kind, n, p = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    rng = numpy.random.default_rng(1)
    if kind == "noise":
        def draw():
            for _ in range(1000):
                numpy.linalg.eigvalsh(numpy.corrcoef(rng.standard_normal((n, p)).T))
        print(*timed(draw, 2000), "numpy, whole tables")
        return
    if kind == "gaps":
        print(*timed(lambda: expectation_maximisation(*gapped(rng, n, p, 4), 4), 3000), "numpy, EM by hand")
        return
    x = 5 + rng.standard_normal((n, p)) * (1 + numpy.arange(p) / p)
    if kind == "bootstrap":
        def resample():
            for _ in range(2000):
                rows = rng.integers(0, n, n)
                numpy.linalg.eigh(numpy.corrcoef(x[rows].T))
        print(*timed(resample, 2000), "numpy, loop over resamples")
        return
    if kind == "scatter":
        print(*timed(lambda: MinCovDet(random_state=1).fit(x), 2000), "scikit-learn, MinCovDet")
        return
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
