"""One UUT's whole static analysis in plain numpy and scipy, the way an analyst
would write it: what the Go package is timed against, and held to.

Reads one JSON document from stdin: the readings, the specification of the
budget, and how often to repeat. Writes the figures and the seconds of one
analysis, the fastest of the rounds.
"""

import itertools
import json
import sys
import time

import numpy as np
from scipy import stats


def analyse(reference, uut, cycle, down, sets, spec):
    n = len(uut)
    mean_p = reference.mean()
    d = reference - mean_p
    sxx = d @ d
    slope = d @ (uut - uut.mean()) / sxx
    intercept = uut.mean() - slope * mean_p
    r = uut - intercept - slope * reference
    s = np.sqrt(r @ r / (n - 2))
    covariance = s**2 * np.array([[1 / n + mean_p**2 / sxx, -mean_p / sxx], [-mean_p / sxx, 1 / sxx]])

    cubic, cubic_covariance = np.polyfit(reference, uut, 3, cov=True)

    # residuals by cycle, leg and set pressure
    levels, level = np.unique(sets, return_inverse=True)
    table = np.full((cycle.max(), 2, len(levels)), np.nan)
    table[cycle - 1, down.astype(int), level] = r

    zero = np.abs(levels).argmin()
    hysteresis = table[:, 1] - table[:, 0]
    mean_hysteresis = np.abs(hysteresis).mean(axis=0)
    zero_return = hysteresis[:, zero]
    ranges = np.ptp(table, axis=0)
    dof = (table.shape[0] - 1) * 2 * len(levels)
    pooled = np.sqrt(((table - table.mean(axis=0)) ** 2).sum() / dof)
    corrected = table - table[:, :1, zero : zero + 1]
    repeatability = np.ptp(corrected, axis=0).max(axis=0)

    average = intercept + slope * levels + table.mean(axis=(0, 1))
    x, y = levels, average
    terminal = np.abs(y - y[0] - (y[-1] - y[0]) / (x[-1] - x[0]) * (x - x[0])).max()
    b, a = np.polyfit(x, y, 1)
    least_squares = np.abs(y - a - b * x).max()
    dx, dy = x[1:] - x[0], y[1:] - y[0]
    zero_based = np.max(np.abs(np.outer(dy, dx) - np.outer(dx, dy)) / np.add.outer(dx, dx))
    i, j, k = np.array(list(itertools.combinations(range(len(x)), 3))).T
    chord = y[i] + (y[k] - y[i]) * (x[j] - x[i]) / (x[k] - x[i])
    independent = np.abs(y[j] - chord).max() / 2

    error = uut - reference
    first = np.flatnonzero((cycle == 1) & ~down & (level == zero))[0]
    after = error - error[first]

    # the budget at each set pressure
    u = np.column_stack(
        [
            np.full(len(levels), spec["certificate"] / 2),
            spec["share"] / 2 * levels,
            spec["drift"] / np.sqrt(3) * levels,
            np.full(len(levels), spec["resolution_reference"] / np.sqrt(12)),
            np.full(len(levels), spec["resolution_uut"] / np.sqrt(12)),
            np.full(len(levels), pooled / np.sqrt(table.shape[0])),
            mean_hysteresis / np.sqrt(12),
            np.full(len(levels), np.abs(zero_return).max() / np.sqrt(12)),
            np.full(len(levels), spec["temperature"]),
            np.full(len(levels), spec["head"]),
            np.full(len(levels), spec["settling"] / np.sqrt(3)),
            np.full(len(levels), spec["skew"] / np.sqrt(3)),
        ]
    )
    combined = np.sqrt((u**2).sum(axis=1))
    effective = combined**4 / (u[:, 5] ** 4 / dof)
    expanded = stats.t.ppf(0.975, effective) * combined

    return {
        "intercept": intercept,
        "slope": slope,
        "residual": s,
        "covariance": covariance,
        "cubic": cubic[::-1],
        "cubic_covariance": cubic_covariance[::-1, ::-1],
        "terminal": terminal,
        "least_squares": least_squares,
        "zero_based": zero_based,
        "independent": independent,
        "hysteresis": hysteresis,
        "largest_hysteresis": np.abs(hysteresis).max(),
        "mean_hysteresis": mean_hysteresis,
        "zero_offset": error[first],
        "zero_return": zero_return,
        "ranges": ranges,
        "pooled": pooled,
        "repeatability": repeatability,
        "average": average,
        "as_read": [error.max(), error.min()],
        "after_zero": [after.max(), after.min()],
        "combined": combined,
        "effective": effective,
        "expanded": expanded,
    }


def main():
    task = json.load(sys.stdin)
    columns = (
        np.array(task["reference"]),
        np.array(task["uut"]),
        np.array(task["cycle"]),
        np.array(task["down"]),
        np.array(task["set"]),
    )
    figures = analyse(*columns, task["spec"])
    seconds = []
    for _ in range(task["rounds"]):
        start = time.perf_counter()
        for _ in range(task["repeat"]):
            analyse(*columns, task["spec"])
        seconds.append((time.perf_counter() - start) / task["repeat"])
    figures = {name: np.asarray(value).tolist() for name, value in figures.items()}
    json.dump({"figures": figures, "seconds": min(seconds)}, sys.stdout)


main()
