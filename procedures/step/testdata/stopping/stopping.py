"""Bounds for looking at a mean after every step from the least to the most.

Two million runs of independent normal steps whose mean stands at the limit:
t = mean/(s/sqrt n) after each look, carried to z = (8v+1)/(8v+3) sqrt(v ln(1+t^2/v))
with its sign, v = n - 1. Printed for each least and most: the part of runs in
which z passes 1.959964 at some look, and the z that 2.5 % of runs pass.
"""
import numpy as np

LEAST, MOST, RUNS, PIECES = [3, 4, 5, 6, 8, 10], [4, 5, 6, 8, 10, 12, 15, 20, 25, 30], 2_000_000, 20
rng = np.random.default_rng(20261201)
tops = {(a, b): [] for a in LEAST for b in MOST if b > a}
for _ in range(PIECES):
    x = rng.standard_normal((RUNS // PIECES, max(MOST)))
    s, q = np.cumsum(x, 1), np.cumsum(x * x, 1)
    running = {a: np.full(len(x), -np.inf) for a in LEAST}
    for n in range(min(LEAST), max(MOST) + 1):
        m = s[:, n - 1] / n
        t = m / np.sqrt((q[:, n - 1] - n * m * m) / (n - 1) / n)
        v = n - 1
        z = np.sign(t) * (8 * v + 1) / (8 * v + 3) * np.sqrt(v * np.log1p(t * t / v))
        for a in LEAST:
            if n >= a:
                running[a] = np.maximum(running[a], z)
            if (a, n) in tops:
                tops[a, n].append(running[a].copy())
print("least,most,passed_at_1.96,z")
for (a, b), pieces in tops.items():
    top = np.concatenate(pieces)
    print(f"{a},{b},{np.mean(top > 1.959964):.4f},{np.quantile(top, 0.975):.4f}")
