# Fits second-order step responses with scipy.optimize.least_squares, as a peer
# to be timed against. stdin: {"repeats": n, "traces": [{"t0", "dt", "y", "start"}]};
# the parameters are baseline, drift, height, ln w, ln zeta and time of the step.
# stdout: for each trace {"seconds": per fit, "theta": [...]}.
import json
import sys
import time

import numpy as np
from scipy.optimize import least_squares


def response(x, zeta):
    x = np.maximum(x, 0.0)
    q2 = zeta * zeta - 1.0
    if q2 < 0:
        q = np.sqrt(-q2)
        e = np.exp(-zeta * x)
        return 1 - e * (np.cos(q * x) + zeta / q * np.sin(q * x))
    q = np.sqrt(q2)
    slow, fast = np.exp(-x / (zeta + q)), np.exp(-x * (zeta + q))
    return 1 - (slow + fast) / 2 - zeta * (slow - fast) / (2 * q)


def main():
    job = json.load(sys.stdin)
    out = []
    for trace in job["traces"]:
        y = np.array(trace["y"])
        t = trace["t0"] + trace["dt"] * np.arange(len(y))
        span = t - t.mean()

        def residuals(p):
            return y - (p[0] + p[1] * span + p[2] * response(np.exp(p[3]) * (t - p[5]), np.exp(p[4])))

        best, fit = None, None
        for _ in range(job["repeats"]):
            begun = time.perf_counter()
            fit = least_squares(residuals, trace["start"], method="lm", xtol=1e-10, ftol=1e-10, gtol=1e-10)
            took = time.perf_counter() - begun
            best = took if best is None else min(best, took)
        out.append({"seconds": best, "theta": list(fit.x), "evaluations": int(fit.nfev)})
    json.dump(out, sys.stdout)


main()
