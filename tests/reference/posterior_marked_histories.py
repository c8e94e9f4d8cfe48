#!/usr/bin/env python3
"""Direct integration for posteriors with marked readings and a history, the within sd, the between sd or both unknown:
posterior_marked_histories.csv (case,quantity,function,argument,value).

Nothing is normal but single readings and levels: every period's likelihood is a product over its readings on a grid of
levels; levels, the long-run mean, tau and ln sigma are integrated out by Gauss-Legendre panels (levels given mu as a
matrix of normal densities where tau is wide against the grid, by levels mu + tau z where it is narrow). Chances are
integrals of the panels' Legendre series up to the argument itself. A case with `earlier` also has the change against
that period. numpy and scipy, double precision; two sets of
panels, pairs that differ by more than 1e-10 are named; those by more than 1e-9 (and 1e-22) are left out.
"""
import sys
from functools import lru_cache
import numpy as np
from numpy.polynomial import legendre as leg
from scipy.optimize import brentq
from scipy.special import log_ndtr, ndtr


@lru_cache(None)
def rule(k):
    x, w = leg.leggauss(k)
    p = leg.legvander(x, k - 1)
    to_series = (p * w[:, None]).T * ((2 * np.arange(k) + 1) / 2)[:, None]
    return x, w, to_series


class Panels:
    """Gauss points on panels; series of values there and their integrals."""

    def __init__(self, edges, k):
        self.edges, self.k = np.asarray(edges, float), k
        x, w, self.to_series = rule(k)
        self.h, m = np.diff(self.edges) / 2, (self.edges[:-1] + self.edges[1:]) / 2
        self.x = (m[:, None] + self.h[:, None] * x).ravel()
        self.w = (self.h[:, None] * w).ravel()

    def series(self, values):
        return values.reshape(len(self.h), self.k) @ self.to_series.T

    def at(self, series, t):
        t = np.clip(np.asarray(t, float), self.edges[0], self.edges[-1])
        i = np.clip(np.searchsorted(self.edges, t) - 1, 0, len(self.h) - 1)
        x = (t - self.edges[i]) / self.h[i] - 1
        out, before, here = series[i, 0] + series[i, 1] * x, np.ones_like(x), x
        for n in range(1, self.k - 1):
            before, here = here, ((2 * n + 1) * x * here - n * before) / (n + 1)
            out = out + series[i, n + 1] * here
        return out

    def above(self, values, t):
        """Integral above each t, from the right."""
        s = self.series(values)
        whole = 2 * self.h * s[:, 0]
        right = np.concatenate([np.cumsum(whole[::-1])[::-1][1:], [0.0]])
        t = np.clip(np.atleast_1d(np.asarray(t, float)), self.edges[0], self.edges[-1])
        i = np.clip(np.searchsorted(self.edges, t) - 1, 0, len(self.h) - 1)
        y = (t - self.edges[i]) / self.h[i] - 1
        p = leg.legvander(y, self.k)
        part = s[i, 0] * (1 - y)
        for n in range(1, self.k):
            part = part - s[i, n] * (p[:, n + 1] - p[:, n - 1]) / (2 * n + 1)
        return right[i] + self.h[i] * part

    def below(self, values, t):
        s = self.series(values)
        whole = 2 * self.h * s[:, 0]
        left = np.concatenate([[0.0], np.cumsum(whole)[:-1]])
        t = np.clip(np.atleast_1d(np.asarray(t, float)), self.edges[0], self.edges[-1])
        i = np.clip(np.searchsorted(self.edges, t) - 1, 0, len(self.h) - 1)
        y = (t - self.edges[i]) / self.h[i] - 1
        p = leg.legvander(y, self.k)
        part = s[i, 0] * (y + 1)
        for n in range(1, self.k):
            part = part + s[i, n] * (p[:, n + 1] - p[:, n - 1]) / (2 * n + 1)
        return left[i] + self.h[i] * part


def even(lo, hi, width):
    return np.linspace(lo, hi, int(np.ceil((hi - lo) / width)) + 1)


def ln_like(readings, theta, sigma):
    ln = np.zeros_like(theta)
    for kind, x, count in readings:
        if kind == '=':
            ln = ln + count * (-np.log(sigma) - 0.5 * ((x - theta) / sigma)**2)
        elif kind == '<':
            ln = ln + count * log_ndtr((x - theta) / sigma)
        else:
            ln = ln + count * log_ndtr((theta - x) / sigma)
    return ln


def plain(*xs):
    return [('=', x, 1) for x in xs]


HISTORY = [plain(9.1, 10.3, 9.9), plain(12.0, 11.5, 11.1), plain(8.0, 9.2, 9.0), plain(10.0, 10.4), plain(11.1, 10.2)]
MARKED = [plain(9.1, 9.9) + [('<', 8.5, 1)], plain(12.0, 11.5, 11.1), plain(9.3) + [('<', 8.5, 2)],
          plain(10.0, 10.4) + [('>', 12.0, 1)], plain(11.1, 10.2, 9.5)]
NOW = plain(9.2, 9.9, 9.4) + [('<', 8.8, 2)]
PLAIN_NOW = plain(9.2, 9.9, 9.4, 10.3)

# sd None: p(sigma^2) ~ 1/sigma^2, one sigma for all periods; ln of its range.
CASES = {
    'now: tau': dict(history=HISTORY, now=NOW, sd=0.8, between='uniform'),
    'now: sigma and tau': dict(history=HISTORY, now=NOW, sd=None, between='half-normal', scale=1.5),
    'then: tau': dict(history=MARKED, now=PLAIN_NOW, sd=0.8, between='half-normal', scale=1.5),
    'then and now: tau': dict(history=MARKED, now=NOW, sd=0.8, between='half-normal', scale=1.5),
    'then and now: sigma and tau': dict(history=MARKED, now=NOW, sd=None, between='half-normal', scale=1.5),
}
LEVEL = (7.6, 8.4, 9.3, 10.1, 11.0)
NEXT = (5.5, 8.8, 10.4, 13.5)
LONG_RUN = (8.7, 10.3, 11.6)
READING = (6.5, 9.0, 10.8, 13.0)
PERCENTILE = (9.6, 10.6, 11.9, 13.5)
CHANGE = (-1.5, 0.4, 1.6)
Z = 1.6448536269514727


class Posterior:
    def __init__(self, case, fine):
        self.case, self.fine = case, fine
        # Points a panel: of levels, and of tau and ln sigma.
        self.k, outer = (15, 11) if fine else (14, 10)
        f = self.f = 1.0 if fine else 1.1
        if case['sd'] is None:
            ls = Panels(even(np.log(0.85) - 2.1, np.log(0.85) + 2.6, 0.45 * f), outer)
            sigmas, ws = np.exp(ls.x), 2 * ls.w
        else:
            sigmas, ws = np.array([case['sd']]), np.array([1.0])
        top = case.get('scale', 1.5) * 9.2 if case['between'] == 'half-normal' else 3e4
        edges = [0.0, 0.12, 0.3, 0.55, 0.9]
        while edges[-1] < top:
            edges.append(min(edges[-1] * 1.45, top))
        taus = Panels(edges if fine else np.interp(np.linspace(0, len(edges) - 1, len(edges) + 2),
                                                   np.arange(len(edges)), edges), outer)
        self.levels, self.sigmas = [], []
        self.next, self.long = np.zeros((2, len(NEXT))), np.zeros((2, len(LONG_RUN)))
        self.change = np.zeros((2, len(CHANGE)))
        self.unit = None
        for sigma, w in zip(sigmas, ws):
            self.of_sigma(sigma, w, taus)
        self.whole = sum(np.sum(grid.w * p) for grid, p in self.levels)

    def of_sigma(self, sigma, weight, taus):
        c = self.case
        places = [x for period in c['history'] + [c['now']] for _, x, _ in period]
        lo, hi = min(places) - 9.0 * sigma, max(places) + 9.0 * sigma
        inner = even(lo, hi, 0.8 * sigma * self.f)
        level = Panels(inner, self.k)
        total = np.zeros_like(level.x)
        for tau, wt in zip(taus.x, taus.w):
            prior = -0.5 * (tau / c['scale'])**2 if c['between'] == 'half-normal' else 0.0
            out = even(0.0, 9.7 * tau, 1.8 * tau * self.f)[1:]
            grid = Panels(np.concatenate([(lo - out)[::-1], inner, hi + out]), self.k)
            middle = slice(len(out) * self.k, (len(out) + len(inner) - 1) * self.k)
            like = [ln_like(p, grid.x, sigma) for p in c['history'] + [c['now']]]
            if self.unit is None:
                self.unit = sum(l.max() for l in like)
            like = [np.exp(l) for l in like]
            wide = tau > 0.5 * sigma
            if wide:
                normal = np.exp(-0.5 * ((grid.x[:, None] - grid.x[None, :]) / tau)**2) / (tau * np.sqrt(2 * np.pi))
                blur = lambda values: normal @ (grid.w * values)
            else:
                z = Panels(even(-9.6, 9.6, 2.0 * self.f), self.k)
                wz = z.w * np.exp(-0.5 * z.x**2) / np.sqrt(2 * np.pi)
                shifted = grid.x[:, None] + tau * z.x[None, :]

                def blur(values):
                    ln = grid.series(np.log(np.maximum(values, 1e-300)))
                    inside = (shifted >= grid.edges[0]) & (shifted <= grid.edges[-1])
                    found = np.where(inside.ravel(), np.exp(np.minimum(grid.at(ln, shifted.ravel()), 300)), 0.0)
                    return found.reshape(shifted.shape) @ wz
            given = [blur(l) for l in like]
            scale = weight * wt * np.exp(prior - self.unit)
            q = scale * np.prod(given[:-1], axis=0)
            total += (blur(q) * like[-1])[middle]
            q = q * given[-1]
            for i, t in enumerate(NEXT):
                for side, sign in enumerate((1, -1)):
                    if wide:
                        self.next[side, i] += np.sum(grid.w * q * ndtr(sign * (t - grid.x) / tau))
                    else:
                        part = grid.below if side == 0 else grid.above
                        self.next[side, i] += wz @ part(q, t - tau * z.x)
            self.long[0] += grid.below(q, LONG_RUN)
            self.long[1] += grid.above(q, LONG_RUN)
            if 'earlier' in c:
                self.of_change(c['earlier'], tau, sigma, scale, grid, given, like, wide)
        self.levels.append((level, total))
        self.sigmas.append(sigma)

    def of_change(self, j, tau, sigma, scale, grid, given, like, wide):
        """This level less that of period j: given mu both levels on the grid (or mu + tau z)."""
        rest = scale * np.prod([g for i, g in enumerate(given[:-1]) if i != j], axis=0)
        now, then = like[-1], like[j]
        for i, t in enumerate(CHANGE):
            for side, sign in enumerate((1, -1)):
                if wide:
                    # P(theta_now - theta_j <= t): for each level of j, mu and theta_now below level + t.
                    k = self.k
                    m = np.exp(-0.5 * ((grid.x[:, None] - grid.x[None, :]) / tau)**2) / (tau * np.sqrt(2 * np.pi))
                    density = rest[:, None] * m
                    h = grid.w[None, :] * then[None, :]
                    # inner integral over theta_now for every mu and every level of j
                    s = (m * now[None, :]).reshape(len(grid.x), len(grid.h), k) @ grid.to_series.T
                    inner = cut(grid, s, grid.x + t, side)
                    self.change[side, i] += np.sum(grid.w[:, None] * density * h * inner)
                else:
                    z = Panels(even(-9.6, 9.6, 1.2 * self.f), self.k)
                    ln_now, ln_then = (ln_like(p, grid.x[:, None] + tau * z.x[None, :], sigma)
                                       for p in (self.case['now'], self.case['history'][j]))
                    phi = np.exp(-0.5 * z.x**2) / np.sqrt(2 * np.pi)
                    s = (np.exp(ln_now) * phi).reshape(len(grid.x), len(z.h), self.k) @ z.to_series.T
                    inner = cut(z, s, z.x + t / tau, side)
                    self.change[side, i] += np.sum(grid.w * rest * ((inner * np.exp(ln_then) * phi) @ z.w))

    def level(self, t, side):
        return sum((g.below if side == 0 else g.above)(p, t)[0] for g, p in self.levels) / self.whole

    def percentile(self, t, side):
        parts = zip(self.levels, self.sigmas)
        return sum((g.below if side == 0 else g.above)(p, t - Z * s)[0] for (g, p), s in parts) / self.whole

    def reading(self, t, side):
        sign = 1 if side == 0 else -1
        parts = zip(self.levels, self.sigmas)
        return sum(np.sum(g.w * p * ndtr(sign * (t - g.x) / s)) for (g, p), s in parts) / self.whole

    def moments(self):
        mean = sum(np.sum(g.w * p * g.x) for g, p in self.levels) / self.whole
        return mean, np.sqrt(sum(np.sum(g.w * p * (g.x - mean)**2) for g, p in self.levels) / self.whole)


def cut(grid, series, t, side):
    """For each row of series: its integral below (or above) each t."""
    whole = 2 * grid.h * series[:, :, 0]
    zero = np.zeros((len(series), 1))
    if side == 0:
        outside = np.concatenate([zero, np.cumsum(whole, axis=1)[:, :-1]], axis=1)
    else:
        outside = np.concatenate([np.cumsum(whole[:, ::-1], axis=1)[:, ::-1][:, 1:], zero], axis=1)
    t = np.clip(t, grid.edges[0], grid.edges[-1])
    i = np.clip(np.searchsorted(grid.edges, t) - 1, 0, len(grid.h) - 1)
    y = (t - grid.edges[i]) / grid.h[i] - 1
    p = leg.legvander(y, grid.k)
    anti = np.zeros((len(t), grid.k))
    anti[:, 0] = y + 1 if side == 0 else 1 - y
    for n in range(1, grid.k):
        anti[:, n] = (p[:, n + 1] - p[:, n - 1]) / (2 * n + 1) * (1 if side == 0 else -1)
    out = outside[:, i]
    for m in np.unique(i):
        here = i == m
        out[:, here] += grid.h[m] * (series[:, m, :] @ anti[here].T)
    return out


def figures(p):
    for t in LEVEL:
        yield 'level', 'cdf', t, p.level(t, 0)
        yield 'level', 'sf', t, p.level(t, 1)
    for q in (0.025, 0.5, 0.975):
        yield 'level', 'quantile', q, brentq(lambda t: p.level(t, 0) - q, 3, 16, xtol=1e-13, rtol=1e-14)
    mean, sd = p.moments()
    yield 'level', 'mean', 0, mean
    yield 'level', 'sd', 0, sd
    for t in READING:
        yield 'reading', 'cdf', t, p.reading(t, 0)
        yield 'reading', 'sf', t, p.reading(t, 1)
    for i, t in enumerate(NEXT):
        yield 'next', 'cdf', t, p.next[0, i] / p.whole
        yield 'next', 'sf', t, p.next[1, i] / p.whole
    for i, t in enumerate(LONG_RUN):
        yield 'long run', 'cdf', t, p.long[0, i] / p.whole
        yield 'long run', 'sf', t, p.long[1, i] / p.whole
    for t in PERCENTILE:
        yield 'percentile', 'cdf', t, p.percentile(t, 0)
        yield 'percentile', 'sf', t, p.percentile(t, 1)
    yield 'percentile', 'quantile', 0.95, brentq(lambda t: p.percentile(t, 1) - 0.05, 5, 30, xtol=1e-13, rtol=1e-14)
    if 'earlier' in p.case:
        for i, t in enumerate(CHANGE):
            yield 'change', 'cdf', t, p.change[0, i] / p.whole
            yield 'change', 'sf', t, p.change[1, i] / p.whole


if __name__ == '__main__':
    worst = 0
    print('case,quantity,function,argument,value')
    for name in sys.argv[1:] or CASES:
        coarse, fine = (list(figures(Posterior(CASES[name], fine))) for fine in (False, True))
        for (quantity, function, argument, value), (_, _, _, again) in zip(fine, coarse):
            rel = abs(value - again) / abs(value)
            worst = max(worst, rel)
            if rel > 1e-10:
                print('poor', name, quantity, function, argument, value, again, rel, file=sys.stderr)
            if rel > 1e-9 and abs(value - again) > 1e-22:
                continue
            print(f'{name},{quantity},{function},{argument!r},{float(value)!r}', flush=True)
    print('worst difference of the two sets of panels', worst, file=sys.stderr)
