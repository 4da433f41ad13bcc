# SPDX-License-Identifier: Apache-2.0
"""Rehearsals are deterministic.

    same_seed.py [OTHER_PROGRAM]

With SOURCE_DATE_EPOCH set, the same seed gives byte-identical run folders, and
another seed does not. With the path of a program of another compiler: the same
verdicts from it.
"""
import os
import pathlib
import sys

sys.path.insert(0, str(pathlib.Path(__file__).resolve().parents[1] / "bench"))
import bench  # noqa: E402

STILL = {"SOURCE_DATE_EPOCH": "1700000000"}


def contents(folder):
    return {str(path.relative_to(folder)): path.read_bytes()
            for path in sorted(pathlib.Path(folder).rglob("*")) if path.is_file()}


def main():
    checks = bench.Checks()
    with bench.folder() as base:
        for suite in (bench.SMOKE, bench.RELEASE):
            runs = [bench.rehearse(suite, f"{base}/{suite.stem}-{i}", "--seed", seed, env=STILL)
                    for i, seed in enumerate(("7", "7", "8"))]
            first, same, other = (contents(run.folder) for run in runs)
            checks.that("results.json" in first, f"{suite.stem}: no results\n{runs[0].stderr}")
            checks.that(first.keys() == same.keys(), f"{suite.stem}: not the same files")
            different = [name for name in first if first[name] != same.get(name)]
            checks.that(not different, f"{suite.stem}: the same seed, but {different[:5]} differ")
            checks.that(first != other, f"{suite.stem}: another seed gives the same bytes")
            if len(sys.argv) > 1:
                os.environ["DRIVETRIAL"], here = sys.argv[1], bench.program()
                run = bench.rehearse(suite, f"{base}/{suite.stem}-other", "--seed", "7", env=STILL)
                os.environ["DRIVETRIAL"] = here
                checks.that(run.verdicts() == runs[0].verdicts(),
                            f"{suite.stem}: the other build has other verdicts")
                alike = contents(run.folder) == first
                print(f"{suite.stem}: the other build's folder is {'' if alike else 'not '}the same "
                      "byte for byte")
    checks.exit()


if __name__ == "__main__":
    main()
