#!/usr/bin/env python3
"""Time drumlin's evaluators beside general numerical libraries, in one run.

Run from the repository's root, on a machine as calm as can be had:

    python3 testdata/gen/peers.py [--quick]

Needs numpy, scipy, scikit-learn and Go. Everything runs on one core, and what
is compared is processor time, which other work on the machine disturbs least.
Prints one line per comparison, with the ratio; writes nothing.

Problems (both sides draw the same distribution, not the same numbers):
  ridges   100,000 events of five slanted clusters, scale 150, 128 x 128 queries
  surface  10 million such events, a density on about 1024 x 1024 nodes
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import subprocess
import sys
import time

import numpy as np
from scipy.ndimage import gaussian_filter
from scipy.stats import gaussian_kde
from sklearn.neighbors import KernelDensity

H = 150.0


def ridges(n, seed):
    rng = np.random.default_rng(seed)
    k = rng.integers(0, 5, n).astype(float)
    u, v = rng.standard_normal(n), rng.standard_normal(n)
    return np.column_stack([1000 * k + 300 * u, 500 * k * k + 100 * v + 200 * u])


def timed(work):
    begin = time.process_time()
    out = work()
    return time.process_time() - begin, out


def direct(events, points):
    """The plain sum, in chunks of events."""
    total = np.zeros(len(points))
    for at in range(0, len(events), 100_000):
        part = events[at : at + 100_000]
        for j, p in enumerate(points):
            d = part - p
            total[j] += np.exp(-0.5 * (d * d).sum(axis=1) / H**2).sum()
    return total / (2 * np.pi * H**2 * len(events))


def ours(pattern, short):
    command = ["go", "test", "-run", "xxx", "-bench", pattern, "-benchtime", "3x", "-cpu", "1", "-timeout", "30m", "./mv"]
    if short:
        command.insert(2, "-short")
    text = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    found = {}
    for line in text.splitlines():
        if line.startswith("Benchmark"):
            words = line.split()
            values = {unit: float(number) for number, unit in zip(words[2::2], words[3::2])}
            found[words[0]] = values  # one processor: no suffix
    return found


def main():
    quick = "--quick" in sys.argv
    n = 100_000
    x = ridges(n, 1)
    lo, hi = x.min(axis=0) - 300, x.max(axis=0) + 300
    gx, gy = np.meshgrid(np.linspace(lo[0], hi[0], 128), np.linspace(lo[1], hi[1], 128))
    q = np.column_stack([gx.ravel(), gy.ravel()])
    m = ours("PeerRidges", quick)
    tree = {r: m["BenchmarkPeerRidges/tree/rtol=%s,atol=0" % r]["cpu-s/op"] for r in ("0.001", "1e-06")}
    lattice = m["BenchmarkPeerRidges/lattice/rtol=0,atol=1e-12"]["cpu-s/op"]
    print("ridges   ours, tree                 rtol 1e-3 %.3f s, rtol 1e-6 %.3f s" % (tree["0.001"], tree["1e-06"]))
    print("ridges   ours, lattice              atol 1e-12 (1e-6 of the maximum) %.3f s" % lattice)

    # A tree that takes minutes is timed on every 4th query and scaled up.
    every = 16 if quick else 4
    def peer_tree():
        return KernelDensity(bandwidth=H, rtol=1e-3, algorithm="kd_tree").fit(x).score_samples(q[::every])
    t, log = timed(peer_tree)
    t *= every
    sample = np.random.default_rng(5).choice(len(q) // every, 60, replace=False)
    truth = direct(x, q[::every][sample])
    seen = truth > 1e-6 * truth.max()  # far out its tolerance does not hold
    err = np.max(np.abs(np.exp(log[sample]) - truth)[seen] / truth[seen])
    print("ridges   scikit-learn kd_tree       rtol 1e-3 %.1f s (relative error %.2g above 1e-6 of the maximum): ours is %.0f times faster at rtol 1e-3, %.0f at 1e-6"
          % (t, err, t / tree["0.001"], t / tree["1e-06"]))

    thin = 20  # a direct evaluator is given every 20th query
    t, f = timed(lambda: gaussian_kde(x.T, bw_method=1).evaluate(q[:: thin * 8].T))
    t *= thin * 8
    print("ridges   scipy gaussian_kde         all events, every %d. query, scaled up: %.0f s: ours is %.0f times faster at rtol 1e-6, %.0f by lattice"
          % (thin * 8, t, t / tree["1e-06"], t / lattice))

    n = 200_000 if quick else 10_000_000
    m = ours("PeerSurface", quick)
    read, tally, both = (m["BenchmarkPeerSurface/" + k] for k in ("read", "tally", "tally_and_surface"))
    print("surface  ours, n = %d: reading %.2f, tally %.1f, tally and surface %.1f ns an event; %.0f x %.0f nodes, error %.2g of the maximum"
          % (n, read["cpu-ns/event"], tally["cpu-ns/event"], both["cpu-ns/event"], both["nodes-x"], both["nodes-y"], both["error-1e-9-of-max"] * 1e-9))
    x = ridges(n, 3)
    lo, hi = x.min(axis=0), x.max(axis=0)

    def peer_surface():
        h, ex, ey = np.histogram2d(x[:, 0], x[:, 1], bins=1024, range=[[lo[0] - 600, hi[0] + 600], [lo[1] - 600, hi[1] + 600]])
        step = (ex[1] - ex[0], ey[1] - ey[0])
        f = gaussian_filter(h, (H / step[0], H / step[1]), mode="constant") / (n * step[0] * step[1])
        return f, ex[:-1] + step[0] / 2, ey[:-1] + step[1] / 2
    t, (f, cx, cy) = timed(peer_surface)
    at = np.argwhere(f > f.max() / 100)
    at = at[np.linspace(0, len(at) - 1, 12).astype(int)]
    truth = direct(x, np.column_stack([cx[at[:, 0]], cy[at[:, 1]]]))
    err = np.max(np.abs(f[at[:, 0], at[:, 1]] - truth)) / f.max()
    print("surface  histogram2d, gaussian_filter %.1f ns an event, error %.2g of the maximum: ours is %.1f times faster and %.0f times closer"
          % (t / n * 1e9, err, t / both["cpu-s/op"], err / (both["error-1e-9-of-max"] * 1e-9)))


if __name__ == "__main__":
    main()
