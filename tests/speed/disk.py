# SPDX-License-Identifier: Apache-2.0
"""A run whose samples surely do not fit on the disk is refused before it begins."""
import os
import pathlib
import shutil
import subprocess
import sys
import tempfile

TOP = pathlib.Path(__file__).resolve().parents[2]
SUITE = """suite: too-long
sample: {every: 1 ms, channels: [speed, fault_code, torque_estimate]}
tests:
  - test: LONG
    title: A year
    stimulus: [{hold: 8760 h, mark: begin}]
    checks:
      - stays_within: {channel: speed, window: {from: begin}, between: [-100, 100],
                       ignore_shorter_than: 1 s, limits: {largest: {max: 100}}}
"""
ROWS = 8760 * 3600 * 1000


def main():
    with tempfile.TemporaryDirectory(prefix="drivetrial-disk-") as folder:
        if shutil.disk_usage(folder).free > ROWS * 40:
            print("the disk is large enough for a year")
            return 77
        suite, out = pathlib.Path(folder) / "suite.yaml", pathlib.Path(folder) / "deep" / "out"
        suite.write_text(SUITE)
        done = subprocess.run([os.environ["DRIVETRIAL"], "rehearse", "--rig",
                               str(TOP / "rigs" / "model-spm.yaml"), str(suite), "--out", str(out)],
                              stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, timeout=60)
        wrong = []
        if done.returncode != 73:
            wrong.append(f"exit code {done.returncode}, not 73")
        if "TB of disk" not in done.stderr:
            wrong.append(f"the need is not said: {done.stderr!r}")
        if out.exists():
            wrong.append("a run folder was made")
        print("\n".join(wrong) or "refused, and the need is said")
        return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
