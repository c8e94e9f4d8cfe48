"""Ground of answers.py: what belongs to a rule beside its verdict. Every figure by solving the whole model again: at other
means of the readings (acceptance limits), under a moved or stretched prior (tipping prior); risks by Gauss-Legendre panels.
Sources: JCGM 106:2012, clauses 8 and 9; ILAC-G8:09/2019."""
import copy
import numpy as np
import mpmath as mp
from brute_normal import LD, big, density, ld, lower, mp_legendre, upper, zq

FIGURE = {'chance_at_least': 'chance', 'chance_at_most': 'chance', 'estimate_above': 'estimate', 'estimate_below': 'estimate',
          'lower_above': 'lower', 'upper_below': 'upper'}
KEYS = list(FIGURE)


def conditions(rule):
    """(verdict, condition, key, threshold)."""
    return [(v, c, key, mp.mpf(verdict[key])) for v, verdict in enumerate(rule['verdicts'])
            for c, key in enumerate(k for k in verdict if k in FIGURE)]


def holds(key, figure, threshold):
    return {'chance_at_least': figure >= threshold, 'chance_at_most': figure <= threshold, 'estimate_above': figure > threshold,
            'estimate_below': figure < threshold, 'lower_above': figure > threshold, 'upper_below': figure < threshold}[key]


def verdict_of(rule, figures):
    for v, verdict in enumerate(rule['verdicts']):
        if all(holds(k, figures[FIGURE[k]], mp.mpf(verdict[k])) for k in verdict if k in FIGURE):
            return v


def accepting(rule, q):
    """The condition under which the rule accepts: that of the first verdict with a chance that is no `fail`, where one is; else
    the first that asks for a small chance (of lying between: a large one)."""
    chances = [(v, c, k) for v, c, k, _ in conditions(rule) if FIGURE[k] == 'chance']
    if any(v.get('fail') for v in rule['verdicts']):
        return next(((v, c, k) for v, c, k in chances if not rule['verdicts'][v].get('fail')), None)
    wanted = 'chance_at_least' if 'between' in q else 'chance_at_most'
    return next((x for x in chances if x[2] == wanted), chances[0] if chances else None)


def root(f, a, b, scale):
    """Between a and b, where f changes its sign: regula falsi (Illinois), then until steps are below 1e-17 of `scale`."""
    a, b = mp.mpf(a), mp.mpf(b)
    fa, fb = f(a), f(b)
    side = 0
    for _ in range(30):
        if fa == 0: return a
        if fb == 0: return b
        c = (a * fb - b * fa) / (fb - fa)
        fc = f(c)
        step = min(abs(c - a), abs(c - b))
        if mp.sign(fc) == mp.sign(fb):
            b, fb = c, fc
            if side == 1: fa /= 2
            side = 1
        else:
            a, fa = c, fc
            if side == -1: fb /= 2
            side = -1
        if step < mp.mpf(10) ** -17 * scale:
            return c
    return c


def moved_data(data, series, now, by):
    """All readings of the period moved."""
    out = {s: dict(p) for s, p in data.items()}
    o = copy.copy(out[series][now])
    o.mean = o.mean + by
    if o.xs is not None:
        o.xs = [x + by for x in o.xs]
    out[series][now] = o
    return out


def shift_of(q, sigma):
    """Shift(sigma) and own variance(sigma) of what the chance is of: theta + shift beyond the limits; None where it is of another kind."""
    if q['ask'] == 'level chance':
        return (sigma**2 / 2 if q.get('mean') == 'arithmetic' else 0 * sigma), 0
    if q['ask'] == 'percentile':
        return ld(zq(mp.mpf(q['percentile']) / 100)) * sigma, 0
    if q['ask'] == 'share beyond' and ('above' in q or 'below' in q):
        z = -ld(zq(q['more_than']))
        return (z if 'above' in q else -z) * sigma, 0
    if q['ask'] == 'reading chance' and 'at_least' not in q:
        return 0 * sigma, sigma**2 / (q.get('readings', 1) if q.get('of') == 'mean' else 1)


def limits_of(q):
    if 'above' in q: return (q['above'],)
    if 'below' in q: return (q['below'],)
    return tuple(q.get('between') or q.get('outside') or ())


def inside(level, error, a, b):
    lo = (a - level) / error if a is not None else None
    hi = (b - level) / error if b is not None else None
    if lo is None and hi is None: return 1 + 0 * level
    if lo is None: return lower(hi)
    if hi is None: return upper(lo)
    return np.where(lo > 0, upper(lo) - upper(hi), lower(hi) - lower(lo))


def over(regions, m, v, error, ranges):
    """At every node (m, v, error), the integral over the regions of N(theta; m, v) P(a reading of theta lies in the ranges):
    Gauss-Legendre panels, no wider than half the narrower law where the chance changes, elsewhere half of N(m, v)."""
    nodes, weights = mp_legendre(24)
    s = np.sqrt(v)
    marks = [e for r in ranges for e in r if e is not None]
    total = LD(0) * m
    for a, b in regions:
        lo = np.maximum(a, m - 14 * s) if a is not None else m - 14 * s
        hi = np.minimum(b, m + 14 * s) if b is not None else m + 14 * s
        # a far tail falls within a few sds
        hi, lo = np.minimum(hi, np.maximum(lo, m) + 14 * s), np.maximum(lo, np.minimum(hi, m) - 14 * s)
        cuts = np.sort([np.clip(c + 0 * m, lo, np.maximum(lo, hi)) for e in marks for c in (e - 13 * error, e + 13 * error)]
                       + [lo, np.maximum(lo, hi)], axis=0)
        for p, q in zip(cuts, cuts[1:]):
            steep = np.any([np.abs((p + q) / 2 - e) < 13 * error for e in marks], axis=0)
            width = np.where(steep, np.minimum(s, error), s) / 2
            count = int(np.ceil(float(((q - p) / width).max())))
            half = (q - p) / (2 * max(count, 1))
            ok = half > 0
            if not ok.any(): continue
            pp, hh, mm, ss, ee = p[ok], half[ok], m[ok], s[ok], error[ok]
            part = LD(0) * mm
            for k in range(count):
                mid = pp + (2 * k + 1) * hh
                for x, w in zip(nodes, weights):
                    th = mid + hh * x
                    part = part + w * hh * density((th - mm) / ss) / ss * sum(inside(th, ee, *r) for r in ranges)
            total[ok] += part
    return total


def rule_figures(post, q, every, answer, make):
    """`make(data, move, present)` solves the series again."""
    rule, data, now, series = q['rule'], every['data'], every['now'], post.series
    out = {}
    x0, log = data[series][now].mean, post.log
    printed = lambda x: ('end', mp.exp(x) if log else x)
    s2 = post.laws['s2']
    mean_sd = big(np.sqrt(np.sum(post.w * s2)))
    figure = lambda p: {k: v for k, (_, v) in answer(p, q, every).items()}
    kept = {}
    def at(x):
        if x not in kept:
            kept[x] = figure(make(moved_data(data, series, now, x - x0)))
        return kept[x]
    # ---- crossings
    log_of = lambda t: mp.log(mp.mpf(t)) if log else mp.mpf(t)
    scan = every['scans'].get((series, q['id']))
    conds = conditions(rule)
    if scan is None:
        centres = [x0] + [log_of(L) for L in limits_of(q)] + [log_of(t) for _, _, k, t in conds if FIGURE[k] != 'chance']
        offsets = [mp.mpf(k) * 3 / 4 for k in range(9)] + [8, 10, 13, 17, 22, 30, 40, 60, 80, 100, 128]
        places = sorted({c + sign * d * mean_sd for c in centres for d in offsets for sign in (-1, 1)})
        places = [p for i, p in enumerate(places) if i == 0 or p - places[i - 1] > 0.3 * mean_sd]
        found = [at(p) for p in places]
        scan = []
        for v, c, k, t in conds:
            for p, r, f, g in zip(places, places[1:], found, found[1:]):
                if (f[FIGURE[k]] < t) != (g[FIGURE[k]] < t):
                    scan.append((v, c, k, t, p, r))
        every['scans'][(series, q['id'])] = scan
    crossings = sorted((root(lambda x: at(x)[FIGURE[k]] - t, p, r, mean_sd), v, c) for v, c, k, t, p, r in scan)
    for row, (v, c, _, _) in enumerate(conds):
        mine = [x for x, vv, cc in crossings if (vv, cc) == (v, c)]
        out['conditions.%d.limits.len' % row] = ('whole', mp.mpf(len(mine)))
        for i, x in enumerate(mine):
            out['conditions.%d.limits.%d' % (row, i)] = printed(x)
    ends = [x for i, (x, _, _) in enumerate(crossings) if i == 0 or x - crossings[i - 1][0] > mean_sd * mp.mpf(10) ** -10]
    ranges = []
    for a, b in zip([None] + ends, ends + [None]):
        mid = (a + b) / 2 if a is not None and b is not None else a + mean_sd if a is not None else b - mean_sd if b is not None else x0
        v = verdict_of(rule, at(mid))
        if ranges and ranges[-1][2] == v: ranges[-1] = (ranges[-1][0], b, v)
        else: ranges.append((a, b, v))
    # ---- acceptance
    accept = accepting(rule, q)
    kind = shift_of(q, post.laws['sigma'])
    shifted = lambda x: None if x is None else ld(x - post.shift)
    if accept:
        v, c, key = accept
        mine = [x for x, vv, cc in crossings if (vv, cc) == (v, c)]
        out['acceptance_limits.len'] = ('whole', mp.mpf(len(mine)))
        if len(mine) == 1:
            out['acceptance_limit'] = printed(mine[0])
            if 'above' in q or 'below' in q:
                L = log_of(limits_of(q)[0])
                band = L - mine[0] if 'above' in q else mine[0] - L
                out['guard_band'] = printed(band)
                if len(post.w) == 1 and kind and kind[0] == 0 and not post.model.bias2:
                    var = post.laws['this'][1] + kind[1]
                    out['guard_band_share_of_u'] = ('end', band / (2 * big(np.sqrt(var[0]))))
        small_is_good = key == 'chance_at_most'
        side = next(k for k in ('above', 'below', 'between', 'outside') if k in q)
        other = {'above': 'below', 'below': 'above', 'between': 'outside', 'outside': 'between'}
        if kind and 'of_period' not in q:
            mirrored = {**q, other[side]: q[side]}
            del mirrored[side]
            chance = figure(post)['chance']
            if small_is_good:
                out['specific_risk'] = ('chance', chance)
            elif q['ask'] == 'level chance':
                out['specific_risk'] = ('chance', answer(post, mirrored, every)['chance'][1])
        # ---- global risks
        flat = post.model.kind == 'flat'
        sigma_first = post.model.sd is not None or post.model.df > post.model.df_now
        if kind and np.ndim(kind[1]) == 0 and not flat and sigma_first and not post.model.bias2:
            prior = make(data, present=False)
            sg = prior.laws['sigma'] + 0 * prior.w
            m, var = (a + 0 * prior.w for a in prior.laws['this'])
            now_data = data[series][now]
            error = np.sqrt(sg**2 / now_data.n if now_data.u is None else ld(now_data.u**2) + 0 * sg)
            move = shift_of(q, sg)[0]
            cut = [post.limit(L) - move for L in limits_of(q)]
            regions = {'above': [(cut[0], None)], 'below': [(None, cut[0])], 'between': [cut], 'outside': [(None, cut[0]), (cut[-1], None)]}
            bad, good = (side, other[side]) if small_is_good else (other[side], side)
            accepted = [(shifted(a), shifted(b)) for a, b, vv in ranges if vv == v]
            refused = [(shifted(a), shifted(b)) for a, b, vv in ranges if vv != v]
            # neighbouring ranges of other verdicts are one
            joined = []
            for a, b in refused:
                if joined and a is not None and joined[-1][1] == a: joined[-1] = (joined[-1][0], b)
                else: joined.append((a, b))
            ok = prior.w > 1e-18
            risk = lambda rs, ranges: ('chance', big(np.sum(prior.w[ok] * over(
                [tuple(None if e is None else (e + 0 * prior.w)[ok] for e in r) for r in rs], m[ok], var[ok], error[ok], ranges))))
            if accepted:
                out['global_risk_accepted'] = risk(regions[bad], accepted)
            out['global_risk_rejected'] = risk(regions[good], joined)
    # ---- operating characteristic: 41 levels from 4 errors of the mean below the lowest of the ranges' ends and the mean to 4 above
    places = [a for a, _, _ in ranges if a is not None] + [x0]
    first, last = min(places) - 4 * mean_sd, max(places) + 4 * mean_sd
    error = np.sqrt(s2 + post.model.bias2 + 0 * post.w)
    for i in (0, 7, 13, 18, 20, 23, 29, 36, 40):
        level = first + (last - first) * i / 40
        out['operating_characteristic.%d.level' % i] = printed(level)
        for v in range(len(rule['verdicts'])):
            chance = sum(np.sum(post.w * inside(shifted(level), error, shifted(a), shifted(b))) for a, b, vv in ranges if vv == v)
            if chance > 1e-13:      # beyond, the even grid of sigma is too coarse
                out['operating_characteristic.%d.chances.%d' % (i, v)] = ('chance', big(chance))
    # ---- tipping prior
    if all(FIGURE[k] == 'chance' for _, _, k, _ in conds) and kind and post.model.kind != 'flat' and not post.model.bias2 and 'of_period' not in q:
        out.update(tipping(post, q, rule, figure, make, data, now, printed))
    return out


def tipping(post, q, rule, figure, make, data, now, printed):
    if post.spec['prior']['from'] in ('stated', 'quantiles') and post.model.tau is None and hasattr(post.model, 'v0'):
        m0, prior_sd = post.model.m0, np.sqrt(post.model.v0)
    else:
        law = make(data, present=False).mix('this')
        m0 = law.quantile(mp.mpf(1) / 2)
        prior_sd = (law.quantile(mp.mpf('0.8413')) - law.quantile(mp.mpf('0.1587'))) / 2
    sd = big(prior_sd)
    here = verdict_of(rule, figure(post))
    out = {}
    def search(steps, move):
        kept = {}
        def at(t):
            if t not in kept: kept[t] = figure(make(data, move=move(t)))
            return kept[t]
        last = mp.mpf(0)
        for step in steps:
            step = mp.mpf(step)
            there = verdict_of(rule, at(step))
            if there != here:
                # the verdict changes where some condition's figure passes its threshold
                best = None
                for _, _, k, t in conditions(rule):
                    f = lambda x: (figure(post) if x == 0 else at(x))[FIGURE[k]] - t
                    if (f(last) < 0) != (f(step) < 0):
                        r = root(f, last, step, 1)
                        if verdict_of(rule, at(r + (step - last) * mp.mpf(10) ** -9)) != here:
                            best = r if best is None else min(best, r)
                return best
            last = step
    move = lambda sign: lambda t: (m0, LD(1), ld(sign * t * sd))
    steps = [mp.mpf(k) / 4 for k in range(1, 9)] + [2.5, 3, 3.5, 4, 5, 6, 7, 8, 10, 12, 16, 20]
    up, down = search(steps, move(1)), search(steps, move(-1))
    if up is not None or down is not None:
        h = up if down is None or (up is not None and up <= down) else -down
        out['tipping_prior_mean'] = printed(big(m0) + post.shift + h * sd)
    o = data[post.series][now]
    if o.n is not None:
        stretch = lambda sign: lambda t: (m0, ld(mp.exp(sign * t)), LD(0))
        steps = [mp.mpf(k) / 4 for k in range(1, 29)]
        wide, narrow = search(steps, stretch(1)), search(steps, stretch(-1))
        if wide is not None or narrow is not None:
            t = wide if narrow is None or (wide is not None and wide <= narrow) else -narrow
            p = make(data, move=(m0, ld(mp.exp(t)), LD(0)))
            b = big(np.sum(p.w * p.laws['s2'] / (p.laws['v0'] + p.laws['s2'])))
            out['tipping_prior_readings'] = ('end', o.n * b / (1 - b))
    return out
