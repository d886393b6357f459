"""What the demo notebook must conclude, computed a second time with numpy.

    python3 demo_numbers.py ../../notebooks-demo/tiles.csv

`tests/clients.rs` holds the printed lines as its expectations; this script is not run by the
tests. It shares no code with the project: eigenvalues come from numpy.linalg.eigvalsh of
numpy.corrcoef, noise from numpy's own generator, and files from the csv module.
"""

import csv
import sys

import numpy as np


def main(path):
    with open(path, newline="") as file:
        rows = list(csv.DictReader(file))
    names = list(rows[0])[4:]
    complete = [row for row in rows if all(row[name] for name in names)]
    print("numpy", np.__version__)
    print(f"{len(complete)} complete rows of {len(rows)}")

    incomplete = np.array([not all(row[name] for name in names) for row in rows])
    for name in names:
        if all(row[name] for row in rows):
            values = np.array([float(row[name]) for row in rows])
            gap = values[incomplete].mean() - values[~incomplete].mean()
            print(f"{name:24}{gap / values.std(ddof=1):6.2f}")

    x = np.array([[float(row[name]) for name in names] for row in complete])
    covariance = np.linalg.eigvalsh(np.cov(x.T))
    print(f"the first component holds {100 * covariance[-1] / covariance.sum():.1f} % of the variance")

    def decompose(part):
        values, vectors = np.linalg.eigh(np.corrcoef(part.T))
        return values[::-1], vectors[:, ::-1]

    values, vectors = decompose(x)
    generator = np.random.default_rng(1)
    noise = [decompose(generator.standard_normal(x.shape))[0] for _ in range(1000)]
    limit = np.quantile(noise, 0.95, axis=0)
    kept = int(np.argmin(values > limit))
    print(f"{kept} components stand out from noise and hold {100 * values[:kept].sum() / len(names):.0f} % of the variance; the next one has {values[kept]:.2f}")

    scores = (x - x.mean(0)) / x.std(0, ddof=1) @ vectors / np.sqrt(values)
    batch = np.array([row["batch"] for row in complete])
    kiln = np.array([row["kiln"] for row in complete])
    distances = sorted(
        (float(np.linalg.norm(scores[batch == b, :kept].mean(0))), str(b)) for b in set(batch)
    )[::-1]
    middle = distances[len(distances) // 2][0]
    odd = [b for distance, b in distances if distance > 2 * middle]
    print(f"the middle batch lies {middle:.2f} from the centre; odd batches: {', '.join(odd)}")

    parts = [(f"without {k}", kiln != k) for k in ("north", "mill", "yard")]
    parts.append((f"without {' and '.join(odd)}", ~np.isin(batch, odd)))
    for what, chosen in parts:
        again = decompose(x[chosen])[1]
        agreement = np.abs((vectors[:, :kept] * again[:, :kept]).sum(0))
        print(f"{what:24}{chosen.sum():4} tiles   {'  '.join(f'{a:.3f}' for a in agreement)}")


if __name__ == "__main__":
    main(*sys.argv[1:])
