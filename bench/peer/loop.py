#!/usr/bin/env python3
"""The obvious way, with scikit-learn: for every half-sample copy its rows, standardise the copy, fit all lambdas.

usage: loop.py DIR SHAPE --solver lasso_path|liblinear --lambda-max L --draws 8 [--ratio 0.954] [--floor 0.1] [--workers 1]
       [--tolerance 1e-7] [--intercept-scaling 1000] [--iterations 1000] [--entries]

Reads SHAPE_x.npy, SHAPE_y.npy and SHAPE_rows.npy of DIR (written by bench/sidebyside) and prints what it took as JSON.
Lambdas are the lattice lambda_max * ratio^k from the draw's own start down to floor * lambda_max: the same as ours.
lasso_path serves numbers. A yes-no outcome (0 and 1) goes to LogisticRegression with liblinear, the faster of scikit-learn's two
solvers of the L1 penalty, one fit per lambda because it takes no start; lambda is 1/(C rows).
With more than one worker, processes share the table and each fits every workers-th draw. Linear algebra runs on one thread.
"""
import argparse
import json
import os
import platform
import sys
import time
import warnings
from multiprocessing import get_context

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("OMP_NUM_THREADS", "1")
import numpy as np
import sklearn
from sklearn.exceptions import ConvergenceWarning
from sklearn.linear_model import LogisticRegression, lasso_path

warnings.simplefilter("always", ConvergenceWarning)


def half(x, y, rows):
    """The drawn rows, standardised on themselves (population standard deviation), in the order that lasso_path wants."""
    z = np.take(x.T, rows, axis=1).T    # of four ways to copy rows of such a matrix the fastest (2 ms against 8 to 106 on wide)
    z -= z.mean(0)
    z /= np.sqrt(np.einsum("ij,ij->j", z, z) / len(rows))
    u = y[rows]
    return z, u - u.mean()


def lambdas(z, u, top, ratio, last):
    """Lattice steps from the draw's own start, and their lambdas."""
    own = abs(z.T @ u).max() / len(u)
    step = int(np.floor(np.log(own / top) / np.log(ratio))) + 1
    while top * ratio ** step < own:
        step -= 1
    steps = np.arange(step, last + 1)
    return steps, top * ratio ** steps.astype(float)


def entries(coef, steps):
    """[column, step] of the first non-zero coefficient, by step, then column."""
    on = coef != 0
    j = np.flatnonzero(on.any(1))
    found = [[int(a), int(b)] for a, b in zip(j, steps[on[j].argmax(1)])]
    return sorted(found, key=lambda e: (e[1], e[0]))


def lasso(z, u, lams, a):
    return lasso_path(z, u, alphas=lams, tol=a.tolerance, max_iter=100_000, copy_X=False)[1]


def logistic(z, u, lams, a):
    """L1 logistic regression at each lambda; u is the centred outcome.

    liblinear penalises the intercept, as the coefficient of a column that holds --intercept-scaling: the gradient of a free
    intercept, which should be 0, is then up to lambda over that number. With 1, intercepts of balanced halves stay 0; from
    10,000 on the stopping rule, which sees the gradient of that column, is no longer met.
    """
    coef = np.zeros((z.shape[1], len(lams)))
    y = u > 0
    for k, lam in enumerate(lams):
        model = LogisticRegression(
            penalty="l1", solver="liblinear", C=1 / (lam * len(y)), tol=a.tolerance, intercept_scaling=a.intercept_scaling,
            max_iter=a.iterations, random_state=0)
        coef[:, k] = model.fit(z, y).coef_[0]
    return coef


# The function that fits, and the order in which it wants the columns.
SOLVERS = {"lasso_path": (lasso, np.asfortranarray), "liblinear": (logistic, np.ascontiguousarray)}


def fit(job):
    a, draws = job
    x = np.load(os.path.join(a.dir, a.shape + "_x.npy"))
    y = np.load(os.path.join(a.dir, a.shape + "_y.npy"))[:, 0]
    rows = np.load(os.path.join(a.dir, a.shape + "_rows.npy"))
    last = int(np.floor(np.log(a.floor) / np.log(a.ratio) + 1e-9))
    solve, arrange = SOLVERS[a.solver]
    out = {"prepare": 0.0, "path": 0.0, "entries": {}, "unconverged": 0}
    begin, cpu = time.perf_counter(), time.process_time()
    for d in draws:
        t0 = time.perf_counter()
        z, u = half(x, y, rows[d])
        steps, lams = lambdas(z, u, a.lambda_max, a.ratio, last)
        z = arrange(z)
        t1 = time.perf_counter()
        with warnings.catch_warnings(record=True) as caught:
            warnings.simplefilter("always", ConvergenceWarning)
            coef = solve(z, u, lams, a)
        t2 = time.perf_counter()
        out["entries"][d] = entries(coef, steps)
        out["prepare"] += t1 - t0
        out["path"] += t2 - t1
        out["unconverged"] += sum(issubclass(w.category, ConvergenceWarning) for w in caught)
    out["begin"], out["end"], out["cpu"] = begin, time.perf_counter(), time.process_time() - cpu
    out["peak"] = peak_memory()
    return out


def peak_memory():
    with open("/proc/self/status") as f:
        return next(int(line.split()[1]) * 1024 for line in f if line.startswith("VmHWM:"))


def main():
    a = argparse.ArgumentParser()
    a.add_argument("dir")
    a.add_argument("shape")
    a.add_argument("--solver", choices=SOLVERS, default="lasso_path")
    a.add_argument("--lambda-max", type=float, required=True)
    a.add_argument("--ratio", type=float, default=0.954)
    a.add_argument("--floor", type=float, default=0.1)
    a.add_argument("--draws", type=int, default=8)
    a.add_argument("--workers", type=int, default=1)
    a.add_argument("--tolerance", type=float, default=1e-7)
    a.add_argument("--intercept-scaling", type=float, default=1000.0, help="liblinear: how nearly the intercept is free")
    a.add_argument("--iterations", type=int, default=1000, help="liblinear: the most it may take")
    a.add_argument("--entries", action="store_true")
    a = a.parse_args()
    jobs = [(a, list(range(k, a.draws, a.workers))) for k in range(a.workers)]
    if a.workers == 1:
        parts = [fit(jobs[0])]
    else:
        with get_context("fork").Pool(a.workers) as pool:
            parts = pool.map(fit, jobs, chunksize=1)
    # Reading the table is not counted, on either side. The clock is the same for all processes of the machine.
    wall = max(p["end"] for p in parts) - min(p["begin"] for p in parts)
    result = {
        "workers": a.workers, "draws": a.draws, "fit_seconds": wall, "seconds_per_draw": wall / a.draws,
        "cpu_seconds_per_draw": sum(p["cpu"] for p in parts) / a.draws,
        "prepare_seconds_per_draw": sum(p["prepare"] for p in parts) / a.draws,
        "path_seconds_per_draw": sum(p["path"] for p in parts) / a.draws,
        "peak_bytes": max(p["peak"] for p in parts), "not_converged": sum(p["unconverged"] for p in parts),
        "versions": "scikit-learn %s, numpy %s, Python %s" % (sklearn.__version__, np.__version__, platform.python_version()),
    }
    if a.entries:
        all_entries = {d: e for p in parts for d, e in p["entries"].items()}
        result["entries"] = [all_entries[d] for d in range(a.draws)]
    json.dump(result, sys.stdout)
    print()


if __name__ == "__main__":
    main()
