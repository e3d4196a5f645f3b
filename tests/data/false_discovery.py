"""Reference table: probabilities adjusted for many comparisons.

Run from the repository root: python3 tests/data/false_discovery.py
Made with Python 3.11, numpy==2.4.6, scipy==1.17.1.

40 sets of 1 to 300 values, of which a share differs from zero by 1 to 6
standard errors, with ties, zeros and ones among them.  z is the value over its
standard error, p = 2 * scipy.stats.norm.sf(|z|), bh and by are
scipy.stats.false_discovery_control(p, method="bh" and "by").

Accuracy: double precision.
"""
import csv
from pathlib import Path

import numpy as np
from scipy.stats import false_discovery_control, norm


def main():
    rng = np.random.default_rng(20260501)
    path = Path(__file__).with_name("false_discovery.csv")
    with path.open("w", newline="") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(["set", "z", "p", "bh", "by"])
        for k, n in enumerate(list(range(1, 21)) + [30] * 10 + [100] * 8 + [300] * 2):
            z = rng.normal(size=n)
            far = rng.random(n) < rng.random()
            z[far] += rng.uniform(-6, 6, size=far.sum())
            z = np.round(z, 2)  # ties
            z[rng.random(n) < 0.02] = 0.0
            p = 2 * norm.sf(np.abs(z))
            bh = false_discovery_control(p, method="bh")
            by = false_discovery_control(p, method="by")
            for row in zip(z, p, bh, by):
                out.writerow([k] + [repr(float(x)) for x in row])


main()
