"""Ground of answers.py: a series' posterior on even grids over ln(sigma) and ln(tau)."""
import numpy as np
import mpmath as mp
from scipy.optimize import minimize
from brute_normal import LD, Mix, big, ld, zq

CUT = 62


def power(s, df, ss):
    """ln of sigma^-df exp(-ss / 2 sigma^2) for s = ln sigma, as what it lacks to its peak (no large terms that cancel), and the peak."""
    at = np.log(ss / df) / 2
    return -df * (s - at) - df * np.expm1(-2 * (s - at)) / 2, -df * at - df / LD(2)


def joined(several):
    """Laws of several chunks of nodes in one."""
    def join(values):
        if isinstance(values[0], tuple):
            return tuple(join(v) for v in zip(*values))
        return values[0] if values[0] is None or np.ndim(values[0]) == 0 else np.concatenate(values)
    return {k: join([laws[k] for laws in several]) for k in several[0]}


class Model:
    """ln weight and the normal law of each level at given sigma, tau; see `at`."""

    def __init__(self, spec, data, series, now, log, prior=None, shift=None):
        self.log, self.now = log, now
        self.prior = prior or spec['prior']
        self.within = spec['within']
        own = data[series]
        self.present = own.get(now)
        self.shares = any(q['ask'] in ('share beyond', 'percentile', 'count beyond') or 'at_least' in q or q.get('of') == 'all'
                          for q in spec['question'])
        self.changes = any(q['ask'] in ('change', 'difference') for q in spec['question'])
        earlier = sorted((p for p in own if int(p) < int(now)), key=int)
        self.shift = shift
        # One b ~ N(0, u_b^2) in all readings: `this`, `next` and `long run` are as measured, `true ...` without it.
        bias = spec.get('series', {}).get(series, {}).get('bias') or spec['quantity'].get('bias')
        self.bias2 = ld(mp.mpf(bias['sd']) ** 2) if bias else LD(0)
        self.sd_h = None         # fixed sigma of the history beside an unknown one of this period
        self.quick = False
        self.move = None         # (centre, stretch, shift) of the prior's pieces: see `moved`
        P = self.prior
        self.kind = P['from']
        if self.kind == 'peers':
            names = [s for s in data if s != series and now in data[s]]
            self.hist = [(s, data[s][now]) for s in names]
        else:
            self.hist = [(p, own[p]) for p in earlier]
        W = self.within
        self.sd = None           # fixed sigma
        self.own_uniform = False
        self.two_sigmas = False
        ss, df = mp.mpf(0), 0    # all that informs sigma beside the normal factors of the means
        uses_history = self.kind == 'history'
        if W['from'] == 'none':
            self.sd = LD(0)
        elif W['from'] == 'stated' and W.get('df', float('inf')) == float('inf'):
            s = mp.log(mp.mpf(W['geometric_sd'])) if 'geometric_sd' in W else mp.mpf(W.get('log_sd', W.get('sd')))
            self.sd = ld(s)
        else:
            if W['from'] == 'stated':
                s = mp.log(mp.mpf(W['geometric_sd'])) if 'geometric_sd' in W else mp.mpf(W.get('log_sd', W.get('sd')))
                df += W['df']
                ss += mp.mpf(W['df']) * s * s
            sources = [self.present] if self.present else []
            if W['from'] == 'history' or (W['from'] == 'stated' and uses_history):
                sources += [o for _, o in self.hist]
            if W['from'] == 'peers':
                sources = [data[s][now] for s in data if now in data[s]]
            for o in sources:
                if o.n is not None:
                    df += o.n - 1
                    ss += o.ss
            if self.present and self.present.us is not None:
                self.own_uniform = True
            if W['from'] == 'readings' and uses_history:
                self.two_sigmas = True
                self.df_h = sum(o.n - 1 for _, o in self.hist)
                self.ss_h = ld(sum(o.ss for _, o in self.hist))
        self.df, self.ss = df, ld(ss)
        self.ss_now = ld(self.present.ss) if self.present and self.present.n else LD(0)
        self.df_now = self.present.n - 1 if self.present and self.present.n else 0
        # tau
        self.tau = None
        self.has_tau = False
        if self.kind in ('history', 'peers'):
            b = P.get('between', 'uniform')
            if 'between_sd' in P:
                self.tau = ld(P['between_sd'])
            elif b == 'none':
                self.tau = LD(0)
            elif b == 'reml':
                self.tau = self.reml()
            elif b == 'moments':
                self.tau = self.moments()
            else:
                self.has_tau = True
                self.between = b
                self.scale = ld(P['between_scale']) if 'between_scale' in P else None
        elif 'between_sd' in P:
            self.tau = ld(P['between_sd'])
        if self.kind == 'stated' and 'worth_readings' not in P:
            if 'geometric_mean' in P or 'log_mean' in P:
                m = mp.mpf(P['log_mean']) if 'log_mean' in P else mp.log(mp.mpf(P['geometric_mean']))
                s = mp.mpf(P['log_sd']) if 'log_sd' in P else mp.log(mp.mpf(P['geometric_sd']))
            else:
                m, s = mp.mpf(P['mean']), mp.mpf(P['sd'])
            self.m0, self.v0 = ld(m - shift), ld(s * s)
        elif self.kind == 'stated':
            m = mp.log(mp.mpf(P['geometric_mean'])) if 'geometric_mean' in P else mp.mpf(P.get('log_mean', P.get('mean')))
            self.m0 = ld(m - shift)
        elif self.kind == 'quantiles':
            zs = [zq(p) for p, _ in P['quantiles']]
            qs = [mp.log(mp.mpf(q)) if log else mp.mpf(q) for _, q in P['quantiles']]
            zb, qb = mp.fsum(zs) / len(zs), mp.fsum(qs) / len(qs)
            s = mp.fsum((z - zb) * (q - qb) for z, q in zip(zs, qs)) / mp.fsum((z - zb) ** 2 for z in zs)
            self.m0, self.v0 = ld(qb - s * zb - shift), ld(s * s)
        # Tails t^-a of ln sigma and ln tau: what is cut off must not be seen in moments either.
        self.cut = CUT
        n = self.present.n or (len(self.present.xs) if self.present.xs else 0) if self.present else 0
        heavy = [self.df + (0 if self.kind == 'flat' else 1)] if self.sd is None and not self.own_uniform else []
        if self.own_uniform:
            heavy.append(n - (2 if self.kind == 'flat' else 1))
        if self.has_tau and self.between != 'half-normal':
            heavy.append(len(self.hist) + (1 if self.present else 0) - (2 if self.between == 'uniform' else 0))
        self.widen(heavy)
        self.axes = (['s'] if self.sd is None else []) + (['h'] if self.two_sigmas else []) + (['t'] if self.has_tau else [])

    def widen(self, heavy):
        for a in heavy:
            for k in (1, 2):
                if a > k:
                    self.cut = max(self.cut, min(150, 36 / (1 - k / a)))

    def known_history(self, sd):
        """Sigma unknown in this period alone; the history keeps a known one."""
        self.sd_h = sd
        self.two_sigmas = False
        self.axes = [a for a in self.axes if a != 'h']

    # plug-ins, sigma known
    def known(self):
        out = []
        for _, o in self.hist:
            v = o.u ** 2 if o.u is not None else big(self.sd) ** 2 / o.n
            out.append((o.mean, v))
        return out

    def reml(self):
        obs = self.known()
        def parts(t):
            w = [1 / (t + v) for _, v in obs]
            mu = mp.fsum(a * x for a, (x, _) in zip(w, obs)) / mp.fsum(w)
            return w, mu
        def slope(t):
            w, mu = parts(t)
            return mp.fsum(a * a for a in w) / mp.fsum(w) - mp.fsum(w) + mp.fsum(a * a * (x - mu) ** 2 for a, (x, _) in zip(w, obs))
        def ln_l(t):
            w, mu = parts(t)
            return -mp.log(mp.fsum(w)) / 2 + mp.fsum(mp.log(a) for a in w) / 2 - mp.fsum(a * (x - mu) ** 2 for a, (x, _) in zip(w, obs)) / 2
        unit = mp.fsum(v for _, v in obs) / len(obs)
        grid = [mp.mpf(0)] + [unit * mp.mpf(2) ** (mp.mpf(k) / 4) for k in range(-80, 120)]
        best = max(range(len(grid)), key=lambda i: ln_l(grid[i]))
        if best == 0:
            return LD(0)
        t = mp.findroot(slope, (grid[best - 1], grid[best + 1]), solver='anderson')
        return ld(mp.sqrt(t))

    def moments(self):
        obs = self.known()
        a = [1 / v for _, v in obs]
        A = mp.fsum(a)
        mu = mp.fsum(w * x for w, (x, _) in zip(a, obs)) / A
        q = mp.fsum(w * (x - mu) ** 2 for w, (x, _) in zip(a, obs))
        t = (q - (len(obs) - 1)) / (A - mp.fsum(w * w for w in a) / A)
        return ld(mp.sqrt(max(mp.mpf(0), t)))

    def guess(self, axis):
        if axis == 's':
            return float(np.log(np.sqrt(float(self.ss) / self.df))) if self.df > 0 and self.ss > 0 else float(np.log(float(np.std([float(x) for x in self.present.xs]))))
        if axis == 'h':
            return float(np.log(np.sqrt(float(self.ss_h) / self.df_h)))
        xs = [float(o.mean - self.shift) for _, o in self.hist]
        return float(np.log((np.std(xs) if len(xs) > 1 else 0) + 1e-12 + (float(self.scale) if self.scale else 0)))

    def at(self, s=None, h=None, t=None, present=True):
        if self.move is not None:
            return self.moved(s, h, t, present)
        return self.at_once(s, h, t, present)

    def moved(self, s, h, t, present):
        """The prior of this level at each (sigma, tau), N(m, v), as N(q + c (m - q) + d, c^2 v), then the present readings."""
        lw, laws = self.at_once(s, h, t, False)
        assert self.bias2 == 0 and not self.own_uniform
        q, c, d = self.move
        m, v = laws['this']
        m, v = q + c * (m - q) + d, c * c * v
        laws = {k: laws[k] for k in ('sigma', 'tau', 'constant')}
        laws.update(this=(m, v), v0=v, x=None, s2=None)
        if not present:
            return lw, laws
        now, sigma = self.present, laws['sigma']
        if s is not None and self.df_now:
            more, constant = power(s, self.df_now, self.ss_now)
            lw, laws['constant'] = lw + more, laws['constant'] + constant
        x = ld(now.mean - self.shift) + 0 * sigma
        s2 = ld(now.u**2) + 0 * sigma if now.u is not None else sigma**2 / now.n
        laws['lw'], laws['x'], laws['s2'] = lw, x, s2
        self.single(lw, laws, m, v)
        return laws.pop('lw'), laws

    def at_once(self, s=None, h=None, t=None, present=True):
        """Arrays of ln sigma, ln sigma of the history, ln tau -> ln weight (with Jacobians), laws."""
        shape = np.broadcast(*[a for a in (s, h, t) if a is not None]).shape if self.axes else (1,)
        zero = np.zeros(shape, dtype=LD)
        sigma = (np.exp(s) if s is not None else self.sd) + zero
        tau = (np.exp(t) if t is not None else (self.tau if self.tau is not None else LD(0))) + zero
        sigma_h = np.exp(h) + zero if h is not None else sigma if self.sd_h is None else self.sd_h + zero
        lw, constant = zero.copy(), LD(0)
        if s is not None:
            if self.own_uniform:
                lw = lw + s
            df, ss = (self.df, self.ss) if present else (self.df - self.df_now, self.ss - self.ss_now)
            if df:
                more, constant = power(s, df, ss)
                lw = lw + more
        if h is not None:
            more, other = power(h, self.df_h, self.ss_h)
            lw, constant = lw + more, constant + other
        if t is not None:
            lw = lw + t
            if self.between == 'half-normal':
                lw = lw - (tau / self.scale) ** 2 / 2 - np.log(self.scale)
            elif self.between == 'half-cauchy':
                lw = lw - np.log1p((tau / self.scale) ** 2) - np.log(self.scale)
        x = s2 = None
        now = self.present if present else None
        if now is not None:
            if now.us is not None:
                om = [1 / (ld(u * u) + sigma**2) for u in now.us]
                xs = [ld(v - self.shift) for v in now.xs]
                w = sum(om)
                x = sum(a * b for a, b in zip(om, xs)) / w
                s2 = 1 / w
                lw = lw + sum(np.log(a) for a in om) / 2 - np.log(w) / 2 - sum(a * (b - x) ** 2 for a, b in zip(om, xs)) / 2
            elif now.u is not None:
                x, s2 = ld(now.mean - self.shift) + zero, ld(now.u**2) + zero
            else:
                x, s2 = ld(now.mean - self.shift) + zero, sigma**2 / now.n
        laws = {'sigma': sigma, 'tau': tau, 'x': x, 's2': s2, 'constant': constant}
        P = self.prior
        pattern = P.get('pattern', 'about a mean')
        if self.kind == 'flat':
            laws['this'] = (x, s2)
        elif self.kind == 'quantiles' or (self.kind == 'stated' and self.tau is None):
            if 'worth_readings' in P:
                v0 = sigma**2 / ld(P['worth_readings'])
            else:
                v0 = self.v0 + zero
            self.single(lw, laws, self.m0 + zero, v0 + self.bias2)
            lw = laws.pop('lw')
            self.true(laws, {'this': (v0, v0)}, v0 + self.bias2)
        elif self.kind == 'stated':          # about the long run
            if now is None:
                laws['this'] = (self.m0 + zero, self.v0 + self.bias2 + tau**2)
            else:
                if self.changes and self.sd is not None:      # the two periods alone
                    pairs = {}
                    for name, xa, va in self.history(sigma_h):
                        self.about(lw, pairs, [(name, xa, va), ('now', x, s2)], tau, flat=False)
                    laws.update({k: v for k, v in pairs.items() if k.startswith('change')})
                self.about(lw, laws, [('now', x, s2)], tau, flat=False)
                lw = laws.pop('lw')
            laws['v0'] = self.v0 + self.bias2 + tau**2
            self.true(laws, {'this': (self.v0 + tau**2, self.v0 + tau**2), 'next': (self.v0 + tau**2, self.v0 + 0 * tau),
                             'long run': (self.v0 + 0 * tau, self.v0 + 0 * tau)}, laws['v0'])
        elif pattern == 'about a mean' and 'weight_of_history' in P:
            obs = self.history(sigma_h)
            self.about(lw, laws, obs, tau, flat=True)
            lw = laws.pop('lw')
            total = sum(o.n for _, o in self.hist)
            xh = mp.fsum(o.n * o.mean for _, o in self.hist) / total
            self.single(lw, laws, ld(xh - self.shift) + zero, sigma_h**2 / (ld(P['weight_of_history']) * total))
            lw = laws.pop('lw')
            del laws['long run'], laws['next']
        elif pattern == 'about a mean':
            obs = self.history(sigma_h)
            v_hist = 1 / sum(1 / (tau**2 + v) for _, _, v in obs)
            self.about(lw, laws, obs + ([('now', x, s2)] if now is not None else []), tau, flat=True)
            lw = laws.pop('lw')
            laws['v0'] = tau**2 + v_hist
        else:
            obs = self.history(sigma_h)
            self.walk(lw, laws, obs, x, s2, tau)
            lw = laws.pop('lw')
        if self.kind == 'peers':
            laws.pop('next', None), laws.pop('long run', None)
        if self.bias2 and self.kind not in ('stated', 'quantiles'):
            # b is unseen behind a flat mean: independent of the levels as measured.
            for name in ('this', 'next', 'long run'):
                if name in laws:
                    laws['true ' + name] = (laws[name][0], laws[name][1] + self.bias2)
        return lw, laws

    def true(self, laws, of, before):
        """With a bias: true levels by conditioning each (variance, covariance with this level) on the reading of variance
        `before` + s^2."""
        if not self.bias2:
            return
        for name, (var, cov) in of.items():
            if laws['x'] is None:
                laws['true ' + name] = (self.m0 + 0 * var, var)
            else:
                gain = cov / (before + laws['s2'])
                laws['true ' + name] = (self.m0 + gain * (laws['x'] - self.m0), var - gain * cov)

    def history(self, sigma_h):
        if not hasattr(self, 'shifted'):
            self.shifted = [(name, ld(o.mean - self.shift), None if o.u is None else ld(o.u**2), o.n) for name, o in self.hist]
        zero = 0 * sigma_h
        return [(name, x + zero, sigma_h**2 / n if u2 is None else u2 + zero) for name, x, u2, n in self.shifted]

    def single(self, lw, laws, m0, v0):
        x, s2 = laws['x'], laws['s2']
        laws['v0'] = v0
        if x is None:
            laws['this'], laws['lw'] = (m0, v0), lw
            return
        b = v0 / (v0 + s2)
        laws['this'] = (b * x + (1 - b) * m0, b * s2)
        laws['lw'] = lw - np.log(v0 + s2) / 2 - (x - m0) ** 2 / (2 * (v0 + s2))

    def about(self, lw, laws, obs, tau, flat):
        w = [1 / (tau**2 + v) for _, _, v in obs]
        v_run = None if flat else self.v0 + self.bias2
        prec = sum(w) + (0 if flat else 1 / v_run)
        mu = (sum(a * x for a, (_, x, _) in zip(w, obs)) + (0 if flat else self.m0 / v_run)) / prec
        var = 1 / prec
        lw = lw + sum(np.log(a) for a in w) / 2 - np.log(prec) / 2 - sum(a * (x - mu) ** 2 for a, (_, x, _) in zip(w, obs)) / 2
        if not flat:
            lw = lw - (mu - self.m0) ** 2 / (2 * v_run)
        laws['lw'] = lw
        laws['long run'], laws['next'] = (mu, var), (mu, tau**2 + var)
        given = {}
        for name, x, v in obs:
            b = tau**2 / (tau**2 + v)
            given[name] = (b, x, v, v / (tau**2 + v))
        if 'now' not in given:
            laws['this'] = (mu, tau**2 + var)
            return
        b, x, v, c = given['now']
        laws['this'] = (b * x + c * mu, b * v + c * c * var)
        laws['change long run'] = (b * (x - mu), b * v + b * b * var)
        for name, (ba, xa, va, ca) in given.items():
            if name != 'now':
                # B_a - B_n as a difference of complements keeps its digits
                d = c - ca
                laws['change ' + name] = (b * x - ba * xa + d * mu, b * v + ba * va + d * d * var)

    def walk(self, lw, laws, obs, x, s2, tau):
        """Levels 0 at the first period plus steps; first level flat; dense covariances, generalised least squares."""
        first = int(obs[0][0])
        now = int(self.now)
        at = [int(n) - first for n, _, _ in obs]
        y, noise = [q for _, q, _ in obs], [v for _, _, v in obs]
        if x is not None:
            at, y, noise = at + [now - first], y + [x], noise + [s2]
        q = tau**2
        m = len(at)
        K = [[q * min(at[i], at[j]) + (noise[i] if i == j else 0) for j in range(m)] for i in range(m)]
        rows = [list(y), [np.ones_like(q) for _ in at]]
        goals = {'this': now - first, 'next': now - first + 1}
        cov = {g: [q * min(a, b) for b in at] for g, a in goals.items()}
        var = {g: q * a for g, a in goals.items()}
        coef = {g: 1 for g in goals}
        for (name, _, _), a in zip(obs, at):
            g = 'change ' + name
            if x is not None:
                cov[g] = [q * (min(now - first, b) - min(a, b)) for b in at]
                var[g], coef[g] = q * (now - first - a), 0
        rows += [cov[g] for g in cov]
        # L L^T = K, forward substitution of all right-hand sides
        L = [[None] * m for _ in range(m)]
        Z = [[None] * m for _ in rows]
        for i in range(m):
            for j in range(i + 1):
                acc = K[i][j] - sum((L[i][k] * L[j][k] for k in range(j)), 0 * q)
                L[i][j] = np.sqrt(acc) if i == j else acc / L[j][j]
            for r, row in enumerate(rows):
                Z[r][i] = (row[i] - sum((L[i][k] * Z[r][k] for k in range(i)), 0 * q)) / L[i][i]
        dot = lambda a, b: sum(p * r for p, r in zip(a, b))
        one = dot(Z[1], Z[1])
        mu = dot(Z[1], Z[0]) / one
        res = [a - mu * b for a, b in zip(Z[0], Z[1])]
        laws['lw'] = lw - sum(np.log(L[i][i]) for i in range(m)) - np.log(one) / 2 - dot(res, res) / 2
        for g, z in zip(cov, Z[2:]):
            d = coef[g] - dot(z, Z[1])
            laws[g] = (coef[g] * mu + dot(z, res), var[g] - dot(z, z) + d * d / one)
        # prior variance of this level: the same without the present reading
        if x is not None:
            keep = dict(laws)
            inner = {'x': None, 's2': None}
            self.walk(lw, inner, obs, None, None, tau)
            laws.clear(), laws.update(keep)
            laws['v0'] = inner['this'][1]

    # ---- nodes --------------------------------------------------------------------------------------------------
    def box(self, present):
        k = len(self.axes)
        call = lambda pts: self.at(**dict(zip(self.axes, [LD(1) * p for p in pts])), present=present)[0]
        centre = np.array([self.guess(a) for a in self.axes])
        best = -np.inf
        offs = np.arange(-30, 31, 1.0) if k < 3 else np.arange(-12, 13, 2.0)
        grid = np.meshgrid(*[c + offs for c in centre], indexing='ij')
        v = call([g.ravel() for g in grid])
        i = int(np.argmax(v))
        x = np.array([g.ravel()[i] for g in grid])
        for half in ([1.5 * 0.55**i for i in range(14)] if self.quick else []):       # one of many like solutions: near is enough
            at = np.linspace(-half, half, 21 if k == 1 else 9)
            grid = [g.ravel() for g in np.meshgrid(*[c + at for c in x], indexing='ij')]
            x = np.array([g[int(np.argmax(call(grid)))] for g in grid])
        for _ in range(0 if self.quick else 3):
            r = minimize(lambda p: -float(call([np.array([q]) for q in p])[0]), x, method='Nelder-Mead',
                         options={'xatol': 1e-7, 'fatol': 1e-10, 'maxiter': 2000, 'initial_simplex': np.vstack([x] + [x + 0.3 * e for e in np.eye(k)])})
            x = r.x
        reach = np.concatenate([[0.0], 0.005 * 1.45 ** np.arange(0, 28)]) if k < 3 else np.concatenate([[0.0], 0.02 * 1.7 ** np.arange(0, 17)])
        offs = np.concatenate([-reach[:0:-1], reach])
        grid = np.meshgrid(*[c + offs for c in x], indexing='ij')
        v = call([g.ravel() for g in grid]).reshape(grid[0].shape).astype(float)
        peak = np.nanmax(v)
        v = np.where(np.isnan(v), -np.inf, v)
        bounds, steps = [], []
        for d in range(k):
            prof = v.max(axis=tuple(j for j in range(k) if j != d))
            inside = np.where(prof > peak - self.cut)[0]
            lo, hi = max(inside[0] - 1, 0), min(inside[-1] + 1, len(offs) - 1)
            assert inside[0] > 0 and inside[-1] < len(offs) - 1, ("box", self.axes, d, prof[0] - peak, prof[-1] - peak)
            bounds.append((x[d] + offs[lo], x[d] + offs[hi]))
            half = np.where(prof > peak - 2.0)[0]      # about two sds either side
            width = (offs[min(half[-1] + 1, len(offs) - 1)] - offs[max(half[0] - 1, 0)]) / 4
            # the profile near the peak, by a parabola on the scan: a safe smaller value
            curv = max(1e-3, min(abs(offs[i]) / np.sqrt(2 * (peak - prof[i])) for i in range(len(offs))
                                 if 0.1 < peak - prof[i] < 3) if any(0.1 < peak - prof[i] < 3 for i in range(len(offs))) else width)
            # Shares and percentiles at c sds: as functions of ln sigma they turn within 1/(c sqrt(n)).
            steep = self.axes[d] == 's' and self.shares
            steps.append(min((0.04 if k == 1 else 0.08) if steep else 0.10, min(width, curv) / (3.2 if steep else 2.0)))
        if k == 3:       # coarser, or there are too many nodes; two steps are compared all the same
            steps = [h * {'t': 1.3, 's': 1.0, 'h': 1.25}[a] for a, h in zip(self.axes, steps)]
        return bounds, steps

    def nodes(self, fine, present=True):
        """Normalised weights, laws, ln of the integral."""
        if not self.axes:
            lw, laws = self.at(present=present)
            del laws['constant']
            return np.ones(1, dtype=LD), laws, lw[0]
        key = 'box%d' % present
        if not hasattr(self, key):
            setattr(self, key, self.box(present))
        bounds, steps = getattr(self, key)
        grids = []
        for (lo, hi), h in zip(bounds, steps):
            h = h * (2 / 3 if fine else 1)
            count = int(np.ceil((hi - lo) / h)) + 1
            grids.append(LD(lo) + np.arange(count).astype(LD) * LD(h))
        pts = [g.ravel() for g in np.meshgrid(*grids, indexing='ij')]
        hs = np.prod([LD(s * (2 / 3 if fine else 1)) for s in steps])
        # pruned first, so that the laws are only formed where they count
        chunk = 200000
        part = lambda i: {a: p[i:i + chunk] for a, p in zip(self.axes, pts)}
        lw = np.concatenate([self.at(**part(i), present=present)[0] for i in range(0, len(pts[0]), chunk)])
        peak = lw.max()
        ok = lw > peak - self.cut + (4 if len(self.axes) < 3 else 10)
        pts = [p[ok] for p in pts]
        lws, several = [], []
        for i in range(0, len(pts[0]), chunk):
            lw, laws = self.at(**part(i), present=present)
            lws.append(lw)
            several.append({k: v for k, v in laws.items() if self.changes or not k.startswith('change')})
        lw, laws = np.concatenate(lws), joined(several)
        w = np.exp(lw - peak)
        total = w.sum()
        return w / total, laws, peak + np.log(total * hs) + laws.pop('constant')


class Posterior:
    def __init__(self, spec, data, series, now, log, fine, present=True, models=None, move=None, shift=None, sd_h=None):
        """`present` false leaves this period's readings out."""
        self.present = present
        first = data[series].get(now) or list(data[series].values())[-1]
        self.shift = mp.mpf(first.mean) if shift is None else shift
        self.log, self.spec, self.series = log, spec, series
        P = spec['prior']
        def mk(prior=None):
            model = Model(spec, data, series, now, log, prior, self.shift)
            model.quick = shift is not None
            if model.quick and model.has_tau and model.between == 'uniform':
                model.widen([len(model.hist) - 2])     # the prior's own sd is asked for
            if sd_h is not None:
                model.known_history(sd_h)
            return model
        cache = spec.setdefault('_models', {}) if models is None else models
        if P['from'] == 'mixture':
            parts = []
            for i, part in enumerate(P['parts']):
                model = cache.setdefault((series, i), mk(part))
                if move is not None:
                    model.move = move
                w, laws, z = model.nodes(fine, present)
                z0 = model.nodes(fine, present=False)[2]
                parts.append((ld(part['weight']), w, laws, z - z0))
            top = max(z for _, _, _, z in parts)
            ws = [c * np.exp(z - top) * w for c, w, _, z in parts]
            total = sum(w.sum() for w in ws)
            self.w = np.concatenate(ws) / total
            self.laws = {}
            for k in set.intersection(*[set(l) for _, _, l, _ in parts]):
                first = parts[0][2][k]
                if isinstance(first, tuple):
                    self.laws[k] = tuple(np.concatenate([l[k][i] + np.zeros(len(w), dtype=LD) for _, w, l, _ in parts]) for i in (0, 1))
                else:
                    self.laws[k] = None if parts[0][2][k] is None else np.concatenate([l[k] + np.zeros(len(w), dtype=LD) for _, w, l, _ in parts])
            self.model = mk(P['parts'][0])
        else:
            self.model = cache.setdefault(series, mk())
            if move is not None:
                self.model.move = move
            self.w, self.laws, _ = self.model.nodes(fine, present)

    def mix(self, name, extra=0):
        m, v = self.laws[name]
        return Mix(self.w, m, v + extra)

    def out(self, t):
        x = big(t) + self.shift
        return mp.exp(x) if self.log else x

    def limit(self, L):
        return ld((mp.log(mp.mpf(L)) if self.log else mp.mpf(L)) - self.shift)
