"""Ground of answers.py: several series at once. The chance of being the highest, expected ranks, and differences
of series that share a bias."""
import numpy as np
import mpmath as mp
from brute_normal import LD, Mix, big, density, ld, lower, mp_legendre, upper


def difference_with_bias(a, b, apart):
    """True level of `a` less that of `b`, their origins `apart`, given that both readings carry one b ~ N(0, u^2): the two
    levels and the two readings are jointly normal given both sigmas; pairs of nodes weighed by the joint density of the readings."""
    u2 = a.model.bias2
    prior = lambda p: (p.model.m0 + 0 * p.w, p.laws['v0'] - u2, p.laws['x'], p.laws['s2'], p.w)
    row = lambda t: t[:, None]
    ma, va, xa, sa, wa = (row(t) for t in prior(a))
    mb, vb, xb, sb, wb = prior(b)
    A, B = va + u2 + sa, vb + u2 + sb
    det = A * B - u2 * u2
    ra, rb = xa - ma, xb - mb
    joint = -np.log(det) / 2 - (B * ra * ra - 2 * u2 * ra * rb + A * rb * rb) / (2 * det)
    alone = -np.log(A * B) / 2 - ra * ra / (2 * A) - rb * rb / (2 * B)      # in the nodes' weights already
    w = wa * wb * np.exp(joint - alone)
    # d = theta_a - theta_b; Cov(d, x_a) = va, Cov(d, x_b) = -vb
    ga, gb = (va * B + vb * u2) / det, (-vb * A - va * u2) / det
    mean = ma - mb + apart + ga * ra + gb * rb
    var = va + vb - (ga * va - gb * vb)
    ok = w > 1e-26
    return Mix((w / w.sum())[ok], (mean + 0 * w)[ok], (var + 0 * w)[ok])


def given_bias(posts, names, shift, sign):
    """Nodes of b: weight, and each series' level as a mixture given b."""
    u = np.sqrt(posts[names[0]].model.bias2)
    nodes = []
    for z in np.arange(-10.5, 10.6, 0.25).astype(LD):
        ln, laws = -z * z / 2, []
        for s, d in zip(names, shift):
            p = posts[s]
            v, x, s2 = p.laws['v0'] - u * u, p.laws['x'], p.laws['s2']
            r, total = x - u * z - p.model.m0, v + s2
            own = (x - p.model.m0) ** 2 / (total + u * u) + np.log(total + u * u)      # in the nodes' weights already
            f = np.exp(-r * r / (2 * total) - np.log(total) / 2 + own / 2) * p.w
            ln = ln + np.log(f.sum())
            m, var = p.model.m0 + v / total * r, v * s2 / total
            ok = f > 1e-22 * f.sum()
            laws.append(Mix((f / f.sum())[ok], sign * (m + d + 0 * f)[ok], (var + 0 * f)[ok]))
        nodes.append((ln, laws))
    top = max(ln for ln, _ in nodes)
    nodes = [(np.exp(ln - top), laws) for ln, laws in nodes if ln > top - 50]
    whole = sum(w for w, _ in nodes)
    return [(w / whole, laws) for w, laws in nodes]


def even(laws):
    """The same as `independent` on an even grid, for levels that are normal or nearly so."""
    wide = max((l.s[l.w > 1e-15]).max() for l in laws)
    step = LD(0.3) * min((l.s[l.w > 1e-6]).min() for l in laws)
    lo, hi = min(l.m.min() for l in laws) - 10 * wide, max(l.m.max() for l in laws) + 10 * wide
    t = lo + step * np.arange(int((hi - lo) / step) + 1).astype(LD)
    z = [(t[:, None] - l.m) / l.s for l in laws]
    f = [density(x) @ (l.w / l.s) for x, l in zip(z, laws)]
    F, G = [lower(x) @ l.w for x, l in zip(z, laws)], [upper(x) @ l.w for x, l in zip(z, laws)]
    out = []
    for i in range(len(laws)):
        others = [j for j in range(len(laws)) if j != i]
        out.append((step * np.sum(f[i] * np.prod([F[j] for j in others], axis=0)), 1 + step * sum(np.sum(f[i] * G[j]) for j in others)))
    return out


def independent(laws):
    """For independent levels, the chance that each is the highest, and its expected rank."""
    edges = set()
    for l in laws:
        heavy = l.w > 1e-3
        width = l.s[heavy].min() / 3
        away = width * np.arange(0, 31)
        if len(l.w) > 1:       # on to where a heavy tail is below 1e-24
            away = np.concatenate([away, away[-1] * LD(1.3) ** np.arange(1, 75)])
        edges |= set(l.quantile(mp.mpf(0.5)) + sign * d for d in away for sign in (-1, 1))
    edges = np.array(sorted(edges), dtype=LD)
    nodes, weights = mp_legendre(24)
    half = np.diff(edges) / 2
    t = ((edges[:-1] + edges[1:]) / 2)[:, None] + half[:, None] * nodes
    w, t = (half[:, None] * weights).ravel(), t.ravel()
    each = lambda f: np.array([[f(l, x) for x in t] for l in laws], dtype=LD)
    f, F, G = each(Mix.pdf), each(Mix.cdf), each(Mix.sf)
    out = []
    for i in range(len(laws)):
        others = [j for j in range(len(laws)) if j != i]
        out.append((np.sum(w * f[i] * np.prod(F[others], axis=0)), 1 + sum(np.sum(w * f[i] * G[j]) for j in others)))
    return out


def ranking(posts, q):
    """Chance of the highest (lowest) level and expected rank of every series."""
    names = [s for s in posts if s in q.get('only', posts)]
    sign = 1 if q.get('first', 'highest') == 'highest' else -1
    first = posts[names[0]]
    shift = [ld(posts[s].shift - first.shift) for s in names]
    out = {}
    if first.model.bias2 and first.model.kind == 'stated':
        sums = {s: [LD(0), LD(0)] for s in names}
        for weight, laws in given_bias(posts, names, shift, sign):
            for s, (c, r) in zip(names, even(laws)):
                sums[s][0] += weight * c
                sums[s][1] += weight * r
        out = {s: tuple(v) for s, v in sums.items()}
    elif first.model.kind != 'peers' and first.model.within['from'] != 'peers':
        laws = [posts[s].mix('this') for s in names]
        laws = [Mix(l.w, sign * (l.m + d), l.s**2) for l, d in zip(laws, shift)]
        out = dict(zip(names, independent(laws)))
    else:
        obs = [(posts[s].model.present, d) for s, d in zip(names, shift)]
        ok = first.w > 1e-21
        weight, sigma = first.w[ok], (first.laws['sigma'] + 0 * first.w)[ok]
        s2 = [sigma**2 / o.n for o, _ in obs]
        x = [ld(o.mean - posts[s].shift) + d for (o, d), s in zip(obs, names)]
        if first.model.kind == 'peers':
            tau2 = (first.laws['tau'] ** 2 + 0 * first.w)[ok]
            prec = sum(1 / (tau2 + v) for v in s2)
            mu, var = sum(a / (tau2 + v) for a, v in zip(x, s2)) / prec, 1 / prec
            pull = [(tau2 / (tau2 + v), v / (tau2 + v)) for v in s2]
            zs = np.arange(-10.5, 10.6, 0.25).astype(LD)
        else:
            mu, var, pull, zs = 0 * sigma, 0 * sigma, [(1, 0)] * len(x), np.zeros(1, dtype=LD)
        g = density(zs)
        z = np.arange(-10.5, 10.6, 0.2).astype(LD)
        h = density(z)
        total = {s: LD(0) for s in names}
        for k, zm in enumerate(zs):
            m = [sign * (b * a + c * (mu + np.sqrt(var) * zm)) for a, (b, c) in zip(x, pull)]
            r = [np.sqrt(b * v) for (b, _), v in zip(pull, s2)]
            for i, s in enumerate(names):
                t = m[i][:, None] + r[i][:, None] * z if np.ndim(m[i]) else m[i] + r[i][:, None] * z
                inside = np.ones_like(t)
                for j in range(len(names)):
                    if j != i:
                        inside = inside * lower((t - (m[j][:, None] if np.ndim(m[j]) else m[j])) / r[j][:, None])
                total[s] += g[k] * np.sum(weight * (inside @ h))
        scale = weight.sum() * g.sum() * h.sum()
        for i, s in enumerate(names):
            rank = LD(1)
            for j in range(len(names)):
                if j != i:
                    (bi, ci), (bj, cj) = pull[i], pull[j]
                    slope = cj - ci
                    mean = bj * x[j] - bi * x[i] + slope * mu
                    sd = np.sqrt(bj * s2[j] + bi * s2[i] + slope * slope * var)
                    rank += np.sum(weight * lower(sign * mean / sd)) / weight.sum()
            out[s] = total[s] / scale, rank
    return {f'{s}:{n}': ('chance' if n == 'chance' else 'count', big(v)) for s, (c, r) in out.items()
            for n, v in (('chance', c), ('expected_rank', r))}
