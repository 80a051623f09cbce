#!/usr/bin/env python3
"""Selection counts of a study whose outcome is not a number, made by other programs than ours.

usage: frequencies_families.py FAMILY TABLE.csv OUTCOME ROWS.csv OUT.json --seed S --selected 2,4,8
           [--candidates A,B,C=level] [--offset COLUMN] [--event COLUMN --ties efron|breslow [--strata COLUMN]] [--ratio 0.95] [--floor 0.005]

FAMILY is binomial, multinomial, poisson or cox (OUTCOME is then the time). Candidates default to every other column;
C=level is the indicator of a level. ROWS.csv (header draw,row) lists the rows of every draw; draws 2k and 2k+1 are a
pair. go run ./bench/drawn writes it. Every half is copied, standardised on its own rows (population standard deviation)
and fitted on the lattice lambda_max * ratio^k, lambda_max being the whole table's, from its own start until more
predictors have entered than the largest of --selected. Intercepts are not penalised. A predictor of a multinomial outcome
is in where it is non-zero in any class; its sign is written as 1. What is written is what bench/peer/frequencies.py writes.

The set of non-zero coefficients is proposed by scikit-learn's saga (binomial, multinomial) or scipy's L-BFGS-B on
b = u - v, u, v >= 0 (poisson, cox), and accepted only if it is proven: the equations on that set are solved by Newton's
method and the solution meets the optimality conditions of the lasso with a margin on both sides, in units of the
condition's own scale (in: |b_j| / (inverse Hessian_jj * lambda), out: 1 - |g_j|/lambda). The smallest margins met are
written beside the counts. All four losses are convex; a proven solution is the only one (of three classes: with a lasso
penalty and an odd number of classes).
"""
import argparse
import csv
import json
import os
import platform
import sys
import warnings

import numpy as np
import scipy
import sklearn
from scipy.optimize import minimize
from sklearn.exceptions import ConvergenceWarning
from sklearn.linear_model import LogisticRegression

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "..", "bench", "peer"))
from frequencies import MARGIN, read_draws, region  # noqa: E402

SAGA = [1e-5, 1e-7, 1e-9, 1e-11]         # largest change of a coefficient relative to the largest coefficient
ROUNDS = 100_000
DROPPED = [0, 1e-9, 1e-7, 1e-5]          # coefficients that L-BFGS-B leaves on a bound but for this share of the largest
SOLVED = 1e-13                           # of the equations on the set, in units of the gradient, relative to its size


# ---------------------------------------------------------------- losses: intercepts first, then coefficients class by class
class Glm:
    """Mean loss of binomial or poisson, one intercept."""
    intercepts, classes = 1, 1

    def __init__(self, family, z, y, offset):
        self.family, self.z, self.y, self.offset = family, z, y, offset
        self.d = np.column_stack([np.ones(len(y)), z])

    def null(self):
        if self.family == "binomial":
            return np.array([np.log(self.y.mean() / (1 - self.y.mean()))])
        return np.array([np.log(self.y.sum() / np.exp(self.offset).sum())])

    def mean(self, t):
        eta = self.offset + self.d @ t
        return 1 / (1 + np.exp(-eta)) if self.family == "binomial" else np.exp(eta)

    def value(self, t):
        eta = self.offset + self.d @ t
        return (np.logaddexp(0, eta) if self.family == "binomial" else np.exp(eta)).mean() - (self.y * eta).mean()

    def gradient(self, t):
        return self.d.T @ (self.mean(t) - self.y) / len(self.y)

    def hessian(self, t):
        mu = self.mean(t)
        v = mu * (1 - mu) if self.family == "binomial" else mu
        return (self.d * (v / len(v))[:, None]).T @ self.d


class Multinomial:
    """Mean loss with one coefficient vector per class; the intercepts are held to sum zero."""

    def __init__(self, z, y, classes):
        self.z, self.classes, self.intercepts = z, classes, classes
        self.y, self.label = np.eye(classes)[y], y

    def null(self):
        a = np.log(self.y.mean(0))
        return a - a.mean()

    def probabilities(self, t):
        k = self.classes
        eta = t[:k] + self.z @ t[k:].reshape(k, -1).T
        p = np.exp(eta - eta.max(1, keepdims=True))
        return p / p.sum(1, keepdims=True)

    def gradient(self, t):
        u = (self.probabilities(t) - self.y) / len(self.y)
        return np.concatenate([u.sum(0), (u.T @ self.z).ravel()])

    def hessian(self, t):
        k, p = self.classes, self.z.shape[1]
        mu = self.probabilities(t)
        h = np.zeros((len(t), len(t)))
        d = np.column_stack([np.ones(len(mu)), self.z])
        at = [np.concatenate([[c], k + c * p + np.arange(p)]) for c in range(k)]
        for c in range(k):
            for e in range(k):
                v = mu[:, c] * ((c == e) - mu[:, e]) / len(mu)
                h[np.ix_(at[c], at[e])] = (d * v[:, None]).T @ d
        h[:k, :k] += 1        # the direction that no probability sees
        return h


class Cox:
    """Negative log partial likelihood over the number of rows. A row of risk holds, for one event, the weight of every
    row in the sum under the logarithm; Efron's takes away l/m of the m that die at the time, for l = 0 ... m-1."""
    intercepts, classes = 0, 1

    def __init__(self, z, time, event, strata, ties):
        self.z, self.dead, risk = z, event == 1, []
        for s in np.unique(strata):
            for t in np.unique(time[self.dead & (strata == s)]):
                at_risk, dies = (strata == s) & (time >= t), (strata == s) & (time == t) & self.dead
                m = dies.sum()
                risk += [at_risk - (l / m if ties == "efron" else 0) * dies for l in range(m)]
        self.risk = np.array(risk, float)

    def null(self):
        return np.zeros(0)

    def shares(self, t):
        p = self.risk * np.exp(self.z @ t)
        return p / p.sum(1, keepdims=True)

    def value(self, t):
        eta = self.z @ t
        return (np.log(self.risk @ np.exp(eta)).sum() - eta[self.dead].sum()) / len(eta)

    def gradient(self, t):
        return self.z.T @ (self.shares(t).sum(0) - self.dead) / len(self.dead)

    def hessian(self, t):
        p = self.shares(t)
        mean = p @ self.z
        return ((self.z * p.sum(0)[:, None]).T @ self.z - mean.T @ mean) / len(self.dead)


# ---------------------------------------------------------------- who proposes a set
def saga(loss, lam, t):
    """scikit-learn's solutions at one lambda, ever tighter."""
    n, k = len(loss.y), loss.intercepts
    label = loss.y if k == 1 else loss.label
    model = LogisticRegression(penalty="l1", solver="saga", C=1 / (n * lam), max_iter=ROUNDS, warm_start=True, random_state=0,
                               multi_class="ovr" if k == 1 else "multinomial")
    model.intercept_, model.coef_ = t[:k].copy(), t[k:].reshape(loss.classes, -1).copy()
    for tol in SAGA:
        model.set_params(tol=tol)
        with warnings.catch_warnings():
            warnings.simplefilter("error", ConvergenceWarning)
            model.fit(loss.z, label)
        yield tol, np.concatenate([model.intercept_, model.coef_.ravel()])


def bounded(loss, lam, t):
    """scipy's solution of the bounded problem at one lambda, less what it leaves beside a bound."""
    k = loss.intercepts
    price = np.concatenate([np.zeros(k), np.full(len(t) - k, lam)])

    def both(s):
        at = s[:len(t)] - np.concatenate([np.zeros(k), s[len(t):]])
        g = loss.gradient(at)
        return loss.value(at) + price @ s[:len(t)] + lam * s[len(t):].sum(), np.concatenate([g + price, lam - g[k:]])

    start = np.concatenate([t[:k], np.maximum(t[k:], 0), np.maximum(-t[k:], 0)])
    bounds = [(None, None)] * k + [(0, None)] * (2 * (len(t) - k))
    s = minimize(both, start, jac=True, method="L-BFGS-B", bounds=bounds, options={"ftol": 1e-16, "gtol": 1e-12, "maxiter": 20000, "maxfun": 40000}).x
    b = s[k:len(t)] - s[len(t):]
    for share in DROPPED:
        yield share, np.concatenate([s[:k], np.where(abs(b) > share * abs(b).max(), b, 0)])


# ---------------------------------------------------------------- what proves it
def newton(loss, lam, t):
    """The solution of the equations of the set of non-zero coefficients, the signs held, and the inverse Hessian on it."""
    k = loss.intercepts
    on = np.concatenate([np.arange(k), k + np.flatnonzero(t[k:])])
    price = np.concatenate([np.zeros(k), lam * np.sign(t[k:])])
    t = t.copy()
    if k > 1:
        t[:k] -= t[:k].mean()
    for _ in range(100):
        g = (loss.gradient(t) + price)[on]
        inverse = np.linalg.inv(loss.hessian(t)[np.ix_(on, on)])
        if abs(g).max(initial=0) < SOLVED * max(1, lam):
            return t, on, np.diag(inverse)
        t[on] -= inverse @ g
        if not np.isfinite(t).all():
            return None
    return None


def proof(loss, lam, t):
    """Margins (in, out) of the set of non-zero coefficients at lam, and the exact solution on it."""
    solved = newton(loss, lam, t)
    if solved is None:
        return -np.inf, -np.inf, t
    exact, on, inverse = solved
    k = loss.intercepts
    inside = (exact[on] * np.sign(t[on]) / (inverse * lam))[k:].min(initial=np.inf)
    off = np.setdiff1d(np.arange(k, len(t)), on)
    return inside, (1 - abs(loss.gradient(exact)[off]) / lam).min(initial=np.inf), exact


def fit(loss, propose, lam, start):
    """The solution at one lambda, its set proven."""
    for how, t in propose(loss, lam, start):
        inside, out, exact = proof(loss, lam, t)
        if min(inside, out) > MARGIN:
            return exact, inside, out, how
    raise SystemExit("lambda %r: no set proven: margins %g in, %g out at the last" % (lam, inside, out))


# ---------------------------------------------------------------- paths
def lambda_max(loss, predictors):
    t = np.concatenate([loss.null(), np.zeros(loss.classes * predictors)])
    return abs(loss.gradient(t)[loss.intercepts:]).max(), t


def path(loss, propose, predictors, top, ratio, floor, stop_after):
    """Entries [predictor, step, sign] of one draw; (first, last) step fitted; smallest margins; fits by what proposed."""
    own, t = lambda_max(loss, predictors)
    step = int(np.floor(np.log(own / top) / np.log(ratio))) + 1
    while top * ratio ** step < own:
        step -= 1
    entries, seen, margins, used = [], set(), [np.inf, np.inf], {}
    first, last = step, int(np.floor(np.log(floor) / np.log(ratio) + 1e-9))
    while step < last and len(seen) <= stop_after:
        step += 1
        t, inside, out, how = fit(loss, propose, top * ratio ** step, t)
        margins, used[how] = [min(margins[0], inside), min(margins[1], out)], used.get(how, 0) + 1
        b = t[loss.intercepts:].reshape(loss.classes, predictors)
        for j in np.flatnonzero((b != 0).any(0)):
            if j not in seen:
                entries.append([int(j), step, int(np.sign(b[0, j])) if loss.classes == 1 else 1])
                seen.add(j)
    return entries, [first, step], margins, used


# ---------------------------------------------------------------- the table
def standardise(x):
    z = x - x.mean(0)
    sd = np.sqrt((z * z).mean(0))
    if (sd < 1e-8 * abs(x).max(0)).any():
        raise SystemExit("a column hardly varies in a draw: this script does not treat that case")
    return np.asfortranarray(z / sd)


class Study:
    def __init__(self, a):
        with open(a.table, encoding="utf-8") as f:
            self.header, *rows = list(csv.reader(f))
        self.cells = {h: [r[i] for r in rows] for i, h in enumerate(self.header)}
        self.a, roles = a, {a.outcome, a.offset, a.event, a.strata}
        self.names = a.candidates.split(",") if a.candidates else [h for h in self.header if h not in roles]
        self.x = np.column_stack([self.column(n) for n in self.names])
        self.classes = sorted(set(self.cells[a.outcome])) if a.family == "multinomial" else None

    def column(self, name):
        if name in self.cells:
            return np.array(self.cells[name], float)
        column, level = name.split("=", 1)
        return np.array([float(cell == level) for cell in self.cells[column]])

    def loss(self, rows):
        a, z = self.a, standardise(self.x[rows])
        if a.family == "multinomial":
            return Multinomial(z, np.array([self.classes.index(self.cells[a.outcome][i]) for i in rows]), len(self.classes))
        y = self.column(a.outcome)[rows]
        if a.family == "cox":
            strata = np.array(self.cells[a.strata])[rows] if a.strata else np.zeros(len(rows))
            return Cox(z, y, self.column(a.event)[rows], strata, a.ties)
        return Glm(a.family, z, y, self.column(a.offset)[rows] if a.offset else np.zeros(len(rows)))

    def keys(self):
        """What Go needs to read the table the same way."""
        a = self.a
        said = {"family": a.family, "classes": self.classes, "offset": a.offset, "event": a.event, "ties": a.ties, "strata": a.strata}
        return {k: v for k, v in said.items() if v}


def arguments():
    a = argparse.ArgumentParser()
    a.add_argument("family", choices=["binomial", "multinomial", "poisson", "cox"])
    for name in ("table", "outcome", "rows", "out"):
        a.add_argument(name)
    for name in ("--candidates", "--offset", "--event", "--strata"):
        a.add_argument(name)
    a.add_argument("--ties", choices=["efron", "breslow"])
    a.add_argument("--seed", type=int, required=True)
    a.add_argument("--selected", required=True)
    a.add_argument("--ratio", type=float, default=0.95)
    a.add_argument("--floor", type=float, default=0.005)
    return a.parse_args()


def main():
    a = arguments()
    study, draws, qs = Study(a), read_draws(a.rows), [int(q) for q in a.selected.split(",")]
    propose, p = saga if a.family in ("binomial", "multinomial") else bounded, len(study.names)
    top, _ = lambda_max(study.loss(np.arange(len(study.x))), p)
    entries, ranges, margins, used = [], [], [np.inf, np.inf], {}
    for rows in draws:
        e, r, m, u = path(study.loss(rows), propose, p, top, a.ratio, a.floor, max(qs))
        entries.append(e), ranges.append(r)
        margins = [min(margins[0], m[0]), min(margins[1], m[1])]
        used = {t: used.get(t, 0) + u.get(t, 0) for t in set(used) | set(u)}
    result = {
        "made_by": "testdata/tools/frequencies_families.py with scikit-learn %s, scipy %s, numpy %s, Python %s"
                   % (sklearn.__version__, scipy.__version__, np.__version__, platform.python_version()),
        **study.keys(),
        "table": a.table.split("testdata/")[-1], "outcome": a.outcome, "rows": a.rows.split("testdata/")[-1], "seed": a.seed,
        "draws": len(draws), "ratio": a.ratio, "floor": a.floor, "stop_after": max(qs), "lambda_max": top,
        "smallest_margin_in": margins[0], "smallest_margin_out": margins[1], "fits": sum(used.values()),
        "predictors": study.names, "regions": [region(q, entries, p) for q in qs], "steps": ranges, "entries": entries,
    }
    with open(a.out, "w", encoding="utf-8") as f:
        f.write("{\n" + ",\n".join("%s: %s" % (json.dumps(k), json.dumps(v, separators=(",", ":"))) for k, v in result.items()) + "\n}\n")
    print("%s: %d draws, %d fits, proposed at %s, smallest margins %.2g in, %.2g out" % (a.out, len(draws), result["fits"], used, *margins))


if __name__ == "__main__":
    main()
