#!/usr/bin/env python3
"""Selection counts of a study, made by another lasso than ours: scikit-learn's coordinate descent.

usage: frequencies.py TABLE.csv OUTCOME ROWS.csv OUT.json --seed S --selected 2,4,8 [--ratio 0.95] [--floor 0.005]

ROWS.csv (header draw,row) lists the rows of every draw; draws 2k and 2k+1 are a pair. go run ./bench/drawn writes it.
Every half is copied, standardised on its own rows (population standard deviation) and fitted on the lattice
lambda_max * ratio^k, lambda_max being the whole table's, from its own start until more predictors have entered than the
largest of --selected. Entries, and for each q of --selected the counts within the cap region (the longest first part of a
path over which at most q distinct predictors have entered, whole steps), are written to OUT.json.

The set that scikit-learn leaves non-zero is accepted only if it is proven: the equations on that set are solved directly and
the solution meets the optimality conditions of the lasso with a margin on both sides, in units of the condition's own scale
(in: |b_j| / (inverse Gram_jj * lambda), out: 1 - |g_j|/lambda). The smallest margins met are written beside the counts.
"""
import argparse
import csv
import json
import platform

import numpy as np
import sklearn
from sklearn.linear_model import lasso_path

MARGIN = 1e-7        # a fit nearer to the border than this is not accepted as evidence
TOLERANCES = [1e-10, 1e-13, 1e-15]   # duality gap relative to the sum of squares; the next is tried where a set is not proven


def read_table(path, outcome):
    with open(path, encoding="utf-8") as f:
        header, *rows = list(csv.reader(f))
    x = np.array(rows, float)
    k = header.index(outcome)
    return [h for h in header if h != outcome], np.delete(x, k, axis=1), x[:, k]


def read_draws(path):
    a = np.loadtxt(path, delimiter=",", skiprows=1, dtype=int)
    return [np.sort(a[a[:, 0] == d, 1]) for d in range(a[-1, 0] + 1)]


def standardise(x, y):
    """Columns and outcome centred, columns in units of their population standard deviation."""
    z = x - x.mean(0)
    sd = np.sqrt((z * z).mean(0))
    if (sd < 1e-8 * abs(x).max(0)).any():
        raise SystemExit("a column hardly varies in a draw: this script does not treat that case")
    return np.asfortranarray(z / sd), y - y.mean()


def lambda_max(z, y):
    return abs(z.T @ y).max() / len(y)


def proof(z, y, b, lam):
    """Margins (in, out) of the set of non-zero b at lam, and the exact coefficients on it."""
    n, on = len(y), np.flatnonzero(b)
    exact, sign = np.zeros(len(b)), np.sign(b[on])
    inside = np.inf
    if len(on):
        inverse = np.linalg.inv(z[:, on].T @ z[:, on] / n)
        exact[on] = inverse @ (z[:, on].T @ y / n - lam * sign)
        inside = (exact[on] * sign / (np.diag(inverse) * lam)).min()
    g = z.T @ (y - z @ exact) / n
    off = np.delete(abs(g), on)
    return inside, (1 - off / lam).min() if len(off) else np.inf, exact


def fit(z, y, lam, start):
    """scikit-learn's solution at one lambda, its set proven."""
    b = start
    for tol in TOLERANCES:
        b = lasso_path(z, y, alphas=[lam], coef_init=b, precompute=z.shape[1] < len(y), tol=tol, max_iter=2_000_000)[1][:, 0]
        inside, out, exact = proof(z, y, b, lam)
        if min(inside, out) > MARGIN:
            return exact, inside, out, tol
    raise SystemExit("lambda %r: set of %d not proven: margins %g in, %g out" % (lam, np.count_nonzero(b), inside, out))


def path(z, y, top, ratio, floor, stop_after):
    """Entries [predictor, step, sign] of one draw; (first, last) step fitted; smallest margins; fits per tolerance."""
    step = int(np.floor(np.log(lambda_max(z, y) / top) / np.log(ratio))) + 1   # the lattice point above the draw's own lambda_max...
    while top * ratio ** step < lambda_max(z, y):
        step -= 1
    b, entries, seen, margins, used = np.zeros(z.shape[1]), [], set(), [np.inf, np.inf], {}
    first, last = step, int(np.floor(np.log(floor) / np.log(ratio) + 1e-9))
    while step < last and len(seen) <= stop_after:
        step += 1
        b, inside, out, tol = fit(z, y, top * ratio ** step, b)
        margins, used[tol] = [min(margins[0], inside), min(margins[1], out)], used.get(tol, 0) + 1
        for j in np.flatnonzero(b):
            if j not in seen:
                entries.append([int(j), step, int(np.sign(b[j]))])
                seen.add(j)
    return entries, [first, step], margins, used


def within_cap(entries, q):
    """Predictors of the longest first part of a path over which at most q have entered, whole steps; was there more?"""
    steps = sorted({s for _, s, _ in entries})
    chosen = set()
    for s in steps:
        new = {j for j, at, _ in entries if at == s}
        if len(chosen) + len(new) > q:
            return chosen, True
        chosen |= new
    return chosen, False


def region(q, all_entries, p):
    counts, both, binding = [0] * p, [0] * p, 0
    sets = [within_cap(e, q) for e in all_entries]
    for chosen, more in sets:
        binding += more
        for j in chosen:
            counts[j] += 1
    for (a, _), (b, _) in zip(sets[0::2], sets[1::2]):
        for j in a & b:
            both[j] += 1
    return {"selected": q, "counts": counts, "both_halves": both, "cap_binding": binding}


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
    draws = read_draws(a.rows)
    top = lambda_max(*standardise(x, y))
    entries, ranges, margins, used = [], [], [np.inf, np.inf], {}
    for rows in draws:
        e, r, m, u = path(*standardise(x[rows], y[rows]), top, a.ratio, a.floor, max(qs))
        entries.append(e), ranges.append(r)
        margins = [min(margins[0], m[0]), min(margins[1], m[1])]
        used = {t: used.get(t, 0) + u.get(t, 0) for t in set(used) | set(u)}
    result = {
        "made_by": "bench/peer/frequencies.py with scikit-learn %s, numpy %s, Python %s" % (sklearn.__version__, np.__version__, platform.python_version()),
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
