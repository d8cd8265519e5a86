#!/usr/bin/env python3
"""Time least-squares cross-validation against a general statistics library.

    go build -o drumlin ./cmd/drumlin
    /usr/bin/python3 testdata/gen/peers_bandwidth.py ./drumlin

Both choose a diagonal bandwidth by least-squares cross-validation for the same
1,000 rows (testdata/events/fiji-quakes.csv, shaken by up to half a unit of the
last digit so that no two stand at one place, seeded). drumlin's time is that of
the whole process, start and reading included, the median of five; the
library's is that of the search alone, once, in a process that has it loaded.
Times are on the wall and, since other work on the machine disturbs that less,
of the processors (drumlin uses two where it can, the library one).
Needs Debian's python3-statsmodels and python3-numpy.
"""
import csv
import json
import os
import statistics
import subprocess
import sys
import tempfile
import time

import numpy as np
from statsmodels.nonparametric.kernel_density import KDEMultivariate


def children():
    """Processor time of finished child processes."""
    t = os.times()
    return t.children_user + t.children_system


def main():
    program = sys.argv[1]
    here = os.path.dirname(os.path.abspath(__file__))
    with open(os.path.join(here, "..", "events", "fiji-quakes.csv")) as f:
        rows = [(float(r["long"]), float(r["lat"])) for r in csv.DictReader(f)]
    rng = np.random.default_rng(1)
    x = np.array(rows) + rng.uniform(-0.005, 0.005, (len(rows), 2))
    x *= 1000  # a plane without a place wants metres; the scale changes nothing
    with tempfile.TemporaryDirectory() as folder:
        name = os.path.join(folder, "events.csv")
        with open(name, "w") as f:
            f.write("x,y\n")
            f.writelines(f"{a:.6f},{b:.6f}\n" for a, b in x)
        command = [program, "bandwidth", name, "--crs", "plane", "--bandwidth", "lscv", "--shape", "diagonal", "--json", "--quiet"]
        times, busy = [], []
        for _ in range(5):
            start, used = time.perf_counter(), children()
            out = subprocess.run(command, check=True, capture_output=True).stdout
            times.append(time.perf_counter() - start)
            busy.append(children() - used)
    row = json.loads(out)["selectors"][0]
    ours, cpu = statistics.median(times), statistics.median(busy)
    h = [row["matrix_m2"][0] ** 0.5, row["matrix_m2"][3] ** 0.5]
    start, used = time.perf_counter(), time.process_time()
    kde = KDEMultivariate(x, var_type="cc", bw="cv_ls")
    theirs, their_cpu = time.perf_counter() - start, time.process_time() - used
    print(f"rows {len(x)}")
    print(f"drumlin      {ours:8.3f} s, {cpu:.3f} of processors  h {h[0]:.2f} {h[1]:.2f}  criterion {row['criterion']:.6e}  ({row['status']})")
    print(f"statsmodels  {theirs:8.3f} s, {their_cpu:.3f} of processors  h {kde.bw[0]:.2f} {kde.bw[1]:.2f}  criterion {kde.imse(kde.bw):.6e}")
    print(f"ratio        {theirs / ours:8.1f}, {their_cpu / cpu:.1f} of processors")


if __name__ == "__main__":
    main()
