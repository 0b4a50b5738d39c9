#!/usr/bin/env python3
"""How much faster the program fits one class, with the interval of Kd, than scipy does.

    python against_scipy.py                 # times scipy and the bench `one_fit`, compares
    python against_scipy.py --no-rust       # scipy alone
    python against_scipy.py serial stock    # these racks of tests/numbers/data/racks only

The same likelihood in numpy, written for speed: all tubes at once, the closed root of the
mass balance, the analytic gradient by the implicit-function theorem, every level's dilution
error as a parameter.  Fitted twice, from seven cold starts (a grid of Kd over the levels, the
best three followed to the end) and from the best of the seven alone; then both ends of the
profile interval of Kd, by a secant on the root of the excess, each refit started where
the last ones point to.

scipy's minimisers are tried twice: `plain`, given objective and gradient, and `scaled`, in
coordinates turned by the Cholesky factor of the expected information, which is second-order
knowledge that a plain call does not have and which makes them several times faster here.  The
fastest of either kind is set against the program (CG, TNC, trust-constr, and the trust-region
methods given the information as second derivatives, are slower and left out).  Tolerances are no tighter than what the
interval of Kd needs to be right to 1e-7, well within the 1e-6 to which both sides must agree.

Times are processor time of one thread, so that other work on the machine counts little:
medians of the passes on this side, taken before and after the program's own; on that side the bench
repeats the fit in a process whose processor time is asked for, less what it takes to start.
The likelihood and the rack files are described in tests/numbers/reference.py, from
which nothing is used here.
"""

import os

for threads in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(threads, "1")

import argparse
import json
import math
import pathlib
import resource
import statistics
import subprocess
import sys
import time

import numpy as np
import scipy
from scipy import linalg, optimize, special, stats

ROOT = pathlib.Path(__file__).resolve().parents[2]
RACKS = ROOT / "tests/numbers/data/racks"
NAMES = ("serial", "stock", "other_ki", "full_block")
AGREE = 1e-6
JOBS = ("seven starts", "one start", "interval")


class Rack:
    """Objective and gradient over z = [ln Kd, ln R, ln ns, ln b, ln cv, d_1/s_d, ...]."""

    def __init__(self, rack):
        s = rack["settings"]
        assert not s.get("scale_errors")
        tubes = [t for t in rack["tubes"] if not t["lost"] and not t["suspect"]]
        added = {t["level"]: t["added_nm"] for t in rack["tubes"]}
        order = {j: i for i, j in enumerate(sorted(added, key=added.get))}
        self.level = np.array([order[t["level"]] for t in tubes])
        self.added = np.array([t["added_nm"] for t in tubes])
        self.counts = np.array([float(t["counts"]) for t in tubes])
        self.minutes = np.array([float(t["minutes"]) for t in tubes])
        blocked = np.array([t["role"] == "nonspecific" for t in tubes])
        self.n = len(tubes)
        self.n_b = float(sum(v["counts"] for v in rack["background"]))
        self.t_b = float(sum(v["minutes"] for v in rack["background"]))
        self.per_nm = (
            s["efficiency"] * 2.22 * s["sa_ci_per_mmol"] * s["fraction_counted"] * 1000 * s["volume_ml"]
        )
        self.gain = self.minutes * self.per_nm
        u = s["unlabelled"]
        self.cold, self.factor, self.open = np.zeros(self.n), np.ones(self.n), np.ones(self.n)
        if u["kind"] == "same_ligand":
            self.cold[blocked] = u["concentration_nm"]
        elif u["ki_nm"] is not None:
            self.factor[blocked] = 1 + u["concentration_nm"] / u["ki_nm"]
        else:
            self.open[blocked] = 0.0
        self.sticks = s["sticks"] == "preparation"
        self.s_d, self.serial = s["s_d"], s["dilution"] == "serial"
        prior = s["cv_prior"]
        self.prior = (math.log(prior["centre"]), prior["sd_ln"]) if prior else None
        self.levels = len(order) if self.s_d > 0 else 0
        self.dim = 5 + self.levels
        self.constant = self.n * math.log(2 * math.pi) + 2 * float(special.gammaln(self.n_b + 1))
        t = stats.t.ppf(0.975, self.n - 3)
        self.cut = self.n * math.log1p(t * t / (self.n - 3))

    def signal(self, z):
        """b, cv^2, counts without background, their derivatives by ln Kd, ln R, ln ns and by d."""
        kd, r, ns, b, cv = np.exp(z[:5])
        label = self.added
        if self.levels:
            label = label * np.exp(self.s_d * z[5:])[self.level]
        k, r, whole = kd * self.factor, r * self.open, label + self.cold
        a = 1 + ns if self.sticks else 1.0
        beta = a * k + r - whole
        q = np.sqrt(beta * beta + (4 * a) * k * whole)
        free = np.where(beta >= 0, 2 * k * whole / (q + np.abs(beta)), (q - beta) / (2 * a))
        near = k + free
        specific = r * free / near
        steep = specific * k / near  # S' F, which is also -dS / d ln Kd
        slope = steep / free
        kept = (slope + ns) / (a + slope)  # d bound / d whole
        nonspecific = ns * free
        gain = self.gain * (label / whole)
        by = np.empty((3, self.n))
        by[0] = (kept - 1) * steep
        by[1] = (1 - kept) * specific
        by[2] = nonspecific * (1 - kept) if self.sticks else nonspecific
        by *= gain
        bound = specific + nonspecific
        by_d = gain * (kept * label + bound * (self.cold / whole)) if self.levels else None
        return b, cv * cv, gain * bound, by, by_d

    def __call__(self, z):
        b, cv2, s, by, by_d = self.signal(z)
        blank = self.minutes * b
        mu = blank + s
        spread = cv2 * s
        v = mu + spread * s
        miss = self.counts - mu
        pull = miss / v
        by_v = (1 - miss * pull) / v
        expected = self.t_b * b
        f = self.constant + miss @ pull + np.log(v).sum() + 2 * (expected - self.n_b * math.log(expected))
        by_mu = by_v - 2 * pull
        by_s = by_mu + 2 * spread * by_v
        g = np.empty(self.dim)
        g[:3] = by @ by_s
        g[3] = blank @ by_mu + 2 * (expected - self.n_b)
        g[4] = 2 * ((spread * s) @ by_v)
        if self.prior:
            p = (z[4] - self.prior[0]) / self.prior[1]
            f += p * p
            g[4] += 2 * p / self.prior[1]
        if self.levels:
            g[5:] = self.s_d * np.bincount(self.level, weights=by_d * by_s, minlength=self.levels)
            step = z[5:].copy()
            if self.serial:
                step[:-1] -= z[6:]
            f += step @ step
            g[5:] += 2 * step
            if self.serial:
                g[6:] -= 2 * step[:-1]
        return f, g

    def information(self, z):
        """Expected information: half the expected second derivatives of the objective."""
        b, cv2, s, by, by_d = self.signal(z)
        blank = self.minutes * b
        v = blank + s + cv2 * s * s
        mean, spread = np.zeros((self.dim, self.n)), np.empty((self.dim, self.n))
        mean[:3], mean[3] = by, blank
        if self.levels:
            mean[5 + self.level, np.arange(self.n)] = self.s_d * by_d
        spread[:] = mean * (1 + 2 * cv2 * s)
        spread[3], spread[4] = blank, 2 * cv2 * s * s
        mean /= np.sqrt(v)
        spread /= math.sqrt(2) * v
        info = mean @ mean.T + spread @ spread.T
        info[3, 3] += self.t_b * b
        if self.prior:
            info[4, 4] += 1 / self.prior[1] ** 2
        if self.levels:
            i = np.arange(5, self.dim)
            info[i, i] += 1
            if self.serial:
                info[i[1:], i[1:]] += 1
                info[i[1:], i[:-1]] -= 1
                info[i[:-1], i[1:]] -= 1
        return info

    def starts(self):
        """Seven values of Kd over the levels; sites and ns by weighted straight fits."""
        b = max(self.n_b, 0.5) / self.t_b
        bound = (self.counts / self.minutes - b) / self.per_nm
        weight = 1 / (np.maximum(self.counts, 1) / self.gain**2 + (0.06 * bound) ** 2)
        free = np.clip(self.added - bound, 0.02 * self.added, self.added)
        whole = self.added + self.cold
        for kd in np.geomspace(self.added.min(), self.added.max(), 7):
            k = kd * self.factor
            taken = np.where(self.cold > 0, self.added / (kd + whole), self.open * free / (k + free))
            both = np.array([taken, free])
            square, side = (both * weight) @ both.T, (both * weight) @ bound
            r, ns = np.linalg.solve(square, side)
            z = np.zeros(self.dim)
            z[:5] = np.log([kd, max(r, 1e-3 * kd), max(ns, 1e-4), b, 0.06])
            yield z


# ---------------------------------------------------------------------------- the minimisers
OPTIONS = {
    "L-BFGS-B": dict(maxcor=20, ftol=1e-12, gtol=1e-6, maxiter=2000, maxfun=5000),
    "SLSQP": dict(ftol=1e-9, maxiter=500),
    "BFGS": dict(gtol=1e-4, maxiter=500),
}


class Minimiser:
    """A method of scipy, plain or in scaled coordinates z = z0 + C y."""

    def __init__(self, rack, method, scaled):
        self.rack, self.method, self.scaled = rack, method, scaled

    def scale(self, info):
        """C with C C' the inverse of the second derivatives."""
        upper = linalg.cholesky(2 * info, check_finite=False)
        return linalg.solve_triangular(upper, np.eye(len(info)), check_finite=False)

    def run(self, objective, z0, scale):
        if scale is None:
            done = optimize.minimize(
                objective, z0, jac=True, method=self.method, options=OPTIONS[self.method]
            )
            return done.fun, done.x

        def inner(y):
            f, g = objective(z0 + scale @ y)
            return f, g @ scale

        done = optimize.minimize(
            inner, np.zeros(len(z0)), jac=True, method=self.method, options=OPTIONS[self.method]
        )
        return done.fun, z0 + scale @ done.x

    def fit(self, followed):
        """The lowest of so many of the seven starts."""
        ranked = sorted(((self.rack(z)[0], i, z) for i, z in enumerate(self.rack.starts())))
        found = []
        for _, _, z in ranked[:followed]:
            scale = self.scale(self.rack.information(z)) if self.scaled else None
            found.append(self.run(self.rack, z, scale))
        return min(found, key=lambda p: p[0])

    def kd_interval(self, best, z):
        rack = self.rack
        info = rack.information(z)
        along = linalg.solve(info, np.eye(rack.dim)[0], assume_a="pos", check_finite=False)
        se, along = math.sqrt(along[0]), along / along[0]
        scale = self.scale(info[1:, 1:]) if self.scaled else None
        root_cut = math.sqrt(rack.cut)

        def end(sign):
            met = [(0.0, -root_cut, z)]
            distance = root_cut * se
            for _ in range(30):
                # Start from where the estimate, then the last two refits, point to.
                at, before = met[-1], met[-2] if len(met) > 1 else None
                if before is None:
                    guess = at[2] + sign * distance * along
                else:
                    guess = at[2] + (at[2] - before[2]) * ((distance - at[0]) / (at[0] - before[0]))
                pinned = z[0] + sign * distance
                full = guess.copy()
                full[0] = pinned

                def objective(y):
                    full[1:] = y
                    f, g = rack(full)
                    return f, g[1:]

                f, y = self.run(objective, guess[1:], scale)
                excess = f - best
                off = math.sqrt(max(excess, 0.0)) - root_cut
                if abs(excess - rack.cut) < 1e-6:
                    return math.exp(pinned)
                met.append((distance, off, np.concatenate([[pinned], y])))
                (d0, o0, _), (d1, o1, _) = met[-2:]
                distance = d1 - o1 * (d1 - d0) / (o1 - o0)
            raise ArithmeticError("the profile was not brought to its cut")

        return end(-1), end(1)


METHODS = [(kind, method) for kind in ("plain", "scaled") for method in OPTIONS]


def near(got, want):
    return all(abs(g - w) <= AGREE * abs(w) for g, w in zip(got, want))


def passes(rack, seconds):
    """Times in ms of every method: fit from seven starts, from one, and the interval."""
    times, intervals = {}, {}
    for label in METHODS:
        m = Minimiser(rack, label[1], label[0] == "scaled")
        best, z = m.fit(1)
        intervals[label] = m.kd_interval(best, z)
        jobs = (lambda: m.fit(3), lambda: m.fit(1), lambda: m.kd_interval(best, z))
        for job, do in zip(JOBS, jobs):
            took, until = [], time.perf_counter() + seconds
            while len(took) < 5 or time.perf_counter() < until:
                begun = time.process_time()
                do()
                took.append((time.process_time() - begun) * 1e3)
            times[*label, job] = took
    return times, intervals


def rust(names, seconds):
    """Of each rack: times in ms of the program's fit, and its interval of Kd."""
    build = ["cargo", "bench", "--bench", "one_fit", "--no-run", "--message-format=json"]
    said = subprocess.run(build, cwd=ROOT, check=True, stdout=subprocess.PIPE, text=True).stdout
    made = [m for m in map(json.loads, said.splitlines()) if m.get("target", {}).get("name") == "one_fit"]
    bench = made[-1]["executable"]

    def repeat(name, times):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        run = subprocess.run([bench, "repeat", name, str(times)], check=True, capture_output=True, text=True)
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        return (after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime), run.stdout

    found = {}
    for name in names:
        start, said = repeat(name, 0)
        ends = tuple(float(x) for x in said.split())
        times = 32
        while (took := repeat(name, times)[0] - start) < seconds:
            times *= 2
        each = [took, *(repeat(name, times)[0] - start for _ in range(4))]
        found[name] = ([t / times * 1e3 for t in each], ends)
    return found


def main():
    parser = argparse.ArgumentParser(description="One class and the interval of Kd against scipy.")
    parser.add_argument("names", nargs="*", default=NAMES, help="racks of tests/numbers/data/racks")
    parser.add_argument("--no-rust", action="store_true", help="scipy alone")
    parser.add_argument("--seconds", type=float, default=0.5, help="for each timing")
    args = parser.parse_args()
    files = {n: json.loads((RACKS / f"{n}.json").read_text()) for n in args.names}
    racks = {n: Rack(f) for n, f in files.items()}
    with np.errstate(all="ignore"):  # a line search may try places far out and come back
        first = {n: passes(r, args.seconds) for n, r in racks.items()}
        own = {} if args.no_rust else rust(args.names, args.seconds)
        second = {n: passes(r, args.seconds) for n, r in racks.items()}
    print(f"numpy {np.__version__}, scipy {scipy.__version__}, python {sys.version.split()[0]}; ms")
    good = True
    for name, rack in racks.items():
        want = files[name]["expected"]["fit"]["intervals"]["kd_nm"]
        want = own[name][1] if own else (want["low"], want["high"])
        print(f"{name}: {rack.n} tubes, {rack.dim} parameters, Kd {want[0]:.7g} to {want[1]:.7g}")
        totals = {}
        for label in METHODS:
            seven, one, interval = (
                statistics.median(first[name][0][*label, job] + second[name][0][*label, job]) for job in JOBS
            )
            agrees = near(first[name][1][label], want) and near(second[name][1][label], want)
            print(
                f"  {' '.join(label):16s} {JOBS[0]} {seven:8.3f}   {JOBS[1]} {one:8.3f}"
                f"   {JOBS[2]} {interval:8.3f}   {'agrees' if agrees else 'DIFFERS'}"
            )
            good &= agrees
            totals[label] = (seven + interval, one + interval)
        if own:
            ms = statistics.median(own[name][0])
            print(f"  {'rackside':16s} what its bench times {ms:.4f} ({min(own[name][0]):.4f} to {max(own[name][0]):.4f})")
        for kind in ("plain", "scaled"):
            for start in (0, 1):
                label = min((m for m in METHODS if m[0] == kind), key=lambda m: totals[m][start])
                line = f"  {JOBS[start]} and interval, fastest {' '.join(label)}: {totals[label][start]:.3f}"
                print(line + (f", {totals[label][start] / ms:.1f} times rackside's" if own else ""))
    print("intervals of Kd agree" if good else "INTERVALS OF KD DIFFER")
    sys.exit(0 if good else 1)


if __name__ == "__main__":
    main()
