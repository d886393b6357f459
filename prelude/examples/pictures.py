"""The peer of `pictures.rs`: the same charts of the same tiles as SVG, plainly made.

    python pictures.py TILES

Prints the median time of each in milliseconds, and last their sum.
"""

import csv
import io
import sys
import time

import matplotlib

matplotlib.use("svg")
import numpy
from matplotlib import pyplot
from matplotlib.patches import Ellipse

with open(sys.argv[1], newline="", encoding="utf-8") as file:
    rows = [row for row in csv.DictReader(file) if all(row.values())]
names = [name for name in rows[0] if name not in ("tile", "kiln", "batch", "date")]
x = numpy.array([[float(row[name]) for name in names] for row in rows])
kilns = numpy.array([row["kiln"] for row in rows])
z = (x - x.mean(axis=0)) / x.std(axis=0, ddof=1)
roots, vectors = numpy.linalg.eigh(numpy.corrcoef(z.T))
roots, vectors = roots[::-1], vectors[:, ::-1]
scores = z @ vectors
t2 = (scores[:, :3] ** 2 / roots[:3]).sum(axis=1)
q = ((z - scores[:, :3] @ vectors[:, :3].T) ** 2).sum(axis=1)


def groups(axes, a, b, size=12):
    for kiln in numpy.unique(kilns):
        inside = kilns == kiln
        axes.scatter(a[inside], b[inside], s=size, label=kiln)


def scree():
    figure, axes = pyplot.subplots()
    axes.plot(range(1, len(roots) + 1), roots, "o-")
    axes.axhline(1, linestyle="--")
    return figure


def score_plot():
    figure, axes = pyplot.subplots()
    groups(axes, scores[:, 0], scores[:, 1])
    for kiln in numpy.unique(kilns):
        s = scores[kilns == kiln, :2]
        values, turn = numpy.linalg.eigh(numpy.cov(s.T))
        angle = numpy.degrees(numpy.arctan2(turn[1, 1], turn[0, 1]))
        width, height = 2 * numpy.sqrt(5.991 * values[::-1])
        axes.add_patch(Ellipse(s.mean(axis=0), width, height, angle=angle, fill=False))
    axes.legend()
    return figure


def grid(columns, diagonal):
    k = columns.shape[1]
    figure, axes = pyplot.subplots(k, k)
    for i in range(k):
        for j in range(k):
            if i > j:
                groups(axes[i, j], columns[:, j], columns[:, i], 5)
            elif i == j and diagonal:
                axes[i, j].hist(columns[:, i], bins=20)
    return figure


def loadings():
    figure, axes = pyplot.subplots()
    for name, (a, b) in zip(names, vectors[:, :2]):
        axes.annotate(name, (a, b))
        axes.arrow(0, 0, a, b, head_width=0.01)
    return figure


def bars():
    figure, axes = pyplot.subplots(1, 3, sharey=True)
    for k in range(3):
        axes[k].barh(names, vectors[:, k])
    return figure


def biplot():
    figure = score_plot()
    for name, (a, b) in zip(names, 8 * vectors[:, :2]):
        figure.axes[0].annotate(name, (a, b))
        figure.axes[0].arrow(0, 0, a, b, head_width=0.1)
    return figure


def correlations():
    figure, axes = pyplot.subplots()
    r = numpy.corrcoef(z.T)
    axes.imshow(r)
    axes.set_xticks(range(len(names)), names, rotation=90)
    axes.set_yticks(range(len(names)), names)
    for i in range(len(names)):
        for j in range(i):
            axes.text(j, i, f"{r[i, j]:.2f}", ha="center", fontsize=6)
    return figure


def profiles():
    figure, axes = pyplot.subplots()
    axes.plot(z.T, linewidth=0.3)
    axes.set_xticks(range(len(names)), names, rotation=45)
    return figure


def distances():
    figure, axes = pyplot.subplots()
    groups(axes, numpy.sqrt(t2), numpy.sqrt(q))
    axes.legend()
    return figure


def sequence():
    figure, axes = pyplot.subplots(2, 1)
    axes[0].plot(t2, "o-", markersize=3)
    axes[1].plot(q, "o-", markersize=3)
    return figure


few = [names.index(n) for n in ("length_mm", "thickness_mm", "mass_g", "water_absorption_pct", "breaking_load_n")]
total = 0.0
for name, make in [
    ("scree", scree), ("scores", score_plot), ("score matrix", lambda: grid(scores[:, :4], False)),
    ("loadings", loadings), ("loading bars", bars), ("biplot", biplot),
    ("correlation map", correlations), ("pairs", lambda: grid(x[:, few], True)),
    ("profiles", profiles), ("distances", distances), ("sequence", sequence),
]:
    times = []
    for _ in range(5):
        start = time.perf_counter()
        figure = make()
        figure.savefig(io.BytesIO(), format="svg")
        pyplot.close(figure)
        times.append((time.perf_counter() - start) * 1e3)
    median = sorted(times)[2]
    total += median
    print(f"{name:>16}  {median:8.2f}   matplotlib {matplotlib.__version__}")
print(f"all {total:.2f}")
