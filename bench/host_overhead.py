"""What being recorded costs a whole host: Saltmarsh on two ranks, with the library and without, in turn.

    host_overhead.py PAIRS SIDE STEPS FOLDER      (BUILD names the build folder)

Processor time: what our calls and threads take of what the host's steps take, over all ranks. Wall clock: with over
without, pair by pair, where every second pair runs in the other order; mean and 95 % confidence interval by Student's
t. The library changes nothing in the run, so both do the same work. Prints "name value" lines.
"""

import math
import os
import statistics
import subprocess
import sys

# Two-sided 95 % quantiles of Student's t for 1, 2, … degrees of freedom (Abramowitz & Stegun 1964, table 26.10).
STUDENT = [12.706, 4.303, 3.182, 2.776, 2.571, 2.447, 2.365, 2.306, 2.262, 2.228, 2.201, 2.179, 2.160, 2.145, 2.131]
STUDENT += [2.120, 2.110, 2.101, 2.093, 2.086, 2.080, 2.074, 2.069, 2.064, 2.060, 2.056, 2.052, 2.048, 2.045, 2.042]


def run(side, steps, folder, series):
    """One run; its totals."""
    cost = os.path.join(folder, "cost")
    command = ["scripts/mpirun.sh", "2", os.path.join(os.environ.get("BUILD", "target"), "host/saltmarsh")]
    command += ["--quiet", "--side", side, "--max-steps", steps, "--cost", cost]
    if series is not None:
        command += ["--config", "ffi-examples/saltmarsh/limnograph.toml", "--series", os.path.join(folder, series)]
    done = subprocess.run(command, capture_output=True, text=True)
    if done.returncode != 0 or done.stderr:
        sys.exit(f"host_overhead: {' '.join(command)} ended with {done.returncode}: {done.stderr}")
    with open(cost) as lines:
        return {name: float(value) for name, value in (line.split() for line in lines)}


def tell(name, values):
    print(f"{name} {statistics.median(values):.6g}\n{name}_min {min(values):.6g}\n{name}_max {max(values):.6g}")


def main():
    pairs, side, steps, folder = int(sys.argv[1]), sys.argv[2], sys.argv[3], sys.argv[4]
    shares, calls, walls, own, seconds = [], [], [], [], []
    for pair in range(pairs):
        totals = {}
        for with_library in [True, False] if pair % 2 == 0 else [False, True]:
            totals[with_library] = run(side, steps, folder, f"host{pair}.limno" if with_library else None)
        recorded, plain = totals[True], totals[False]
        ours = recorded["recording_calls_seconds"] + recorded["other_threads_seconds"]
        shares.append(100 * ours / (recorded["processor_seconds"] - ours))
        calls.append(1e6 * recorded["recording_calls_seconds"] / (2 * recorded["steps"]))
        walls.append(100 * (recorded["wall_seconds"] / plain["wall_seconds"] - 1))
        own.append(1e6 * recorded["other_threads_seconds"] / (2 * recorded["steps"]))
        seconds.append(plain["wall_seconds"] / plain["steps"])
    tell("host_overhead_percent", shares)
    tell("host_calls_us_per_step", calls)
    tell("host_threads_us_per_step", own)
    tell("host_step_seconds", seconds)
    tell("host_wall_overhead_percent", walls)
    if pairs > 1:
        mean = statistics.mean(walls)
        quantile = STUDENT[min(pairs - 1, len(STUDENT)) - 1]
        half = quantile * statistics.stdev(walls) / math.sqrt(pairs)
        print(f"host_wall_overhead_percent_mean {mean:.6g}")
        print(f"host_wall_overhead_percent_low {mean - half:.6g}")
        print(f"host_wall_overhead_percent_high {mean + half:.6g}")


main()
