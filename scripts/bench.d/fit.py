"""Fits the curves of a file written by TestWholeCurveSpeed (package fit) with scipy.

    python3 fit.py CURVES.json

Prints, on one line: fits per CPU-second of scipy, of the project, their ratio;
the greatest difference of V_T in uV; evaluations of a curve per fit of scipy, of the
project; fits per wall-second of the project in two threads; memory requests a fit.

Both have the same points, weights, start values, equation and unknowns, and both
solve the load line by Newton's rule, from the measured currents and afterwards from
the last solution. Here that is done over the 100 points at once with numpy, the
derivatives are those of the formula (through the load line by implicit
differentiation), and what residuals and derivatives have in common is worked out
once. The tolerances are scipy's own (1e-8); the project stops where a further step
would move V_T by less than 0.1 uV. One thread. The project's time includes finding
the start values, scipy's does not.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import json
import sys
import time

import numpy as np
from scipy.optimize import least_squares

THERMAL = 1.380649e-23 * 300 / 1.602176634e-19  # kT/q at 300 K, V


class Curve:
    """One curve; residuals and their derivatives by V_T, ln beta, ln n, theta, lambda."""

    def __init__(self, lot, c):
        self.vg, self.i = np.array(c["vg"]), np.array(c["i"])
        self.weight = 1 / np.array(c["sigma"])
        self.tied, self.vdd, self.rl = lot["tied"], lot["vdd"], lot["rl"]
        self.evals = 0

    def fit(self, start):
        self.at, self.solved = None, np.clip(self.i, 0, self.vdd / self.rl if self.rl else np.inf)
        got = least_squares(self.residuals, start, self.jacobian, method="lm")
        if not got.success:
            sys.exit("scipy: " + got.message)
        return got.x[0]

    def current(self, vds):
        """I_D and its slope by V_DS; what the other derivatives need is kept."""
        vt, a, half, theta, lam = self.par
        v = self.v
        x = v - vds
        z = x / a
        e = np.exp(-np.abs(z))
        s, g = self.s, self.g
        d = np.maximum(x, 0) + a * np.log1p(e)
        gd = np.where(z >= 0, 1, e) / (1 + e)
        share = 1 / (1 + theta * s)
        early = 1 + lam * vds
        q = s * s - d * d
        k = half * share
        i = k * q * early
        gds = k * (2 * d * gd * early + lam * q)
        self.kept = x, d, gd, share, early, q, k
        return i, gds

    def solve(self, p):
        """The current of the circuit at parameters p, kept for the derivatives."""
        if self.at is not None and np.array_equal(p, self.at):
            return
        self.evals += 1
        a = 2 * np.exp(p[2]) * THERMAL
        self.par = p[0], a, np.exp(p[1]) / 2, p[3], p[4] if len(p) > 4 else 0.0
        self.v = v = self.vg - p[0]
        z = v / a
        e = np.exp(-np.abs(z))
        self.s = np.maximum(v, 0) + a * np.log1p(e)
        self.g = np.where(z >= 0, 1, e) / (1 + e)
        if self.tied:
            i, self.gds = self.current(self.vg)
            self.vds = self.vg
        else:
            i = self.newton(self.solved)
        self.solved, self.at = i, p.copy()

    def newton(self, i):
        """Newton's rule, halving where a step leaves the bracket."""
        lo, hi = np.zeros_like(i), np.full_like(i, self.vdd / self.rl)
        for _ in range(80):
            self.vds = self.vdd - i * self.rl
            id, self.gds = self.current(self.vds)
            miss = i - id
            above = miss > 0
            hi = np.where(above, i, hi)
            lo = np.where(above, lo, i)
            to = i - miss / (1 + self.rl * self.gds)
            out = (to < lo) | (to > hi)
            if out.any():
                to = np.where(out, (lo + hi) / 2, to)
            if (np.abs(to - i) <= 1e-6 * to).all() and not out.any():
                return to
            i = to
        return i

    def residuals(self, p):
        self.solve(p)
        return (self.solved - self.i) * self.weight

    def jacobian(self, p):
        self.solve(p)
        vt, a, half, theta, lam = self.par
        x, d, gd, share, early, q, k = self.kept
        s, g = self.s, self.g
        bend = q * theta * share
        kl = k * early
        gm = kl * (2 * (s * g - d * gd) - bend * g)
        sa, da = s - self.v * g, d - x * gd  # a times the derivatives by a
        i = kl * q
        columns = [-gm, i, kl * (2 * (s * sa - d * da) - bend * sa), -i * s * share]
        if len(p) > 4:
            columns.append(k * q * self.vds)
        w = self.weight
        if not self.tied:
            w = w / (1 + self.rl * self.gds)
        return np.stack(columns, axis=1) * w[:, None]


def main():
    with open(sys.argv[1]) as f:
        lot = json.load(f)
    curves = [Curve(lot, c) for c in lot["curves"]]
    starts = [np.array(c["start"]) for c in lot["curves"]]
    curves[0].fit(starts[0])  # warm
    curves[0].evals = 0
    begin = time.process_time()
    vts = [c.fit(s) for c, s in zip(curves, starts)]
    cpu = (time.process_time() - begin) / len(curves)
    apart = max(abs(v - c["vt"]) for v, c in zip(vts, lot["curves"])) * 1e6
    evals = sum(c.evals for c in curves) / len(curves)
    print(f"{1 / cpu:.0f} {1 / lot['cpu']:.0f} {cpu / lot['cpu']:.1f} {apart:.3f}",
          f"{evals:.1f} {lot['evals']:.1f} {1 / lot['wall2']:.0f} {lot['allocs']:.0f}")


main()
