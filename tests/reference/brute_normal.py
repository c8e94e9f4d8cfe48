"""Ground of answers.py: 64-bit mantissas, the normal distribution function, mixtures of normals, Gauss-Legendre nodes."""
import numpy as np
import mpmath as mp
from scipy.special import ndtr
from scipy.optimize import brentq

mp.mp.dps = 50
LD = np.longdouble
assert np.finfo(LD).nmant >= 63, "needs 80-bit long doubles"


def ld(x):
    return LD(mp.nstr(mp.mpf(x), 24))


def big(x):
    return mp.mpf(np.format_float_scientific(x, unique=True, trim='0')) if isinstance(x, LD) else mp.mpf(x)


PI = ld(mp.pi)
SQ2, RPI2 = ld(mp.sqrt(2)), ld(1 / mp.sqrt(2 * mp.pi))

# ---- normal distribution function -------------------------------------------------------------------------------
TERMS = 16
def _table():
    rows = []
    for k in range(16 * 45 + 1):
        x = mp.mpf(k) / 16
        c = [mp.exp(x * x) * mp.erfc(x)]
        c.append(2 * x * c[0] - 2 / mp.sqrt(mp.pi))
        for n in range(1, TERMS - 1):
            c.append((2 * x * c[n] + 2 * c[n - 1]) / (n + 1))
        rows.append([ld(v) for v in c])
    return np.array(rows, dtype=LD).T.copy()
mp.mp.dps = 90          # the recurrence loses digits at large x
ERFCX = _table()
mp.mp.dps = 50


def upper(z):
    """P(Z > z)."""
    z = np.asarray(z, dtype=LD)
    x = np.minimum(np.abs(z) / SQ2, LD(44.9))
    k = np.rint(x * 16).astype(np.int64)
    d = x - k.astype(LD) / 16
    r = ERFCX[TERMS - 1][k]
    for n in range(TERMS - 2, -1, -1):
        r = r * d + ERFCX[n][k]
    r = r * np.exp(-x * x) / 2
    return np.where(z < 0, 1 - r, r)


def lower(z):
    return upper(-np.asarray(z, dtype=LD))


def density(z):
    z = np.asarray(z, dtype=LD)
    return np.exp(-z * z / 2) * RPI2


def zq(p):
    """Standard normal quantile of the double p, exactly rounded."""
    p = mp.mpf(p)
    if p > 0.5:
        return -zq(1 - p)
    if p == 0.5:
        return mp.mpf(0)
    x = mp.mpf(float(-np.sqrt(-2 * np.log(float(p)))) if p < 0.02 else -0.7)
    return mp.findroot(lambda t: mp.log(mp.erfc(-t / mp.sqrt(2)) / 2) - mp.log(p), x)


# ---- a mixture of normals ---------------------------------------------------------------------------------------
class Mix:
    def __init__(self, w, m, v):
        self.w = np.atleast_1d(w)
        self.m = np.broadcast_to(np.asarray(m, dtype=LD), self.w.shape)
        self.s = np.sqrt(np.broadcast_to(np.asarray(v, dtype=LD), self.w.shape))
        top = self.w > 1e-9
        self.small = [a[top].astype(float) for a in (self.w, self.m, self.s)]

    def sf(self, t): return np.sum(self.w * upper((t - self.m) / self.s))
    def cdf(self, t): return np.sum(self.w * lower((t - self.m) / self.s))
    def pdf(self, t): return np.sum(self.w * density((t - self.m) / self.s) / self.s)
    def dpdf(self, t):
        z = (t - self.m) / self.s
        return np.sum(-self.w * z * density(z) / self.s**2)
    def mean(self): return np.sum(self.w * self.m)

    def start(self, p):
        w, m, s = self.small
        w = w / w.sum()
        lo, hi = (m - 12 * s).min(), (m + 12 * s).max()
        if p <= 0.5:
            f = lambda t: np.sum(w * ndtr((t - m) / s)) - p
        else:
            f = lambda t: (1 - p) - np.sum(w * ndtr((m - t) / s))
        return brentq(f, lo, hi, xtol=1e-13 * min(abs(hi - lo), 1e6), rtol=1e-14)

    def quantile(self, p):
        """p an mpf."""
        p = mp.mpf(p)
        pl, pu = ld(p), ld(1 - p)
        t = LD(self.start(float(p)))
        for _ in range(60):
            f = self.cdf(t) - pl if p <= 0.5 else pu - self.sf(t)
            step = f / self.pdf(t)
            t = t - step
            if abs(step) <= 4e-19 * max(abs(t), 1 / self.pdf(t)):
                return t
        return t

    def shortest(self, p, log):
        k = LD(1 if log else 0)
        p = mp.mpf(p)
        rest = float(1 - p)
        def g(a):
            l, u = self.start(a), self.start(a + float(p))
            return float(np.log(self.pdf(LD(l))) - np.log(self.pdf(LD(u))) - k * (LD(l) - LD(u)))
        a = brentq(g, rest * 1e-4, rest * (1 - 1e-4), xtol=1e-8)
        l, u = LD(self.start(a)), LD(self.start(a + float(p)))
        for _ in range(60):
            fl, fu = self.pdf(l), self.pdf(u)
            e1 = 1 - ld(p) - self.cdf(l) - self.sf(u)           # = F(u) - F(l) - p
            e2 = np.log(fl) - np.log(fu) - k * (l - u)
            a11, a12 = -fl, fu
            a21, a22 = self.dpdf(l) / fl - k, -self.dpdf(u) / fu + k
            det = a11 * a22 - a12 * a21
            dl, du = (e1 * a22 - a12 * e2) / det, (a11 * e2 - a21 * e1) / det
            l, u = l - dl, u - du
            if abs(dl) + abs(du) <= 1e-18 * (u - l):
                break
        return l, u


def solve_ld(f, df, x):
    for _ in range(80):
        step = f(x) / df(x)
        x = x - step
        if abs(step) <= 1e-18 * max(LD(1e-3), abs(x)):
            break
    return x


_LEGENDRE = {}


def mp_legendre(n):
    """Gauss-Legendre nodes and weights: double-precision roots, polished by Newton's method."""
    if n not in _LEGENDRE:
        xs, ws = [], []
        for x in np.polynomial.legendre.leggauss(n)[0]:
            x = mp.mpf(float(x))
            for _ in range(4):
                slope = n * (x * mp.legendre(n, x) - mp.legendre(n - 1, x)) / (x * x - 1)
                x -= mp.legendre(n, x) / slope
            xs.append(ld(x)), ws.append(ld(2 / ((1 - x * x) * slope * slope)))
        _LEGENDRE[n] = np.array(xs, dtype=LD), np.array(ws, dtype=LD)
        assert abs(_LEGENDRE[n][1].sum() - 2) < 1e-17
    return _LEGENDRE[n]
