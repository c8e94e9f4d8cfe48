"""Ground of answers.py: the share of readings beyond, its bounds and its shortest interval. A share p is Phi(-c)."""
import numpy as np
import mpmath as mp
from scipy.optimize import brentq
from brute_normal import LD, big, density, ld, lower, solve_ld, upper, zq
from brute_rules import root


class Share:
    """Above or below one limit: P(share <= Phi(-c)), P(share > Phi(-c)) and the density by c."""
    def __init__(self, post, q, limit):
        m, v = post.laws['this']
        s, r, w = post.laws['sigma'] + 0 * m, np.sqrt(v), post.w
        z = (lambda c: (limit - c * s - m) / r) if 'above' in q else (lambda c: (m - limit - c * s) / r)
        self.at_most = lambda c: np.sum(w * lower(z(c)))
        self.more = lambda c: np.sum(w * upper(z(c)))
        self.by_c = lambda c: np.sum(w * density(z(c)) * s / r)
        self.out = lambda c: big(upper(c)[()])

    def place(self, p):
        """c with P(share <= Phi(-c)) = p."""
        pl, pu = ld(p), ld(1 - p)
        f = (lambda c: self.at_most(c) - pl) if p <= 0.5 else (lambda c: pu - self.more(c))
        return solve_ld(f, lambda c: -self.by_c(c), LD(brentq(lambda c: float(f(LD(c))), -60, 60, xtol=1e-10)))

    def bound(self, p):
        return self.out(self.place(p))

    def chance(self, share):
        return self.more(ld(-zq(share)))

    def shortest(self, p):
        """Of all intervals of that probability the shortest: the densities at its ends are equal, or it begins at 0 or ends at 1."""
        left = 1 - p
        tail = lambda y: left / (1 + mp.exp(-y))
        def ends(y):
            return self.place(tail(y)), self.place(p + tail(y))
        def apart(y):
            a, b = ends(y)
            at = lambda c: np.log(self.by_c(c)) - np.log(density(c))
            return big(at(a) - at(b))
        found = [(self.bound(p), mp.mpf(0), self.bound(p)), (1 - self.bound(left), self.bound(left), mp.mpf(1))]
        ys = [mp.mpf(k) / 2 for k in range(-60, 61)]
        fs = [apart(y) for y in ys]
        for y, z, f, g in zip(ys, ys[1:], fs, fs[1:]):
            if f < 0 < g or g < 0 < f:
                a, b = (self.out(c) for c in ends(root(apart, y, z, 1)))
                found.append((b - a, a, b))
        return min(found)[1:]


class TwoLimits:
    """Between or outside two limits, sigma known: share outside <= p where the level lies within d(p) of the middle."""
    def __init__(self, post, q, limits):
        assert post.model.sd is not None
        self.post, self.outside = post, 'outside' in q
        self.middle, self.half = (limits[0] + limits[1]) / 2, big(limits[1] - limits[0]) / 2 / big(post.model.sd)
        m, v = post.laws['this']
        self.m, self.s = m, np.sqrt(v)

    def near(self, p):
        """(P, 1 - P) that the share outside is at most p."""
        Q = lambda x: mp.erfc(x / mp.sqrt(2)) / 2
        f = lambda t: Q(self.half - t) + Q(self.half + t) - p
        if f(0) >= 0: return mp.mpf(0), mp.mpf(1)
        lo, hi = mp.mpf(0), self.half + 40
        for _ in range(20):          # bisection, then the secant's rule
            mid = (lo + hi) / 2
            if f(mid) < 0: lo = mid
            else: hi = mid
        t, u, ft, fu = lo, hi, f(lo), f(hi)
        while ft != fu and abs(u - t) > mp.mpf(10) ** -25:
            t, u, ft = u, u - fu * (u - t) / (fu - ft), fu
            fu = f(u)
        d = ld(u * big(self.post.model.sd))
        a, b = (self.middle - d - self.m) / self.s, (self.middle + d - self.m) / self.s
        far = np.sum(self.post.w * (lower(a) + upper(b)))
        inside = np.sum(self.post.w * np.where(a > 0, upper(a) - upper(b), lower(b) - lower(a)))
        return big(inside), big(far)

    def chance(self, share):
        share = mp.mpf(share)
        return ld(self.near(share)[1] if self.outside else self.near(1 - share)[0])

    def bound(self, p):
        f = (lambda s: self.near(s)[0] - p) if self.outside else (lambda s: self.near(1 - s)[1] - p)
        g = lambda y: f(1 / (1 + mp.exp(-y)))
        y0 = brentq(lambda y: float(g(mp.mpf(y))), -40, 40, xtol=1e-7)
        y = root(g, y0 - 1e-6, y0 + 1e-6, mp.mpf(1) / 1000)
        return 1 / (1 + mp.exp(-y))


def share_beyond(post, q, lim, prob, estimate):
    out = {'estimate': prob(estimate)}
    one = 'above' in q or 'below' in q
    law = Share(post, q, lim(q['above'] if 'above' in q else q['below'])) if one else \
        TwoLimits(post, q, [lim(t) for t in q.get('between') or q['outside']])
    p = mp.mpf(q.get('probability', 0.95))
    kind = q.get('interval', 'upper bound')
    if kind in ('upper bound', 'central'): out['upper'] = prob(law.bound(p if kind == 'upper bound' else (1 + p) / 2))
    if kind in ('lower bound', 'central'): out['lower'] = prob(law.bound(1 - p if kind == 'lower bound' else (1 - p) / 2))
    if kind == 'shortest':
        a, b = law.shortest(p)
        out['lower'], out['upper'] = ('end', a), ('end', b)
    if 'more_than' in q:
        out['chance'] = prob(law.chance(q['more_than']))
    return out
