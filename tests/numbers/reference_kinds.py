#!/usr/bin/env python3
"""Independent reference for the kinds of counting beyond a rack of bound counts.

What it is
----------
A second implementation, sharing no code with the program nor with `reference.py`, of the
likelihoods of: free label counted, both sides of a dialysis cell counted, a plate reader's
signal, aliquots of what was added, tubes without receptor, tubes whose counting minutes
carry weights (efficiency, decay, dead time), and background vials that scatter.  One class
of sites throughout.  It is slow and general on purpose: derivatives come from the complex
step through the whole objective, minima from a general quasi-Newton minimiser started from
many places and polished by Newton steps, intervals from root finding on re-minimised
profiles.  Every fit is then gone over with mpmath at 40 digits (`certificate_40_digits`),
and its objective is summed once more by `plain_cost`, a scalar rewriting of this text
that reads only the written JSON and solves the balance by the quadratic formula.

How it is run
-------------
    python reference_kinds.py racks --out data/kinds [NAME ...]  # simulate, fit, write JSON
    python reference_kinds.py fit FILE.json                      # fit a rack file again
    python reference_kinds.py check data/racks                   # refit racks of reference.py

Written with Python 3.11, numpy 2.4, scipy 1.17, mpmath 1.3.  Data are simulated with
numpy's PCG64, seeds in each file (`simulated`); all are invented, none are measured.

What all kinds share
--------------------
    -2 ln L = sum_i [ (N_i - mu_i)^2 / V_i + ln(2 pi V_i) ] + background
    background = 2 [ t_b b - N_b ln(t_b b) + lnGamma(N_b + 1) ],  N_b, t_b sums over vials
    prior terms = ((ln cv - ln centre) / sd_ln)^2 + dilution terms
    kappa = efficiency * 2.22 * (Ci/mmol) * 1000 * mL        cpm per nM

The fit minimises -2 ln L + prior terms.  Dilution: level j of the ladder has
L_j = added_j exp(d_j); terms (d_j / s_d)^2 each from stock; serial: (d_top / s_d)^2 and
((d_j - d_(j+1)) / s_d)^2; none where s_d = 0 or in dialysis.  Of L only the share
`bindable` p can bind: L_b = p L takes part in the balance, the rest (1 - p) L does not.

    label sticks to the preparation   L_b = (1 + ns) F + S(F)
    label sticks to the filter        L_b = F + S(F)
    S(F) = R F / (Kd + F)             Bound = S(F) + ns F

Nonspecific tube with C nM of an unlabelled ligand: the same one, X solved for L_b + C and
the label's share L_b / (L_b + C) of S(X), and of X as F; another one with Ki, Kd times
(1 + C / Ki); Ki unknown, S = 0.

Kinds
-----
bound_counted   mu = t b + K w Bound, K = kappa of the incubation volume times the fraction
                counted.  V = mu (1 + (mu / t) tau) + cv^2 (K w Bound)^2 + t^2 sigma2.
                t: minutes of all readings of the tube, N: their counts.
                w = sum t_i e_i f_i, e_i = that reading's efficiency / the nominal one,
                f_i = 2^(-start_i / T) (1 - exp(-lambda t_i)) / (lambda t_i), start_i from
                the reference time to the start of the count.  Without either w = t.
                tau: dead time in minutes; N are the corrected counts N = M / (1 - M tau / t)
                of the observed M (also in the background vials).  Else tau = 0.
free_counted    mu = t (b + kappa Q), kappa of the aliquot.
                V = mu + cv^2 (mu - t b)^2 + t^2 sigma2.
                preparation Q = F + rest; filter Q = (1 - ns) F + rest.
reader          y = m0 + g q Bound, q = volume * fraction / read volume;
                standards y = m0 + g c (blank wells c = 0).
                V = s0^2 + cv^2 (mean - m0)^2 for both.  No background.
                Standards are not in n of the cut; AICc n = tubes + standards + blanks,
                k = 7 (Kd, R, ns, m0, g, s0, cv).
dialysis        F = max((N_F / t_F - b) / kappa_F, 1 / (1000 t_F kappa_F)) of the ligand side;
                mu = t_P (b + kappa_P (F + c B(F))) of the protein side, c = v0 / v1 of its
                volume before and after.
                V = mu + cv^2 (mu - t_P b)^2 + (t_P kappa_P)^2 (1 + c B'(F))^2 V_F,
                V_F = [max(N_F, 1) + cv^2 (N_F - t_F b)^2] / (t_F kappa_F)^2.
                B = S(F) + ns F; blocked by the same ligand B = S(rho F) / rho + ns F,
                rho = (L + C) / L with L nominal.  n = cells.

`added` aliquots (bound or free counted): mu = t (b + kappa_a L_j exp(d_j)), kappa_a of the
volume times the aliquot's share, all label counted, V as a tube's.  Not in n.

`no_receptor` tubes bring a parameter ns_filter and count in n.  With receptor (stuck to the
preparation): balance with ns as above, Bound = S + (ns + ns_filter) F.  Without:
F = L_b, Bound = ns_filter F.  Free counted: Q = L_b - Bound + rest.  p and k rise by one.

Background vials that scatter (`background_scatter`: true): y_i = N_i / t_i, b0 = sum N / sum t,
w_i = t_i / b0, Q = sum w (y - b0)^2, sigma2 = max(0, (Q - (m - 1)) / (sum w - sum w^2 / sum w))
(DerSimonian & Laird 1986, Controlled Clinical Trials 7:177, from memory); weights
1 / (b0 / t_i + sigma2) give the mean bhat and v = 1 / sum of the weights, and the background
term is (bhat - b)^2 / v + ln(2 pi v).  sigma2 is 0 otherwise.

    AICc = minus2lnl + 2k + 2k(k+1)/(n' - k - 1);  k = 5 (6 with ns_filter), n' = n + 1

Intervals: profile of the penalised objective with the cut n ln(1 + t^2_{0.975, n-p} / (n-p)),
n tubes or cells, p = 3 (4 with ns_filter).  Kd is searched from LTmin/1000 to LTmax*1000, R and
the reader's m0 and g within a factor 1e4, ns and ns_filter from 1e-9 to 1e3 (below 1 where free
is counted and they lessen it, since Q would turn negative); an end not met there is open
(null).  Standard errors: inverse of the expected information of the logarithms,
sum [mu'mu'^T / V + V'V'^T / (2 V^2)] + background + prior rows, with derivatives of all that
depends on a parameter (in dialysis also F and V_F on b and cv), parameters at a floor left out.
Floors: ns, ns_filter >= 1e-9, b >= 0.05 / t_b.

Of one dialysis rack `functional` gives another fit, at the CV of the truth: every cell's F is a
parameter of its own, and the squared standardised residuals of both vials and of the
background are minimised, their variances taken from the last solution until nothing changes;
`at_fixed_cv` is the effective-variance fit above at that CV.
"""

import argparse
import json
import math
import pathlib
import sys

import mpmath
import numpy as np
import scipy
from scipy import optimize, stats

NS_FLOOR = 1e-9
DPM_PER_FMOL_PER_CI_PER_MMOL = 2.22
H = 1e-30  # complex step
LAB_PRIOR = dict(centre=0.06, sd_ln=0.7)
TUBE_ROLES = ("total", "nonspecific", "no_receptor")


class Digits:
    """exp and log of numpy arrays of mpmath numbers."""

    exp = staticmethod(np.frompyfunc(mpmath.exp, 1, 1))
    log = staticmethod(np.frompyfunc(mpmath.log, 1, 1))


def real(x):
    """First row of an array of complex or of mpmath numbers, in double precision."""
    return np.array([float(y.real) for y in np.atleast_2d(x)[0]])


def free_of_balance(a, kd, sites, total):
    """F of a F + sites F / (kd + F) = total; arrays of complex, or of mpmath numbers.

    Newton's steps on the real parts from the left of the root, where they climb without
    overshoot because the left side is concave; the last steps carry derivatives or digits.
    """
    a, kd, sites, total = np.broadcast_arrays(a, kd, sites, total)
    a0, k0, r0, t0 = (real(x) for x in (a, kd, sites, total))
    f = np.maximum((t0 - r0) / a0, t0 / (a0 + r0 / k0))
    for _ in range(200):
        step = (t0 - a0 * f - r0 * f / (k0 + f)) / (a0 + r0 * k0 / (k0 + f) ** 2)
        f = f + step
        if np.all(np.abs(step) <= 4e-16 * f):
            break
    else:
        if np.any(np.abs(step) > 1e-13 * f):
            raise ArithmeticError("balance not solved")
    f = np.broadcast_to(f, total.shape)
    if total.dtype == object:
        f = f.astype(object)
    for _ in range(4 if total.dtype == object else 1):
        f = f + (total - a * f - sites * f / (kd + f)) / (a + sites * kd / (kd + f) ** 2)
    return f


# ----------------------------------------------------------------------------- background
class Poisson:
    """Background vials pooled."""

    sigma2 = 0.0

    def __init__(self, vials):
        self.counts = math.fsum(r["counts"] for v in vials for r in v["readings"])
        self.minutes = math.fsum(r["minutes"] for v in vials for r in v["readings"])
        self.rate = max(self.counts, 0.5) / self.minutes

    def term(self, b, lib):
        tb = self.minutes * b
        const = mpmath.loggamma(mpmath.mpf(self.counts) + 1)
        return 2 * (tb - self.counts * lib.log(tb) + (const if lib is Digits else float(const)))

    def information(self, b):
        return self.minutes * b


class Scattered(Poisson):
    """Background vials that scatter more than their counts."""

    def __init__(self, vials):
        super().__init__(vials)
        n = np.array([float(v["readings"][0]["counts"]) for v in vials])
        t = np.array([float(v["readings"][0]["minutes"]) for v in vials])
        assert all(len(v["readings"]) == 1 for v in vials)
        b0, y = n.sum() / t.sum(), n / t
        w = t / b0
        q = (w * (y - b0) ** 2).sum()
        self.sigma2 = float(max(0.0, (q - (len(n) - 1)) / (w.sum() - (w**2).sum() / w.sum())))
        w = 1 / (b0 / t + self.sigma2)
        self.v = float(1 / w.sum())
        self.bhat = self.rate = float((w * y).sum() / w.sum())

    def term(self, b, lib):
        pi = mpmath.pi if lib is Digits else math.pi
        ln = mpmath.log if lib is Digits else math.log
        return (self.bhat - b) ** 2 / self.v + ln(2 * pi * self.v)

    def information(self, b):
        return b * b / self.v


# ------------------------------------------------------------------------------ the evidence
def weight(readings, s):
    """Effective minutes of a tube: efficiency and decay of each of its readings."""
    total = 0.0
    for r in readings:
        w = r["minutes"]
        if r.get("efficiency") is not None:
            w *= r["efficiency"] / s["efficiency"]
        if s.get("half_life_min"):
            lam = math.log(2) / s["half_life_min"]
            w *= 2 ** (-r["start_min_after_reference"] / s["half_life_min"])
            w *= -math.expm1(-lam * r["minutes"]) / (lam * r["minutes"])
        total += w
    return total


class Rack:
    """Rows of one rack over z = [ln Kd, ln R, ns / unit, ..., ln b, ln cv, ..., d_j / s_d]."""

    def __init__(self, rack):
        self.rack, self.s = rack, rack["settings"]
        s = self.s
        self.kind = s["kind"]
        of = lambda *roles: [v for v in rack["vials"] if v["role"] in roles]
        self.tubes = of(*TUBE_ROLES)
        self.added_vials, self.standards = of("added"), of("standard")
        self.background = None
        if self.kind != "reader":
            vials = of("background")
            self.background = (Scattered if s.get("background_scatter") else Poisson)(vials)
        self.per_sa = DPM_PER_FMOL_PER_CI_PER_MMOL * s.get("sa_ci_per_mmol", 0.0) * s.get("efficiency", 0.0) * 1000
        self.set_levels()
        self.set_rows()
        self.has_filter = any(v["role"] == "no_receptor" for v in self.tubes)
        assert not (self.has_filter and s["sticks"] != "preparation")
        self.p_mean = 4 if self.has_filter else 3
        self.names = ["kd_nm", "sites_nm", "ns"] + (["ns_filter"] if self.has_filter else [])
        self.profiled = list(self.names)
        if self.kind == "reader":
            extra = ["blank_signal", "signal_per_nm", "cv", "signal_sd"]
            self.profiled += extra[:2]
        else:
            extra = ["background_cpm", "cv"]
        self.names += extra
        self.at = {n: i for i, n in enumerate(self.names)}
        self.k_aicc = len(self.names)
        self.n_aicc = self.n + (len(self.standards) if self.kind == "reader" else 1)
        self.s_d = s.get("s_d") or 0.0
        self.first_d = len(self.names)
        self.dim = self.first_d + (len(self.level_added) if self.s_d > 0 else 0)
        self.unit = {n: 1.0 for n in ("ns", "ns_filter") if n in self.at}

    def set_levels(self):
        levels = {v["level"]: v["added_nm"] for v in self.tubes + self.added_vials}
        self.levels = sorted(levels, key=lambda j: levels[j])
        self.level_added = np.array([levels[j] for j in self.levels])
        self.lt_min, self.lt_max = self.level_added.min(), self.level_added.max()

    def set_rows(self):
        s, tubes = self.s, self.tubes
        column = {j: i for i, j in enumerate(self.levels)}
        self.n = len(tubes)
        self.col = np.array([column[v["level"]] for v in tubes])
        self.blocked = np.array([v["role"] == "nonspecific" for v in tubes])
        self.receptor = np.array([v["role"] != "no_receptor" for v in tubes]) * 1.0
        self.added_col = np.array([column[v["level"]] for v in self.added_vials], int)
        rows = tubes + self.added_vials + self.standards
        key = "signal" if self.kind == "reader" else "counts"
        self.observed = np.array([math.fsum(r[key] for r in v["readings"]) for v in rows])
        if self.kind == "reader":
            self.q = s["volume_ml"] * s["fraction_counted"] / s["read_volume_ml"]
            self.standard_nm = np.array([v["standard_nm"] for v in self.standards])
            return
        self.t = np.array([math.fsum(r["minutes"] for r in v["readings"]) for v in rows])
        self.w = np.array([weight(v["readings"], s) for v in rows])
        self.tau = (s.get("dead_time_s") or 0.0) / 60
        ml = s["aliquot_ml"] if self.kind == "free_counted" else s["volume_ml"] * s["fraction_counted"]
        self.per_nm = self.per_sa * ml
        self.added_per_nm = self.per_sa * s["volume_ml"] * (s.get("added_share") or 0.0)

    def prepare(self):
        """What needs readings: scales of ns, limits, cut."""
        s, at = self.s, self.at
        rough = self.start(math.sqrt(self.lt_min * self.lt_max))
        for n in self.unit:
            self.unit[n] = max(rough[at[n]], 1e-4)
        self.lower, self.upper = np.full(self.dim, -50.0), np.full(self.dim, 50.0)
        self.kd_range = (math.log(self.lt_min / 1000), math.log(self.lt_max * 1000))
        self.lower[0], self.upper[0] = self.kd_range[0] - 14, self.kd_range[1] + 14
        self.lower[1], self.upper[1] = math.log(self.lt_min * 1e-9), math.log(self.lt_max * 1e9)
        for n, u in self.unit.items():
            lessens = self.kind == "free_counted" and (n == "ns_filter" or s["sticks"] == "filter")
            self.lower[at[n]], self.upper[at[n]] = NS_FLOOR / u, (1 - 1e-6 if lessens else 1e3) / u
        self.lower[at["cv"]], self.upper[at["cv"]] = math.log(1e-6), math.log(10)
        if self.background:
            self.lower[at["background_cpm"]] = math.log(0.05 / self.background.minutes)
        free = self.n - self.p_mean
        self.cut = self.n * math.log1p(stats.t.ppf(0.975, free) ** 2 / free)
        return self

    # --------------------------------------------------------------- means and variances
    def split(self, z, lib):
        p = {}
        for n, i in self.at.items():
            p[n] = z[:, i : i + 1] * self.unit[n] if n in self.unit else lib.exp(z[:, i : i + 1])
        if "ns_filter" not in p:
            p["ns_filter"] = p["ns"] * 0
        d = z[:, self.first_d :] * self.s_d if self.s_d > 0 else np.zeros((len(z), len(self.level_added)))
        return p, d

    def amounts(self, p, d, lib):
        """S + stuck label, unbound label, and each level's label, all in nM."""
        s = self.s
        level = self.level_added * (lib.exp(d) if self.s_d > 0 else 1.0)
        level = level + 0 * p["ns"]
        added = level[:, self.col]
        bindable = s["bindable_share"] * added
        u = s["unlabelled"]
        whole, kd, sites = bindable, p["kd_nm"], p["sites_nm"] * self.receptor
        if u["kind"] == "same_ligand":
            whole = bindable + u["concentration_nm"] * self.blocked
        elif u["ki_nm"] is not None:
            kd = kd * (1 + self.blocked * (u["concentration_nm"] / u["ki_nm"]))
        else:
            sites = sites * (1.0 - self.blocked)
        ns = p["ns"] * self.receptor
        on_filter = {"filter": True, "preparation": False}[s["sticks"]]
        x = free_of_balance(1 + 0 * ns if on_filter else 1 + ns, kd, sites, whole)
        share = bindable / whole
        free = x * share
        bound = sites * x / (kd + x) * share + (ns + p["ns_filter"]) * free
        lost = p["ns_filter"] + (ns if on_filter else 0 * ns)
        unbound = (1 - lost) * free + (1 - s["bindable_share"]) * added
        return bound, unbound, level

    def rows(self, p, d, lib):
        bound, unbound, level = self.amounts(p, d, lib)
        if self.kind == "reader":
            standard = self.standard_nm + 0 * p["ns"]
            signal = p["signal_per_nm"] * np.concatenate([self.q * bound, standard], 1)
            return p["blank_signal"] + signal, p["signal_sd"] ** 2 + (p["cv"] * signal) ** 2
        seen = self.per_nm * (unbound if self.kind == "free_counted" else bound)
        seen = np.concatenate([seen, self.added_per_nm * level[:, self.added_col]], 1)
        signal = self.w * seen
        mu = self.t * p["background_cpm"] + signal
        v = mu * (1 + mu * (self.tau / self.t)) + (p["cv"] * signal) ** 2
        return mu, v + self.t**2 * self.background.sigma2

    # --------------------------------------------------------------------- the objective
    def parts(self, z, lib=np):
        """-2 ln L and the prior terms of each row of z."""
        p, d = self.split(z, lib)
        mu, v = self.rows(p, d, lib)
        pi = mpmath.pi if lib is Digits else math.pi
        data = ((self.observed - mu) ** 2 / v + lib.log(2 * pi * v)).sum(1)
        if self.background:
            data = data + self.background.term(p["background_cpm"], lib)[:, 0]
        prior = 0
        for row in self.prior_rows():
            prior = prior + (z @ row - self.prior_centre(row)) ** 2
        return data, prior

    def prior_rows(self):
        rows = []
        if self.s["cv_prior"]:
            row = np.zeros(self.dim)
            row[self.at["cv"]] = 1 / self.s["cv_prior"]["sd_ln"]
            rows.append(row)
        for j in range(self.first_d, self.dim):
            row = np.zeros(self.dim)
            row[j] = 1.0
            if self.s["dilution"] == "serial" and j + 1 < self.dim:
                row[j + 1] = -1.0
            rows.append(row)
        return rows

    def prior_centre(self, row):
        return row[self.at["cv"]] * math.log(self.s["cv_prior"]["centre"]) if row[self.at["cv"]] else 0.0

    def objective(self, z):
        data, prior = self.parts(z[None, :] + 1j * H * np.eye(self.dim))
        both = data + prior
        return float(both[0].real), both.imag / H

    def objective_mp(self, z):
        z = np.array([[mpmath.mpf(x) for x in z]], dtype=object)
        data, prior = self.parts(z, Digits)
        return (data + prior)[0]

    def information(self, z):
        zc = z[None, :] + 1j * H * np.eye(self.dim)
        p, d = self.split(zc, np)
        mu, v = self.rows(p, d, np)
        dmu, dv, v = mu.imag / H, v.imag / H, v[0].real
        for n in self.unit:
            i = self.at[n]
            dmu[i] *= z[i]
            dv[i] *= z[i]
        info = (dmu / v) @ dmu.T + (dv / (2 * v**2)) @ dv.T
        if self.background:
            i = self.at["background_cpm"]
            info[i, i] += self.background.information(math.exp(z[i]))
        for row in self.prior_rows():
            info += np.outer(row, row)
        return info

    # ------------------------------------------------------------------------- starts
    def measured(self):
        """Rough free and bound of each tube or cell, in nM."""
        added = self.level_added[self.col]
        n, share = self.n, self.s["bindable_share"]
        if self.kind == "reader":
            g, m0 = self.reader_line()
            bound = (self.observed[:n] - m0) / (g * self.q)
        else:
            net = self.observed[:n] - self.t[:n] * self.background.rate
            seen = net / self.w[:n] / self.per_nm
            if self.kind == "free_counted":
                return np.maximum(seen - (1 - share) * added, 0.02 * added), added - seen
            bound = seen
        return np.maximum(share * added - bound, 0.02 * added), bound

    def reader_line(self):
        return np.polyfit(self.standard_nm, self.observed[self.n :], 1)

    def start(self, kd):
        free, bound = self.measured()
        bound = np.maximum(bound, 0.0)
        weight = 1 / (0.05 * (bound + free * (self.kind == "free_counted")) + 0.01 * bound.max())
        columns = [self.receptor * ~self.blocked * free / (kd + free), self.receptor * free]
        if self.has_filter:
            columns.append(free)
        (sites, *ns), _ = optimize.nnls(np.stack(columns, 1) * weight[:, None], bound * weight)
        z = np.zeros(self.dim)
        z[0], z[1] = math.log(kd), math.log(max(sites, 1e-3 * bound.max(), 1e-6 * self.lt_max))
        for n, x in zip(("ns", "ns_filter"), ns):
            z[self.at[n]] = max(x, 1e-7) / self.unit[n]
        z[self.at["cv"]] = math.log(0.06)
        if self.background:
            z[self.at["background_cpm"]] = math.log(self.background.rate)
        if self.kind == "reader":
            g, m0 = self.reader_line()
            blanks = self.observed[self.n :][self.standard_nm == 0]
            z[self.at["blank_signal"]], z[self.at["signal_per_nm"]] = math.log(max(m0, blanks.mean() / 2)), math.log(g)
            z[self.at["signal_sd"]] = math.log(blanks.std(ddof=1))
        return z

    def starts(self, rng, grid=9, jitter=2):
        out = []
        for kd in np.geomspace(self.lt_min / 5, self.lt_max * 5, grid):
            out.append(self.start(kd))
            for _ in range(jitter):
                z = self.start(kd)
                for n, i in self.at.items():
                    e = rng.normal(0, {"kd_nm": 0.0, "background_cpm": 0.1, "signal_per_nm": 0.1}.get(n, 0.5))
                    z[i] = z[i] * math.exp(e) if n in self.unit else z[i] + e
                z[self.first_d :] = rng.normal(0, 0.7, self.dim - self.first_d)
                out.append(z)
        return out

    # ------------------------------------------------------------------- minimisation
    def hessian(self, z, free):
        step = 1e-4
        out = np.empty((len(free), len(free)))
        for r, i in enumerate(free):
            hi, lo = z.copy(), z.copy()
            hi[i] += step
            lo[i] -= step
            out[r] = (self.objective(hi)[1] - self.objective(lo)[1])[free] / (2 * step)
        return (out + out.T) / 2

    def minimise(self, z0, pinned=(), polish=True):
        """Local minimum from z0, some coordinates pinned: value, z."""
        z = np.clip(np.array(z0, float), self.lower, self.upper)
        movable = np.array([i for i in range(self.dim) if i not in pinned])

        def inner(y):
            full = z.copy()
            full[movable] = y
            f, g = self.objective(full)
            return f, g[movable]

        res = optimize.minimize(
            inner, z[movable], jac=True, method="L-BFGS-B",
            bounds=list(zip(self.lower[movable], self.upper[movable])),
            options=dict(maxiter=2000, maxfun=4000, ftol=1e-13, gtol=1e-7, maxcor=30),
        )
        z[movable] = res.x
        f, g = self.objective(z)
        held, last = None, 0.0
        for _ in range(60 if polish else 0):
            free = self.inside(z, g, movable)
            if len(free) == 0:
                break
            if held is None or not np.array_equal(held, free):
                held = free
                w, q = np.linalg.eigh(self.hessian(z, free))
                w = np.maximum(np.abs(w), 1e-10 * np.abs(w).max())
            step = -(q @ ((q.T @ g[free]) / w))
            size = min(1.0, 3 / max(np.abs(step).max(), 1e-300))
            while size > 1e-10:
                trial = z.copy()
                trial[free] += size * step
                trial = np.clip(trial, self.lower, self.upper)
                ft, gt = self.objective(trial)
                if np.isfinite(ft) and ft <= f + 1e-12 * (1 + abs(f)):
                    break
                size /= 2
            else:
                break
            moved = np.abs(trial - z).max()
            z, f, g = trial, ft, gt
            if moved < 3e-13:
                break
            if moved > 0.01 * last:  # the second derivatives are stale
                held = None
            last = moved
        return f, z

    def inside(self, z, g, movable):
        """Those of `movable` that do not stand at a limit they are pushed against."""
        held = ((z <= self.lower) & (g > 0)) | ((z >= self.upper) & (g < 0))
        return np.array([i for i in movable if not held[i]], int)

    def global_minimum(self, rng):
        found = sorted((self.minimise(z) for z in self.starts(rng)), key=lambda p: p[0])
        best, z = found[0]
        same = [p for p in found if p[0] - best < 1e-7]
        others = [p for p in found if p[0] - best >= 1e-7]
        spread = max(np.abs(np.log(self.values(p[1]) / self.values(z))).max() for p in same)
        return best, z, dict(
            starts=len(found), reached_best=len(same), spread_ln=float(spread),
            spread_objective=float(max(p[0] for p in same) - best),
            next_best_excess=float(others[0][0] - best) if others else None,
        )

    def values(self, z):
        p, _ = self.split(z[None, :], np)
        return np.array([p[n][0, 0] for n in self.names])

    # ---------------------------------------------------------------------- intervals
    def profile_end(self, best, zhat, i, direction, limit, step, rng):
        """Outwards to the first crossing of the cut: coordinate (None: open) and z there."""

        def value(x, warm, wide=False):
            pin = lambda z: np.concatenate([z[:i], [x], z[i + 1 :]])
            out = min((self.minimise(pin(z), (i,)) for z in warm), key=lambda p: p[0])
            for z in self.starts(rng, grid=5, jitter=0) if wide else ():
                found = self.minimise(pin(z), (i,), polish=False)
                if found[0] < out[0] - 1e-9:
                    out = min(out, self.minimise(found[1], (i,)), key=lambda p: p[0])
            return out

        x0, f0, z0 = zhat[i], best, zhat
        k = 0
        while True:
            x1 = zhat[i] + direction * step * 2.0**k
            last = (x1 - limit) * direction >= 0
            x1 = limit if last else x1
            f1, z1 = value(x1, [z0])
            if f1 - best > self.cut:
                f1, z1 = value(x1, [z1, zhat], wide=True)
            if f1 - best > self.cut:
                break
            if last:
                return None, z1
            x0, f0, z0 = x1, f1, z1
            k += 1
        memory = {x0: (f0, z0), x1: (f1, z1)}

        def excess(x):
            if x not in memory:
                near = [max((y for y in memory if y < x)), min((y for y in memory if y > x))]
                memory[x] = value(x, [memory[y][1] for y in near])
            return memory[x][0] - best - self.cut

        x = optimize.brentq(excess, x0, x1, xtol=1e-13 * max(1.0, abs(x0)), rtol=9e-16)
        if abs(excess(x)) > 1e-8:
            raise ArithmeticError(f"the profile jumps at its end: {excess(x)}")
        return x, memory[x][1]

    def search(self, z, name, direction, se):
        i, side = self.at[name], (direction + 1) // 2
        limit = (self.lower, self.upper)[side][i]
        if name == "kd_nm":
            limit = self.kd_range[side]
        elif name not in self.unit:
            limit = z[i] + direction * math.log(1e4)
        step = 0.5 * se[name] if se[name] else 1e-3
        return limit, step * (z[i] if name in self.unit and se[name] else 1)

    def fit(self, seed=0):
        rng = np.random.default_rng(seed)
        self.prepare()
        best, z, agreement = self.global_minimum(rng)
        floored = [n for n in (*self.unit, *(["background_cpm"] if self.background else []))
                   if z[self.at[n]] <= self.lower[self.at[n]] + 1e-12]
        keep = np.array([i for i in range(self.dim) if not any(self.at[n] == i for n in floored)])
        cov = np.linalg.inv(self.information(z)[np.ix_(keep, keep)])
        se = {n: None for n in self.names}
        for r, i in enumerate(keep):
            if i < self.first_d:
                se[self.names[i]] = math.sqrt(cov[r, r])
        points, parameters, lower_valley = {}, [], 0.0
        for name, estimate in zip(self.names, self.values(z)):
            i = self.at[name]
            par = dict(name=name, estimate=float(estimate), se_ln=se[name])
            for side, direction in (("low", -1), ("high", 1)):
                if name not in self.profiled:
                    continue
                limit, step = self.search(z, name, direction, se)
                if (limit - z[i]) * direction <= 0:
                    x, zx = None, z
                else:
                    x, zx = self.profile_end(best, z, i, direction, limit, step, rng)
                par[side] = None if x is None else float(self.values(zx)[i])
                points[name, side] = (i, x, zx)
                here = self.objective(zx)[0]
                for other in self.starts(rng, grid=5, jitter=1):
                    other[i] = zx[i]
                    lower_valley = max(lower_valley, here - self.minimise(other, (i,), polish=False)[0])
            parameters.append(par)
        data, prior = self.parts(z[None, :])
        k, n = self.k_aicc, self.n_aicc
        out = dict(
            n=self.n, p=self.p_mean, cut=self.cut,
            minus2lnl=float(data[0]), prior_term=float(np.ravel(prior)[0]) if np.ndim(prior) else float(prior),
            aicc=float(data[0]) + 2 * k + 2 * k * (k + 1) / (n - k - 1), aicc_n=n, aicc_k=k,
            parameters=parameters, at_floor=floored,
            dilution_d={str(j): float(self.s_d * x) for j, x in zip(self.levels, z[self.first_d :])} if self.s_d else None,
        )
        accuracy = dict(**agreement, lower_valley_at_ends=float(lower_valley))
        accuracy["objective_excess_at_open_ends"] = {
            f"{n}.{s}": self.objective(zx)[0] - best for (n, s), (_, x, zx) in points.items() if x is None
        }
        accuracy["certificate_40_digits"] = self.certify(z, points)
        values = {p["name"]: p["estimate"] for p in parameters}
        plain = plain_cost(self.rack, values, out["dilution_d"])
        accuracy["plain_cost_difference"] = [plain[0] - out["minus2lnl"], plain[1] - out["prior_term"]]
        out["accuracy"] = accuracy
        self.solution = (best, z)
        return out

    def certify(self, z, points):
        """How far the double-precision results can be from the 40-digit ones."""
        mpmath.mp.dps = 40
        h = mpmath.mpf(10) ** -12

        def left(at, free):
            """Newton step still to go, and the drop it would bring."""
            g = []
            for i in free:
                ends = []
                for sign in (1, -1):
                    x = [mpmath.mpf(y) for y in at]
                    x[i] += sign * h
                    ends.append(self.objective_mp(x))
                g.append(float((ends[0] - ends[1]) / (2 * h)))
            step = -np.linalg.solve(self.hessian(at, free), np.array(g))
            return step, float(-0.5 * np.array(g) @ step)

        everything = np.arange(self.dim)
        free = self.inside(z, self.objective(z)[1], everything)
        step, drop = left(z, free)
        step = np.array([x / z[i] if self.is_share(i) else x for x, i in zip(step, free)])
        hat = self.objective_mp(z)
        out = dict(
            estimates_ln=float(np.abs(step[free < self.first_d]).max()),
            objective=abs(float(hat - mpmath.mpf(self.objective(z)[0]))) + abs(drop), ends_ln=0.0,
        )
        for i, x, zx in points.values():
            if x is None:
                continue
            g = self.objective(zx)[1]
            _, d = left(zx, self.inside(zx, g, everything[everything != i]))
            miss = float(self.objective_mp(zx) - hat - mpmath.mpf(self.cut)) - d + drop
            out["ends_ln"] = max(out["ends_ln"], abs(miss / g[i]) / (zx[i] if self.is_share(i) else 1))
        return out

    def is_share(self, i):
        return any(self.at[n] == i for n in self.unit)


class Cells(Rack):
    """Dialysis: one row for each cell."""

    def set_levels(self):
        sides = {}
        for v in self.tubes:
            sides.setdefault(v["cell"], {})[v["side"]] = v
        self.pairs = [sides[c] for c in sorted(sides)]
        super().set_levels()

    def set_rows(self):
        s = self.s
        assert not s.get("s_d")
        self.n = len(self.pairs)
        read = lambda side, key: np.array([float(c[side]["readings"][0][key]) for c in self.pairs])
        self.observed, self.t = read("protein", "counts"), read("protein", "minutes")
        self.n_f, self.t_f = read("ligand", "counts"), read("ligand", "minutes")
        self.per_nm = self.per_sa * s["protein_side_aliquot_ml"]
        self.per_nm_f = self.per_sa * s["ligand_side_aliquot_ml"]
        self.c = s["protein_side_ml_before"] / s["protein_side_ml_after"]
        self.lt = np.array([c["protein"]["added_nm"] for c in self.pairs])
        self.blocked = np.array([c["protein"]["role"] == "nonspecific" for c in self.pairs])
        self.receptor = np.ones(self.n)

    def curve(self, p, f):
        """B(F) and its slope."""
        u = self.s["unlabelled"]
        kd, sites, rho = p["kd_nm"], p["sites_nm"], np.ones(self.n)
        if u["kind"] == "same_ligand":
            rho = 1 + self.blocked * u["concentration_nm"] / self.lt
        elif u["ki_nm"] is not None:
            kd = kd * (1 + self.blocked * (u["concentration_nm"] / u["ki_nm"]))
        else:
            sites = sites * (1.0 - self.blocked)
        x = rho * f
        return sites * x / (kd + x) / rho + p["ns"] * f, sites * kd / (kd + x) ** 2 + p["ns"]

    def rows(self, p, d, lib):
        b, cv = p["background_cpm"], p["cv"]
        free = (self.n_f / self.t_f - b) / self.per_nm_f
        least = 1 / (1000 * self.t_f * self.per_nm_f)
        free = np.where(real_all(free) > least, free, least)
        v_f = (np.maximum(self.n_f, 1) + cv**2 * (self.n_f - self.t_f * b) ** 2) / (self.t_f * self.per_nm_f) ** 2
        bound, slope = self.curve(p, free)
        signal = self.t * self.per_nm * (free + self.c * bound)
        mu = self.t * b + signal
        return mu, mu + cv**2 * signal**2 + (self.t * self.per_nm) ** 2 * (1 + self.c * slope) ** 2 * v_f

    def measured(self):
        b = self.background.rate
        free = np.maximum(self.n_f / self.t_f - b, 0.001 / self.t_f) / self.per_nm_f
        return free, ((self.observed / self.t - b) / self.per_nm - free) / self.c

    def at_fixed_cv(self, cv):
        z = self.solution[1].copy()
        z[self.at["cv"]] = math.log(cv)
        _, z = self.minimise(z, (self.at["cv"],))
        return dict(zip(self.names[:4], map(float, self.values(z)[:4])))

    def functional(self, cv):
        """Every cell's F a parameter: y = [ln Kd, ln R, ns, ln b, ln F...]."""
        now = self.at_fixed_cv(cv)
        y = np.concatenate([
            [math.log(now["kd_nm"]), math.log(now["sites_nm"]), now["ns"], math.log(now["background_cpm"])],
            np.log(self.measured()[0]),
        ])
        observed = np.concatenate([self.observed, self.n_f, [self.background.counts]])
        plain = np.concatenate([self.t, self.t_f, [self.background.minutes]])

        def means(y):
            e = np.exp(y)
            f = e[4:]
            bound, _ = self.curve(dict(kd_nm=e[0], sites_nm=e[1], ns=y[2]), f)
            signal = [self.t * self.per_nm * (f + self.c * bound), self.t_f * self.per_nm_f * f, 0 * f[:1]]
            signal = np.concatenate(signal)
            return plain * e[3] + signal, signal

        def jacobian(y):
            return np.stack([means(y + 1j * H * row)[0].imag / H for row in np.eye(len(y))], 1)

        for turn in range(100):
            mu, signal = means(y)
            sd = np.sqrt(mu + (cv * signal) ** 2)
            before = y
            for _ in range(200):
                j, r = jacobian(y) / sd[:, None], (observed - means(y)[0]) / sd
                step = np.linalg.lstsq(j, r, rcond=None)[0]
                size = 1.0
                while size > 1e-6 and np.sum(((observed - means(y + size * step)[0]) / sd) ** 2) > np.sum(r**2) * (1 + 1e-13):
                    size /= 2
                y = y + size * step
                if np.abs(step).max() < 1e-13:
                    break
            if np.abs(y - before).max() < 1e-12:
                break
        return dict(
            kd_nm=math.exp(y[0]), sites_nm=math.exp(y[1]), ns=float(y[2]), background_cpm=math.exp(y[3]),
            turns=turn + 1, last_change=float(np.abs(y - before).max()),
        )


def real_all(x):
    return x.astype(float) if x.dtype == object else x.real


def problem(rack):
    return (Cells if rack["settings"]["kind"] == "dialysis" else Rack)(rack)


# ---------------------------------------------------- the same sums, scalar and from the file
def plain_cost(rack, values, d):
    """minus2lnl and the prior term, one vial after the other; free by the quadratic formula."""
    s = rack["settings"]
    kd, r, ns, cv = (values[n] for n in ("kd_nm", "sites_nm", "ns", "cv"))
    nf, b = values.get("ns_filter", 0.0), values.get("background_cpm", 0.0)
    u = s["unlabelled"]
    cold = u["concentration_nm"]
    total = []

    def normal(seen, mean, variance):
        total.append((seen - mean) ** 2 / variance + math.log(2 * math.pi * variance))

    def competed(role):
        k, sites = kd, r
        if role == "nonspecific" and u["kind"] == "other_ligand":
            k = kd * (1 + cold / u["ki_nm"]) if u["ki_nm"] is not None else kd
            sites = r if u["ki_nm"] is not None else 0.0
        return k, sites

    def count(vial, key="counts"):
        return sum(x[key] for x in vial["readings"]), sum(x.get("minutes", 0) for x in vial["readings"])

    backs = [count(v) for v in rack["vials"] if v["role"] == "background"]
    sigma2 = 0.0
    if s.get("background_scatter"):
        n_b, t_b = sum(n for n, _ in backs), sum(t for _, t in backs)
        pooled = n_b / t_b
        q = sum(t / pooled * (n / t - pooled) ** 2 for n, t in backs)
        squares = sum((t / pooled) ** 2 for _, t in backs)
        sigma2 = max(0.0, (q - (len(backs) - 1)) / (t_b / pooled - squares / (t_b / pooled)))
        ws = [1 / (pooled / t + sigma2) for _, t in backs]
        normal(sum(w * n / t for w, (n, t) in zip(ws, backs)) / sum(ws), b, 1 / sum(ws))
    elif backs:
        n_b, t_b = sum(n for n, _ in backs), sum(t for _, t in backs)
        total.append(2 * (t_b * b - n_b * math.log(t_b * b) + math.lgamma(n_b + 1)))

    per_ml = s.get("efficiency", 0) * 2.22 * s.get("sa_ci_per_mmol", 0) * 1000
    cells = {}
    for vial in rack["vials"]:
        role = vial["role"]
        if "cell" in vial:
            cells.setdefault(vial["cell"], {})[vial["side"]] = vial
            continue
        if role == "background":
            continue
        if role == "standard":
            m, g = values["blank_signal"], values["signal_per_nm"]
            y, _ = count(vial, "signal")
            normal(y, m + g * vial["standard_nm"], values["signal_sd"] ** 2 + (cv * g * vial["standard_nm"]) ** 2)
            continue
        level = vial["added_nm"] * math.exp(d[str(vial["level"])] if d else 0.0)
        if role == "added":
            n, t = count(vial)
            signal = t * per_ml * s["volume_ml"] * s["added_share"] * level
            normal(n, t * b + signal, t * b + signal + (cv * signal) ** 2 + t * t * sigma2)
            continue
        label = level * s["bindable_share"]
        if role == "no_receptor":
            free, bound = label, nf * label
        else:
            k, sites = competed(role)
            whole = label + (cold if role == "nonspecific" and u["kind"] == "same_ligand" else 0.0)
            a = 1 + ns if s["sticks"] == "preparation" else 1.0
            half = a * k + sites - whole
            root = math.sqrt(half * half + 4 * a * k * whole)
            x = 2 * k * whole / (half + root) if half > 0 else (root - half) / (2 * a)
            free = x * label / whole
            bound = sites * x / (k + x) * label / whole + (ns + nf) * free
        if s["kind"] == "reader":
            y, _ = count(vial, "signal")
            signal = values["signal_per_nm"] * s["volume_ml"] * s["fraction_counted"] / s["read_volume_ml"] * bound
            normal(y, values["blank_signal"] + signal, values["signal_sd"] ** 2 + (cv * signal) ** 2)
            continue
        n, t = count(vial)
        if s["kind"] == "free_counted":
            signal = t * per_ml * s["aliquot_ml"] * (level - bound)
        else:
            w = 0.0
            for x in vial["readings"]:
                e = x["efficiency"] / s["efficiency"] if "efficiency" in x else 1.0
                f = 1.0
                if s.get("half_life_min"):
                    rate = math.log(2) / s["half_life_min"]
                    start = x["start_min_after_reference"]
                    f = (math.exp(-rate * start) - math.exp(-rate * (start + x["minutes"]))) / (rate * x["minutes"])
                w += x["minutes"] * e * f
            signal = w * per_ml * s["volume_ml"] * s["fraction_counted"] * bound
        mean = t * b + signal
        dead = mean / t * s["dead_time_s"] / 60 if s.get("dead_time_s") else 0.0
        normal(n, mean, mean * (1 + dead) + (cv * signal) ** 2 + t * t * sigma2)
    for cell in cells.values():
        p_side, f_side = cell["protein"], cell["ligand"]
        (n_p, t_p), (n_f, t_f) = count(p_side), count(f_side)
        k_p, k_f = per_ml * s["protein_side_aliquot_ml"], per_ml * s["ligand_side_aliquot_ml"]
        f = max((n_f / t_f - b) / k_f, 1 / (1000 * t_f * k_f))
        k, sites = competed(p_side["role"])
        same = p_side["role"] == "nonspecific" and u["kind"] == "same_ligand"
        rho = (p_side["added_nm"] + cold) / p_side["added_nm"] if same else 1.0
        c = s["protein_side_ml_before"] / s["protein_side_ml_after"]
        bound = sites * rho * f / (k + rho * f) / rho + ns * f
        slope = sites * k / (k + rho * f) ** 2 + ns
        mean = t_p * (b + k_p * (f + c * bound))
        v_f = (max(n_f, 1) + cv**2 * (n_f - t_f * b) ** 2) / (t_f * k_f) ** 2
        normal(n_p, mean, mean + cv**2 * (mean - t_p * b) ** 2 + (t_p * k_p * (1 + c * slope)) ** 2 * v_f)
    prior = 0.0
    if s["cv_prior"]:
        prior += (math.log(cv / s["cv_prior"]["centre"]) / s["cv_prior"]["sd_ln"]) ** 2
    if d:
        added = {v["level"]: v["added_nm"] for v in rack["vials"] if "level" in v}
        ds = [d[str(j)] / s["s_d"] for j in sorted(added, key=added.get)]
        if s["dilution"] == "serial":
            prior += ds[-1] ** 2 + sum((x - y) ** 2 for x, y in zip(ds, ds[1:]))
        else:
            prior += sum(x * x for x in ds)
    return math.fsum(total), prior


# ------------------------------------------------------------------------------- simulation
def ladder(low, high, n):
    return [float(f"{x:.4g}") for x in np.geomspace(low, high, n)]


def settings(kind, **change):
    base = dict(kind=kind, law="one_class", confidence=0.95)
    if kind == "dialysis":
        base.update(efficiency=0.4, sa_ci_per_mmol=50.0, s_d=0.0)
    else:
        base.update(volume_ml=0.5)
        if kind != "reader":
            base.update(efficiency=0.45, sa_ci_per_mmol=80.0)
            base.update(half_life_min=None, quench_table=None, dead_time_s=None, added_share=None)
        if kind != "free_counted":
            base.update(fraction_counted=1.0)
        base.update(sticks="preparation", bindable_share=1.0, s_d=0.02, dilution="from_stock")
    if kind != "reader":
        base.update(background_scatter=False)
    base.update(unlabelled=dict(kind="same_ligand", concentration_nm=1000.0, ki_nm=None), cv_prior=LAB_PRIOR)
    base.update(change)
    return base


def vials_of(levels, background=(10.0, 10.0), totals=2, nonspecifics=2, minutes=2.0, no_receptor=None,
             added=None, standards=None):
    """Vials in the order in which they are numbered; no_receptor and added: level -> how many."""
    out = []

    def put(role, minutes, **more):
        reading = dict(minutes=float(minutes)) if minutes else {}
        out.append(dict(vial=len(out) + 1, role=role, **more, readings=[reading]))

    for i, m in enumerate(background):
        put("background", m, replicate=i + 1)
    for c, how_many in standards or ():
        for i in range(how_many):
            put("standard", None, standard_nm=c, replicate=i + 1)
    every = {j: 1 for j in range(1, len(levels) + 1)}
    for role, many in (
        ("added", added or {}), ("total", {j: totals for j in every}),
        ("nonspecific", {j: nonspecifics for j in every}), ("no_receptor", no_receptor or {}),
    ):
        for j, how_many in many.items():
            for i in range(how_many):
                put(role, minutes, level=j, replicate=i + 1, added_nm=levels[j - 1])
    return out


def simulate(rack, truth, seed):
    """Dilution errors, tube CV on what is counted, then counts (or the reader's noise)."""
    rng = np.random.default_rng(seed)
    s = rack["settings"]
    key = "signal" if s["kind"] == "reader" else "counts"
    for v in rack["vials"]:
        for x in v["readings"]:
            x.setdefault(key, 1)
    r = problem(rack)
    column = lambda x: np.array([[x]], float)
    p = {n: column(x) for n, x in truth.items()}
    p.setdefault("ns_filter", column(0.0))
    levels = len(r.level_added)
    e = rng.normal(0, s["s_d"] or 0.0, levels)
    d = np.cumsum(e[::-1])[::-1] if s["dilution"] == "serial" else e
    level = r.level_added * np.exp(d)
    # Means by the law under test, from levels that were really made.
    kept, r.level_added, s_d, r.s_d = r.level_added, level, r.s_d, 0.0
    bound, unbound, _ = r.amounts(p, np.zeros((1, levels)), np)
    r.level_added, r.s_d = kept, s_d
    bound, unbound = bound[0], unbound[0]
    b, scatter = truth.get("background_cpm", 0.0), truth.get("background_sd_cpm", 0.0)
    tau = (s.get("dead_time_s") or 0.0) / 60
    index = {v["vial"]: i for i, v in enumerate(r.tubes)}
    at = {j: i for i, j in enumerate(r.levels)}
    for v in rack["vials"]:
        spread = 1 + truth["cv"] * rng.normal()
        if s["kind"] == "reader":
            c = v["standard_nm"] if v["role"] == "standard" else r.q * bound[index[v["vial"]]]
            y = truth["blank_signal"] + truth["signal_per_nm"] * c * spread + truth["signal_sd"] * rng.normal()
            v["readings"][0]["signal"] = round(float(y), 1)
            continue
        plain = b + scatter * rng.normal() if scatter else b
        for x in v["readings"]:
            if v["role"] == "background":
                rate = plain
            elif v["role"] == "added":
                rate = plain + r.added_per_nm * level[at[v["level"]]] * spread
            else:
                seen = unbound if s["kind"] == "free_counted" else bound
                share = weight([x], s) / x["minutes"]
                rate = plain + r.per_nm * seen[index[v["vial"]]] * spread * share
            if tau:
                # A counter that is deaf for tau after every count it registers.
                gaps = tau + rng.exponential(1 / rate, int(rate * x["minutes"] * 1.2 + 100))
                observed = int(np.searchsorted(np.cumsum(gaps), x["minutes"]))
                x["observed_counts"] = observed
                x["counts"] = observed / (1 - observed * tau / x["minutes"])
            else:
                x["counts"] = int(rng.poisson(max(rate, 0.0) * x["minutes"]))
    rack["simulated"] = dict(
        seed=seed, generator="numpy default_rng (PCG64)", truth=truth,
        dilution_d={str(j): float(x) for j, x in zip(r.levels, d)},
    )
    return rack


def simulate_cells(levels, s, truth, seed, totals=2, blocked=1, minutes=5.0, background=(10.0, 10.0)):
    """Cells whose free label is what two equal chambers would come to, give or take 5 %."""
    rng = np.random.default_rng(seed)
    vials = [
        dict(vial=i + 1, role="background", replicate=i + 1,
             readings=[dict(minutes=m, counts=int(rng.poisson(m * truth["background_cpm"])))])
        for i, m in enumerate(background)
    ]
    per_ml = s["efficiency"] * DPM_PER_FMOL_PER_CI_PER_MMOL * s["sa_ci_per_mmol"] * 1000
    c = s["protein_side_ml_before"] / s["protein_side_ml_after"]
    u = s["unlabelled"]
    cell, free_true = 0, {}
    for role, many in (("total", totals), ("nonspecific", blocked)):
        for j, lt in enumerate(levels):
            for rep in range(many):
                cell += 1
                kd, rho = truth["kd_nm"], 1.0
                if role == "nonspecific" and u["kind"] == "same_ligand":
                    rho = (lt + u["concentration_nm"]) / lt
                elif role == "nonspecific":
                    kd *= 1 + u["concentration_nm"] / u["ki_nm"]

                def curve(f):
                    return truth["sites_nm"] * f / (kd + rho * f) + truth["ns"] * f

                f = optimize.brentq(lambda f: f + curve(f) / 2 - lt, 0, lt) * math.exp(0.05 * rng.normal())
                free_true[str(cell)] = f
                for side, conc in (("protein", f + c * curve(f)), ("ligand", f)):
                    ml = s[f"{side}_side_aliquot_ml"]
                    rate = truth["background_cpm"] + per_ml * ml * conc * (1 + truth["cv"] * rng.normal())
                    vials.append(dict(
                        vial=len(vials) + 1, role=role, level=j + 1, replicate=rep + 1, added_nm=lt, cell=cell,
                        side=side, readings=[dict(minutes=minutes, counts=int(rng.poisson(rate * minutes)))],
                    ))
    return dict(settings=s, vials=vials, simulated=dict(
        seed=seed, generator="numpy default_rng (PCG64)", truth=truth, free_nm_of_cell=free_true))


def truth(kd, r, ns, cv=0.03, b=25.0, **more):
    return dict(kd_nm=kd, sites_nm=r, ns=ns, background_cpm=b, cv=cv, **more)


def rack_free():
    s = settings("free_counted", aliquot_ml=0.1)
    return simulate(dict(settings=s, vials=vials_of(ladder(0.1, 6.0, 8))), truth(0.5, 0.8, 0.1), 20401)


def rack_free_filter():
    s = settings(
        "free_counted", aliquot_ml=0.1, sticks="filter", bindable_share=0.85, dilution="serial",
        unlabelled=dict(kind="other_ligand", concentration_nm=500.0, ki_nm=2.0),
    )
    return simulate(dict(settings=s, vials=vials_of(ladder(0.1, 8.0, 8))), truth(0.4, 0.9, 0.12), 20402)


def rack_dialysis():
    s = settings(
        "dialysis", protein_side_aliquot_ml=0.1, ligand_side_aliquot_ml=0.1, protein_side_ml_before=0.5,
        protein_side_ml_after=0.5, unlabelled=dict(kind="same_ligand", concentration_nm=5000.0, ki_nm=None),
    )
    return simulate_cells(ladder(0.4, 40.0, 8), s, truth(2.0, 6.0, 0.15, cv=0.01), 20403)


def rack_dialysis_shift():
    s = settings(
        "dialysis", protein_side_aliquot_ml=0.15, ligand_side_aliquot_ml=0.2, protein_side_ml_before=1.0,
        protein_side_ml_after=1.12, unlabelled=dict(kind="other_ligand", concentration_nm=2000.0, ki_nm=5.0),
    )
    return simulate_cells(ladder(0.1, 12.0, 7), s, truth(0.8, 2.0, 0.1, cv=0.04), 20404, blocked=2, minutes=2.0)


def rack_reader():
    s = settings(
        "reader", volume_ml=0.1, fraction_counted=0.8, read_volume_ml=0.05,
        unlabelled=dict(kind="same_ligand", concentration_nm=2000.0, ki_nm=None),
    )
    standards = [(0.0, 6), (0.05, 2), (0.1, 2), (0.2, 2), (0.5, 2), (1.0, 2)]
    vials = vials_of(ladder(0.2, 20.0, 8), background=(), minutes=None, standards=standards)
    real = dict(kd_nm=1.0, sites_nm=0.4, ns=0.004, cv=0.05, blank_signal=120.0, signal_per_nm=5000.0, signal_sd=15.0)
    return simulate(dict(settings=s, vials=vials), real, 20405)


def rack_added():
    s = settings("bound_counted", s_d=0.03, added_share=0.1)
    vials = vials_of(ladder(0.06, 6.0, 8), added={j: 2 for j in range(1, 9)})
    return simulate(dict(settings=s, vials=vials), truth(0.5, 0.05, 0.003), 20406)


def rack_added_serial():
    s = settings(
        "bound_counted", s_d=0.04, dilution="serial", added_share=0.05, bindable_share=0.9, sticks="filter",
        fraction_counted=0.8,
    )
    vials = vials_of(ladder(0.05, 5.0, 8), added={2: 1, 4: 1, 6: 2, 8: 2})
    return simulate(dict(settings=s, vials=vials), truth(0.5, 0.2, 0.01), 20407)


def rack_no_receptor():
    s = settings("bound_counted", added_share=0.1)
    vials = vials_of(ladder(0.06, 6.0, 8), added={3: 2, 6: 2}, no_receptor={2: 2, 4: 2, 6: 2, 8: 2})
    return simulate(dict(settings=s, vials=vials), truth(0.5, 0.06, 0.004, ns_filter=0.003), 20408)


def rack_no_receptor_free():
    s = settings("free_counted", aliquot_ml=0.1, s_d=0.01)
    vials = vials_of(ladder(0.1, 6.0, 8), no_receptor={j: 2 for j in range(1, 9)})
    return simulate(dict(settings=s, vials=vials), truth(0.5, 0.8, 0.02, cv=0.02, ns_filter=0.06), 20409)


def rack_decay():
    """Fluorine-18 (half-life 109.77 min), counted one vial after another, some twice."""
    s = settings("bound_counted", volume_ml=0.25, efficiency=0.5, sa_ci_per_mmol=1000.0, half_life_min=109.77)
    vials = vials_of(ladder(0.1, 10.0, 8), background=(10.0, 10.0))
    start = 6.0
    for v in vials:
        if v["role"] == "background":
            continue
        minutes = 2.0 if start < 150 else 5.0
        v["readings"] = [dict(minutes=minutes, start_min_after_reference=round(start, 2))]
        start += minutes + 6.35
    for v in vials:  # the lowest totals and two more a second time, longer
        if v["role"] == "total" and v["level"] in (1, 2) or v["vial"] in (12, 20):
            v["readings"].append(dict(minutes=8.0, start_min_after_reference=round(start, 2)))
            start += 8.35
    return simulate(dict(settings=s, vials=vials), truth(1.0, 0.12, 0.002, b=30.0), 20410)


def rack_quench():
    """Efficiency of each vial from its quench number; a dead time of 8 microseconds."""
    table = [(250.0, 0.28), (350.0, 0.36), (450.0, 0.41), (550.0, 0.44)]
    s = settings(
        "bound_counted", efficiency=0.40, sa_ci_per_mmol=600.0, dead_time_s=8e-6,
        quench_table=[dict(quench=q, efficiency=e) for q, e in table],
        quench_interpolation="linear between neighbours",
    )
    vials = vials_of(ladder(0.05, 8.0, 8), minutes=1.0)
    rng = np.random.default_rng(20412)
    for v in vials:
        if v["role"] != "background":
            quench = float(rng.integers(270, 540))
            v["readings"][0].update(quench=quench, efficiency=float(np.interp(quench, *zip(*table))))
    rack = simulate(dict(settings=s, vials=vials), truth(0.5, 1.0, 0.02), 20411)
    rack["simulated"]["seed_of_quench"] = 20412
    return rack


def rack_background():
    s = settings("bound_counted", background_scatter=True)
    vials = vials_of(ladder(0.05, 5.0, 8), background=(10.0, 10.0, 10.0, 10.0, 5.0, 20.0), minutes=5.0)
    return simulate(dict(settings=s, vials=vials), truth(0.5, 0.008, 0.0008, background_sd_cpm=8.0), 20413)


RACKS = dict(
    free=rack_free, free_filter=rack_free_filter, dialysis=rack_dialysis, dialysis_shift=rack_dialysis_shift,
    reader=rack_reader, added=rack_added, added_serial=rack_added_serial, no_receptor=rack_no_receptor,
    no_receptor_free=rack_no_receptor_free, decay=rack_decay, quench=rack_quench, background=rack_background,
)


def expected(rack):
    r = problem(rack)
    fit = r.fit()
    if rack["settings"]["kind"] == "dialysis":
        cv = rack["simulated"]["truth"]["cv"]
        fit["at_fixed_cv"] = dict(cv=cv, **r.at_fixed_cv(cv))
        fit["functional"] = dict(cv=cv, **r.functional(cv))
    return fit


def derived(rack):
    """Figures on the way, so that a difference can be traced."""
    r = problem(rack)
    out = {}
    if r.kind != "reader":
        out["cpm_per_nm"] = r.per_nm
    if r.kind == "dialysis":
        out = dict(cpm_per_nm_protein_side=r.per_nm, cpm_per_nm_ligand_side=r.per_nm_f)
    if r.kind == "reader":
        out["q"] = r.q
    elif r.added_vials:
        out["added_cpm_per_nm"] = r.added_per_nm
    if isinstance(r.background, Scattered):
        out.update(sigma2_cpm2=r.background.sigma2, bhat_cpm=r.background.bhat, v_cpm2=r.background.v)
    if r.s.get("half_life_min") or r.s.get("quench_table"):
        out["effective_minutes"] = {str(v["vial"]): w for v, w in zip(r.tubes, r.w.tolist())}
    return out


def write_rack(name, folder):
    rack = RACKS[name]()
    out = dict(name=name, about="Simulated data, invented; made by reference_kinds.py", **rack)
    out["derived"] = derived(rack)
    out["expected"] = expected(rack)
    out["made_with"] = dict(
        python=sys.version.split()[0], numpy=np.__version__, scipy=scipy.__version__, mpmath=mpmath.__version__
    )
    folder = pathlib.Path(folder)
    folder.mkdir(parents=True, exist_ok=True)
    (folder / f"{name}.json").write_text(compact(out) + "\n")
    return out["expected"]


def compact(value, depth=0):
    """JSON with one vial, or one parameter, to a line."""
    pad = " " * (depth + 1)
    flat = json.dumps(value)
    if not isinstance(value, (dict, list)) or len(flat) < 150 and (depth > 1 or isinstance(value, list)):
        return flat
    if depth > 1 and not any(isinstance(v, (dict, list)) for v in (value.values() if isinstance(value, dict) else value)):
        return flat
    if isinstance(value, dict):
        inner = ",\n".join(f"{pad}{json.dumps(k)}: {compact(v, depth + 1)}" for k, v in value.items())
        return "{\n" + inner + "\n" + pad[:-1] + "}"
    return "[\n" + ",\n".join(pad + (json.dumps(v) if "vial" in v else compact(v, depth + 1)) for v in value) + "\n" + pad[:-1] + "]"


# ------------------------------------------------------------- racks of the other reference
def check(folder):
    """Racks that reference.py has fitted, as bound counts of this one: how far apart?"""
    good = True
    for name in ("filter", "serial", "other_ki", "full_block", "ns_zero", "low_counts", "unsaturated"):
        old = json.loads((pathlib.Path(folder) / f"{name}.json").read_text())
        s = dict(old["settings"], kind="bound_counted", bindable_share=1.0)
        assert not s.get("scale_errors")
        vials = [dict(role="background", readings=[v]) for v in old["background"]]
        for t in old["tubes"]:
            assert not t["lost"] and not t["suspect"]
            reading = dict(counts=t["counts"], minutes=t["minutes"])
            vials.append(dict({k: t[k] for k in ("role", "level", "added_nm")}, readings=[reading]))
        got, want = problem(dict(settings=s, vials=vials)).fit(), old["expected"]["fit"]
        worst = max(abs(got[k] - want[k]) for k in ("minus2lnl", "prior_term", "aicc"))
        apart = 0.0
        for p in got["parameters"]:
            pairs = [(p["estimate"], want["estimates"][p["name"]]), (p["se_ln"], want["se_ln"][p["name"]])]
            pairs += [(p[side], want["intervals"][p["name"]][side]) for side in ("low", "high") if side in p]
            for a, b in pairs:
                same = (a is None) == (b is None)
                apart = max(apart, abs(math.log(a / b)) if same and a is not None else 0.0 if same else math.inf)
        good &= apart < 1e-8 and worst < 1e-8
        print(f"{name:12s} figures apart by {worst:.1e}, parameters and ends by {apart:.1e} (ln)", flush=True)
    return good


def main():
    parser = argparse.ArgumentParser(description="Independent reference for the other kinds of counting.")
    sub = parser.add_subparsers(dest="what", required=True)
    a = sub.add_parser("racks", help="simulate and fit the racks, one JSON file each")
    a.add_argument("--out", required=True)
    a.add_argument("names", nargs="*", help="only these")
    sub.add_parser("fit", help="fit a rack file again").add_argument("file")
    sub.add_parser("check", help="refit racks of reference.py").add_argument("folder")
    args = parser.parse_args()
    if args.what == "racks":
        for name in args.names or RACKS:
            print(name, json.dumps(write_rack(name, args.out), indent=1), flush=True)
    if args.what == "fit":
        print(json.dumps(expected(json.loads(pathlib.Path(args.file).read_text())), indent=1))
    if args.what == "check":
        sys.exit(0 if check(args.folder) else 1)


if __name__ == "__main__":
    main()
