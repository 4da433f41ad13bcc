# SPDX-License-Identifier: Apache-2.0
"""Who the drive is: another firmware or parameter refuses the run, a change during it ends it."""
import pathlib

import bench


def with_parameters(base, lines):
    """The shipped rig with a parameters file beside it."""
    folder = pathlib.Path(base)
    (folder / "drive-parameters.yaml").write_text(lines)
    rig = folder / "rig.yaml"
    rig.write_text(bench.RIG.read_text() + "\nparameters: drive-parameters.yaml\n")
    return rig


def no_motion(run):
    return not run.folder.exists() or not any(
        event["event"] == "command" for event in run.journal())


def main():
    checks = bench.Checks()
    with bench.folder() as base:
        rig = with_parameters(base, "encoder_open: 0\nsupply_surge: 0\n")
        run = bench.rehearse(bench.SMOKE, f"{base}/same", rig=rig)
        checks.that(run.code == 0, f"the same parameters: exit {run.code}\n{run.stdout}{run.stderr}")
        checks.that((run.folder / "drive-parameters.yaml").exists(), "the file is not in the record")
        again = bench.report(run.folder, f"{base}/again")
        checks.that(again.code == 0, f"judged again: exit {again.code}\n{again.stdout}{again.stderr}")
        checks.that(again.verdicts() == run.verdicts(), "judged again: other verdicts")
    with bench.folder() as base:
        rig = with_parameters(base, "encoder_open: 0\nwatchdog_time: 500 ms\n")
        run = bench.rehearse(bench.SMOKE, f"{base}/other", rig=rig)
        checks.that(run.code == 65, f"another parameter: exit {run.code}")
        checks.that("drive-parameters.yaml:2:16: watchdog_time of the drive is 0" in run.stderr,
                    f"another parameter: {run.stderr}")
        checks.that(no_motion(run), "another parameter: something was commanded")
    with bench.folder() as base:
        # The run itself arms the watchdog: the parameter is not what it was.
        rig = with_parameters(base, "watchdog_time: 0 ms\n")
        run = bench.rehearse(bench.SMOKE, f"{base}/changed", rig=rig)
        checks.that(run.code == 3, f"a changed parameter: exit {run.code}")
        checks.that("the parameter watchdog_time was 0 before the run and is 200 after it"
                    in run.stdout, f"a changed parameter: {run.stdout}")
    with bench.folder() as base:
        suite = pathlib.Path(base) / "suite.yaml"
        suite.write_text(bench.SMOKE.read_text().replace('"2.4.1"', '"2.5.0"'))
        run = bench.rehearse(suite, f"{base}/firmware")
        checks.that(run.code == 65, f"another firmware: exit {run.code}")
        checks.that('firmware of controller is "2.4.1"' in run.stderr, f"firmware: {run.stderr}")
        checks.that(no_motion(run), "another firmware: something was commanded")
    checks.exit()


if __name__ == "__main__":
    main()
