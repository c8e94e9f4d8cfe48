"""Makes f_cdf.csv, f_sf.csv and the *_large.csv tables of this folder with mpmath, by direct integration.

Run in this folder: python3 make_large.py
"""
from mpmath import mp, mpf, quad, exp, log, log1p, loggamma, sqrt, erfc, pi, nstr

mp.dps = 40


def pieces(lo, hi, parts):
    return [lo + (hi - lo) * mpf(i) / parts for i in range(parts + 1)]


def scaled_quad(ln_f, points):
    """The integral of exp(ln_f), relative to its highest value on the points: quad stops on an absolute error."""
    top = max(ln_f(point) for point in points)
    return quad(lambda z: exp(ln_f(z) - top), points) * exp(top)


def write(name, header, rows):
    with open(name, "w") as out:
        out.write(header + "\n")
        for row in rows:
            out.write(",".join(row) + "\n")


def gamma_tails(a, x):
    """P and Q of shape a by integrating the density in z = (t - a)/sqrt(a)."""
    a, x = mpf(a), mpf(x)
    root = sqrt(a)
    ln_constant = a * log(a) - a - loggamma(a) - log(root) + log(1)

    def ln_density(z):
        mu = z / root
        return ln_constant + (a - 1) * log1p(mu) - a * mu

    z = (x - a) / root
    # exp(-z^2/2) falls below 1e-400 at 43; the gamma's upper tail is a little heavier.
    lower = scaled_quad(ln_density, pieces(max(-root * mpf("0.999999"), min(z, 0) - 45), z, 60))
    upper = scaled_quad(ln_density, pieces(z, max(z, 0) + 60, 60))
    return lower, upper


rows_p, rows_q = [], []
for a in ["2000000.0", "50000000.0"]:
    for z in [-37, -20, -8, -3, -1, -0.1, 0, 0.1, 1, 3, 8, 20, 36]:
        x = float(mpf(a) + sqrt(mpf(a)) * z)
        lower, upper = gamma_tails(a, x)
        rows_p.append(["gamma_p", a, repr(x), nstr(lower, 25)])
        rows_q.append(["gamma_q", a, repr(x), nstr(upper, 25)])
write("gamma_p_large.csv", "function,a,x,value", rows_p)
write("gamma_q_large.csv", "function,a,x,value", rows_q)


def f_tails(f, d1, d2):
    """Both tails of F by integrating the density of w = ln f outward from f."""
    f, d1, d2 = mpf(f), mpf(d1), mpf(d2)
    a, b = d1 / 2, d2 / 2
    ln_beta = loggamma(a) + loggamma(b) - loggamma(a + b)

    def ln_density(w):
        ratio = exp(w) * d1 / d2
        # x^a (1-x)^b / B with x = ratio/(1+ratio)
        return a * log(ratio) - (a + b) * log1p(ratio) - ln_beta

    w = log(f)
    sd = sqrt(2 / d1 + 2 / d2)
    down = min(w, 0) - 60 * sd - 120 / a
    up = max(w, 0) + 60 * sd + 120 / b
    return scaled_quad(ln_density, pieces(down, w, 80)), scaled_quad(ln_density, pieces(w, up, 80))


rows_c, rows_s = [], []
for d1, d2 in [(1, 1), (1, 5), (2, 0.5), (3, 17), (9, 4), (20, 20), (50, 1000), (1, 100000), (7, 1e6), (500, 300)]:
    for f in [0.001, 0.2, 0.7, 1.0, 1.3, 3.0, 12.0, 90.0]:
        sd = (2 / d1 + 2 / d2) ** 0.5
        if abs(float(log(f))) > 25 * sd:
            continue
        lower, upper = f_tails(f, d1, d2)
        rows_c.append(["f_cdf", repr(float(d1)), repr(float(d2)), repr(f), nstr(lower, 25)])
        rows_s.append(["f_sf", repr(float(d1)), repr(float(d2)), repr(f), nstr(upper, 25)])
write("f_cdf.csv", "function,df1,df2,f,value", [r for r in rows_c if mpf(r[-1]) > mpf("1e-300")])
write("f_sf.csv", "function,df1,df2,f,value", [r for r in rows_s if mpf(r[-1]) > mpf("1e-300")])


def noncentral_tail(t, df, delta):
    """P(T > t) by integrating Phi-bar(t s - delta) over the density of u = ln s, u = v/sqrt(2 df)."""
    t, df, delta = mpf(t), mpf(df), mpf(delta)
    a = df / 2
    root = sqrt(2 * df)
    ln_constant = log(2) + a * log(a) - loggamma(a) - log(root)

    def ln_integrand(v):
        u = v / root
        chance = erfc((t * exp(u) - delta) / sqrt(mpf(2))) / 2
        return ln_constant + df * u - a * exp(2 * u) + log(chance)

    return scaled_quad(ln_integrand, pieces(mpf(-45), mpf(45), 90))


rows_s, rows_c = [], []
for df in ["5000.0", "1000000.0", "100000000.0"]:
    for delta, ts in [("0.5", [-6, -1, 0.5, 3, 12]), ("20.0", [5, 15, 19.9, 22, 30]), ("300.0", [280, 299, 301, 330])]:
        for t in ts:
            upper = noncentral_tail(t, df, delta)
            lower = noncentral_tail(-t, df, -mpf(delta))
            rows_s.append(["nct_sf", df, delta, repr(float(t)), nstr(upper, 25)])
            rows_c.append(["nct_cdf", df, delta, repr(float(t)), nstr(lower, 25)])
write("nct_sf_large.csv", "function,df,delta,t,value", [r for r in rows_s if mpf(r[-1]) > mpf("1e-300")])
write("nct_cdf_large.csv", "function,df,delta,t,value", [r for r in rows_c if mpf(r[-1]) > mpf("1e-300")])
