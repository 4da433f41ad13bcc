# SPDX-License-Identifier: Apache-2.0
"""How much faster than real time rehearsals are, and what memory they take.

    speed.py [BUILD_FOLDER]     build/gcc unless given

The model alone (bench_model of that folder), the release suite in rehearsal
(processor time, best of three), and an hour of the soak suite with its largest
memory. Prints only: no ordinary test asserts a time. Exit 1 where a promise is
not kept: 200 and 100 times real time, 100 MB.
"""
import json
import pathlib
import resource
import subprocess
import sys
import tempfile

TOP = pathlib.Path(__file__).resolve().parents[2]


def rehearse(program, suite, folder, *options):
    """Bench seconds, processor seconds, largest memory in MB, processor seconds in the kernel."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    # A process of its own for each, so that its largest memory is known.
    measure = ("import resource,subprocess,sys; code=subprocess.run(sys.argv[1:],"
               "stdout=subprocess.DEVNULL).returncode; "
               "print(code, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss/1024)")
    done = subprocess.run([sys.executable, "-c", measure, str(program), "rehearse", "--quiet",
                           "--rig", str(TOP / "rigs/model-spm.yaml"), "--out", str(folder),
                           *options, str(TOP / "suites" / suite)],
                          capture_output=True, text=True, check=True)
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    code, memory = done.stdout.split()
    if code != "0":
        raise SystemExit(f"{suite} ended with exit {code}")
    last = 0  # ns
    for line in (pathlib.Path(folder) / "journal.jsonl").open():
        event = json.loads(line)
        last = max(last, event.get("time", 0))
    user, system = after.ru_utime - before.ru_utime, after.ru_stime - before.ru_stime
    return last * 1e-9, user + system, float(memory), system


def main():
    build = pathlib.Path(sys.argv[1]) if len(sys.argv) > 1 else TOP / "build" / "gcc"
    alone = next(build.rglob("bench_model"), None)
    kept = True
    if alone:
        text = subprocess.run([str(alone)], capture_output=True, text=True, check=True).stdout
        print("the model alone:\n  " + text.strip().replace("\n", "\n  "))
        ratio = float(text.split(" times real time")[0].split()[-1])
        kept = kept and ratio >= 200
    with tempfile.TemporaryDirectory(prefix="drivetrial-speed-") as base:
        runs = [rehearse(build / "drivetrial", "release.yaml", f"{base}/release-{i}")
                for i in range(3)]
        bench_time, spent, memory, system = min(runs, key=lambda run: run[1])
        print(f"the release suite: {bench_time:.1f} s of bench time in {spent:.2f} s of processor "
              f"time, {bench_time / spent:.0f} times real time, {memory:.0f} MB; {system:.2f} s of it in the "
              f"kernel, for its files")
        kept = kept and bench_time / spent >= 100
        bench_time, spent, memory, system = rehearse(build / "drivetrial", "soak.yaml", f"{base}/soak",
                                             "--set", "rounds=1200")
        print(f"soak: {bench_time:.0f} s of bench time in {spent:.1f} s of processor time, "
              f"{bench_time / spent:.0f} times real time, {memory:.0f} MB at most")
        kept = kept and memory < 100
    sys.exit(0 if kept else 1)


if __name__ == "__main__":
    main()
