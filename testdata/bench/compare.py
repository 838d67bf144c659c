#!/usr/bin/python3
"""The line and its peers on the same recordings in one run: one core each, one thread, one after the other, several
times round.

    compare.py BIN RECORDINGS_DIR [--rounds 5] [--yardstick scipy_line.py] [--core 0]

BIN is bin/lapwing. For each NAME-CHANNELS.wav: "line" is lapwing review to its summary, "line+records" the same with
one JSON record a turn, "peer" is peer.py beside this file, "yardstick" the shared script that does part of the work.
Printed are minimum, median and maximum of the CPU seconds (user and system) of a whole run, with the peers' time to
start Python and import numpy and scipy taken off, the peak memory, and the ratio to the line of the same round. CPU
seconds are compared because others may be using the machine; wall-clock ratios are printed beside them.
"""
import argparse
import json
import os
import statistics
import subprocess
import sys
import time

HERE = os.path.dirname(os.path.abspath(__file__))
ENV = dict(os.environ, GOMAXPROCS="1", OMP_NUM_THREADS="1", OPENBLAS_NUM_THREADS="1", MKL_NUM_THREADS="1")


def run(core, argv):
    """CPU seconds, wall seconds, peak MB and what was printed."""
    t0 = time.perf_counter()
    p = subprocess.Popen(["taskset", "-c", str(core)] + argv, env=ENV, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL)
    text = p.stdout.read().decode()
    _, status, use = os.wait4(p.pid, 0)
    wall = time.perf_counter() - t0
    p.returncode = os.waitstatus_to_exitcode(status)
    if p.returncode != 0:
        sys.exit("compare: %s failed (%d)" % (" ".join(argv), p.returncode))
    return use.ru_utime + use.ru_stime, wall, use.ru_maxrss / 1024, text


def spread(x):
    return "%.2f / %.2f / %.2f" % (min(x), statistics.median(x), max(x))


def main():
    a = argparse.ArgumentParser()
    a.add_argument("bin")
    a.add_argument("dir")
    a.add_argument("--rounds", type=int, default=5)
    a.add_argument("--yardstick")
    a.add_argument("--core", type=int, default=0)
    o = a.parse_args()
    start = [sys.executable, "-c", "import numpy; from scipy import ndimage, signal; from scipy.io import wavfile"]
    idle = min(run(o.core, start)[0] for _ in range(5))
    print("one core, %d rounds; starting Python with numpy and scipy: %.2f s, taken off the peers" % (o.rounds, idle))
    for wav in sorted(f for f in os.listdir(o.dir) if f.endswith(".wav")):
        rec = os.path.join(o.dir, wav)
        channels = int(wav[:-4].rsplit("-", 1)[1])
        half = (channels - 1) // 2
        review = [o.bin, "review", "--skid", rec[:-4] + ".yaml", rec]
        jobs = {"line": review, "line+records": review + ["--out", os.devnull],
                "peer": [sys.executable, os.path.join(HERE, "peer.py"), rec, str(half // 2)]}
        if o.yardstick and os.path.exists(o.yardstick):
            lists = [",".join(str(c) for c in range(k, k + half)) for k in (1, 1 + half)]
            jobs["yardstick"] = [sys.executable, o.yardstick, "--pressures", lists[0], "--accels", lists[1], rec]
        got = {k: [] for k in jobs}
        for _ in range(o.rounds):
            for k, argv in jobs.items():
                cpu, wall, mb, text = run(o.core, argv)
                if k in ("peer", "yardstick"):
                    report = json.loads(text)
                    cpu, wall, seconds = cpu - idle, report["work_s"], report["signal_s"]
                got[k].append((cpu, wall, mb))
        print("\n%s, %d channels, %.0f s of signal" % (wav, channels, seconds))
        print("  %-13s %-22s %-10s %-8s %-26s %s" % ("", "CPU s min/median/max", "x real", "MB", "line's speed / its, CPU", "wall clock"))
        for k, rows in got.items():
            cpu = [r[0] for r in rows]
            ratio = [r[0] / l[0] for r, l in zip(rows, got["line"])]
            walls = [r[1] / l[1] for r, l in zip(rows, got["line"])]
            print("  %-13s %-22s %-10.1f %-8.0f %-26s %s" % (k, spread(cpu), seconds / statistics.median(cpu), max(r[2] for r in rows),
                                                              spread(ratio), spread(walls)))
        line = statistics.median(r[0] for r in got["line"])
        print("  the line: %.1f ns of CPU per sample and channel" % (1e9 * line / (seconds * 51200 * channels)))


if __name__ == "__main__":
    main()
