# SPDX-License-Identifier: Apache-2.0
"""How long after the violating reply the first write of the safe state goes out. A benchmark.

    interlock.py [TIMES]   (default 50; an otherwise idle machine is needed for honest figures)

The journal says both: when the reply that violated the interlock was there, and
when the first command of the safe state was sent. Demanded: median within 2 ms,
99 % within 10 ms, plus the transaction in progress (which is included here).
"""
import pathlib
import sys

import bench

SUITE = """suite: interlock
sample: {every: 2 ms, channels: [bench_speed]}
tests:
  - test: OVER
    stimulus:
      - set: {control: 1}
      - set: {speed_command: 1500 rpm}
      - hold: 2 s
    checks:
      - stays_within:
          channel: bench_speed
          between: [-3000 rpm, 3000 rpm]
          ignore_shorter_than: 1 s
          limits: {inside: {is: yes}}
"""


def latency_ms(run):
    events = run.journal()
    violated = next(event["time"] for event in events if event["event"] == "interlock")
    begun = next(i for i, event in enumerate(events)
                 if event["event"] == "rest_begin" and event["time"] >= violated)
    first = next(event for event in events[begun:] if event["event"] == "command")
    return (first["earliest"] - violated) / 1e6


def main():
    times = int(sys.argv[1]) if len(sys.argv) > 1 else 50
    latencies, wrong = [], 0
    with bench.folder() as base:
        base = pathlib.Path(base)
        rig, suite = base / "rig.yaml", base / "suite.yaml"
        text = bench.RIG.read_text()
        old = "between: [-3600 rpm, 3600 rpm], for: 4 ms"
        assert old in text, "the shipped rig has another interlock"
        rig.write_text(text.replace(old, "between: [-800 rpm, 800 rpm]"))
        suite.write_text(SUITE)
        bench.RIG = rig
        for i in range(times):
            with bench.Served(rig=rig) as server:
                run = bench.run(server, suite, base / f"run-{i}")
                wrong += run.code != 3 or server.end()[0] != "rest"
                latencies.append(latency_ms(run))
    latencies.sort()
    p99 = latencies[min(len(latencies) - 1, int(0.99 * len(latencies)))]
    print(f"violating reply to first write of the safe state, {times} runs: "
          f"median {latencies[len(latencies) // 2]:.3f} ms, 99 % {p99:.3f} ms, "
          f"largest {latencies[-1]:.3f} ms; runs that did not end at rest with exit 3: {wrong}")
    sys.exit(1 if wrong else 0)


if __name__ == "__main__":
    main()
