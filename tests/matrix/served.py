# SPDX-License-Identifier: Apache-2.0
"""Served equals rehearsed: the release suite over real Modbus and in rehearsal.

    served.py [SEED]

Same verdict of every test; at least 95 % of the metrics agree within their
combined uncertainty, all within 1.5 times it. Combined is the root of the sum
of squares of both half-widths, each at its metric's own coverage; a metric
with guaranteed bounds counts with the half-width of its interval.
"""
import math
import pathlib
import sys

sys.path.insert(0, str(pathlib.Path(__file__).resolve().parents[1] / "bench"))
import bench  # noqa: E402


def metrics(run):
    found = {}
    for suite in run.results()["suites"]:
        for test in suite["tests"]:
            for number, check in enumerate(test.get("checks", [])):
                for metric in check["metrics"]:
                    found[test["name"], number, metric["name"]] = metric
    return found


def half_width(metric):
    low, high, value = metric["low"], metric["high"], metric["value"]
    if low is None or high is None or value is None:
        return None
    return max(high - value, value - low)


def apart(a, b):
    """Difference in units of the combined uncertainty; None where one is no number."""
    wide_a, wide_b = half_width(a), half_width(b)
    if wide_a is None or wide_b is None:
        return None
    combined, difference = math.hypot(wide_a, wide_b), abs(a["value"] - b["value"])
    if difference == 0:
        return 0.0
    return difference / combined if combined > 0 else math.inf


def main():
    seed = sys.argv[1] if len(sys.argv) > 1 else "1"
    checks = bench.Checks()
    with bench.folder() as base:
        rehearsed = bench.rehearse(bench.RELEASE, f"{base}/rehearsed", "--seed", seed)
        with bench.Served(seed=seed) as server:
            served = bench.run(server, bench.RELEASE, f"{base}/served", timeout=400)
        checks.that(rehearsed.code == served.code == 0,
                    f"exit {rehearsed.code} rehearsed, {served.code} served\n{served.stdout}")
        for name, verdict in rehearsed.verdicts().items():
            checks.that(served.verdicts().get(name) == verdict,
                        f"{name}: {verdict} rehearsed, {served.verdicts().get(name)} served")
        one, other = metrics(rehearsed), metrics(served)
        ratios = []
        for key, metric in one.items():
            if not checks.that(key in other, f"{key} is only in the rehearsal"):
                continue
            ratio = apart(metric, other[key])
            if ratio is None:
                checks.that(metric["value"] == other[key]["value"],
                            f"{key}: {metric['value']} and {other[key]['value']}")
                continue
            ratios.append((ratio, key, metric, other[key]))
    ratios.sort(key=lambda row: -row[0])
    within = sum(ratio <= 1 for ratio, *_ in ratios)
    print(f"{len(ratios)} metrics: {100 * within / len(ratios):.1f} % within their combined "
          f"uncertainty, the worst at {ratios[0][0]:.2f} times it")
    for ratio, key, a, b in ratios[:8]:
        print(f"  {ratio:5.2f}  {' '.join(map(str, key))}: {a['value']:.6g} [{a['low']:.6g}, "
              f"{a['high']:.6g}] and {b['value']:.6g} [{b['low']:.6g}, {b['high']:.6g}] {a['unit']}")
    checks.that(within >= 0.95 * len(ratios), "fewer than 95 % of the metrics agree")
    checks.that(ratios[0][0] <= 1.5, f"{ratios[0][1]} differs by {ratios[0][0]:.2f} times")
    checks.exit()


if __name__ == "__main__":
    main()
