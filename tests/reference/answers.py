#!/usr/bin/env python3
"""Brute-force answers to whole specs: answers.json from answers/*.toml.

A second implementation, written from the formulas alone. How it differs from the program:
- every model is solved in one go over all periods (no prior that is then updated, no pieces carried forward);
  the random walk by dense covariances and an unknown mean (universal kriging), no filter and no smoother;
- integrals over ln(sigma) and ln(tau) by the plain trapezoid rule on an even grid over the whole region where the
  integrand exceeds e^-62 of its peak (less, where moments of heavy tails are wanted); no transformation, no adaptation. Every spec is solved with two steps, the second
  two thirds of the first; the figures of the finer one are written, and `agree` is the largest difference of the two,
  relative for chances, in units of max(|end|, interval width) for ends;
- readings are exact doubles, and sums, means, logarithms and limits are formed with mpmath at 50 digits; all is
  then shifted by the mean of the period under review, exactly, before it is rounded to 64-bit mantissas
  (numpy.longdouble on x86, 18 digits), in which the sums run. The normal distribution function is a Taylor
  series of erfcx about points 1/16 apart, its coefficients from mpmath. scipy only gives starting points of roots.
- `--closed` compares some of the figures with closed forms (Student t) and with mpmath's own quadrature, at 40 digits.
Sources: Gelman et al., Bayesian Data Analysis, 3rd ed., sections 2.5, 3.2, 5.4; West & Harrison 1997.
"""
import json, sys, tomllib, glob, os, time
import numpy as np
import mpmath as mp
from brute_alternatives import ASKED, alternatives
from brute_data import read
from brute_model import Posterior
from brute_needed import needed
from brute_normal import LD, Mix, big, density, ld, lower, mp_legendre, solve_ld, upper, zq
from brute_ranking import difference_with_bias, ranking
from brute_rules import rule_figures
from brute_share import share_beyond


def between(a, b):
    """P(a < Z < b), in the tail where less cancels."""
    return np.where(a > 0, upper(a) - upper(b), lower(b) - lower(a))


def chance(mix, q, lim):
    if 'above' in q: return mix.sf(lim(q['above']))
    if 'below' in q: return mix.cdf(lim(q['below']))
    if 'between' in q:
        a, b = (lim(t) for t in q['between'])
        return np.sum(mix.w * between((a - mix.m) / mix.s, (b - mix.m) / mix.s))
    a, b = q['outside']
    return mix.cdf(lim(a)) + mix.sf(lim(b))


def ends(mix, q, log, default='central'):
    p = mp.mpf(q.get('probability', 0.95))
    kind = q.get('interval', default)
    if kind == 'central':
        return {'lower': mix.quantile((1 - p) / 2), 'upper': mix.quantile((1 + p) / 2)}
    if kind == 'lower bound':
        return {'lower': mix.quantile(1 - p)}
    if kind == 'upper bound':
        return {'upper': mix.quantile(p)}
    l, u = mix.shortest(p, log)
    return {'lower': l, 'upper': u}


def theta_nodes(w, m, v, sigma):
    """Levels on nodes: the trapezoid in the standardised level, fine against the readings' sd."""
    ok = w > 1e-21
    w, m, s, sigma = w[ok], m[ok], np.sqrt(v[ok]), sigma[ok]
    ratio = float((s / sigma).max())
    h = min(0.3, 0.45 / max(ratio, 1e-9))
    z = np.arange(-10.2, 10.2 + h, h).astype(LD)
    g = density(z)
    g = g / g.sum()
    return (w[:, None] * g).ravel(), (m[:, None] + s[:, None] * z).ravel(), np.repeat(sigma, len(z))


def binomial(post, q, name):
    m, v = post.laws[name]
    W, th, sg = theta_nodes(post.w, m, v, post.laws['sigma'] + 0 * m)
    lim = post.limit
    if 'above' in q: pi, co = upper((lim(q['above']) - th) / sg), lower((lim(q['above']) - th) / sg)
    elif 'below' in q: pi, co = lower((lim(q['below']) - th) / sg), upper((lim(q['below']) - th) / sg)
    else:
        a, b = q.get('between') or q['outside']
        out = lower((lim(a) - th) / sg) + upper((lim(b) - th) / sg)
        ins = 1 - out
        pi, co = (ins, out) if 'between' in q else (out, ins)
    n = q['readings']
    return [np.sum(W * pi**k * co ** (n - k)) * LD(int(mp.binomial(n, k))) for k in range(n + 1)]


def sd_law(post, which):
    """Quantiles, mean and sd. Marginal density by trapezoid over the other axis; distribution by Gauss-Legendre panels to the end itself."""
    model = post.model
    axis = {'within': 's', 'between': 't'}[which]
    (bounds, steps) = model.box1
    d = model.axes.index(axis)
    lo, hi = bounds[d]
    others = [(model.axes[j], LD(bounds[j][0]) + np.arange(int((bounds[j][1] - bounds[j][0]) / (steps[j] * post.other)) + 2).astype(LD) * LD(steps[j] * post.other))
              for j in range(len(model.axes)) if j != d]
    peak = [None]
    def marginal(ys):
        ys = np.asarray(ys, dtype=LD)
        if not others:
            return model.at(**{axis: ys})[0], None
        name, g = others[0]
        a, b = np.meshgrid(ys, g, indexing='ij')
        lw = model.at(**{axis: a.ravel(), name: b.ravel()})[0].reshape(a.shape)
        return lw, True
    nodes, weights = mp_legendre(24)
    count = int(np.ceil((hi - lo) / (steps[d] * 3 * post.other)))
    edges = np.linspace(lo, hi, count + 1).astype(LD)
    def dens(ys):
        lw, two = marginal(ys)
        e = np.exp(lw - peak[0])
        return e.sum(axis=1) if two else e
    probe, _ = marginal(np.linspace(lo, hi, 400))
    peak[0] = probe.max()
    near = np.exp(LD(model.guess(axis)))     # squares from a place nearby keep their digits
    def panel(a, b):
        ys = (a + b) / 2 + (b - a) / 2 * nodes
        f = dens(ys)
        x = np.exp(ys)
        return [np.sum(weights * f * g) * (b - a) / 2 for g in (1, x, (x - near) ** 2)]
    each = [panel(a, b) for a, b in zip(edges[:-1], edges[1:])]
    mass = np.array([e[0] for e in each], dtype=LD)
    total = mass.sum()
    below = np.concatenate([[LD(0)], np.cumsum(mass)])
    above = np.concatenate([np.cumsum(mass[::-1])[::-1], [LD(0)]])
    mean, square = (sum(e[k] for e in each) / total for k in (1, 2))
    sd = np.sqrt(square - (mean - near) ** 2)
    def quantile(p):
        p = mp.mpf(p)
        pl, pu = ld(p) * total, ld(1 - p) * total
        i = int(np.searchsorted(below, pl) - 1) if p <= 0.5 else int(len(above) - np.searchsorted(above[::-1], pu) - 1)
        i = min(max(i, 0), len(edges) - 2)
        y = (edges[i] + edges[i + 1]) / 2
        lo_, hi_ = edges[i], edges[i + 1]
        for _ in range(60):
            f = below[i] + panel(edges[i], y)[0] - pl if p <= 0.5 else pu - above[i + 1] - panel(y, edges[i + 1])[0]
            step = f / dens(np.array([y]))[0]
            if f > 0: hi_ = y
            else: lo_ = y
            new = y - step
            if not lo_ <= new <= hi_: new = (lo_ + hi_) / 2
            done = abs(new - y) < 1e-18 * max(1, abs(y))
            y = new
            if done: break
        return np.exp(y)
    return quantile, mean, sd


def sd_interval(post, q):
    quantile, mean, _ = sd_law(post, q['sd'])
    p = mp.mpf(q.get('probability', 0.95))
    kind = q.get('interval', 'central')
    out = {'estimate': mean if exists(post, q['sd'], 1) else quantile(0.5)}
    if kind in ('central', 'lower bound'):
        out['lower'] = quantile((1 - p) / 2 if kind == 'central' else 1 - p)
    if kind in ('central', 'upper bound'):
        out['upper'] = quantile((1 + p) / 2 if kind == 'central' else p)
    return out


def exists(post, what, order):
    """Whether the moment exists: the table of moments in the methods."""
    model = post.model
    heavy_sigma = model.sd is None
    proper = model.kind in ('stated', 'quantiles') and 'worth_readings' not in model.prior
    # degrees of freedom of sigma once everything is seen
    kappa = model.df + (1 if proper or 'worth_readings' in model.prior else 0) if post.present else model.df - model.df_now
    if model.own_uniform:
        # ln sigma uniform would leave sigma^-n dsigma / sigma; sigma uniform leaves a power more.
        kappa = len(model.present.xs) - (1 if proper else 2)
    periods = len(model.hist) + (1 if post.present else 0)
    if model.has_tau and what in ('next', 'long run', 'between', 'next reading of next'):
        ok = {'uniform': order < periods - 2, 'half-cauchy': order < periods, 'half-normal': True}[model.between]
        if not ok: return False
    if heavy_sigma and what in ('within', 'reading'):
        return order < kappa
    if heavy_sigma and what == 'this' and not proper:
        return order < kappa
    return True


def answer(post, q, every):
    ask, log = q['ask'], post.log
    lim = post.limit
    name = q.get('of_period', 'this')
    if ask in ('level interval', 'level chance') and 'true ' + name in post.laws:
        name = 'true ' + name
    sig = post.laws['sigma']
    value = lambda t: ('end', post.out(t))
    prob = lambda p: ('chance', big(p))
    centre = lambda mix, what: value(mix.quantile(mp.mpf(0.5)) if log or not exists(post, what, 1) else mix.mean())
    if ask == 'classes':
        mix = post.mix('true this' if 'true this' in post.laws else 'this')
        cuts = [lim(b) for b in q['bounds']]
        chances = [mix.cdf(cuts[0])] + [np.sum(mix.w * between((a - mix.m) / mix.s, (b - mix.m) / mix.s)) for a, b in zip(cuts, cuts[1:])] + [mix.sf(cuts[-1])]
        return {'chances.%d' % k: prob(c) for k, c in enumerate(chances)}
    if ask in ('level interval', 'level chance'):
        mix = post.mix(name)
        if q.get('mean') == 'arithmetic':
            m, v = post.laws[name]
            mix = Mix(post.w, m + sig**2 / 2, v)
        if ask == 'level chance':
            return {'chance': prob(chance(mix, q, lim))}
        out = {k: value(t) for k, t in ends(mix, q, log).items()}
        return {'estimate': centre(mix, name.removeprefix('true ')), **out}
    if ask == 'reading interval':
        m, of = q.get('readings', 1), q.get('of', 'each')
        u2 = ld(mp.mpf(q['uncertainty']) ** 2) if 'uncertainty' in q else 0
        if of == 'all':
            one = post.mix(name, sig**2 + u2)
            W, th, sg = theta_nodes(post.w, *post.laws[name], post.laws['sigma'])
            p = mp.mpf(q.get('probability', 0.95))
            kind = q.get('interval', 'central')
            def held(pp):
                pp = mp.mpf(pp)
                lo = one.quantile((1 - pp) / 2 if kind == 'central' else 1 - pp) if kind != 'upper bound' else None
                hi = one.quantile((1 + pp) / 2 if kind == 'central' else pp) if kind != 'lower bound' else None
                out = (lower((lo - th) / sg) if lo is not None else 0) + (upper((hi - th) / sg) if hi is not None else 0)
                return lo, hi, big(np.sum(W * (1 - out) ** m))
            pp = mp.findroot(lambda t: held(t)[2] - p, (1 - (1 - p) / m, 1 - (1 - p) / m / 1.3), solver='secant', tol=mp.mpf(10) ** -34, maxsteps=14, verify=False)
            lo, hi, got = held(pp)
            assert abs(got - p) < 1e-17, got - p
            out = {}
            if lo is not None: out['lower'] = value(lo)
            if hi is not None: out['upper'] = value(hi)
            return {'estimate': centre(one, 'reading'), **out}
        mix = post.mix(name, sig**2 / (m if of == 'mean' else 1) + u2)
        return {'estimate': centre(mix, 'reading'), **{k: value(t) for k, t in ends(mix, q, log).items()}}
    if ask == 'reading chance':
        m, of = q.get('readings', 1), q.get('of', 'each')
        u2 = ld(mp.mpf(q['uncertainty']) ** 2) if 'uncertainty' in q else 0
        if 'at_least' in q:
            b = binomial(post, q, name)
            return {'chance': prob(sum(b[q['at_least']:]))}
        return {'chance': prob(chance(post.mix(name, sig**2 / (m if of == 'mean' else 1) + u2), q, lim))}
    if ask == 'count beyond':
        b = binomial(post, q, name)
        out = {'estimate': ('count', big(sum(k * v for k, v in enumerate(b))))}
        return {**out, **{'chances.%d' % k: prob(v) for k, v in enumerate(b)}}
    if ask == 'share beyond':
        return share_beyond(post, q, lim, prob, chance(post.mix(name, sig**2), q, lim))
    if ask in ('percentile', 'characteristic value'):
        if ask == 'characteristic value':
            mix = post.mix(name, sig**2)
            return {'estimate': value(mix.quantile(mp.mpf(q.get('percentile', 5)) / 100))}
        z = ld(zq(mp.mpf(q['percentile']) / 100))
        m, v = post.laws[name]
        mix = Mix(post.w, m + z * sig, v)
        out = {'estimate': centre(mix, 'reading'), **{k: value(t) for k, t in ends(mix, q, log).items()}}
        if 'above' in q or 'below' in q:
            out['chance'] = prob(chance(mix, q, lim))
        return out
    if ask == 'period mean':
        m, v = post.laws['this']
        n, k = post.model.present.n, q['readings']
        x = post.laws['x']
        mix = Mix(post.w, (n * x + k * m) / (n + k), (k * k * v + k * sig**2) / LD(n + k) ** 2)
        out = {'estimate': centre(mix, 'reading'), **{a: value(t) for a, t in ends(mix, q, log).items()}}
        if any(b in q for b in ('above', 'below', 'between', 'outside')):
            out['chance'] = prob(chance(mix, q, lim))
        return out
    if ask in ('change', 'difference'):
        back = (lambda t: mp.exp(big(t))) if log else big
        lim0 = (lambda L: ld(mp.log(mp.mpf(L)))) if log else ld
        if ask == 'change':
            against = str(q.get('against', 'previous'))
            model = post.model
            if against == 'previous':
                against = str(max((int(p) for p in every['data'][post.series] if int(p) < int(every['now']))))
            if 'change ' + against in post.laws:
                mix = post.mix('change ' + against)
            else:                     # an earlier level from its own readings, flat, independent given sigma
                o = every['data'][post.series][against]
                m, v = post.laws['this']
                mix = Mix(post.w, m - ld(o.mean - post.shift), v + (ld(o.u**2) if o.u is not None else sig**2 / o.n))
        else:
            a, b = (every['posts'][s] for s in q['series'])
            biased = a.model.bias2 and a.model.kind == 'stated'
            (ma, va), (mb, vb) = a.laws['this'], b.laws['this']
            d = ld(a.shift - b.shift)
            if a.model.kind == 'peers':       # one model of all levels
                mix = a.mix('change ' + q['series'][1])
            elif a.model.within['from'] == 'peers':
                assert a.model.kind == 'flat'
                mix = Mix(a.w, d, va + a.laws['sigma'] ** 2 / b.model.present.n)
            W = (a.w[:, None] * b.w).ravel() if len(a.w) * len(b.w) < 10**7 else np.zeros(1)
            ok = W > 1e-26
            if biased:
                mix = difference_with_bias(a, b, d)
            elif a.model.kind != 'peers' and a.model.within['from'] != 'peers':
                mix = Mix(W[ok], (ma[:, None] - mb + d).ravel()[ok] if len(W) > 1 else ma - mb + d, (va[:, None] + vb).ravel()[ok])
        w = lambda t: ('end', back(t))
        out = {k: w(t) for k, t in ends(mix, q, log).items()}
        out['estimate'] = w(mix.quantile(mp.mpf(0.5)) if log or not exists(post, 'this' if 'long' not in str(q.get('against')) else 'long run', 1) else mix.mean())
        if 'above' in q or 'below' in q:
            out['chance'] = prob(chance(mix, q, lim0))
        if 'band' in q:
            b = ld(mp.log(mp.mpf(q['band']))) if log else ld(q['band'])
            out['band_chance'] = prob(np.sum(mix.w * (lower((b - mix.m) / mix.s) - lower((-b - mix.m) / mix.s))))
        return out
    if ask == 'readings needed':
        return needed(post, q, every['spec'])
    if ask == 'sd interval':
        return {k: ('end', big(t)) for k, t in sd_interval(post, q).items()}
    raise NotImplementedError(ask)


TAILS = {'0.025': mp.mpf(1) / 40, '0.05': mp.mpf(1) / 20, '0.25': mp.mpf(1) / 4, '0.5': mp.mpf(1) / 2,
         '0.75': mp.mpf(3) / 4, '0.95': 1 - mp.mpf(1) / 20, '0.975': 1 - mp.mpf(1) / 40}


def laws(post):
    """What answers.json says of the posterior's laws: mean, sd (of the logarithm on the log scale) and quantiles."""
    out = {}
    names = {'this': 'level', 'next': 'next_level', 'long run': 'long_run_mean', 'reading': 'next_reading'}
    heavy = 'reading' if post.model.sd is None else 'this'
    for name, shown in names.items():
        if name == 'reading' and post.model.within['from'] == 'none': continue
        if name != 'reading' and name not in post.laws: continue
        mix = post.mix('this', post.laws['sigma']**2) if name == 'reading' else post.mix('true ' + name if 'true ' + name in post.laws else name)
        here = {t: ('end', post.out(mix.quantile(p))) for t, p in TAILS.items()}
        what = heavy if name == 'reading' else name
        prefix = 'log_' if post.log else ''
        mean = mix.mean()
        if exists(post, what, 1):
            here[prefix + 'mean'] = ('end', big(mean) + post.shift)
        if exists(post, what, 2):
            here[prefix + 'sd'] = ('sd', big(np.sqrt(np.sum(mix.w * (mix.s**2 + (mix.m - mean)**2)))))
        out[shown] = here
    for which, shown, axis in (('within', 'within_sd', 's'), ('between', 'between_sd', 't')):
        if axis in post.model.axes and not post.log and len(post.model.axes) < 3 and post.spec['prior']['from'] != 'mixture':
            quantile, mean, sd = sd_law(post, which)
            here = {t: ('end', big(quantile(p))) for t, p in TAILS.items()}
            if exists(post, which, 1): here['mean'] = ('end', big(mean))
            if exists(post, which, 2): here['sd'] = ('sd', big(sd))
            out[shown] = here
    return out


BESIDE = ('level interval', 'level chance', 'reading interval', 'reading chance', 'share beyond', 'percentile', 'characteristic value', 'classes')


def beside(spec, data, s, now, log, fine, every, models):
    """Answers with the prior alone, and with the readings alone."""
    P, W = spec['prior'], spec['within']
    out = {}
    known_before = W['from'] in ('stated', 'history', 'none') and P['from'] not in ('flat', 'mixture', 'peers')
    if known_before and not (W['from'] == 'history' and P['from'] != 'history') and 'worth_readings' not in P:
        out['prior_only'] = Posterior(spec, data, s, now, log, fine, present=False, models=models.setdefault('prior', {}))
    if P['from'] in ('stated', 'quantiles') and W['from'] != 'history':
        flat = {**spec, 'prior': {'from': 'flat'}}
        out['readings_only'] = Posterior(flat, data, s, now, log, fine, models=models.setdefault('readings', {}))
    for basis, post in out.items():
        for q in spec['question']:
            if q['ask'] not in BESIDE or 'at_least' in q or q.get('of') == 'all': continue
            if q.get('of_period', 'this') not in post.laws: continue
            yield q['id'] + '.' + basis, answer(post, q, every)


def solve(path):
    with open(path, 'rb') as f:
        spec = tomllib.load(f)
    data, log, now = read(spec)
    results, models, scans = [], {}, {}
    for fine in (False, True):
        posts = {}
        out = {}
        names = [s for s in data if now in data[s]]
        for s in names:
            posts[s] = Posterior(spec, data, s, now, log, fine)
            posts[s].other = 2 / 3 if fine else 1
        every = {'posts': posts, 'data': data, 'now': now, 'scans': scans, 'spec': spec}
        for s in names:
            post = posts[s]
            here = {}
            if 'v0' in post.laws:
                s2, v0 = post.laws['s2'], post.laws['v0']
                here['prior_weight'] = {'prior_weight': ('chance', big(np.sum(post.w * (s2 / (v0 + s2)))))}
            for q in spec['question']:
                if q['ask'] not in ('difference', 'ranking'):
                    here[q['id']] = answer(post, q, every)
            for q in spec['question']:
                if 'rule' in q:
                    def make(other, move=None, present=True):
                        return Posterior(spec, other, s, now, log, fine, present, models={}, move=move, shift=post.shift)
                    here[q['id'] + '.rule'] = rule_figures(post, q, every, answer, make)
            if spec['review'].get('particulars', {}).get('Reference') == 'sensitivity':
                def under(other, move=None, present=True, sd_h=None):
                    other = {k: v for k, v in other.items() if k != '_models'}
                    return Posterior(other, data, s, now, log, fine, present, models={}, move=move, shift=post.shift, sd_h=sd_h)
                for name, other in alternatives(spec, post, data, now, under):
                    for q in spec['question']:
                        if q['ask'] in ASKED and 'at_least' not in q and q.get('of_period', 'this') == 'this':
                            here[q['id'] + '.' + name] = answer(other, q, every)
            here.update(beside(spec, data, s, now, log, fine, every, models.setdefault(s, {})))
            for name, figures in laws(post).items():
                here['posterior.' + name] = figures
            out[s] = here
        for q in spec['question']:
            if q['ask'] == 'ranking':
                out.setdefault('', {})[q['id']] = ranking(posts, q)
            if q['ask'] == 'difference':
                out.setdefault('', {})[q['id']] = answer(posts[q['series'][0]], q, every)
        nodes = max(len(p.w) for p in posts.values())
        results.append(out)
    coarse, fine = results
    worst, where = mp.mpf(0), None
    table = {}
    for s, here in fine.items():
        for qid, figs in here.items():
            width = abs(figs['upper'][1] - figs['lower'][1]) if 'upper' in figs and 'lower' in figs else 0
            for name, (kind, v) in figs.items():
                u = coarse[s][qid][name][1]
                scale = max(abs(v), width if kind in ('end', 'sd') else mp.mpf(10) ** -21)
                err = abs(u - v) / scale
                if kind == 'plan':      # in doubles, of the size of 1: held to 1e-11
                    err = abs(u - v) / 1000
                if err > worst: worst, where = err, (s, qid, name)
                table.setdefault(s, {}).setdefault(qid, {})[name] = {'kind': kind, 'value': mp.nstr(v, 17, strip_zeros=False)}
    return table, worst, where, nodes


def closed():
    """What stands in answers.json against closed forms (Student t) and mpmath's own quadrature, at 40 digits."""
    mp.mp.dps = 40
    here = os.path.dirname(os.path.abspath(__file__))
    doc = json.load(open(os.path.join(here, 'answers.json')))['specs']
    worst = mp.mpf(0)

    def load(name):
        with open(os.path.join(here, 'answers', name + '.toml'), 'rb') as f:
            return tomllib.load(f)

    def t_upper(t, nu):
        half = mp.betainc(nu / 2, mp.mpf(1) / 2, 0, nu / (nu + t * t), regularized=True) / 2
        return half if t > 0 else 1 - half

    def compare(name, question, figure, kind, law):
        nonlocal worst
        (series, table), = doc[name]['series'].items()
        got = mp.mpf(table[question][figure]['value'])
        err = abs(law(got)) if kind == 'end' else abs(got - law) / law
        worst = max(worst, err)
        print(f"{name} {question} {figure}: {mp.nstr(err, 3)}")

    for name in ('03-flat-readings-three', '04-worth-readings', '05-worth-readings-df'):
        if name not in doc: continue
        spec = load(name)
        xs = [mp.mpf(v) for v in spec['readings'][0]['values']]
        n, xbar = len(xs), mp.fsum(xs) / len(xs)
        ss = mp.fsum((x - xbar) ** 2 for x in xs)
        n0 = mp.mpf(spec['prior'].get('worth_readings', 0))
        m0 = mp.mpf(spec['prior'].get('mean', 0))
        nu0 = mp.mpf(spec['within'].get('df', 0))
        s0 = mp.mpf(spec['within'].get('sd', 0))
        n1, m1 = n0 + n, (n0 * m0 + n * xbar) / (n0 + n)
        nu1 = nu0 + n - (1 if n0 == 0 else 0)
        s1 = mp.sqrt((nu0 * s0**2 + ss + n0 * n / n1 * (xbar - m0) ** 2) / nu1)
        for q in spec['question']:
            if q['ask'] == 'level chance' and 'above' in q:
                compare(name, q['id'], 'chance', 'chance', t_upper((mp.mpf(q['above']) - m1) / (s1 / mp.sqrt(n1)), nu1))
            if q['ask'] == 'reading chance' and 'above' in q and 'readings' not in q:
                compare(name, q['id'], 'chance', 'chance', t_upper((mp.mpf(q['above']) - m1) / (s1 * mp.sqrt(1 + 1 / n1)), nu1))
            if q['ask'] == 'level interval' and 'interval' not in q:
                p = (1 - mp.mpf(q.get('probability', 0.95))) / 2
                compare(name, q['id'], 'upper', 'end', lambda v: t_upper((v - m1) / (s1 / mp.sqrt(n1)), nu1) / p - 1)
                compare(name, q['id'], 'lower', 'end', lambda v: t_upper((m1 - v) / (s1 / mp.sqrt(n1)), nu1) / p - 1)
    for name in ('09-history-uniform-known', '25-three-periods-uniform', '34-own-uncertainties-history'):
        if name not in doc: continue
        spec = load(name)
        data, _, now = read(spec)
        (series, own), = data.items()
        sd = mp.mpf(spec['within'].get('sd', 0))
        obs = [(p, o.mean, o.u**2 if o.u is not None else sd**2 / o.n) for p, o in own.items()]
        (x, v), = [(x, v) for p, x, v in obs if p == now]

        def parts(tau, limit, which):
            w = [1 / (tau**2 + a) for _, _, a in obs]
            prec = mp.fsum(w)
            mu = mp.fsum(a * b for a, (_, b, _) in zip(w, obs)) / prec
            like = mp.sqrt(mp.fprod(w) / prec) * mp.exp(-mp.fsum(a * (b - mu) ** 2 for a, (_, b, _) in zip(w, obs)) / 2)
            if which == 'this':
                b = tau**2 / (tau**2 + v)
                m, s2 = b * x + (1 - b) * mu, b * v + (1 - b) ** 2 / prec
            else:
                m, s2 = mu, tau**2 + 1 / prec
            return like, mp.erfc((limit - m) / mp.sqrt(2 * s2)) / 2

        unit = mp.sqrt(mp.fsum(a for _, _, a in obs) / len(obs))
        cuts = [0] + [unit * c for c in (0.3, 1, 2, 4, 10, 30, 100)] + [mp.inf]
        total = mp.quad(lambda t: parts(t, 0, 'this')[0], cuts)
        for q in spec['question']:
            if q['ask'] == 'level chance' and 'above' in q and q.get('of_period', 'this') in ('this', 'next'):
                want = mp.quad(lambda t: mp.fprod(parts(t, mp.mpf(q['above']), q.get('of_period', 'this'))), cuts) / total
                compare(name, q['id'], 'chance', 'chance', want)
    print(f"worst {mp.nstr(worst, 3)}")
    assert worst < 1e-14      # ends are written with 17 digits


def main():
    if sys.argv[1:] == ['--closed']:
        return closed()
    here = os.path.dirname(os.path.abspath(__file__))
    target = os.path.join(here, 'answers.json')
    names = sys.argv[1:]
    doc = {}
    if os.path.exists(target) and names:
        doc = json.load(open(target))['specs']
    for path in sorted(glob.glob(os.path.join(here, 'answers', '*.toml'))):
        name = os.path.basename(path)[:-5]
        if names and name not in names: continue
        began = time.time()
        table, worst, where, nodes = solve(path)
        print(f"{name}: agree {mp.nstr(worst, 3)} at {where}, {nodes} nodes, {time.time() - began:.1f} s", flush=True)
        if worst > 1e-14:
            print("   NOT WRITTEN: the two steps differ by more than 1e-14", flush=True)
            doc.pop(name, None)
            continue
        doc[name] = {'agree': mp.nstr(worst, 3), 'series': table}
        head = {'source': 'tests/reference/answers.py: brute force; mpmath at 50 digits for data, limits and quantiles, 64-bit mantissas '
                          'in the sums; two steps of every integral agree as `agree` says', 'specs': dict(sorted(doc.items()))}
        with open(target + '.new', 'w') as f:
            json.dump(head, f, indent=1)
            f.write('\n')
        os.replace(target + '.new', target)


if __name__ == '__main__':
    main()
