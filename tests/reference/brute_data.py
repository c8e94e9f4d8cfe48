"""Ground of answers.py: the readings and sums of a spec, with mpmath."""
import mpmath as mp


class Obs:
    """One series' readings of one period, shifted: n, mean, ss; or mean and u; or readings with own u."""
    def __init__(self, n=None, mean=None, ss=None, u=None, xs=None, us=None):
        self.n, self.mean, self.ss, self.u, self.xs, self.us = n, mean, ss, u, xs, us


def read(spec):
    log = spec['quantity'].get('scale') == 'log'
    tr = (lambda x: mp.log(mp.mpf(x))) if log else (lambda x: mp.mpf(x))
    now = str(spec['review']['period'])
    raw = {}
    for table in spec.get('readings', []):
        key = (table.get('in_series', spec['quantity']['name']), str(table.get('in_period', now)))
        us = table.get('uncertainties') or [None] * len(table['values'])
        raw.setdefault(key, []).extend(zip([tr(v) for v in table['values']], us))
    out = {}
    for (series, period), rows in raw.items():
        xs = [x for x, _ in rows]
        n = len(xs)
        if rows[0][1] is not None:
            o = Obs(xs=xs, us=[mp.mpf(u) for _, u in rows], mean=mp.fsum(xs) / n)
        else:
            m = mp.fsum(xs) / n
            o = Obs(n=n, mean=m, ss=mp.fsum((x - m) ** 2 for x in xs))
        out.setdefault(series, {})[period] = o
    for table in spec.get('summaries', []):
        for row in table['rows']:
            series = row.get('series', spec['quantity']['name'])
            if log:
                m = mp.mpf(row['log_mean']) if 'log_mean' in row else mp.log(mp.mpf(row['geometric_mean']))
                sd = mp.mpf(row['log_sd']) if 'log_sd' in row else (mp.log(mp.mpf(row['geometric_sd'])) if 'geometric_sd' in row else mp.mpf(0))
            else:
                m, sd = mp.mpf(row['mean']), mp.mpf(row.get('sd', 0))
            if 'uncertainty' in row:
                o = Obs(mean=m, u=mp.mpf(row['uncertainty']))
            else:
                o = Obs(n=row['n'], mean=m, ss=(row['n'] - 1) * sd * sd)
            out.setdefault(series, {})[str(row['period'])] = o
    return out, log, now
