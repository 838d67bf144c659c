"""Makes vectors.json: reference results for internal/dsp from scipy and numpy. Run once; the result is kept.

    /usr/bin/python3 gen.py > vectors.json
"""
import json, sys
import numpy, scipy
from scipy import signal, interpolate, stats

rng = numpy.random.default_rng(20)
L = lambda a: [float(v) for v in numpy.ravel(a)]
x = rng.standard_normal(600) + 0.5 + 0.01 * numpy.arange(600)
out = {"scipy": scipy.__version__, "numpy": numpy.__version__, "python": sys.version.split()[0], "x": L(x), "filters": []}
for kind, order, edges, rate in [
    ("lowpass", 1, [400.0], 10000.0), ("lowpass", 2, [5000.0], 51200.0), ("lowpass", 5, [1200.0], 25600.0),
    ("lowpass", 8, [3000.0], 51200.0), ("highpass", 1, [20.0], 1000.0), ("highpass", 2, [2000.0], 51200.0),
    ("highpass", 3, [50.0], 12800.0), ("bandpass", 1, [2000.0, 20000.0], 51200.0),
    ("bandpass", 2, [2000.0, 20000.0], 51200.0), ("bandpass", 2, [10000.0, 20000.0], 51200.0),
    ("bandpass", 2, [2000.0, 11520.0], 25600.0), ("bandpass", 3, [600.0, 4000.0], 51200.0),
    ("bandpass", 3, [2000.0, 22000.0], 51200.0), ("bandpass", 4, [900.0, 1100.0], 25600.0)]:
    wn = edges if len(edges) > 1 else edges[0]
    z, p, k = signal.butter(order, wn, kind, fs=rate, output="zpk")
    sos = signal.butter(order, wn, kind, fs=rate, output="sos")
    f = numpy.linspace(0.001, 0.499, 40) * rate
    _, h = signal.freqz_zpk(z, p, k, worN=f, fs=rate)
    p = p[numpy.lexsort((p.imag, p.real))]
    out["filters"].append({
        "kind": kind, "order": order, "edges": edges, "rate": rate,
        "pole_re": L(p.real), "pole_im": L(p.imag), "b": L(signal.zpk2tf(z, p, k)[0]), "a": L(signal.zpk2tf(z, p, k)[1]),
        "f": L(f), "h_re": L(h.real), "h_im": L(h.imag),
        "sosfilt": L(signal.sosfilt(sos, x)), "sosfiltfilt": L(signal.sosfiltfilt(sos, x))})
q = [0, 0.05, 0.25, 0.5, 0.9, 0.973, 1]
out["stats"] = []
for n in (1, 2, 5, 24, 101):
    v = numpy.round(rng.standard_t(2, n), 2)
    w = numpy.sort(rng.uniform(0, 10, n))
    s = {"x": L(w), "v": L(v), "median": float(numpy.median(v)), "mad": float(stats.median_abs_deviation(v)),
         "q": q, "quantile": L(numpy.quantile(v, q))}
    if n > 2:
        y = 3 - 0.7 * w + 0.2 * v
        r = stats.linregress(w, y)
        t = stats.theilslopes(y, w, method="joint")
        sigma = numpy.sqrt(numpy.sum((y - r.intercept - r.slope * w) ** 2) / (n - 2))
        s |= {"y": L(y), "slope": r.slope, "intercept": r.intercept, "slope_se": r.stderr, "sigma": float(sigma),
              "ts_slope": float(t[0]), "ts_intercept": float(t[1])}
    out["stats"].append(s)
out["curves"] = []
for n in (2, 3, 4, 5, 12, 40):
    kx = numpy.cumsum(rng.uniform(0.2, 2, n))
    ky = numpy.cumsum(rng.uniform(-0.3, 2, n))
    e = numpy.linspace(kx[0] - 0.5, kx[-1] + 0.5, 57)
    c = interpolate.CubicSpline(kx, ky, bc_type="not-a-knot")
    p = interpolate.PchipInterpolator(kx, ky)
    out["curves"].append({"kx": L(kx), "ky": L(ky), "x": L(e), "spline": L(c(e)), "spline_d": L(c(e, 1)),
                          "pchip": L(p(e)), "pchip_d": L(p(e, 1))})
json.dump(out, sys.stdout, separators=(",", ":"))
print()
