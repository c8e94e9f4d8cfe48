"""Ground of answers.py: before next period's readings are taken. The next true level and the mean of its readings are jointly
normal at every node of (sigma, tau); expected half widths and chances of verdicts by the trapezoid rule over what may come,
in doubles: good to about 1e-12."""
import numpy as np
import mpmath as mp
from scipy.optimize import brentq
from scipy.special import ndtr
from brute_normal import big, zq
from brute_rules import FIGURE, conditions, verdict_of


def joint(post):
    """Weights; mean and variance of the next true level; mean and variance (without sigma^2/n) of its readings' mean; their
    covariance; sigma."""
    model, laws = post.model, post.laws
    w = post.w.astype(float)
    full = lambda a: (a + 0 * post.w).astype(float)
    sigma, tau = full(laws['sigma']), full(laws['tau'])
    if model.kind == 'stated':
        # this period's mean x; theta', x' given it
        v0, u2, m0 = float(model.v0), float(model.bias2), float(model.m0)
        x, total = full(laws['x']), v0 + tau**2 + u2 + full(laws['s2'])
        r = x - m0
        out = [m0 + v0 / total * r, v0 + tau**2 - v0**2 / total, m0 + (v0 + u2) / total * r, v0 + tau**2 + u2 - (v0 + u2) ** 2 / total,
               v0 + tau**2 - v0 * (v0 + u2) / total]
    else:
        m, v = (full(a) for a in laws['next'])
        out = [m, v + float(model.bias2), m, v, v]
    ok = w > 1e-15
    return [a[ok] for a in [w / w.sum()] + out + [sigma]]


def squares(sigma, w, n):
    """(share, SS) of what may come; one without SS where sigma is known."""
    if np.ptp(sigma) == 0 or n < 2:
        return [(1.0, None)]
    df = n - 1
    grid = np.arange(np.log(sigma.min() ** 2 * df) - 60 / df - 3, np.log(sigma.max() ** 2 * df) + 5, 0.12 if df < 12 else 0.05)
    d = [np.sum(w * np.exp(df / 2 * (t - 2 * np.log(sigma)) - np.exp(t) / (2 * sigma**2))) for t in grid]
    d = np.array(d) / np.sum(d)
    return [(s, np.exp(t)) for s, t in zip(d, grid) if s > 1e-15]


def given(w, sigma, n, ss):
    if ss is None:
        return w
    ln = -(n - 1) * np.log(sigma) - ss / (2 * sigma**2)
    g = w * np.exp(ln - ln.max())
    return g / g.sum()


def half_width(post, n, p):
    w, mt, vt, mx, vx, c, sigma = joint(post)
    z = float(zq((1 + mp.mpf(p)) / 2))
    total = vx + sigma**2 / n
    left = vt - c * c / total
    if len(w) == 1:
        return z * np.sqrt(left[0])
    out = 0.0
    for share, ss in squares(sigma, w, n):
        g = given(w, sigma, n, ss)
        centre = np.sum(g * mx)
        unit = np.sqrt(1 / np.sum(g / total))
        t = np.arange(-12, 12.001, 0.06)
        x = centre + unit * np.sinh(t)
        dens = g * np.exp(-((x[:, None] - mx) ** 2) / (2 * total)) / np.sqrt(total)
        f = dens.sum(axis=1)
        keep = f * np.cosh(t) > 1e-18 * (f * np.cosh(t)).max()
        x, dens, f, jac = x[keep], dens[keep], f[keep], np.cosh(t)[keep]
        pw = dens / f[:, None]
        m = mt + c / total * (x[:, None] - mx)
        s = np.sqrt(left)
        def quantile(tail, sign):
            q = np.sum(pw * m, axis=1) + sign * z * np.sqrt(np.sum(pw * (left + (m - np.sum(pw * m, axis=1)[:, None]) ** 2), axis=1))
            lo, hi = (m - 40 * s).min(axis=1), (m + 40 * s).max(axis=1)
            for _ in range(60):
                y = (q[:, None] - m) / s
                e = np.sum(pw * ndtr(-sign * y), axis=1) - tail      # falls away from the middle
                d = np.sum(pw * np.exp(-y * y / 2) / s, axis=1) / np.sqrt(2 * np.pi)
                if sign > 0: lo, hi = np.where(e > 0, q, lo), np.where(e <= 0, q, hi)
                else: lo, hi = np.where(e <= 0, q, lo), np.where(e > 0, q, hi)
                new = q + sign * e / d
                new = np.where((new > lo) & (new < hi), new, (lo + hi) / 2)
                if np.all(np.abs(new - q) <= 1e-14 * (1 + np.abs(q))): return new
                q = new
            return q
        tail = float((1 - mp.mpf(p)) / 2)
        wide = (quantile(tail, 1) - quantile(tail, -1)) / 2
        out += share * np.sum(f * jac * wide) / np.sum(f * jac)
    return out


def verdicts(post, n, rule, q):
    """The chance of each verdict of a rule on the chance of the level lying above a limit."""
    w, mt, vt, mx, vx, c, sigma = joint(post)
    L = float(post.limit(q['above']))
    total = vx + sigma**2 / n
    s = np.sqrt(vt - c * c / total)
    out = np.zeros(len(rule['verdicts']))
    for share, ss in squares(sigma, w, n):
        g = given(w, sigma, n, ss)
        def chance(x):
            ln = np.log(g + 1e-300) - (x - mx) ** 2 / (2 * total) - np.log(total) / 2
            d = np.exp(ln - ln.max())
            return np.sum(d * ndtr((mt + c / total * (x - mx) - L) / s)) / d.sum()
        below = lambda x: np.sum(g * ndtr((x - mx) / np.sqrt(total)))
        above = lambda x: np.sum(g * ndtr((mx - x) / np.sqrt(total)))
        size = np.sqrt(np.sum(g * sigma**2) / n)
        place = np.unique(np.concatenate([cc + size * np.arange(-40, 41, 0.5) for cc in (np.sum(g * mx), L)]))
        values = np.array([chance(x) for x in place])
        ends = sorted(brentq(lambda x: chance(x) - float(t), a, b, xtol=1e-15, rtol=1e-15) for _, _, _, t in conditions(rule)
                      for a, b, fa, fb in zip(place, place[1:], values, values[1:]) if (fa < t) != (fb < t))
        for a, b in zip([None] + ends, ends + [None]):
            mid = (a + b) / 2 if a is not None and b is not None else a + size if a is not None else b - size if b is not None else place[0]
            part = 1.0 if a is None and b is None else below(b) if a is None else above(a) if b is None else below(b) - below(a)
            out[verdict_of(rule, {'chance': mp.mpf(chance(mid))})] += share * part
    return out


def needed(post, q, spec):
    """Figures of a question `readings needed` on the linear scale."""
    p = q.get('probability', 0.95)
    out = {}
    if 'half_width' in q:
        width = lambda n: half_width(post, n, p)
        enough = lambda n: width(n) <= q['half_width']
    else:
        other = next(o for o in spec['question'] if o['id'] == q['rule_of'])
        rule = other['rule']
        place = [v['say'] for v in rule['verdicts']].index(q['verdict'])
        enough = lambda n: verdicts(post, n, rule, other)[place] >= q['assurance']
    n = next((n for n in range(1, 61) if enough(n)), None)
    if n is not None:
        out['readings_needed'] = ('whole', mp.mpf(n))
    for i, k in enumerate(q.get('try', [])):
        out['table.%d.half_width' % i] = ('plan', mp.mpf(float(half_width(post, k, p))))
        if 'rule_of' in q:
            for v, chance in enumerate(verdicts(post, k, rule, other)):
                out['table.%d.chances.%d' % (i, v)] = ('plan', mp.mpf(float(chance)))
    return out
