"""Ground of answers.py: answers under the standing alternatives of the sensitivity section, each model solved anew."""
import numpy as np
import mpmath as mp
from brute_normal import LD, Mix, big, ld

# An answer about the next period or the long run keeps its own prior when this period's is moved.
ASKED = ('level interval', 'level chance', 'reading interval', 'reading chance', 'share beyond', 'percentile', 'characteristic value', 'classes')


def alternatives(spec, post, data, now, solve):
    """(id, posterior); `solve(spec, move, sd_h)`."""
    P, W = spec['prior'], spec['within']
    if P['from'] == 'flat':
        return
    # The prior's median, and its sd or half its range from 16 to 84 %.
    prior = solve(spec, present=False)
    law = prior.mix('this')
    periods = len(post.model.hist)
    finite = not (post.model.has_tau and post.model.between == 'uniform' and periods < 5)
    if P['from'] in ('stated', 'quantiles') and post.model.tau is None:
        q, sd = post.model.m0, np.sqrt(post.model.v0)
    else:
        q = law.quantile(mp.mpf(1) / 2)
        mean = law.mean()
        sd = np.sqrt(np.sum(law.w * (law.s**2 + (law.m - mean) ** 2))) if finite else \
            (law.quantile(mp.mpf('0.84')) - law.quantile(mp.mpf('0.16'))) / 2
    yield 'flat prior', solve({**spec, 'prior': {'from': 'flat'}})
    yield 'prior sd halved', solve(spec, (q, LD(0.5), LD(0)))
    yield 'prior sd doubled', solve(spec, (q, LD(2), LD(0)))
    yield 'prior mean one sd lower', solve(spec, (q, LD(1), -sd))
    yield 'prior mean one sd higher', solve(spec, (q, LD(1), sd))
    if post.model.sd is not None and W['from'] == 'stated':
        for name, c in (('within sd x 0.8', mp.mpf(4) / 5), ('within sd x 1.25', mp.mpf(5) / 4)):
            yield name, solve({**spec, 'within': {**W, 'sd': c * mp.mpf(W['sd'])}})
        yield 'within sd from readings', solve({**spec, 'within': {'from': 'readings'}}, sd_h=post.model.sd)
    elif W['from'] in ('stated', 'history'):
        yield 'within sd from readings', solve({**spec, 'within': {'from': 'readings'}})
    if P['from'] == 'history' and P.get('between', 'uniform') == 'uniform' and 'between_sd' not in P and 1 < periods < 10:
        means = [o.mean for _, o in post.model.hist]
        m = mp.fsum(means) / periods
        scale = mp.sqrt(mp.fsum((x - m) ** 2 for x in means) / (periods - 1))
        yield 'half-normal between', solve({**spec, 'prior': {**P, 'between': 'half-normal', 'between_scale': scale}})
