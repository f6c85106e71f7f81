"""Reads "name value" lines, prints a table and writes a report.

table.py FIGURES REPORT
"""

import json
import sys

# What is aimed at: at most (<=) or at least (>=) so much.
TARGETS = {
    "sweep_over_read_limit": ("<=", 2.0),
    "sweep_over_c_fused": ("<=", 0.6),
    "sweep_over_c_tuned": ("<=", 1.4),
    "c_tuned_over_read_limit": ("<=", 1.7),
    "sweep_f64_over_read_limit": ("<=", 2.0),
    "numpy_over_sweep": (">=", 20.0),
    "exact_sum_over_plain_sum": ("<=", 1.5),
    "stations_10000_over_1": ("<=", 4.0),
    "host_overhead_percent": ("<=", 1.0),
    "fixed_cost_us": ("<=", 10.0),
    "fixed_cost_2_ranks_us": ("<=", 100.0),
}


def shown(value):
    return "" if value is None else f"{value:.4g}"


def main():
    with open(sys.argv[1]) as lines:
        report = {name: float(value) for name, value in (line.split() for line in lines)}
    with open(sys.argv[2], "w") as file:
        json.dump(report, file, indent=2)
        file.write("\n")
    rows = [name for name in report if not name.endswith(("_min", "_max"))]
    # What is held against a target comes first, in the order of the targets.
    rows.sort(key=lambda name: list(TARGETS).index(name) if name in TARGETS else len(TARGETS))
    print(f"{'':34}{'median':>11}{'least':>11}{'most':>11}  target")
    for name in rows:
        value = report[name]
        line = f"{name:34}{shown(value):>11}{shown(report.get(name + '_min')):>11}{shown(report.get(name + '_max')):>11}"
        if name in TARGETS:
            relation, bound = TARGETS[name]
            met = value <= bound if relation == "<=" else value >= bound
            line += f"  {relation} {bound:<5g} {'met' if met else 'NOT MET'}"
        print(line)
    for name in TARGETS:
        if name not in report:
            print(f"{name:34} not measured")


main()
