"""Second oracle: regression by statsmodels and scipy, static figures by plain
Python with linear programs for the lines that minimise a maximum.

Reads {"models": [...], "both": [...], "static": [...]} from stdin and writes the
same lists of figures; None where there is nothing to find.
"""

import json
import math
import sys
from collections import defaultdict

import numpy as np
from scipy import odr, stats
from scipy.optimize import linprog


def model(task):
    from statsmodels.regression.linear_model import GLS, WLS  # slow to load

    x = np.array(task["x"]).T
    y = np.array(task["y"])
    n, p = x.shape
    common = np.array(task["common"] or np.zeros((0, n))).reshape(-1, n).T
    if task["sd"] is not None and not task["relative"]:
        sd = np.array(task["sd"])
        v = np.diag(sd**2) + common @ common.T
        fit = GLS(y, x, sigma=v).fit(cov_type="fixed scale")
        r = y - x @ fit.params
        residual = math.sqrt(r @ np.linalg.solve(v, r) / (n - p))
        dof = n - p
    else:
        w = np.ones(n) if task["sd"] is None else 1 / np.array(task["sd"])
        fit = WLS(y, x, weights=w**2).fit()
        both = np.column_stack([x, common])
        rank = np.linalg.matrix_rank(both / np.linalg.norm(both, axis=0), tol=1e-9)
        left = (y - both @ np.linalg.lstsq(both * w[:, None], y * w, rcond=1e-11)[0]) * w
        dof = int(n - rank)
        residual = math.sqrt(left @ left / dof)
        moves = np.linalg.pinv(x * w[:, None]) @ (common * w[:, None])
        covariance = residual**2 * fit.normalized_cov_params + moves @ moves.T
        row = np.array(task["row"])
        return {
            "b": fit.params.tolist(),
            "covariance": covariance.tolist(),
            "residual": residual,
            "dof": dof,
            "at": [float(row @ fit.params), math.sqrt(row @ covariance @ row)],
        }
    at = fit.get_prediction(np.array([task["row"]]))
    return {
        "b": fit.params.tolist(),
        "covariance": fit.cov_params().tolist(),
        "residual": residual,
        "dof": dof,
        "at": [float(at.predicted_mean[0]), float(np.sqrt(at.var_pred_mean[0]))],
    }


def both(task):
    x, y, ux, uy = (np.array(task[k]) for k in ("x", "y", "ux", "uy"))
    start = stats.linregress(x, y)
    fit = odr.ODR(
        odr.RealData(x, y, sx=ux, sy=uy),
        odr.unilinear,
        beta0=[start.slope, start.intercept],
        sstol=1e-15,
        partol=1e-15,
        maxit=1000,
    ).run()
    return {"slope": fit.beta[0], "intercept": fit.beta[1], "chi2": fit.sum_square}


def chebyshev(columns, y, u):
    """The least largest deviation of y from a combination of columns, and what
    noise u of y leaves in it: the marginals of the program are its weights."""
    scale = max(np.abs(y).max(), 1e-300)
    columns = columns / np.abs(columns).max(axis=0)
    n, p = columns.shape
    a = np.vstack([np.hstack([columns, -np.ones((n, 1))]), np.hstack([-columns, -np.ones((n, 1))])])
    b = np.concatenate([y, -y]) / scale
    options = {"primal_feasibility_tolerance": 1e-10, "dual_feasibility_tolerance": 1e-10}
    out = linprog([0] * p + [1], A_ub=a, b_ub=b, bounds=[(None, None)] * p + [(0, None)], method="highs-ds", options=options)
    weights = out.ineqlin.marginals[:n] - out.ineqlin.marginals[n:]
    return out.fun * scale, weights


def lines(x, y, u):
    n = len(x)
    if n < 2:
        return None
    y = y - y[0] - (y[-1] - y[0]) / (x[-1] - x[0]) * (x - x[0])
    d = x - x[0]
    if n == 2:
        return {k: [0.0, 0.0] for k in ("independent", "zero_based", "terminal", "least_squares")}
    free, weights = chebyshev(np.column_stack([np.ones(n), (x - x.mean())]), y, u)
    out = {"independent": [free, noise(weights, u)]}
    pinned, weights = chebyshev(d[1:, None], y[1:], u)
    out["zero_based"] = [pinned, noise(np.concatenate([[-weights.sum()], weights]), u)]
    k = np.abs(y).argmax()
    share = d[k] / d[-1]
    weights = np.zeros(n)
    weights[k] += 1
    weights[0] -= 1 - share
    weights[-1] -= share
    out["terminal"] = [abs(y[k]), noise(weights, u)]
    design = np.column_stack([np.ones(n), x - x.mean()])
    left = np.eye(n) - design @ np.linalg.pinv(design)
    r = left @ y
    k = np.abs(r).argmax()
    out["least_squares"] = [abs(r[k]), noise(left[k], u)]
    return out


def noise(weights, u):
    return None if u is None else float(np.sqrt(((np.asarray(weights) * u) ** 2).sum()))


def ranked(task):
    """Set pressures by rank where none were stated; None where legs differ."""
    legs = defaultdict(list)
    for i, key in enumerate(zip(task["cycle"], task["down"])):
        legs[key].append(i)
    for members in legs.values():
        members.sort(key=lambda i: (task["reference"][i], task["uut"][i]))
    longest = max(legs.values(), key=len)
    by_time = [legs[k] for k in sorted(legs)]
    longest = next(m for m in by_time if len(m) == len(longest))
    n = len(longest)
    p = task["reference"]
    for members in by_time:
        if len(members) == n:
            continue
        if len(members) != n - 1:
            return None
        below, top = (abs(p[members[-1]] - p[longest[k]]) for k in (n - 2, n - 1))
        if 2 * below > top * (1 + 1e-9):
            return None
    ranks = defaultdict(list)
    for members in by_time:
        for rank, i in enumerate(members):
            ranks[rank].append(i)
    sets = [None] * len(p)
    for members in ranks.values():
        for i in members:
            sets[i] = math.fsum(p[j] for j in members) / len(members)
    return sets


def static(task):
    p, y = np.array(task["reference"]), np.array(task["uut"])
    n = len(p)
    error = y - p
    out = {}
    sets = task["set"] if task["set"] is not None else ranked(task)
    key = sets if sets is not None else task["reference"]
    nearest = min(abs(k) for k in key)
    at = [i for i in range(n) if abs(key[i]) == nearest]
    first = min(at, key=lambda i: (task["cycle"][i], task["down"][i], -key[i] if task["down"][i] else key[i]))
    same = [i for i in at if key[i] == key[first] and task["cycle"][i] == task["cycle"][first] and task["down"][i] == task["down"][first]]
    out["zero_offset"] = error[same].mean()
    zeroed = out["zero_offset"] if task["zero"] is None else task["zero"]
    out["as_read"] = [error.max(), error.min()]
    out["after_zero"] = [error.max() - zeroed, error.min() - zeroed]
    if n < 3 or p.max() == p.min():
        return out
    line = stats.linregress(p, y)
    slope = ((p - p.mean()) @ (y - y.mean())) / ((p - p.mean()) @ (p - p.mean()))
    intercept = y.mean() - slope * p.mean()
    out["line"] = [line.intercept, line.slope, line.intercept_stderr, line.stderr]
    if sets is None:
        return out
    cells = defaultdict(list)
    for i in range(n):
        cells[task["cycle"][i], task["down"][i], sets[i]].append(y[i] - intercept - slope * p[i])
    cells = {k: math.fsum(v) / len(v) for k, v in cells.items()}
    levels = sorted(set(sets))
    cycles = sorted(set(task["cycle"]))
    zero = min(levels, key=lambda s: (abs(s), s))

    hysteresis = {}
    for (cycle, down, s), r in cells.items():
        if down and (cycle, False, s) in cells:
            hysteresis[cycle, s] = r - cells[cycle, False, s]
    out["hysteresis"] = [[c, s, hysteresis[c, s]] for c, s in sorted(hysteresis)]
    out["zero_return"] = [hysteresis.get((c, zero)) for c in cycles]

    mounting = {c: 0 for c in cycles}
    if task["mounting"] is not None:
        mounting = dict(zip(task["cycle"], task["mounting"]))
    groups, corrected, across = defaultdict(list), defaultdict(list), defaultdict(list)
    for (cycle, down, s), r in cells.items():
        groups[mounting[cycle], down, s].append(r)
        begin = cells.get((cycle, False, zero))
        if begin is not None:
            corrected[mounting[cycle], down, s].append(r - begin)
            if cycle == min(c for c in cycles if mounting[c] == mounting[cycle]):
                across[down, s].append(r - begin)
    dof = sum(len(g) - 1 for g in groups.values())
    out["dof"] = dof
    pooled = None
    if dof:
        pooled = math.sqrt(sum((len(g) - 1) * np.var(g, ddof=1) for g in groups.values() if len(g) > 1) / dof)
        out["pooled"] = pooled
        out["range"] = max(np.ptp(g) for g in groups.values() if len(g) > 1)

    def most(table, s, downs=(False, True)):
        found = [np.ptp(g) for k, g in table.items() if k[-1] == s and k[-2] in downs and len(g) > 1]
        return max(found) if found else None

    one_leg = len(set(task["down"])) == 1
    out["points"] = []
    averages, u = [], []
    for s in levels:
        legs = [[r for (c, d, t), r in cells.items() if t == s and d == down] for down in (False, True)]
        there = [leg for leg in legs if leg]
        whole = len(there) == 2 or one_leg or s in (levels[0], levels[-1])
        r = sum(sum(leg) / len(leg) for leg in there) / len(there)
        averages.append(intercept + slope * s + r if whole else None)
        u.append(math.sqrt(sum(1 / len(leg) for leg in there)) / len(there))
        each = [abs(h) for (c, t), h in hysteresis.items() if t == s]
        out["points"].append(
            [
                averages[-1],
                sum(each) / len(each) if each else None,
                most(groups, s, (False,)),
                most(groups, s, (True,)),
                most(corrected, s),
                most({(0,) + k: g for k, g in across.items()}, s) if len(set(mounting.values())) > 1 else None,
            ]
        )
    if None not in averages:
        noises = None if pooled is None else pooled * np.array(u)
        out["lines"] = lines(np.array(levels), np.array(averages), noises)
    order = min(3, len(levels) - 1)
    if order >= 2 and n > order + 1 and len(set(task["reference"])) > order:
        half = (p.max() - p.min()) / 2
        middle = (p.max() + p.min()) / 2
        powers = np.vander((p - middle) / half, order + 1, increasing=True)
        fitted, *_ = np.linalg.lstsq(powers, y, rcond=None)
        curve = np.polynomial.Polynomial(fitted, domain=[p.min(), p.max()]).convert().coef
        out["curve"] = np.pad(curve, (0, order + 1 - len(curve))).tolist()
        left = y - powers @ fitted
        out["curve_residual"] = math.sqrt(left @ left / (n - order - 1))
    return out


def plain(value):
    if isinstance(value, dict):
        return {k: plain(v) for k, v in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(v) for v in value]
    return value.item() if isinstance(value, np.generic) else value


def main():
    task = json.load(sys.stdin)
    json.dump(
        {
            "models": [plain(model(t)) for t in task["models"] or []],
            "both": [plain(both(t)) for t in task["both"] or []],
            "static": [plain(static(t)) for t in task["static"] or []],
        },
        sys.stdout,
    )


main()
