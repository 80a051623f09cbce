#!/usr/bin/env python3
"""Selection counts of a study with a yes-no outcome, made by another logistic lasso than ours: scikit-learn's saga.

usage: frequencies_yes_no.py TABLE.csv OUTCOME ROWS.csv OUT.json --seed S --selected 2,4,6 [--ratio 0.95] [--floor 0.005]

ROWS.csv (header draw,row) lists the rows of every draw; draws 2k and 2k+1 are a pair. go run ./bench/drawn writes it.
Every half is copied, standardised on its own rows (population standard deviation) and fitted on the lattice
lambda_max * ratio^k, lambda_max being the whole table's, from its own start until more predictors have entered than the
largest of --selected. The intercept is not penalised. What is written is what bench/peer/frequencies.py writes for a number.

The set that scikit-learn leaves non-zero is accepted only if it is proven: the equations on that set are solved by Newton's
method and the solution meets the optimality conditions of the lasso with a margin on both sides, in units of the
condition's own scale (in: |b_j| / (inverse Hessian_jj * lambda), out: 1 - |g_j|/lambda). The smallest margins met are
written beside the counts.
"""
import argparse
import json
import os
import platform
import sys
import warnings

import numpy as np
import sklearn
from sklearn.exceptions import ConvergenceWarning
from sklearn.linear_model import LogisticRegression

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "..", "bench", "peer"))
from frequencies import MARGIN, read_draws, read_table, region, standardise  # noqa: E402

TOLERANCES = [1e-5, 1e-7, 1e-9, 1e-11]   # saga's: largest change of a coefficient relative to the largest coefficient
ROUNDS = 100_000
SOLVED = 1e-13                           # of the equations on the set, in units of the gradient


def lambda_max(z, y):
    """Largest gradient of the model of the intercept alone, whose fitted probability is the mean."""
    return abs(z.T @ (y - y.mean())).max() / len(y)


def probabilities(z, a, b):
    return 1 / (1 + np.exp(-(a + z @ b)))


def newton(z, y, a, b, lam):
    """Intercept and coefficients that solve the equations of the set of non-zero b, the signs held; inverse Hessian."""
    n, on, sign = len(y), np.flatnonzero(b), np.sign(b)
    d = np.column_stack([np.ones(n), z[:, on]])
    t = np.concatenate([[a], b[on]])
    for _ in range(100):
        mu = probabilities(d[:, 1:], t[0], t[1:])
        g = d.T @ (mu - y) / n + np.concatenate([[0], lam * sign[on]])
        inverse = np.linalg.inv((d * (mu * (1 - mu) / n)[:, None]).T @ d)
        if abs(g).max() < SOLVED:
            exact = np.zeros(len(b))
            exact[on] = t[1:]
            return t[0], exact, np.diag(inverse)[1:]
        t = t - inverse @ g
    return None


def proof(z, y, a, b, lam):
    """Margins (in, out) of the set of non-zero b at lam, and the exact solution on it."""
    solved = newton(z, y, a, b, lam)
    if solved is None:
        return -np.inf, -np.inf, a, b
    exact_a, exact, inverse = solved
    on, sign = np.flatnonzero(b), np.sign(b)
    inside = (exact[on] * sign[on] / (inverse * lam)).min() if len(on) else np.inf
    off = np.delete(abs(z.T @ (y - probabilities(z, exact_a, exact)) / len(y)), on)
    return inside, (1 - off / lam).min() if len(off) else np.inf, exact_a, exact


def fit(z, y, lam, start):
    """scikit-learn's solution at one lambda, its set proven."""
    model = LogisticRegression(penalty="l1", solver="saga", C=1 / (len(y) * lam), max_iter=ROUNDS, warm_start=True, random_state=0)
    model.intercept_, model.coef_ = np.array([start[0]]), start[1].reshape(1, -1).copy()
    for tol in TOLERANCES:
        model.set_params(tol=tol)
        with warnings.catch_warnings():
            warnings.simplefilter("error", ConvergenceWarning)
            model.fit(z, y)
        inside, out, a, b = proof(z, y, model.intercept_[0], model.coef_[0], lam)
        if min(inside, out) > MARGIN:
            return a, b, inside, out, tol
    raise SystemExit("lambda %r: set of %d not proven: margins %g in, %g out" % (lam, np.count_nonzero(b), inside, out))


def path(z, y, top, ratio, floor, stop_after):
    """Entries [predictor, step, sign] of one draw; (first, last) step fitted; smallest margins; fits per tolerance."""
    step = int(np.floor(np.log(lambda_max(z, y) / top) / np.log(ratio))) + 1
    while top * ratio ** step < lambda_max(z, y):
        step -= 1
    at = np.log(y.mean() / (1 - y.mean())), np.zeros(z.shape[1])
    entries, seen, margins, used = [], set(), [np.inf, np.inf], {}
    first, last = step, int(np.floor(np.log(floor) / np.log(ratio) + 1e-9))
    while step < last and len(seen) <= stop_after:
        step += 1
        a, b, inside, out, tol = fit(z, y, top * ratio ** step, at)
        at = a, b
        margins, used[tol] = [min(margins[0], inside), min(margins[1], out)], used.get(tol, 0) + 1
        for j in np.flatnonzero(b):
            if j not in seen:
                entries.append([int(j), step, int(np.sign(b[j]))])
                seen.add(j)
    return entries, [first, step], margins, used


def main():
    a = argparse.ArgumentParser()
    for name in ("table", "outcome", "rows", "out"):
        a.add_argument(name)
    a.add_argument("--seed", type=int, required=True)
    a.add_argument("--selected", required=True)
    a.add_argument("--ratio", type=float, default=0.95)
    a.add_argument("--floor", type=float, default=0.005)
    a = a.parse_args()
    qs = [int(q) for q in a.selected.split(",")]
    names, x, y = read_table(a.table, a.outcome)
    if set(y) != {0, 1}:
        raise SystemExit("the outcome must hold 0 and 1, and nothing else")
    draws = read_draws(a.rows)
    top = lambda_max(standardise(x, y)[0], y)
    entries, ranges, margins, used = [], [], [np.inf, np.inf], {}
    for rows in draws:
        e, r, m, u = path(standardise(x[rows], y[rows])[0], y[rows], top, a.ratio, a.floor, max(qs))
        entries.append(e), ranges.append(r)
        margins = [min(margins[0], m[0]), min(margins[1], m[1])]
        used = {t: used.get(t, 0) + u.get(t, 0) for t in set(used) | set(u)}
    result = {
        "made_by": "testdata/tools/frequencies_yes_no.py with scikit-learn %s, numpy %s, Python %s" % (sklearn.__version__, np.__version__, platform.python_version()),
        "table": a.table.split("testdata/")[-1], "outcome": a.outcome, "rows": a.rows.split("testdata/")[-1], "seed": a.seed,
        "draws": len(draws), "ratio": a.ratio, "floor": a.floor, "stop_after": max(qs), "lambda_max": top,
        "smallest_margin_in": margins[0], "smallest_margin_out": margins[1], "fits": sum(used.values()),
        "predictors": names, "regions": [region(q, entries, len(names)) for q in qs], "steps": ranges, "entries": entries,
    }
    with open(a.out, "w", encoding="utf-8") as f:
        f.write("{\n" + ",\n".join("%s: %s" % (json.dumps(k), json.dumps(v, separators=(",", ":"))) for k, v in result.items()) + "\n}\n")
    print("%s: %d draws, %d fits, tolerances used %s, smallest margins %.2g in, %.2g out" % (a.out, len(draws), result["fits"], used, *margins))


if __name__ == "__main__":
    main()
