#!/usr/bin/env python3
"""Brute-force values for the posterior: posterior.csv (case,quantity,argument,value).

Independent of the program in three ways: the levels given (sigma, tau) come from the equations of optimal
linear prediction with an unknown mean (universal kriging; dense covariance matrices, no formula for pieces,
filters or smoothers); the integral over ln sigma and ln tau is by composite Gauss-Legendre panels over wide
fixed ranges; quantiles are roots of the summed tails by Brent's method. numpy and scipy, double precision;
every figure is computed on two sets of panels, the finer one is
written, and pairs that differ by more than 3e-11 of their size are named (two medians near 0 differ, by 1e-11 in
absolute terms).
"""
import sys
import numpy as np
from scipy.special import ndtr, roots_legendre
from scipy.optimize import brentq


def panels(lo, hi, width, k):
    x, w = roots_legendre(k)
    edges = np.linspace(lo, hi, int(np.ceil((hi - lo) / width)) + 1)
    h = np.diff(edges) / 2
    m = (edges[:-1] + edges[1:]) / 2
    return (m[:, None] + h[:, None] * x).ravel(), (h[:, None] * w).ravel()


def kriging(K, y, targets, flat, mean=0.0):
    """ln restricted likelihood; for each target (cov with y (N,m), var (N,), coefficient of the mean):
    posterior mean and variance. K (N,m,m)."""
    N, m, _ = K.shape
    one = np.ones(m)
    sign, logdet = np.linalg.slogdet(K)
    Ki1 = np.linalg.solve(K, np.broadcast_to(one, (N, m))[..., None])[..., 0]
    s = Ki1 @ one
    Kiy = np.linalg.solve(K, np.broadcast_to(y, (N, m))[..., None])[..., 0]
    mu = (Kiy @ one) / s if flat else np.full(N, mean)
    r = y - mu[:, None]
    Kir = np.linalg.solve(K, r[..., None])[..., 0]
    lnL = -0.5 * logdet - 0.5 * np.einsum('ni,ni->n', r, Kir)
    if flat:
        lnL = lnL - 0.5 * np.log(s)
    out = []
    for cov, var, coef in targets:
        lam = np.linalg.solve(K, cov[..., None])[..., 0]
        pm = coef * mu + np.einsum('ni,ni->n', lam, r)
        pv = var - np.einsum('ni,ni->n', lam, cov)
        if flat:
            d = coef - lam @ one
            pv = pv + d * d / s
        out.append((pm, pv))
    # Far out, where nothing has weight, rounding can leave a variance below 0.
    return lnL, [(m, np.maximum(v, 1e-12)) for m, v in out]


class Mix:
    def __init__(self, w, m, v):
        self.w, self.m, self.s = w / w.sum(), m, np.sqrt(v)

    def sf(self, t):
        return float(np.sum(self.w * ndtr((self.m - t) / self.s)))

    def cdf(self, t):
        return float(np.sum(self.w * ndtr((t - self.m) / self.s)))

    def q(self, p):
        lo, hi = -1e4, 1e4
        return brentq(lambda t: self.cdf(t) - p, lo, hi, xtol=1e-13, rtol=1e-15)


def model(case, fine):
    """-> dict of Mix by name, built from nodes."""
    width, k = (0.35, 16) if fine else (0.5, 14)
    c = case
    y = [p[1] for p in c['periods']]
    n = [p[0] for p in c['periods']]
    ss = [p[2] for p in c['periods']]
    this = c.get('this')
    # sigma nodes
    def join(*pieces):
        return np.concatenate([p[0] for p in pieces]), np.concatenate([p[1] for p in pieces])

    if c['sigma'] == 'known':
        ls, wls = np.array([np.log(c['sd'])]), np.array([1.0])
    else:
        l0 = np.log(c['around'])
        ls, wls = join(panels(l0 - 2.5, l0 + 1.5, width, k), panels(l0 + 1.5, l0 + c.get('up', 6), 2 * width, k))
    if 'tau' in c:
        lt, wlt = np.array([np.log(c['tau']) if c['tau'] > 0 else -700.0]), np.array([1.0])
    else:
        # Far left the integrand is e^x times a constant; far right a power.
        l0 = np.log(c['tscale'])
        lt, wlt = join(panels(l0 - 32, l0 - 5, 6 * width, k), panels(l0 - 5, l0 + 4, width, k),
                       panels(l0 + 4, l0 + c.get('tup', 16), 3 * width, k))
    S, T = np.meshgrid(ls, lt, indexing='ij')
    W = (wls[:, None] * wlt[None, :]).ravel()
    S, T = np.exp(S.ravel()), np.exp(T.ravel())
    if c.get('tau') == 0:
        T = np.zeros_like(T)
    lnw = np.zeros_like(S)
    J = len(y)
    yy = list(y)
    nn = list(n)
    times = list(c.get('times', range(J)))
    if this:
        yy.append(this[1]); nn.append(this[0])
    ys = np.array(yy)
    m = len(ys)
    N = len(S)
    D = np.zeros((N, m))
    for j in range(m):
        D[:, j] = S**2 / nn[j] if nn[j] > 0 else nn[j]**2   # n < 0 stands for a mean with uncertainty -n
    if c.get('walk'):
        tt = np.array([float(t) for t in times] + ([float(c['now'])] if this else []))
        R = np.minimum(tt[:, None], tt[None, :])
        base = (T**2)[:, None, None] * R
        at = lambda t: (T**2)[:, None] * np.minimum(tt, t)
        var = lambda t: T**2 * t
    else:
        ids = np.eye(m)
        V0 = c.get('V0', 0.0)
        base = (T**2)[:, None, None] * ids + V0
        at = None
    K = base + np.einsum('ni,ij->nij', D, np.eye(m))
    flat = 'V0' not in c
    z = np.zeros(N)
    targets, names = [], []
    if c.get('walk'):
        now = float(c['now'])
        targets += [(at(now), var(now), 1.0), (at(now + 1), var(now + 1), 1.0)]
        names += ['level', 'next']
        a = float(times[c['against']])
        targets += [(at(now) - at(a), T**2 * (now - a), 0.0)]
        names += ['change']
    else:
        V0 = c.get('V0', 0.0)
        e = np.zeros((N, m))
        if this:
            e[:, -1] = T**2
        long = np.full((N, m), V0)
        targets += [(e + V0, T**2 + V0, 1.0), (long, T**2 + V0, 1.0), (long, z + V0, 1.0)]
        names += ['level', 'next', 'long']
        if 'against' in c:
            ea = np.zeros((N, m)); ea[:, c['against']] = T**2
            targets += [(e - ea, 2 * T**2, 0.0)]
            names += ['change']
    lnL, out = kriging(K, ys, targets, flat, c.get('M', 0.0))
    lnw = lnw + lnL
    # sigma's own factors, per d ln sigma
    if c['sigma'] != 'known':
        df = c.get('nu0', 0.0); q = c.get('nu0', 0.0) * c.get('s0', 0.0)**2
        for j in range(J):
            if n[j] > 0:
                df += n[j] - 1; q += ss[j]
        if this and this[0] > 0:
            df += this[0] - 1; q += this[2]
        lnw = lnw - df * np.log(S) - q / (2 * S**2)
    if 'tau' not in c:
        lnw = lnw + np.log(T)
        if c['between'] == 'half-normal':
            lnw = lnw - 0.5 * (T / c['tscale'])**2
        if c['between'] == 'half-cauchy':
            lnw = lnw - np.log1p((T / c['tscale'])**2)
    w = W * np.exp(lnw - lnw.max())
    res = {name: Mix(w, pm, pv) for name, (pm, pv) in zip(names, out)}
    pm, pv = out[0]
    res['reading'] = Mix(w, pm, pv + S**2)
    res['_nodes'] = (w, S, T)
    return res


CASES = {
    'uniform known': dict(sigma='known', sd=1.5, between='uniform', tscale=2.0, against=3,
                          periods=[(4, 10.2, 0), (7, 12.9, 0), (3, 11.0, 0), (12, 9.4, 0), (5, 12.0, 0)],
                          this=(6, 13.7, 0)),
    'uniform pooled': dict(sigma='pooled', around=2.0, between='uniform', tscale=2.0, against=1,
                           periods=[(4, 50.2, 13.0), (6, 52.9, 21.0), (5, 51.0, 30.0), (8, 49.4, 22.0),
                                    (4, 52.0, 9.0), (1, 50.0, 0.0)], this=(6, 53.7, 17.5)),
    'uniform pooled prior': dict(sigma='pooled', around=2.0, between='uniform', tscale=2.0,
                                 periods=[(4, 50.2, 13.0), (6, 52.9, 21.0), (5, 51.0, 30.0), (8, 49.4, 22.0),
                                          (4, 52.0, 9.0), (1, 50.0, 0.0)]),
    'half-cauchy pooled': dict(sigma='pooled', around=2.0, between='half-cauchy', tscale=3.0, up=10,
                               periods=[(3, 50.2, 13.0), (3, 52.9, 2.0)], this=(2, 56.0, 4.0), against=0),
    'half-normal worth': dict(sigma='pooled', around=2.0, between='half-normal', tscale=1.0, nu0=6.0, s0=2.2,
                              periods=[(12, 50.2, 40.0), (12, 51.2, 50.0), (12, 51.2, 44.0)],
                              this=(5, 50.4, 21.0), against=2),
    'wild period': dict(sigma='known', sd=0.4, between='uniform', tscale=5.0, against=4,
                        periods=[(10, 10.2, 0), (10, 10.3, 0), (10, 10.1, 0), (10, 10.25, 0), (10, 40.0, 0)],
                        this=(10, 10.0, 0)),
    'equal means': dict(sigma='known', sd=3.0, between='uniform', tscale=1.0, against=0,
                        periods=[(9, 7.0, 0), (9, 7.0, 0), (9, 7.0, 0), (9, 7.0, 0)], this=(9, 7.1, 0)),
    'means with uncertainties': dict(sigma='known', sd=1.0, between='half-cauchy', tscale=0.5, against=2,
                                     periods=[(-0.3, 10.2, 0), (-0.05, 10.6, 0), (-1.1, 11.9, 0)],
                                     this=(-0.4, 10.9, 0)),
    'long run worth': dict(sigma='pooled', around=2.0, nu0=4.0, s0=1.8, tau=1.3, V0=6.25, M=20.0,
                           periods=[], this=(4, 24.0, 12.0)),
    'walk known': dict(sigma='known', sd=1.5, between='uniform', tscale=1.0, walk=True, now=7, against=2,
                       times=[0, 1, 3, 4, 6],
                       periods=[(4, 10.2, 0), (7, 11.1, 0), (3, 11.0, 0), (12, 12.4, 0), (5, 13.0, 0)],
                       this=(6, 13.7, 0)),
    'walk pooled': dict(sigma='pooled', around=2.0, between='half-normal', tscale=1.5, walk=True, now=4,
                        against=0, times=[0, 1, 2, 3],
                        periods=[(4, 50.2, 13.0), (6, 52.9, 21.0), (5, 51.0, 30.0), (8, 49.4, 22.0)],
                        this=(6, 47.7, 17.5)),
}


def rows():
    for name, case in CASES.items():
        a, b = model(case, False), model(case, True)
        for q in ['level', 'next', 'long', 'reading', 'change']:
            if q not in a:
                continue
            for p in [0.025, 0.5, 0.975]:
                yield name, q, 'quantile', p, a[q].q(p), b[q].q(p)
            mid = b[q].q(0.5)
            spread = b[q].q(0.841344746) - b[q].q(0.158655254)
            for k in [-3.0, 2.0, 4.5]:
                t = round(mid + k * spread, 2)
                f = 'cdf' if k < 0 else 'sf'
                va, vb = getattr(a[q], f)(t), getattr(b[q], f)(t)
                if vb > 1e-13:
                    yield name, q, f, t, va, vb


worst = 0
print('case,quantity,function,argument,value')
for name, q, f, arg, va, vb in rows():
    rel = abs(va - vb) / max(abs(vb), 1e-300)
    worst = max(worst, rel)
    if rel > 3e-11:
        print('poor', name, q, f, arg, va, vb, rel, file=sys.stderr)
    print(f'{name},{q},{f},{arg!r},{vb!r}')
print('worst difference of the two sets of panels', worst, file=sys.stderr)
