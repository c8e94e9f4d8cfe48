#!/usr/bin/env python3
"""Brute-force values for posteriors with marked and rounded readings: posterior_marked.csv
(case,quantity,function,argument,value).

Plain products of the densities of every single reading on a tensor of Gauss-Legendre panels in the level (and in
ln sigma, or in mu, ln tau and the standardised level), no closed form for any piece. Probabilities are cut exactly at
the argument: the panels of the level end there. numpy and scipy, double precision; two sets of panels, pairs that
differ by more than 1e-10 are named.
"""
import sys
from functools import lru_cache
import numpy as np
from scipy.special import log_ndtr, ndtr, roots_legendre
from scipy.optimize import brentq


@lru_cache(None)
def rule(k):
    return roots_legendre(k)


def panels(edges, k):
    edges = np.asarray(edges, float)
    x, w = rule(k)
    h, m = np.diff(edges) / 2, (edges[:-1] + edges[1:]) / 2
    return (m[:, None] + h[:, None] * x).ravel(), (h[:, None] * w).ravel()


def even(lo, hi, width):
    return np.linspace(lo, hi, int(np.ceil((hi - lo) / width)) + 1)


def ln_interval(lo, hi):
    """ln(Phi(hi) - Phi(lo)), in the tail where both are small."""
    flip = lo > 0
    a, b = np.where(flip, -hi, lo), np.where(flip, -lo, hi)
    lb, la = log_ndtr(b), log_ndtr(a)
    return lb + np.log1p(-np.exp(la - lb))


def ln_like(readings, theta, sigma):
    ln = 0.0
    for kind, *x in readings:
        if kind == '=':
            ln = ln - np.log(sigma) - 0.5 * ((x[0] - theta) / sigma)**2
        elif kind == '<':
            ln = ln + log_ndtr((x[0] - theta) / sigma)
        elif kind == '>':
            ln = ln + log_ndtr((theta - x[0]) / sigma)
        else:
            ln = ln + ln_interval((x[0] - theta) / sigma, (x[1] - theta) / sigma)
    return ln


def cut(lo, hi, width, at):
    """Edges with one at `at`."""
    return np.unique(np.concatenate([even(lo, at, width), even(at, hi, width)]))


CASES = {
    'stated known': dict(prior=(2.0, 1.5), sd=0.8,
                         readings=[('=', 2.1), ('=', 1.4), ('<', 1.0), ('<', 1.0), ('>', 3.0)], box=(-8, 12)),
    'all below': dict(prior=(5.0, 2.0), sd=0.7, readings=[('<', 1.0)] * 6, box=(-12, 14)),
    'flat unknown': dict(sd=None, lns=(-4.5, 15.0), unit=1.0,
                         readings=[('=', 2.1), ('=', 1.4), ('=', 2.9), ('=', 2.2), ('<', 1.0), ('<', 1.5)]),
    'all rounded': dict(sd=None, lns=(-7.0, 9.0), unit=1.0,
                        readings=[('[', x - 0.5, x + 0.5) for x in (3, 4, 4, 6, 3)]),
}


class Plane:
    """The level and ln sigma: theta = c + scale(sigma) * z where sigma is unknown."""

    def __init__(self, case, fine):
        self.case, self.k, self.width = case, (20 if fine else 16), (0.25 if fine else 0.3)
        c = case
        if c['sd'] is None:
            self.ls, self.wls = panels(even(*c['lns'], 2 * self.width), self.k)
            vals = [x[0] if k == '=' else sum(x) / 2 for k, *x in c['readings'] if k in '=[']
            self.c, self.n = np.mean(vals), len(vals)
        self.whole = self.integral(None, None)

    def integral(self, upto, above):
        """Mass of level <= upto (or > above); both None: all."""
        c = self.case
        if c['sd'] is not None:
            lo, hi = c['box']
            if upto is not None:
                hi = upto
            if above is not None:
                lo = above
            t, w = panels(even(lo, hi, self.width * c['sd']), self.k)
            ln = -0.5 * ((t - c['prior'][0]) / c['prior'][1])**2 + ln_like(c['readings'], t, c['sd'])
            return float(np.sum(w * np.exp(ln)))
        total = 0.0
        for s, ws in zip(np.exp(self.ls), self.wls):
            scale = np.sqrt((s * s + 0.09) / self.n)
            lo, hi = -34.0, 34.0
            if upto is not None:
                hi = min(hi, (upto - self.c) / scale)
            if above is not None:
                lo = max(lo, (above - self.c) / scale)
            if hi <= lo:
                continue
            z, w = panels(even(lo, hi, 4 * self.width), self.k)
            # p(sigma^2) dsigma^2 = 2 d ln sigma / ... : 1/sigma^2 leaves d ln sigma
            ln = ln_like(c['readings'], self.c + scale * z, s)
            total += ws * scale * np.sum(w * np.exp(ln))
        return float(total)

    def cdf(self, t):
        return self.integral(t, None) / self.whole

    def sf(self, t):
        return self.integral(None, t) / self.whole

    def reading_sf(self, t):
        c = self.case
        if c['sd'] is not None:
            lo, hi = c['box']
            x, w = panels(even(lo, hi, self.width * c['sd']), self.k)
            ln = -0.5 * ((x - c['prior'][0]) / c['prior'][1])**2 + ln_like(c['readings'], x, c['sd'])
            return float(np.sum(w * np.exp(ln) * ndtr((x - t) / c['sd']))) / self.whole
        total = 0.0
        for s, ws in zip(np.exp(self.ls), self.wls):
            scale = np.sqrt((s * s + 0.09) / self.n)
            z, w = panels(even(-34, 34, 4 * self.width), self.k)
            x = self.c + scale * z
            total += ws * scale * np.sum(w * np.exp(ln_like(c['readings'], x, s)) * ndtr((x - t) / s))
        return float(total) / self.whole

    def sigma_cdf(self, x):
        total = 0.0
        edges = even(self.case['lns'][0], np.log(x), 2 * self.width)
        ls, wls = panels(edges, self.k)
        for s, ws in zip(np.exp(ls), wls):
            scale = np.sqrt((s * s + 0.09) / self.n)
            z, w = panels(even(-34, 34, 4 * self.width), self.k)
            total += ws * scale * np.sum(w * np.exp(ln_like(self.case['readings'], self.c + scale * z, s)))
        return float(total) / self.whole


HISTORIES = {
    'history plain': dict(sd=1.0, between='half-normal', scale=2.0, periods=[
        [('=', 9.1), ('=', 10.3), ('=', 9.9)], [('=', 12.0), ('=', 11.5)], [('=', 8.0), ('=', 9.2), ('=', 9.0)],
        [('=', 10.0), ('=', 10.4)], [('=', 11.1)]], now=[('=', 8.2), ('<', 8.5), ('<', 8.5)]),
    'history marked': dict(sd=1.0, between='half-normal', scale=1.5, periods=[
        [('=', 9.1), ('<', 8.5), ('=', 9.9)], [('=', 12.0), ('=', 11.5)], [('<', 8.5), ('<', 8.5)],
        [('=', 10.0), ('=', 10.4), ('>', 12.0)]], now=[('=', 9.2), ('=', 8.7), ('=', 9.0)]),
    'both marked': dict(sd=1.0, between='half-normal', scale=1.5, periods=[
        [('=', 9.1), ('<', 8.5), ('=', 9.9)], [('=', 12.0), ('=', 11.5)], [('<', 8.5), ('<', 8.5)]],
        now=[('=', 9.2), ('<', 8.5)]),
}


class History:
    """mu, ln tau and, for this period, z = (theta - mu)/tau; every earlier period's level integrated in its own z.
    Where something is cut at t, the panels of mu close in on t by steps of tau."""

    def __init__(self, case, fine):
        self.case = case
        self.k, self.f = (16, 1.0) if fine else (14, 1.2)
        c, f = case, self.f
        edges = np.concatenate([even(-30, -4, 5 * f)[:-1], even(-4, 2.3, 0.6 * f)])
        lt, self.wt = panels(edges + np.log(c['scale']), self.k)
        self.tau = np.exp(lt)
        self.top = 0.0
        self.top = max(self.at(tau, None)[2].max() for tau in self.tau)
        self.whole = self.sum(lambda tau, mu: np.exp(self.now(tau, mu)) @ self.zs(tau)[1])

    def width(self, tau):
        """Panels of z as narrow as a reading's likelihood is on them."""
        return min(2.4, 1.5 * self.case['sd'] / tau) * self.f

    def zs(self, tau):
        return panels(even(-10.5, 10.5, self.width(tau)), self.k)

    def now(self, tau, mu):
        theta = mu[:, None] + tau * self.zs(tau)[0][None, :]
        return ln_like(self.case['now'], theta, self.case['sd']) - 0.5 * self.zs(tau)[0]**2

    def at(self, tau, t):
        c = self.case
        spread = np.sqrt(tau**2 + 0.3) / 1.5
        edges = 10.0 + spread * even(-13, 13, 2.0 * self.f)
        if t is not None:
            near = tau * self.f * np.array([0, 1.5, 3, 5, 8, 12, 20, 40, 80, 160, 320, 640, 1280, 2560, 5120])
            near = near[near < 2 * spread]
            edges = np.unique(np.concatenate([edges, t - near, t + near]))
            edges = edges[(edges >= 10 - 13 * spread) & (edges <= 10 + 13 * spread)]
        mu, w = panels(edges, self.k)
        ln = np.log(tau) - (0.5 * (tau / c['scale'])**2 if c['between'] == 'half-normal' else 0.0)
        ln = ln + np.zeros_like(mu)
        for period in c['periods']:
            theta = mu[:, None] + tau * self.zs(tau)[0][None, :]
            l = ln_like(period, theta, c['sd']) - 0.5 * self.zs(tau)[0]**2
            top = l.max(axis=1)
            ln = ln + top + np.log(np.exp(l - top[:, None]) @ self.zs(tau)[1])
        return mu, w, ln - self.top

    def sum(self, inner, t=None):
        total = 0.0
        for tau, wt in zip(self.tau, self.wt):
            mu, w, ln = self.at(tau, t)
            total += wt * np.sum(w * np.exp(ln) * inner(tau, mu))
        return float(total)

    def below(self, tau, mu, t):
        out = np.zeros_like(mu)
        for i, m in enumerate(mu):
            hi = min(10.5, (t - m) / tau)
            if hi > -10.5:
                z, wz = panels(even(-10.5, hi, self.width(tau)), self.k)
                out[i] = np.exp(ln_like(self.case['now'], m + tau * z, self.case['sd']) - 0.5 * z * z) @ wz
        return out

    def cdf(self, t):
        return self.sum(lambda tau, mu: self.below(tau, mu, t), t) / self.whole

    def next_sf(self, t):
        return self.sum(lambda tau, mu: np.exp(self.now(tau, mu)) @ self.zs(tau)[1] * ndtr((mu - t) / tau), t) / self.whole

    def reading_sf(self, t):
        sd = self.case['sd']
        inner = lambda tau, mu: (np.exp(self.now(tau, mu)) * ndtr((mu[:, None] + tau * self.zs(tau)[0] - t) / sd)) @ self.zs(tau)[1]
        return self.sum(inner) / self.whole


def rows():
    for name, case in CASES.items():
        a, b = Plane(case, False), Plane(case, True)
        lo, hi = case.get('box', (-30, 40))
        q = lambda f, p: brentq(lambda t: f(t) - p, lo + 0.5, hi - 0.5, xtol=1e-12, rtol=1e-14)
        for p in (0.025, 0.5, 0.975):
            yield name, 'level', 'quantile', p, q(a.cdf, p), q(b.cdf, p)
        m = q(b.cdf, 0.5)
        s = q(b.cdf, 0.84) - q(b.cdf, 0.16)
        for k in (-2.5, -1.2):
            t = round(m + k * s, 2)
            yield name, 'level', 'cdf', t, a.cdf(t), b.cdf(t)
        for k in (1.3, 2.7):
            t = round(m + k * s, 2)
            yield name, 'level', 'sf', t, a.sf(t), b.sf(t)
        for k in (0.5, 3.0):
            t = round(m + k * s, 2)
            yield name, 'reading', 'sf', t, a.reading_sf(t), b.reading_sf(t)
        if case['sd'] is None:
            for x in (0.4, 0.9, 3.0):
                yield name, 'within sd', 'cdf', x, a.sigma_cdf(x), b.sigma_cdf(x)
    for name, case in HISTORIES.items():
        a, b = History(case, False), History(case, True)
        for t in (7.1, 8.3, 9.0, 10.2):
            yield name, 'level', 'cdf', t, a.cdf(t), b.cdf(t)
        for t in (9.5, 13.0):
            yield name, 'next', 'sf', t, a.next_sf(t), b.next_sf(t)
        for t in (9.0, 12.0):
            yield name, 'reading', 'sf', t, a.reading_sf(t), b.reading_sf(t)


worst = 0
print('case,quantity,function,argument,value')
for name, q, f, arg, va, vb in rows():
    rel = abs(va - vb) / max(abs(vb), 1e-300)
    worst = max(worst, rel)
    if rel > 1e-10:
        print('poor', name, q, f, arg, va, vb, rel, file=sys.stderr)
    print(f'{name},{q},{f},{arg!r},{float(vb)!r}', flush=True)
print('worst difference of the two sets of panels', worst, file=sys.stderr)
