#!/usr/bin/env python3
"""Independent reference for the fits of bound counts: one class, two classes, Hill.

What it is
----------
A second implementation, sharing no code with the program, of the likelihood that
the program maximises for a rack of tubes whose *bound* label is counted (filters,
pellets).  It is slow and general on purpose: every mass balance is solved by
bracketed root finding (no closed form), every minimum is searched by a general
quasi-Newton minimiser from several starts and then polished by Newton steps, the
derivatives come from the complex step, the intervals from root finding on
re-minimised profiles.  `--certify` (on by default for `racks`) then repeats the
sums with mpmath at 40 digits and reports how far each printed figure can be from
the true one.

How it is run
-------------
    python reference.py check --csv DIR     # reproduce the published table below
    python reference.py racks --out DIR     # simulate the racks, fit, write JSON
    python reference.py racks --out DIR scale_errors    # only these
    python reference.py fit [--models] FILE.json        # fit one rack file again, print JSON

Written with Python 3.11, numpy 2.4, scipy 1.17, mpmath 1.3.  `DIR` of `check` holds
exp1_ideal.csv, exp3_twosite.csv and exp5_lowcounts.csv (simulated titrations, truth
in their first line).  The racks come from numpy's PCG64 with the seeds written in
`RACKS`; all data are simulated, none are measured.

The likelihood
--------------
    -2 ln L = sum_i [ (N_i - mu_i)^2 / V_i + ln(2 pi V_i) ]
              + 2 [ t_b b - N_b ln(t_b b) + lnGamma(N_b + 1) ]
    mu = t (b + k 1000 v Bound)          V = mu + cv^2 (mu - t b)^2

with N_b and t_b the sums over the background vials, v the incubation volume in mL,
k = efficiency * 2.22 * (Ci/mmol) * fraction counted in cpm per fmol, Bound in nM.
Total tube, added concentration L, free F:

    label sticks to the preparation   L = (1 + ns) F + S(F)
    label sticks to the filter        L = F + S(F)
    Bound = S(F) + ns F                                       (both cases)

    one class     S(F) = R F / (Kd + F)                                 R, Kd
    two classes   S(F) = R1 F / (K1 + F) + R2 F / (K2 + F)   K1 <= K2;  R1, K1, R2, K2
    Hill          S(F) = R F^n / (Kh^n + F^n)                           R, Kh, n

Nonspecific tube with C nM of an unlabelled ligand:

    the same ligand          balance solved for L + C, giving X;
                             Bound = (S(X) + ns X) L / (L + C)
    another one, Ki known    as a total tube with every K times (1 + C / Ki)
    another one, Ki unknown  as a total tube with S = 0

With a dilution error s_d > 0 every level j of the ladder (also one whose tubes are
all lost) has L_j = added_j exp(d_j) and adds a squared term to the objective:
(d_j / s_d)^2 where each is made from stock; in a serial dilution from the top,
(d_top / s_d)^2 and ((d_j - d_(j+1)) / s_d)^2.  The CV prior adds
((ln cv - ln centre) / sd_ln)^2.  The fit minimises -2 ln L + these terms;
`minus2lnl` is of the data alone, `prior_term` the sum of the terms.

Errors that all tubes share (`scale_errors`, relative standard deviations s on the
natural log scale) each add a parameter e and the squared term (e / s)^2:

    stock                           every L times exp(e), on top of d
    specific_activity, efficiency   counts per nM (1000 v k) times exp(e)
    volume                          counts per nM times exp(e), every L times exp(-e)

C stays as it is.

    AICc = minus2lnl + 2k + 2k(k+1)/(n-k-1),   k = 5, 7 (two classes), 6 (Hill),
                                               n = tubes used + 1

Intervals (every K, sites, n, ns, and in the racks fitted as every law b): profile of
the penalised objective with the cut n ln(1 + t^2_{0.975, n-p} / (n-p)), n tubes used,
p = 3, 5 (two classes), 4 (Hill).  K is searched from LTmin/1000 to LTmax*1000, R from
estimate/1e4 to estimate*1e4, ns from its floor to 1e3; an end not met there is open
(null).  Standard errors: inverse of the expected information of the logarithms of the
law's parameters, ln ns, ln b, ln cv, the d_j and the e,

    sum_i [ mu'mu'^T / V + V'V'^T / (2 V^2) ] + background and prior rows,

with the columns of parameters at a floor or limit removed.  Floors: ns >= 1e-9,
b >= 0.05 / t_b; of two classes and Hill also R >= 0.05 counts in the tube counted
longest.  cv is kept within 1e-6..10, which no fit here meets; n within 0.1..10.

Two classes are minimised over K1 <= K2, and so are their profiles: while the pinned K
is profiled, reaching the other one is an open end.  Where a class has its sites at the
floor, or the two do no better than one class, there is no result for two classes
(`none` says why).

Where the description leaves room, this file chooses: p = 3 also when ns stands at its
floor; every level of the ladder keeps its dilution term; LTmin and LTmax are of the
whole ladder; of one class only the profile of Kd confines Kd to its search range, so
in an unsaturated rack the upper end of R may be met at a Kd beyond it (the accuracy
entry `kd_nm_at_ends` tells), while two classes and Hill keep every K within the range
in the fit and all profiles (`k_and_n_at_ends` tells where one stands at its end);
floors hold along the profiles too; an end is the first crossing of the cut outwards.

Published methods used: Fisher information of a normal whose mean and variance both
depend on the parameters (e.g. Kay, Fundamentals of Statistical Signal Processing I,
section 3.9, from memory); complex-step derivative (Squire & Trapp 1998, SIAM Review
40:110, from memory); Brent's root finder and L-BFGS-B as in scipy.
"""

import argparse
import csv
import json
import math
import pathlib
import re
import sys

import numpy as np
import scipy
from scipy import optimize, special, stats

NS_FLOOR = 1e-9
CV_LIMITS = (1e-6, 10.0)
LN_2PI = math.log(2 * math.pi)
DPM_PER_FMOL_PER_CI_PER_MMOL = 2.22
SCALES = ("stock", "specific_activity", "efficiency", "volume")
SITES_FLOOR_COUNTS = 0.05


# --------------------------------------------------------------------- the laws of binding
class OneClass:
    """S = R F / (Kd + F)."""

    name = "one_class"
    names = ("kd_nm", "sites_nm")
    ks, sites, n = (0,), (1,), None
    concave = True

    @staticmethod
    def specific(f, q, lib):
        k, r = q
        return r * f / (k + f)

    @staticmethod
    def slope(f, q):
        k, r = q
        return r * k / (k + f) ** 2


class TwoClasses:
    """S = R1 F / (K1 + F) + R2 F / (K2 + F), K1 <= K2."""

    name = "two_classes"
    names = ("kd1_nm", "sites1_nm", "kd2_nm", "sites2_nm")
    ks, sites, n = (0, 2), (1, 3), None
    concave = True

    @staticmethod
    def specific(f, q, lib):
        return OneClass.specific(f, q[:2], lib) + OneClass.specific(f, q[2:], lib)

    @staticmethod
    def slope(f, q):
        return OneClass.slope(f, q[:2]) + OneClass.slope(f, q[2:])


class Hill:
    """S = R F^n / (Kh^n + F^n)."""

    name = "hill"
    names = ("kh_nm", "sites_nm", "n")
    ks, sites, n = (0,), (1,), 2
    concave = False  # for n > 1 there is an inflection

    @staticmethod
    def specific(f, q, lib):
        k, r, n = q
        if lib is math:
            return r * float(special.expit(n * math.log(f / k))) if f > 0 else 0.0
        return r / (1 + lib.exp(n * (lib.log(k) - lib.log(f))))

    @staticmethod
    def slope(f, q):
        k, r, n = q
        share = float(special.expit(n * math.log(f / k)))
        return r * n * share * (1 - share) / f


LAWS = {law.name: law for law in (OneClass, TwoClasses, Hill)}
N_LIMITS = (0.1, 10.0)  # of the Hill coefficient


class Chart:
    """Coordinates y in which the minimiser walks: z itself, boxed."""

    def __init__(self, problem):
        self.lower, self.upper = problem.lower, problem.upper

    def y(self, z):
        return z

    z = y

    def pull(self, y, g):
        return g


class Ordered:
    """Coordinates in which K1 <= K2, both within their range, is a box.

    One ln K is kept (the pinned one, else that of K1) and the other is given by how far it
    is on the way from there to the end of the range, as a share times the range's width.
    """

    def __init__(self, problem, pinned):
        self.low, self.high = problem.kd_range
        self.width = self.high - self.low
        self.keep, self.other = (2, 0) if 2 in pinned else (0, 2)
        self.end = self.low if self.keep == 2 else self.high
        self.lower, self.upper = problem.lower.copy(), problem.upper.copy()
        self.lower[self.other], self.upper[self.other] = 0.0, self.width

    def y(self, z):
        y = z.copy()
        way = self.end - z[self.keep]
        share = (z[self.other] - z[self.keep]) / way if way != 0 else 0.0
        y[self.other] = min(max(share, 0.0), 1.0) * self.width
        return y

    def z(self, y):
        z = y.copy()
        z[self.other] = y[self.keep] + y[self.other] / self.width * (self.end - y[self.keep])
        return z

    def pull(self, y, g):
        out = g.copy()
        out[self.keep] += (1 - y[self.other] / self.width) * g[self.other]
        out[self.other] = (self.end - y[self.keep]) / self.width * g[self.other]
        return out


# --------------------------------------------------------------------------- the rack
class Problem:
    """The evidence of one rack: readings used, and the objective over coordinates z.

    z = [the law's parameters as ln, ns / ns_unit, ln b, ln cv, d_1/s_d, d_2/s_d, ...,
    e_1/s_1, ...].  ns is kept on a natural scale so that its floor is an ordinary bound,
    where the slope is finite.
    """

    def __init__(self, rack, leave_out_suspects=True, model="one_class"):
        s = rack["settings"]
        self.law = LAWS[model]
        m = len(self.law.names)
        self.ns, self.bg, self.cv, self.first_d = m, m + 1, m + 2, m + 3
        self.p_mean = m + 1  # parameters of the mean without the background
        self.k_aicc = m + 3  # those of the law, ns, b, cv
        self.names = list(self.law.names) + ["ns", "background_cpm", "cv"]
        self.settings = s
        used = [
            t
            for t in rack["tubes"]
            if not t["lost"] and not (leave_out_suspects and t["suspect"])
        ]
        self.used = used
        self.n = len(used)
        levels = {}
        for t in rack["tubes"]:
            levels.setdefault(t["level"], t["added_nm"])
            assert levels[t["level"]] == t["added_nm"]
        order = sorted(levels, key=lambda j: levels[j])
        self.level_added = np.array([levels[j] for j in order])
        self.level_numbers = order
        self.column = {j: i for i, j in enumerate(order)}
        self.counts = np.array([float(t["counts"]) for t in used])
        self.minutes = np.array([float(t["minutes"]) for t in used])
        self.n_b = float(sum(v["counts"] for v in rack["background"]))
        self.t_b = float(sum(v["minutes"] for v in rack["background"]))
        self.cpm_per_nm = (
            s["efficiency"]
            * DPM_PER_FMOL_PER_CI_PER_MMOL
            * s["sa_ci_per_mmol"]
            * s["fraction_counted"]
            * 1000.0
            * s["volume_ml"]
        )
        self.s_d = s["s_d"]
        self.serial = s["dilution"] == "serial"
        self.prior = s["cv_prior"]
        self.on_filter = {"filter": True, "preparation": False}[s["sticks"]]
        # Tubes of one level and role share a balance: solve each once.
        cases = sorted({(self.column[t["level"]], t["role"]) for t in used})
        where = {c: i for i, c in enumerate(cases)}
        self.case_level = np.array([c[0] for c in cases])
        self.case_ns = np.array([c[1] == "nonspecific" for c in cases])
        self.case_of = np.array(
            [where[(self.column[t["level"]], t["role"])] for t in used]
        )
        self.first_e = self.first_d + (len(order) if self.s_d > 0 else 0)
        errors = s.get("scale_errors") or {}
        assert set(errors) <= set(SCALES)
        self.scales = [(name, errors[name]) for name in SCALES if errors.get(name)]
        self.dim = self.first_e + len(self.scales)
        self.lt_min, self.lt_max = self.level_added.min(), self.level_added.max()
        self.kd_range = (
            math.log(self.lt_min / 1000),
            math.log(self.lt_max * 1000),
        )
        self.ns_unit = 1.0
        share = np.max(self.counts / self.minutes / self.cpm_per_nm / self._added())
        rough = self._start([math.sqrt(self.lt_min * self.lt_max)] * len(self.law.ks))[self.ns]
        self.ns_unit = max(rough, 0.01 * share, 1e-6)
        inf = np.inf
        self.lower = np.full(self.dim, -inf)
        self.upper = np.full(self.dim, inf)
        one = self.law is OneClass
        for k in self.law.ks:
            # Of one class wide numerical limits only; the declared search of Kd is in `fit`.
            wider = 14 if one else 0
            self.lower[k], self.upper[k] = self.kd_range[0] - wider, self.kd_range[1] + wider
        longest = self.minutes.max() * self.cpm_per_nm
        for r in self.law.sites:
            self.lower[r] = math.log(self.lt_min * 1e-9 if one else SITES_FLOOR_COUNTS / longest)
            self.upper[r] = math.log(self.lt_max * 1e9)
        if self.law.n is not None:
            self.lower[self.law.n], self.upper[self.law.n] = map(math.log, N_LIMITS)
        self.lower[self.first_d :], self.upper[self.first_d :] = -50.0, 50.0
        self.lower[self.ns], self.upper[self.ns] = NS_FLOOR / self.ns_unit, 1e3 / self.ns_unit
        self.lower[self.bg], self.upper[self.bg] = math.log(0.05 / self.t_b), 25.0
        self.lower[self.cv], self.upper[self.cv] = map(math.log, CV_LIMITS)
        self.cut = self.n * math.log1p(
            stats.t.ppf(0.975, self.n - self.p_mean) ** 2 / (self.n - self.p_mean)
        )

    def _added(self):
        return self.level_added[self.case_level][self.case_of]

    # ------------------------------------------------------------------ starting points
    def _start(self, ks, hill=1.0):
        """A rough start at given K: non-negative least squares for the sites and ns."""
        b = max(self.n_b, 0.5) / self.t_b
        bound = np.maximum(self.counts / self.minutes - b, 0.0) / self.cpm_per_nm
        added = self._added()
        free = np.maximum(added - bound, 0.02 * added)
        blocked = self.case_ns[self.case_of]
        weight = 1.0 / (0.05 * bound + np.sqrt(self.counts + 1) / self.minutes / self.cpm_per_nm)
        taken = [free / (k + free) if hill == 1.0 else special.expit(hill * np.log(free / k)) for k in ks]
        a = np.stack([np.where(blocked, 0.0, x) for x in taken] + [free], 1)
        (*sites, ns), _ = optimize.nnls(a * weight[:, None], bound * weight)
        z = np.zeros(self.dim)
        for i, k in zip(self.law.ks, ks):
            z[i] = math.log(k)
        for i, r in zip(self.law.sites, sites):
            z[i] = math.log(max(r, 1e-3 * bound.max(), 1e-6 * self.lt_max))
        if self.law.n is not None:
            z[self.law.n] = math.log(hill)
        z[self.ns] = max(ns, 1e-7) / self.ns_unit
        z[self.bg], z[self.cv] = math.log(b), math.log(0.06)
        return z

    def starts(self, rng, grid=9, jitter=2):
        ladder = np.geomspace(self.lt_min / 5, self.lt_max * 5, grid)
        if self.law is TwoClasses:
            where = [([lo, hi], 1.0) for j, hi in enumerate(ladder) for lo in ladder[:j]]
        elif self.law is Hill:
            where = [([k], n) for k in ladder for n in (0.5, 1.0, 2.0)]
        else:
            where = [([k], 1.0) for k in ladder]
        out = []
        for ks, hill in where:
            out.append(self._start(ks, hill))
            for _ in range(jitter):
                z = self._start(ks, hill)
                for i in self.law.sites:
                    z[i] += rng.normal(0, 0.7)
                z[self.ns] *= math.exp(rng.normal(0, 0.7))
                z[self.bg] += rng.normal(0, 0.1)
                z[self.cv] += rng.normal(0, 0.5)
                z[self.first_d :] = rng.normal(0, 0.7, self.dim - self.first_d)
                out.append(z)
        return out

    # ------------------------------------------------------------------------ the model
    def _mean_and_variance(self, z):
        """mu, V of each tube for real z, and their derivatives (complex step)."""
        h = 1e-30
        law = self.law
        zc = z[None, :] + 1j * h * np.eye(self.dim)
        natural = [np.exp(zc[:, i])[:, None] for i in range(len(law.names))]
        b, cv = (np.exp(zc[:, i])[:, None] for i in (self.bg, self.cv))
        ns = zc[:, self.ns][:, None] * self.ns_unit
        added = self.level_added[self.case_level][None, :]
        if self.s_d > 0:
            d = zc[:, self.first_d : self.first_e] * self.s_d
            added = added * np.exp(d)[:, self.case_level]
        else:
            added = np.broadcast_to(added, (self.dim, added.shape[1])).astype(complex)
        per_nm = self.cpm_per_nm
        for c, (name, sd) in enumerate(self.scales, self.first_e):
            times = np.exp(zc[:, c] * sd)[:, None]
            if name == "stock":
                added = added * times
            else:
                per_nm = per_nm * times
            if name == "volume":
                added = added / times
        s = self.settings["unlabelled"]
        c = s["concentration_nm"]
        q = [np.broadcast_to(x, added.shape).copy() for x in natural]
        whole = added.copy()  # what the balance is solved for
        if s["kind"] == "same_ligand":
            whole[:, self.case_ns] += c
        elif s["ki_nm"] is not None:
            for k in law.ks:
                q[k][:, self.case_ns] *= 1 + c / s["ki_nm"]
        else:
            for r in law.sites:
                q[r][:, self.case_ns] = 0.0
        a = np.ones_like(ns) if self.on_filter else 1 + ns
        free = np.empty_like(added)
        a0 = a[0, 0].real
        for i in range(added.shape[1]):
            q0 = [x[0, i].real for x in q]
            root = self._free(a0, q0, whole[0, i].real)
            slope = a0 + law.slope(root, q0)
            # One complex Newton step: polishes the root and carries the derivative.
            g = a[:, 0] * root + law.specific(root, [x[:, i] for x in q], np) - whole[:, i]
            free[:, i] = root - g / slope
        bound = law.specific(free, q, np) + ns * free
        bound = bound * (added / whole)  # the label's share; 1 unless same ligand
        bound = bound[:, self.case_of]
        signal = self.minutes * per_nm * bound
        mu = self.minutes * b + signal
        v = mu + cv**2 * signal**2
        return mu, v, h

    def _free(self, a, q, total):
        """The balance a F + S(F) = total by bracketed root finding."""
        specific = self.law.specific

        def balance(f):
            return a * f + specific(f, q, math) - total

        top = total / a
        return optimize.brentq(
            balance, 0.0, top * (1 + 1e-12), xtol=1e-300, rtol=9e-16, maxiter=500
        )

    def prior_residuals(self, z):
        out = []
        if self.prior is not None:
            out.append((z[self.cv] - math.log(self.prior["centre"])) / self.prior["sd_ln"])
        if self.s_d > 0:
            e = z[self.first_d : self.first_e]
            if self.serial:
                out.extend(e[:-1] - e[1:])
                out.append(e[-1])
            else:
                out.extend(e)
        out.extend(z[self.first_e :])
        return np.array(out)

    def prior_jacobian(self):
        rows = []
        if self.prior is not None:
            row = np.zeros(self.dim)
            row[self.cv] = 1 / self.prior["sd_ln"]
            rows.append(row)
        for j in range(self.first_d, self.dim):
            row = np.zeros(self.dim)
            row[j] = 1.0
            if self.serial and j + 1 < self.first_e:
                row[j + 1] = -1.0
            rows.append(row)
        return np.array(rows).reshape(-1, self.dim)

    def minus2lnl(self, z):
        mu, v, _ = self._mean_and_variance(z)
        return self._minus2lnl(mu[0].real, v[0].real, z[self.bg])

    def _minus2lnl(self, mu, v, ln_b):
        tb = self.t_b * np.exp(ln_b)
        tubes = (self.counts - mu) ** 2 / v + LN_2PI + np.log(v)
        background = 2 * (
            tb - self.n_b * np.log(tb) + special.gammaln(self.n_b + 1)
        )
        return math.fsum(tubes) + background

    def objective(self, z):
        """Penalised objective and its gradient by z."""
        mu, v, h = self._mean_and_variance(z)
        value = self._minus2lnl(mu[0].real, v[0].real, z[self.bg])
        mu0, v0 = mu[0].real, v[0].real
        dmu, dv = mu.imag / h, v.imag / h
        d = self.counts - mu0
        grad = (-2 * d / v0 * dmu + (1 / v0 - d**2 / v0**2) * dv).sum(1)
        grad[self.bg] += 2 * (self.t_b * math.exp(z[self.bg]) - self.n_b)
        q = self.prior_residuals(z)
        value += float(q @ q)
        grad = grad + 2 * self.prior_jacobian().T @ q
        return value, grad

    def expected_information(self, z):
        """Of [the law's parameters as ln, ln ns, ln b, ln cv, d/s_d, e/s]."""
        mu, v, h = self._mean_and_variance(z)
        v0 = v[0].real
        dmu, dv = mu.imag / h, v.imag / h
        dmu[self.ns] *= z[self.ns]  # d/d ln ns
        dv[self.ns] *= z[self.ns]
        info = (dmu / v0) @ dmu.T + (dv / (2 * v0**2)) @ dv.T
        info[self.bg, self.bg] += self.t_b * math.exp(z[self.bg])
        j = self.prior_jacobian()
        return info + j.T @ j

    # -------------------------------------------------------------------- minimisation
    def hessian(self, z, free, objective=None):
        objective = objective or self.objective
        step = 1e-4
        out = np.empty((len(free), len(free)))
        for row, i in enumerate(free):
            hi, lo = z.copy(), z.copy()
            hi[i] += step
            lo[i] -= step
            out[row] = (objective(hi)[1] - objective(lo)[1])[free] / (2 * step)
        return (out + out.T) / 2

    def minimise(self, z0, pinned=(), polish=True):
        """Local minimum from z0 with some coordinates pinned. Returns (value, z).

        Two classes are minimised over K1 <= K2; a minimum may lie where they are equal.
        Without the polish the value is a few 1e-8 too high at worst.
        """
        pinned = set(pinned)
        chart = Ordered(self, pinned) if self.law is TwoClasses else Chart(self)
        lower, upper = chart.lower, chart.upper

        def objective(y):
            f, g = self.objective(chart.z(y))
            return f, chart.pull(y, g)

        z = np.clip(chart.y(np.clip(np.array(z0, float), self.lower, self.upper)), lower, upper)
        movable = np.array([i for i in range(self.dim) if i not in pinned])

        def inner(y):
            full = z.copy()
            full[movable] = y
            f, g = objective(full)
            return f, g[movable]

        res = optimize.minimize(
            inner,
            z[movable],
            jac=True,
            method="L-BFGS-B",
            bounds=list(zip(lower[movable], upper[movable])),
            options=dict(maxiter=2000, maxfun=4000, ftol=1e-13, gtol=1e-7, maxcor=30),
        )
        z[movable] = res.x
        f, g = objective(z)
        held, last = None, 0.0
        for _ in range(60 if polish else 0):
            at_low = (z <= lower) & (g > 0)
            at_high = (z >= upper) & (g < 0)
            free = np.array([i for i in movable if not at_low[i] and not at_high[i]])
            if len(free) == 0:
                break
            if held is None or len(held) != len(free) or (held != free).any():
                held = free
                w, q = np.linalg.eigh(self.hessian(z, free, objective))
                w = np.maximum(np.abs(w), 1e-10 * np.abs(w).max())
            step = -(q @ ((q.T @ g[free]) / w))
            size = 1.0 if np.abs(step).max() < 3 else 3 / np.abs(step).max()
            moved = False
            while size > 1e-10:
                trial = z.copy()
                trial[free] += size * step
                trial = np.clip(trial, lower, upper)
                ft, gt = objective(trial)
                if np.isfinite(ft) and ft <= f + 1e-12 * (1 + abs(f)):
                    moved = True
                    break
                size /= 2
            if not moved:
                break
            moved = np.abs(trial - z).max()
            z, f, g = trial, ft, gt
            if moved < 3e-13:
                break
            if moved > 0.01 * last:  # the second derivatives are stale
                held = None
            last = moved
        return f, chart.z(z)

    def global_minimum(self, rng):
        """Best of many starts, and how well the starts that reached it agree."""
        found = [self.minimise(z) for z in self.starts(rng)]
        found.sort(key=lambda p: p[0])
        best, z = found[0]
        same = [p for p in found if p[0] - best < 1e-7]
        others = [p for p in found if p[0] - best >= 1e-7]
        spread = max(np.abs(self.natural_ln(p[1]) - self.natural_ln(z)).max() for p in same)
        return best, z, dict(
            starts=len(found),
            reached_best=len(same),
            spread_ln=float(spread),
            spread_objective=float(max(p[0] for p in same) - best),
            next_best_excess=float(others[0][0] - best) if others else None,
        )

    def natural_ln(self, z):
        y = z[: self.first_d].copy()
        y[self.ns] = math.log(z[self.ns] * self.ns_unit)
        return y

    def merged(self, z):
        """Whether two classes have become one."""
        return self.law is TwoClasses and z[2] - z[0] < 1e-6

    # ------------------------------------------------------------------------ intervals
    def pin(self, z, i, x):
        """A start with coordinate i at x; of two classes the other K is kept apart."""
        z = z.copy()
        z[i] = x
        if self.law is TwoClasses and z[2] - z[0] < 0.1:
            if i == 2:
                z[0] = z[2] - 1.0
            else:
                z[2] = z[0] + 1.0
        return z

    def profile_end(self, best, zhat, i, direction, limit, step, rng):
        """Walk outwards to the cut. Returns (coordinate or None, z there or at limit)."""
        def value(x, warm, wide=False):
            """Lowest found with coordinate i at x. A profile may have two branches, and a
            warm start can stay on the wrong one, so each neighbour is tried, and where it
            matters starts from all over the place as well."""
            best = min((self.minimise(self.pin(z, i, x), (i,)) for z in warm), key=lambda p: p[0])
            for z in self.starts(rng, grid=5, jitter=0) if wide else ():
                found = self.minimise(self.pin(z, i, x), (i,), polish=False)
                if found[0] < best[0] - 1e-9:
                    best = min(best, self.minimise(found[1], (i,)), key=lambda p: p[0])
            return best

        x0, f0, z0 = zhat[i], best, zhat
        k = 0
        while True:
            x1 = zhat[i] + direction * step * 2.0**k
            last = (x1 - limit) * direction >= 0
            if last:
                x1 = limit
            f1, z1 = value(x1, [z0])
            if f1 - best > self.cut:
                f1, z1 = value(x1, [z1, zhat], wide=True)
            if f1 - best > self.cut:
                break
            if last or (i in self.law.ks and self.merged(z1)):
                return None, z1
            x0, f0, z0 = x1, f1, z1
            k += 1
        memory = {x0: (f0, z0), x1: (f1, z1)}

        def excess(x):
            if x not in memory:
                below = max((y for y in memory if y < x), default=None)
                above = min((y for y in memory if y > x), default=None)
                near = [memory[y][1] for y in (below, above) if y is not None]
                memory[x] = value(x, near)
            return memory[x][0] - best - self.cut

        x = optimize.brentq(excess, x0, x1, xtol=1e-13 * max(1.0, abs(x0)), rtol=9e-16)
        if abs(excess(x)) > 1e-8:
            raise ArithmeticError(f"the profile jumps at its end: {excess(x)}")
        if i in self.law.ks and self.merged(memory[x][1]):
            return None, memory[x][1]
        return x, memory[x][1]

    def search(self, z, i, direction, se):
        """How far coordinate i is profiled, and the first step."""
        side = (direction + 1) // 2
        box = (self.lower, self.upper)[side][i]
        if i in self.law.ks:
            limit = self.kd_range[side]
        elif i in self.law.sites:
            far = z[i] + direction * math.log(1e4)
            limit = max(box, far) if direction < 0 else min(box, far)
        else:
            limit = box
        if i == self.ns:
            step = 0.5 * se[i] * z[i] if i in se else 1e-7 / self.ns_unit
        else:
            step = 0.5 * se[i] if i in se else 0.25
        return limit, step

    def back_under_cut(self, best, points):
        """Does the profile of a K come back under the cut further out?"""
        out = {}
        for k in self.law.ks:
            name = self.names[k]
            out[name] = {}
            for side, direction in (("low", -1), ("high", 1)):
                _, x, warm = points[name, side]
                if x is None:
                    continue
                inside = 0
                for y in np.linspace(x, self.kd_range[(direction + 1) // 2], 15)[1:]:
                    f, warm = self.minimise(self.pin(warm, k, y), (k,))
                    inside += f - best < self.cut
                out[name][side] = int(inside)
        return out

    def fit(self, seed=0, certify=True, background=False, one_class=None):
        """Estimates, intervals and how far each may be off; `background` profiles b too.

        `one_class` is the objective of one class: two classes that do no better, or one of
        which has its sites at the floor, are no result.
        """
        one = self.law is OneClass
        rng = np.random.default_rng(seed)
        best, z, agreement = self.global_minimum(rng)
        floored = [*(() if one else self.law.sites), self.ns, self.bg]
        at_floor = [i for i in floored if z[i] <= self.lower[i] * (1 + 1e-12 * np.sign(self.lower[i]))]
        ends_of_search = () if one else tuple(i for i in (*self.law.ks, self.law.n) if i is not None)
        at_limit = [i for i in ends_of_search if not self.lower[i] + 1e-9 < z[i] < self.upper[i] - 1e-9]
        if self.law is TwoClasses:
            why = [f"{self.names[i]} at its floor" for i in at_floor if i in self.law.sites]
            if self.merged(z) or (one_class is not None and best > one_class - 1e-6):
                why.append("no better than one class")
            if why:
                return dict(none="; ".join(why), n=self.n, objective=best, accuracy=agreement)
        keep = np.array([i for i in range(self.dim) if i not in at_floor + at_limit])
        info = self.expected_information(z)[np.ix_(keep, keep)]
        cov = np.linalg.inv(info)
        se = {int(i): math.sqrt(cov[r, r]) for r, i in enumerate(keep)}
        q = self.prior_residuals(z)
        prior = float(q @ q)
        minus2lnl = self.minus2lnl(z)
        n1 = self.n + 1
        names = self.names
        estimates = dict(zip(names, np.exp(self.natural_ln(z)).tolist()))
        if self.ns in at_floor:
            estimates["ns"] = NS_FLOOR
        ends, points, improved = {}, {}, 0.0
        for i, name in enumerate(names[: self.bg + 1 if background else self.bg]):
            ends[name] = {}
            for side, direction in (("low", -1), ("high", 1)):
                limit, step = self.search(z, i, direction, se)
                if (limit - z[i]) * direction <= 0 or (i in at_limit and abs(limit - z[i]) < 1e-8):
                    x, zx = None, z  # the estimate itself stands at the limit
                else:
                    x, zx = self.profile_end(best, z, i, direction, limit, step, rng)
                if x is None:
                    ends[name][side] = None
                else:
                    ends[name][side] = float(x * self.ns_unit if i == self.ns else math.exp(x))
                points[name, side] = (i, x, zx)
                # Is there a lower valley at this end, from starts all over the place?
                f_here = self.objective(zx)[0]
                for start in self.starts(rng, grid=5, jitter=1):
                    f_other, _ = self.minimise(self.pin(start, i, zx[i]), (i,), polish=False)
                    improved = max(improved, f_here - f_other)
        back = self.back_under_cut(best, points)
        out = dict(
            n=self.n,
            cut=self.cut,
            minus2lnl=minus2lnl,
            prior_term=prior,
            aicc=minus2lnl + 2 * self.k_aicc + 2 * self.k_aicc * (self.k_aicc + 1) / (n1 - self.k_aicc - 1),
            estimates=estimates,
            se_ln={n: se.get(i) for i, n in enumerate(names)},
            intervals=ends,
            at_floor=[names[i] for i in at_floor],
            **({} if one else dict(at_limit=[names[i] for i in at_limit])),
            dilution_d=(
                {str(j): float(self.s_d * z[self.first_d + c]) for j, c in self.column.items()}
                if self.s_d > 0
                else None
            ),
        )
        if self.scales:
            out["scale_e"] = {n: float(sd * z[self.first_e + c]) for c, (n, sd) in enumerate(self.scales)}
        accuracy = dict(
            **agreement,
            lower_valley_at_ends=float(improved),
            kd_profile_points_back_under_cut=back["kd_nm"] if one else back,
        )
        if one:
            accuracy["kd_nm_at_ends"] = {
                f"{n}.{side}": math.exp(zx[0]) for (n, side), (_, _, zx) in points.items()
            }
        else:
            accuracy["k_and_n_at_ends"] = {
                f"{n}.{side}": {names[j]: math.exp(zx[j]) for j in ends_of_search}
                for (n, side), (_, _, zx) in points.items()
            }
            accuracy["classes_equal_at_ends"] = [
                f"{n}.{side}" for (n, side), (_, _, zx) in points.items() if self.merged(zx)
            ]
        if at_floor:
            g = self.objective(z)[1]
            accuracy["slope_at_floor"] = {
                names[i]: float(g[i] / (self.ns_unit if i == self.ns else 1)) for i in at_floor
            }
        open_ends = {
            f"{n}.{s}": float(self.objective(zx)[0] - best)
            for (n, s), (i, x, zx) in points.items()
            if x is None
        }
        if open_ends:
            accuracy["objective_excess_at_search_limit_of_open_ends"] = open_ends
        if certify:
            accuracy["certificate_40_digits"] = self.certify(z, at_floor + at_limit, points)
        out["accuracy"] = accuracy
        self.solution = (best, z)
        return out

    # ---------------------------------------------------------------- 40-digit certificate
    def objective_mp(self, z, mp):
        m = mp.mpf
        z = [m(x) for x in z]
        s, law = self.settings, self.law
        natural = [mp.exp(x) for x in z[: len(law.names)]]
        b, cv = mp.exp(z[self.bg]), mp.exp(z[self.cv])
        ns = z[self.ns] * m(self.ns_unit)
        cpm = (
            m(s["efficiency"]) * m("2.22") * m(s["sa_ci_per_mmol"])
            * m(s["fraction_counted"]) * 1000 * m(s["volume_ml"])
        )
        stretch = m(1)
        for c, (name, sd) in enumerate(self.scales, self.first_e):
            times = mp.exp(m(sd) * z[c])
            stretch *= {"stock": times, "volume": 1 / times}.get(name, 1)
            cpm *= 1 if name == "stock" else times
        a = m(1) if self.on_filter else 1 + ns
        u = s["unlabelled"]
        c = m(u["concentration_nm"])
        bounds = []
        for level, blocked in zip(self.case_level, self.case_ns):
            lt = m(float(self.level_added[level])) * stretch
            if self.s_d > 0:
                lt *= mp.exp(m(self.s_d) * z[self.first_d + int(level)])
            whole, q = lt, list(natural)
            if blocked:
                if u["kind"] == "same_ligand":
                    whole = lt + c
                elif u["ki_nm"] is not None:
                    for k in law.ks:
                        q[k] *= 1 + c / m(u["ki_nm"])
                else:
                    for r in law.sites:
                        q[r] = m(0)
            f = self.free_mp(a, q, whole, mp)
            bounds.append((law.specific(f, q, mp) + ns * f) * lt / whole)
        total = m(0)
        for i, t in enumerate(self.used):
            minutes = m(float(t["minutes"]))
            signal = minutes * cpm * bounds[self.case_of[i]]
            mu = minutes * b + signal
            v = mu + cv**2 * signal**2
            total += (t["counts"] - mu) ** 2 / v + mp.log(2 * mp.pi * v)
        tb = m(self.t_b) * b
        total += 2 * (tb - m(self.n_b) * mp.log(tb) + mp.loggamma(m(self.n_b) + 1))
        if self.prior is not None:
            total += ((z[self.cv] - mp.log(m(self.prior["centre"]))) / m(self.prior["sd_ln"])) ** 2
        if self.s_d > 0:
            e = z[self.first_d : self.first_e]
            for j in range(len(e)):
                total += (e[j] - (e[j + 1] if self.serial and j + 1 < len(e) else 0)) ** 2
        for e in z[self.first_e :]:
            total += e**2
        return total

    def free_mp(self, a, q, whole, mp):
        """The balance at the full number of digits."""
        m = mp.mpf
        small = m(10) ** (5 - mp.mp.dps)
        specific = self.law.specific
        if self.law.concave:
            # Newton from the left of the root (zero) climbs without overshoot.
            f = m(0)
            for _ in range(500):
                step = (whole - a * f - specific(f, q, mp)) / (a + self.law.slope(f, q))
                f += step
                if abs(step) <= abs(f) * small:
                    return f
            raise ArithmeticError("balance not solved")
        # From the root in double precision; that it is the root is seen by the signs around it.
        f = m(self._free(float(a), [float(x) for x in q], float(whole)))
        for _ in range(50):
            slope = a + m(self.law.slope(float(f), [float(x) for x in q]))
            step = (whole - a * f - specific(f, q, mp)) / slope
            f += step
            if abs(step) <= abs(f) * small:
                break
        below, above = f * (1 - 10 * small), f * (1 + 10 * small)
        if not a * below + specific(below, q, mp) < whole < a * above + specific(above, q, mp):
            raise ArithmeticError("balance not solved")
        return f

    def certify(self, z, at_floor, points):
        """How far the double-precision results are from the 40-digit ones."""
        import mpmath as mp

        mp.mp.dps = 40
        h = mp.mpf(10) ** -12

        def gradient(at, free):
            g = []
            for i in free:
                hi, lo = [mp.mpf(x) for x in at], [mp.mpf(x) for x in at]
                hi[i] += h
                lo[i] -= h
                g.append((self.objective_mp(hi, mp) - self.objective_mp(lo, mp)) / (2 * h))
            return np.array([float(x) for x in g])

        def excess_left(at, free):
            """Newton step still to go, and the drop it would bring."""
            g = gradient(at, free)
            step = -np.linalg.solve(self.hessian(np.array(at), free), g)
            return step, float(-0.5 * g @ step)

        free = np.array([i for i in range(self.dim) if i not in at_floor])
        step, drop = excess_left(z, free)
        rel = step.copy()
        for r, i in enumerate(free):
            if i == self.ns:
                rel[r] = step[r] / z[self.ns]
        hat = self.objective_mp(z, mp)
        out = dict(
            estimates_ln=float(np.abs(rel[: self.first_d]).max()),
            objective=abs(float(hat - mp.mpf(self.objective(z)[0]))) + abs(drop),
            ends_ln=0.0,
        )
        for (name, _), (i, x, zx) in points.items():
            if x is None or self.merged(zx):
                continue
            # Which others stand at a floor or a limit there?
            g = self.objective(zx)[1]
            held = ((zx <= self.lower + 1e-12) & (g > 0)) | ((zx >= self.upper - 1e-12) & (g < 0))
            fr = np.array([j for j in range(self.dim) if j != i and not held[j]])
            _, d = excess_left(zx, fr)
            miss = float(self.objective_mp(zx, mp) - hat - mp.mpf(self.cut)) - d + drop
            err = abs(miss / g[i])
            if i == self.ns:
                err /= zx[i]
            out["ends_ln"] = max(out["ends_ln"], err)
        return out


# ----------------------------------------------------------------- the published check table
# Simulated titrations fitted by yet another independent implementation: figures to be met.
TABLE = {
    "exp1, CV free": dict(
        file="exp1_ideal.csv", prior=False, minus2lnl=296.485356, prior_term=0.0, aicc=308.7076,
        kd_nm=".48648349", sites_nm=".019805582", ns=".0019256864", background_cpm="24.419057",
        cv=".038013014", kd_ends=(".423338", ".563331"), sites_ends=(".0184477", ".0213757"),
        ns_ends=(".00182242", ".00203775"),
    ),
    "exp1, CV prior": dict(
        file="exp1_ideal.csv", prior=True, minus2lnl=296.533660, prior_term=0.320384, aicc=308.7559,
        kd_nm=".48733687", sites_nm=".019814494", ns=".0019262296", background_cpm="24.419035",
        cv=".040371632", kd_ends=(".422379", ".565997"), sites_ends=(".0184103", ".021433"),
    ),
    "exp5, CV prior": dict(
        file="exp5_lowcounts.csv", prior=True, minus2lnl=217.975772, prior_term=0.013368, aicc=230.1980,
        kd_nm=".43829757", sites_nm=".0040311431", ns=".00041025035", background_cpm="24.235742",
        cv=".065057958", kd_ends=(".210888", ".893854"), sites_ends=(".00307863", ".00539685"),
    ),
    "exp3 as one class, CV prior": dict(
        file="exp3_twosite.csv", prior=True, minus2lnl=634.812115, prior_term=1.999363, aicc=645.9886,
        kd_nm="1.0301213", sites_nm=".043801239", cv=".16144046",
    ),
    "exp3 as two classes, CV prior": dict(
        file="exp3_twosite.csv", prior=True, model="two_classes",
        minus2lnl=521.838270, prior_term=1.581594, aicc=538.1240,
        kd1_nm=".22705507", sites1_nm=".011876204", kd2_nm="9.1507586", sites2_nm=".057603819",
        ns=".00050167806", cv=".024878763",
        kd1_ends=(".172031", ".291774"), sites1_ends=(".00973153", ".0142208"),
        kd2_ends=("7.20347", "11.7871"), sites2_ends=(".053987", ".0617049"),
    ),
}
LAB_PRIOR = dict(centre=0.06, sd_ln=0.7)


def rack_from_csv(path, prior):
    lines = pathlib.Path(path).read_text().splitlines()
    head = {k: float(v) for k, v in re.findall(r"(\w+)=([-\d.e]+)", lines[0])}
    tubes, levels, seen = [], {}, {}
    for row in csv.DictReader(lines[1:]):
        added = float(row["added_nM"])
        level = levels.setdefault(added, len(levels) + 1)
        role = {"T": "total", "N": "nonspecific"}[row["kind"]]
        seen[level, role] = seen.get((level, role), 0) + 1
        tubes.append(
            dict(level=level, role=role, replicate=seen[level, role], added_nm=added,
                 counts=int(row["counts"]), minutes=float(row["minutes"]), lost=False, suspect=False)
        )
    settings = dict(
        volume_ml=head["vol_mL"], efficiency=head["eff"], sa_ci_per_mmol=head["SA_Ci_per_mmol"],
        fraction_counted=1.0,
        unlabelled=dict(kind="same_ligand", concentration_nm=head["cold_nM"], ki_nm=None),
        sticks="preparation", s_d=0.0, dilution="from_stock", cv_prior=LAB_PRIOR if prior else None,
    )
    background = [dict(counts=int(head["background_counts"]), minutes=head["background_min"])]
    return dict(settings=settings, background=background, tubes=tubes)


def check(folder):
    good = True

    def compare(label, got, want):
        nonlocal good
        text = want if isinstance(want, str) else repr(want)
        decimals = len(text.split(".")[1]) if "." in text else 0
        ok = abs(got - float(text)) <= 0.5000001 * 10.0**-decimals
        good &= ok
        print(f"  {label:18s} {got:<22.12g} table {text:<14s} {'agrees' if ok else 'DIFFERS'}")

    for name, row in TABLE.items():
        print(name)
        rack = rack_from_csv(pathlib.Path(folder) / row["file"], row["prior"])
        problem = Problem(rack, model=row.get("model", "one_class"))
        fit = problem.fit()
        compare("minus2lnl", fit["minus2lnl"], f"{row['minus2lnl']:.6f}")
        compare("prior_term", fit["prior_term"], f"{row['prior_term']:.6f}")
        compare("aicc", fit["aicc"], f"{row['aicc']:.4f}")
        for par in problem.names:
            if par in row:
                compare(par, fit["estimates"][par], row[par])
            key = par.removesuffix("_nm") + "_ends"
            if key in row:
                compare(par + " low", fit["intervals"][par]["low"], row[key][0])
                compare(par + " high", fit["intervals"][par]["high"], row[key][1])
        print("  accuracy", json.dumps(fit["accuracy"]))
    print("table reproduced" if good else "TABLE NOT REPRODUCED")
    return good


# ------------------------------------------------------------------------------ simulation
def plan(levels, totals, nonspecifics, minutes):
    """Tubes of a rack without readings; totals, nonspecifics, minutes per level or one."""
    def per(x, j):
        return x[j] if isinstance(x, (list, tuple)) else x

    tubes = []
    for role, how_many in (("total", totals), ("nonspecific", nonspecifics)):
        for j, added in enumerate(levels):
            for rep in range(per(how_many, j)):
                tubes.append(
                    dict(level=j + 1, role=role, replicate=rep + 1, added_nm=added, counts=None,
                         minutes=float(per(minutes, j)), lost=False, suspect=False)
                )
    return tubes


def ladder(low, high, n):
    return [float(f"{x:.4g}") for x in np.geomspace(low, high, n)]


def settings(**change):
    base = dict(
        volume_ml=0.5, efficiency=0.45, sa_ci_per_mmol=80.0, fraction_counted=1.0,
        unlabelled=dict(kind="same_ligand", concentration_nm=1000.0, ki_nm=None),
        sticks="preparation", s_d=0.0, dilution="from_stock", cv_prior=LAB_PRIOR,
    )
    base.update(change)
    return base


def simulate(rack, truth, seed, background_minutes, model="one_class"):
    """Fill in counts: dilution and scale errors, tube CV on the bound amount, Poisson counts."""
    rng = np.random.default_rng(seed)
    s = rack["settings"]
    rack["background"] = [
        dict(counts=int(rng.poisson(truth["background_cpm"] * m)), minutes=float(m))
        for m in background_minutes
    ]
    for t in rack["tubes"]:
        t["counts"] = 0  # readings wanted only so that Problem can be built
    everything = dict(rack, tubes=[dict(t, lost=False) for t in rack["tubes"]])
    p = Problem(everything, leave_out_suspects=False, model=model)
    z = np.zeros(p.dim)
    for i, name in enumerate(p.law.names):
        z[i] = math.log(truth[name])
    z[p.ns], z[p.bg] = truth["ns"] / p.ns_unit, math.log(truth["background_cpm"])
    z[p.cv] = math.log(truth["cv"])
    if p.s_d > 0:
        e = rng.normal(0, truth.get("s_d", p.s_d) / p.s_d, p.first_e - p.first_d)
        z[p.first_d : p.first_e] = np.cumsum(e[::-1])[::-1] if p.serial else e
    if p.scales:
        z[p.first_e :] = rng.normal(0, 1, len(p.scales))
    mu = p._mean_and_variance(z)[0][0].real
    for t, m in zip(rack["tubes"], mu):
        plain = t["minutes"] * truth["background_cpm"]
        rate = plain + (m - plain) * (1 + truth["cv"] * rng.normal())
        t["counts"] = int(rng.poisson(max(rate, 0.0)))
    rack["simulated"] = dict(seed=seed, generator="numpy default_rng (PCG64)", truth=truth)
    if model != "one_class":
        rack["simulated"]["model"] = model
    return rack


def mark(rack, level, role, replicate, **what):
    for t in rack["tubes"]:
        if (t["level"], t["role"], t["replicate"]) == (level, role, replicate):
            t.update(what)
            return
    raise KeyError((level, role, replicate))


def lose(rack, level, role, replicate):
    mark(rack, level, role, replicate, counts=None, minutes=None, lost=True)


def truth(kd, r, ns, cv=0.04, b=25.0, **more):
    return dict(kd_nm=kd, sites_nm=r, ns=ns, background_cpm=b, cv=cv, **more)


def truth_two(k1, r1, k2, r2, ns, cv=0.03, b=25.0):
    return dict(kd1_nm=k1, sites1_nm=r1, kd2_nm=k2, sites2_nm=r2, ns=ns, background_cpm=b, cv=cv)


def truth_hill(kh, r, n, ns, cv=0.03, b=25.0):
    return dict(kh_nm=kh, sites_nm=r, n=n, ns=ns, background_cpm=b, cv=cv)


def rack_filter():
    s = settings(sticks="filter", cv_prior=None)
    tubes = plan(ladder(0.06, 6.0, 7), 2, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.215, 0.05), 20301, [10])


def rack_serial():
    s = settings(s_d=0.03, dilution="serial")
    tubes = plan(ladder(0.05, 5.0, 8), 2, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.02, 0.002), 20302, [10])


def rack_stock():
    s = settings(s_d=0.02, fraction_counted=0.8)
    totals = [3, 3, 2, 1, 3, 2, 1, 2, 3]
    nonspecifics = [0, 2, 0, 0, 1, 0, 2, 0, 2]
    tubes = plan(ladder(0.05, 5.0, 9), totals, nonspecifics, [5.0, 5.0, 3.0, 2.5, 2.0, 2.0, 1.0, 1.0, 1.0])
    rack = dict(settings=s, tubes=tubes)
    mark(rack, 1, "total", 2, minutes=10.0)  # counted longer, as after a recount
    mark(rack, 7, "nonspecific", 1, minutes=4.0)
    mark(rack, 9, "total", 1, minutes=0.5)
    simulate(rack, truth(0.5, 0.03, 0.003, cv=0.05, b=22.0), 20303, [10, 10, 5])
    lose(rack, 3, "total", 2)
    lose(rack, 9, "nonspecific", 2)
    wild = next(t for t in rack["tubes"] if (t["level"], t["role"], t["replicate"]) == (5, "total", 2))
    wild.update(counts=int(round(wild["counts"] * 1.8)), suspect=True)
    rack["simulated"]["wild"] = "level 5 total 2: simulated counts times 1.8"
    return rack


def rack_other_ki():
    s = settings(
        unlabelled=dict(kind="other_ligand", concentration_nm=200.0, ki_nm=5.0), s_d=0.02
    )
    tubes = plan(ladder(0.05, 6.0, 8), 2, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.08, 0.004), 20304, [10, 10])


def rack_full_block():
    s = settings(
        unlabelled=dict(kind="other_ligand", concentration_nm=10000.0, ki_nm=None),
        sticks="filter", s_d=0.01, volume_ml=0.25, efficiency=0.78, sa_ci_per_mmol=2200.0,
    )
    tubes = plan(ladder(0.01, 1.0, 8), 2, 2, 1.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.08, 0.012, 0.01, b=40.0), 20305, [5, 5])


def rack_unsaturated(blocker=100000.0):
    unlabelled = dict(kind="same_ligand", concentration_nm=blocker, ki_nm=None)
    tubes = plan(ladder(0.2, 6.0, 6), 2, 1, 2.0)
    return simulate(
        dict(settings=settings(unlabelled=unlabelled), tubes=tubes),
        truth(20.0, 0.1, 0.001, cv=0.08), 20306, [10],
    )


def rack_unsaturated_lost_block():
    """With 20 uM a Kd of several uM is not blocked, so nonspecific tubes close the top end."""
    return rack_unsaturated(20000.0)


def rack_ns_zero():
    s = settings(unlabelled=dict(kind="same_ligand", concentration_nm=5000.0, ki_nm=None))
    tubes = plan(ladder(0.05, 5.0, 8), 2, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.02, 0.0), 20307, [20])


def rack_low_counts():
    s = settings(sa_ci_per_mmol=29.0)
    tubes = plan(ladder(0.05, 5.0, 10), 1, 1, 1.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.004, 0.0004), 20308, [10])


def rack_large():
    s = settings(cv_prior=None)
    tubes = plan(ladder(0.08, 12.0, 12), 3, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.75, 0.02), 20309, [10])


def rack_wide():
    s = settings(s_d=0.02, dilution="serial")
    nonspecifics = [1 if j % 3 == 2 else 0 for j in range(24)]
    tubes = plan(ladder(0.02, 10.0, 24), 1, nonspecifics, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.04, 0.004), 20310, [10])


RACKS = dict(
    filter=rack_filter, serial=rack_serial, stock=rack_stock, other_ki=rack_other_ki,
    full_block=rack_full_block, unsaturated=rack_unsaturated,
    unsaturated_lost_block=rack_unsaturated_lost_block, ns_zero=rack_ns_zero,
    low_counts=rack_low_counts, large=rack_large, wide=rack_wide,
)


def rack_two_classes():
    unlabelled = dict(kind="same_ligand", concentration_nm=10000.0, ki_nm=None)
    tubes = plan(ladder(0.02, 50.0, 12), 2, [1, 0] * 6, 2.0)
    return simulate(
        dict(settings=settings(s_d=0.02, unlabelled=unlabelled), tubes=tubes),
        truth_two(0.2, 0.012, 10.0, 0.06, 0.0005), 20311, [10], "two_classes",
    )


def rack_two_classes_filter():
    """Depleted at the low end; the label that is not specific is caught by the filter."""
    unlabelled = dict(kind="same_ligand", concentration_nm=50000.0, ki_nm=None)
    s = settings(
        sticks="filter", s_d=0.02, dilution="serial", unlabelled=unlabelled, volume_ml=0.25,
        efficiency=0.4, sa_ci_per_mmol=50.0,
    )
    tubes = plan(ladder(0.03, 100.0, 12), 2, 1, 2.0)
    return simulate(
        dict(settings=s, tubes=tubes),
        truth_two(0.3, 0.1, 25.0, 0.9, 0.004, cv=0.025), 20312, [10], "two_classes",
    )


def rack_two_classes_scale():
    """Another ligand that competes for both classes, and a stock known to 4 %."""
    s = settings(
        s_d=0.015, unlabelled=dict(kind="other_ligand", concentration_nm=5000.0, ki_nm=2.0),
        scale_errors=dict(stock=0.04),
    )
    tubes = plan(ladder(0.02, 60.0, 14), 2, [0, 1] * 7, 2.0)
    return simulate(
        dict(settings=s, tubes=tubes),
        truth_two(0.15, 0.02, 8.0, 0.09, 0.001), 20313, [10, 10], "two_classes",
    )


def rack_hill_steep():
    s = settings(s_d=0.02)
    tubes = plan(ladder(0.05, 8.0, 10), 2, [0, 0, 0, 1, 0, 1, 0, 1, 0, 1], 2.0)
    return simulate(
        dict(settings=s, tubes=tubes), truth_hill(0.6, 0.05, 1.6, 0.002), 20314, [10], "hill"
    )


def rack_hill_shallow():
    s = settings(
        s_d=0.01, dilution="serial",
        unlabelled=dict(kind="other_ligand", concentration_nm=20000.0, ki_nm=1.5),
    )
    tubes = plan(ladder(0.02, 40.0, 12), 2, 1, 2.0)
    return simulate(
        dict(settings=s, tubes=tubes), truth_hill(0.8, 0.04, 0.7, 0.0008, cv=0.025), 20315, [10], "hill"
    )


def rack_scale_errors():
    errors = dict(stock=0.03, specific_activity=0.04, efficiency=0.02, volume=0.01)
    s = settings(s_d=0.02, scale_errors=errors)
    tubes = plan(ladder(0.05, 5.0, 8), 2, 2, 2.0)
    return simulate(dict(settings=s, tubes=tubes), truth(0.5, 0.06, 0.003), 20316, [10])


# Fitted as every law; the others as one class.
MODEL_RACKS = dict(
    two_classes=rack_two_classes, two_classes_filter=rack_two_classes_filter,
    two_classes_scale=rack_two_classes_scale, hill_steep=rack_hill_steep,
    hill_shallow=rack_hill_shallow, scale_errors=rack_scale_errors,
)
RACKS.update(MODEL_RACKS)


def expected(rack, models=False):
    problem = Problem(rack)
    left_out = problem.fit(background=models)
    out = dict(fit=left_out, fit_all=left_out)
    if any(t["suspect"] for t in rack["tubes"]):
        out["fit_all"] = Problem(rack, leave_out_suspects=False).fit()
    if models:
        two = Problem(rack, model="two_classes").fit(
            background=True, one_class=problem.solution[0]
        )
        hill = Problem(rack, model="hill").fit(background=True)
        out = dict(**out, models=dict(one_class=left_out, two_classes=two, hill=hill))
    return out


def write_rack(name, folder):
    rack = RACKS[name]()
    out = dict(name=name, about="Simulated data, invented; made by reference.py", **rack)
    out["expected"] = expected(rack, name in MODEL_RACKS)
    out["made_with"] = dict(
        python=sys.version.split()[0], numpy=np.__version__, scipy=scipy.__version__
    )
    (pathlib.Path(folder) / f"{name}.json").write_text(json.dumps(out, indent=1) + "\n")
    return out


def main():
    parser = argparse.ArgumentParser(description="Independent reference for the fits of counts.")
    sub = parser.add_subparsers(dest="what", required=True)
    a = sub.add_parser("check", help="reproduce the published table")
    a.add_argument("--csv", required=True, help="folder of the exp*.csv files")
    a = sub.add_parser("racks", help="simulate and fit the racks, one JSON file each")
    a.add_argument("--out", required=True)
    a.add_argument("names", nargs="*", help="only these")
    a = sub.add_parser("fit", help="fit a rack file again")
    a.add_argument("--models", action="store_true", help="as every law")
    a.add_argument("file")
    args = parser.parse_args()
    if args.what == "check":
        sys.exit(0 if check(args.csv) else 1)
    if args.what == "racks":
        for name in args.names or RACKS:
            for which, fit in write_rack(name, args.out)["expected"].items():
                print(name, which, json.dumps(fit), flush=True)
    if args.what == "fit":
        rack = json.loads(pathlib.Path(args.file).read_text())
        print(json.dumps(expected(rack, args.models), indent=1))


if __name__ == "__main__":
    main()
